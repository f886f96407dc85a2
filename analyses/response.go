package analyses

import (
	"math"
	"math/cmplx"

	"poise/mna"
	"poise/netlist"
)

// drive is a unit excitation of the linearised circuit.
type drive struct {
	kind driveKind
	name string // of the port, rail or source
	mode string // of an input: differential, common, signal
}

type driveKind uint8

const (
	driveInput driveKind = iota
	driveRail
	driveSource
	driveOutput // one ampere into the output, out of its second node
)

// The modes of an input, as the language writes them.
const (
	modeDifferential = "differential"
	modeCommon       = "common"
	modeSignal       = "signal"
)

// responder solves the linearised circuit at one frequency after the other, all excitations of a
// frequency on one factorisation. It belongs to one goroutine.
type responder struct {
	m         *model
	small     *mna.Small
	solver    *mna.SmallSolver
	frequency float64 // Hz, of the factorisation; NaN before the first
	solved    map[drive][]complex128
}

func newResponder(m *model, small *mna.Small) *responder {
	return &responder{m: m, small: small, solver: small.Solver(), frequency: math.NaN(), solved: map[drive][]complex128{}}
}

// at factors the system at a frequency in Hz.
func (r *responder) at(frequency float64) error {
	if frequency == r.frequency {
		return nil
	}
	clear(r.solved)
	r.frequency = math.NaN()
	if err := r.solver.At(2 * math.Pi * frequency); err != nil {
		return err
	}
	r.frequency = frequency
	return nil
}

// solve returns all unknowns for a unit excitation at the frequency of the factorisation.
func (r *responder) solve(d drive) ([]complex128, error) {
	if x, ok := r.solved[d]; ok {
		return x, nil
	}
	x := make([]complex128, r.m.system.Size())
	if err := r.excite(x, d); err != nil {
		return nil, err
	}
	r.solver.Solve(x)
	r.solved[d] = x
	return x, nil
}

// excite writes the unit excitation d into x: held voltages and injected right-hand sides.
func (r *responder) excite(x []complex128, d drive) error {
	switch d.kind {
	case driveInput:
		in, err := r.m.input(d.name)
		if err != nil {
			return err
		}
		return r.exciteInput(x, in, d.mode)
	case driveRail:
		i, ok := r.m.rail[d.name]
		if !ok {
			return &InputError{Message: "there is no rail " + d.name}
		}
		x[r.m.system.Unknown(r.m.circuit.Rails[i].Node)] = 1
		return nil
	case driveSource:
		return r.exciteSource(x, d.name)
	default:
		out, err := r.m.output(d.name)
		if err != nil {
			return err
		}
		for pin, node := range out.Nodes {
			r.inject(x, node, complex(float64(1-2*pin), 0))
		}
		return nil
	}
}

// exciteInput writes a unit of the mode: 1 V or, of an input driven by currents, 1 A.
func (r *responder) exciteInput(x []complex128, in *netlist.Input, mode string) error {
	if in.Open {
		return &InputError{Message: "the input " + in.Name + " is open in this bench: nothing drives it"}
	}
	share, second := 1.0, 1.0
	switch {
	case len(in.Nodes) == 1 && (mode == modeSignal || mode == modeDifferential):
	case len(in.Nodes) == 2 && mode == modeCommon:
	case len(in.Nodes) == 2 && mode == modeDifferential:
		share, second = modeShare(in), -1
	default:
		return &InputError{Message: "the input " + in.Name + " has no mode " + mode}
	}
	for pin, node := range in.Nodes {
		value := complex(share, 0)
		if pin == 1 {
			value *= complex(second, 0)
		}
		if in.Current {
			r.inject(x, node, value)
		} else {
			x[r.m.system.Unknown(node)] = value
		}
	}
	return nil
}

// exciteSource writes a unit of an independent source of the circuit.
func (r *responder) exciteSource(x []complex128, name string) error {
	i, ok := r.m.element[name]
	if !ok || r.m.circuit.Elements[i].Signal == nil {
		return &InputError{Message: "there is no source " + name}
	}
	e := &r.m.circuit.Elements[i]
	if node, sense := holds(e); node > 0 {
		x[r.m.system.Unknown(node)] = complex(sense, 0)
		return nil
	}
	if e.Kind == netlist.KindVoltageSource {
		_, internals := r.m.system.Unknowns(r.m.device[i])
		x[internals[0]] = 1
		return nil
	}
	r.inject(x, e.Nodes[0], -1)
	r.inject(x, e.Nodes[1], 1)
	return nil
}

// inject adds a current into a node; an ideal source swallows what is injected into the node it holds.
func (r *responder) inject(x []complex128, node int, amps complex128) {
	if u := r.m.system.Unknown(node); int(u) > r.m.system.Held() {
		x[u] += amps
	}
}

// outputVolts is the difference of an output's nodes, or the voltage of its only one.
func (r *responder) outputVolts(x []complex128, out *netlist.Output) complex128 {
	v := x[r.m.system.Unknown(out.Nodes[0])]
	if len(out.Nodes) == 2 {
		v -= x[r.m.system.Unknown(out.Nodes[1])]
	}
	return v
}

// transfer returns the output per unit of the drive.
func (r *responder) transfer(d drive, output string) (complex128, error) {
	out, err := r.m.output(output)
	if err != nil {
		return cmplx.NaN(), err
	}
	x, err := r.solve(d)
	if err != nil {
		return cmplx.NaN(), err
	}
	return r.outputVolts(x, out), nil
}

// measure returns a voltage or a current of a solution x.
func (r *responder) measure(x []complex128, q netlist.Quantity) (complex128, error) {
	switch q := q.(type) {
	case *netlist.Volts:
		plus, err := r.m.unknown(q.Plus)
		if err != nil {
			return cmplx.NaN(), err
		}
		minus, err := r.m.unknown(q.Minus)
		if err != nil {
			return cmplx.NaN(), err
		}
		return x[plus] - x[minus], nil
	case *netlist.Amps:
		sign, pins, err := r.m.currentPins(q)
		if err != nil {
			return cmplx.NaN(), err
		}
		sum := complex128(0)
		for _, p := range pins {
			sum += r.small.PinCurrent(p.device, p.pin, 2*math.Pi*r.frequency, x)
		}
		return complex(sign, 0) * sum, nil
	}
	return cmplx.NaN(), &InputError{Message: "a gain ends at a voltage or a current"}
}
