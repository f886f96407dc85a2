package analyses

import (
	"fmt"
	"math"

	"poise/devices"
	"poise/mna"
	"poise/netlist"
)

const (
	// offsetIterations bounds the search for the offset; Newton's method with the exact slope needs about five.
	offsetIterations = 60
	// offsetPrecision is the relative precision of the offset, offsetFloor its floor in V or A.
	offsetPrecision = 1e-9
	offsetFloor     = 1e-15
)

// offset is the differential input that brings the output to its rest, or to zero for a pair:
// the root of output(differential) - rest, by Newton's method with dm_gain at 0 Hz as its slope, within a
// bracket as soon as there is one.
func offset(e *evaluation, q *netlist.Metric) (float64, error) {
	in, err := e.model.input(q.Input)
	if err != nil {
		return math.NaN(), err
	}
	out, err := e.model.output(q.Output)
	if err != nil {
		return math.NaN(), err
	}
	if in.Open {
		return math.NaN(), &InputError{Message: "the input " + in.Name + " is open in this bench: it has no offset"}
	}
	if len(out.Nodes) == 1 && !out.HasRest {
		return math.NaN(), &InputError{Message: fmt.Sprintf("the offset needs to know where the output is meant to be: write `output %s = (...) rest V`", out.Name)}
	}
	s := &offsetSearch{e: e, in: in, out: out, metric: q, below: math.NaN(), above: math.NaN()}
	return s.solve()
}

// offsetSearch looks for the root of the output over the differential drive.
type offsetSearch struct {
	e      *evaluation
	in     *netlist.Input
	out    *netlist.Output
	metric *netlist.Metric
	guess  []float64
	// drives at which the output was below and above its rest
	below, above float64
}

func (s *offsetSearch) solve() (float64, error) {
	drive := 0.0
	for range offsetIterations {
		if err := s.e.ctx.Err(); err != nil {
			return math.NaN(), err
		}
		excess, slope, err := s.probe(drive)
		if err != nil {
			return math.NaN(), err
		}
		next := drive - excess/slope
		if excess < 0 {
			s.below = drive
		} else {
			s.above = drive
		}
		if excess == 0 || math.Abs(next-drive) <= offsetPrecision*math.Abs(next)+offsetFloor {
			return next, nil
		}
		drive = s.keep(next, drive)
	}
	return math.NaN(), &InputError{Message: fmt.Sprintf("no differential input brings the output %s to its rest", s.out.Name)}
}

// keep returns next if it lies inside the bracket, else the bracket's middle; a step without a bracket that
// runs away is halved until it is finite.
func (s *offsetSearch) keep(next, last float64) float64 {
	low, high := math.Min(s.below, s.above), math.Max(s.below, s.above)
	if !(low <= high) {
		if math.IsNaN(next) || math.IsInf(next, 0) {
			return last/2 + offsetFloor
		}
		return next
	}
	if next > low && next < high {
		return next
	}
	return (low + high) / 2
}

// probe solves the bias with a differential drive and returns how far the output is from its rest and its slope.
func (s *offsetSearch) probe(differential float64) (excess, slope float64, err error) {
	c := *s.e.model.circuit
	c.Inputs = append([]netlist.Input(nil), c.Inputs...)
	for i := range c.Inputs {
		if c.Inputs[i].Name != s.in.Name {
			continue
		}
		if len(s.in.Nodes) == 1 {
			c.Inputs[i].Single = devices.Constant(differential)
		} else {
			c.Inputs[i].Differential = devices.Constant(differential)
		}
	}
	m, err := newModel(&c)
	if err != nil {
		return 0, 0, err
	}
	b, err := m.system.Bias(s.e.ctx, mna.BiasOptions{Guess: s.guess, Logger: s.e.log})
	if err != nil {
		return 0, 0, err
	}
	s.guess = b.X
	v := b.X[m.system.Unknown(s.out.Nodes[0])]
	if len(s.out.Nodes) == 2 {
		v -= b.X[m.system.Unknown(s.out.Nodes[1])]
	}
	r := newResponder(m, m.system.Small(b.X, 0))
	if err := r.at(0); err != nil {
		return 0, 0, err
	}
	g, err := dmGain(r, s.metric)
	return v - s.out.Rest, real(g), err
}
