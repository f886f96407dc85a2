// Package analyses computes what a design's benches ask for: bias, response, transient,
// the metrics and reducers of the language, and the verdict on every expectation.
//
// [Check] runs the benches of loaded designs; [Measure] computes any quantity of the language for
// one set-up; [Bias], [Curves] and [Waveforms] return what the commands of the same names print. All results are
// plain data in SI units. Every analysis honours its context and is
// safe to run from several goroutines at once.
//
// A run keeps only what is asked for as a waveform. Reducers and comparisons are computed as the steps are accepted, in room that does not grow with the
// length of the run; but rise, fall, overshoot and settles keep an outline of their waveform, exact up to 131072 steps and within a tenth of the accuracy
// beyond, and an expression that has a reducer in it is kept until that is known.
package analyses

import (
	"fmt"

	"poise/devices"
	"poise/mna"
	"poise/netlist"
)

// model is a circuit turned into a system of equations, with the way back from names to unknowns.
type model struct {
	circuit *netlist.Circuit
	system  *mna.System
	node    map[string]int // by full name
	element map[string]int // index into circuit.Elements
	rail    map[string]int // index into circuit.Rails
	device  []int          // device of each element, or held
	fed     [][]pinOfDevice
	inject  map[string][]int // devices that drive a current input, one for each of its pins
}

// held marks an element that is not a device: an ideal source against gnd, which holds its node.
const held = -1

// pinOfDevice is one connection of a node.
type pinOfDevice struct{ device, pin int }

// newModel builds the equations of c. Every input that is not open is driven by ideal sources.
func newModel(c *netlist.Circuit) (*model, error) {
	m := &model{
		circuit: c,
		node:    make(map[string]int, len(c.Nodes)),
		element: make(map[string]int, len(c.Elements)),
		rail:    make(map[string]int, len(c.Rails)),
		device:  make([]int, len(c.Elements)),
		fed:     make([][]pinOfDevice, len(c.Nodes)),
		inject:  map[string][]int{},
	}
	b := mna.NewBuilder()
	for i, name := range c.Nodes {
		m.node[name] = i
		if i > 0 {
			b.Node(name)
		}
	}
	if err := m.hold(b); err != nil {
		return nil, err
	}
	for i := range c.Elements {
		e := &c.Elements[i]
		m.element[e.Name] = i
		if node, _ := holds(e); node > 0 {
			m.device[i] = held
			continue
		}
		m.device[i] = m.add(b, e.Name, e.Device, e.Nodes...)
	}
	system, err := b.Build()
	if err != nil {
		return nil, err
	}
	m.system = system
	return m, nil
}

func (m *model) add(b *mna.Builder, name string, d mna.Device, nodes ...int) int {
	index := b.Add(name, d, nodes...)
	for pin, node := range nodes {
		m.fed[node] = append(m.fed[node], pinOfDevice{index, pin})
	}
	return index
}

// holds returns the node that an ideal voltage source against gnd holds, and the sense.
func holds(e *netlist.Element) (node int, sense float64) {
	if e.Kind != netlist.KindVoltageSource || e.Signal == nil {
		return 0, 0
	}
	switch {
	case e.Nodes[1] == 0:
		return e.Nodes[0], 1
	case e.Nodes[0] == 0:
		return e.Nodes[1], -1
	}
	return 0, 0
}

// hold fixes the nodes of rails, inputs and grounded sources.
func (m *model) hold(b *mna.Builder) error {
	for i, r := range m.circuit.Rails {
		m.rail[r.Name] = i
		if err := b.Hold(r.Node, r.Signal); err != nil {
			return err
		}
	}
	for i := range m.circuit.Elements {
		e := &m.circuit.Elements[i]
		node, sense := holds(e)
		if node <= 0 {
			continue
		}
		if err := b.Hold(node, devices.Scaled(e.Signal, sense)); err != nil {
			return err
		}
	}
	for i := range m.circuit.Inputs {
		in := &m.circuit.Inputs[i]
		if in.Open {
			continue
		}
		if err := m.drive(b, in); err != nil {
			return err
		}
	}
	return nil
}

// drive connects the ideal sources of an input.
func (m *model) drive(b *mna.Builder, in *netlist.Input) error {
	signals := pinSignals(in)
	for pin, node := range in.Nodes {
		if !in.Current {
			if err := b.Hold(node, signals[pin]); err != nil {
				return err
			}
			continue
		}
		name := fmt.Sprintf("%s.%d", in.Name, pin+1)
		m.inject[in.Name] = append(m.inject[in.Name], m.add(b, name, devices.NewCurrentSource(signals[pin]), 0, node))
	}
	return nil
}

// pinSignals combines the modes of an input to what drives each of its pins: volts of the pin, or
// amperes into the circuit there.
func pinSignals(in *netlist.Input) []mna.Signal {
	if len(in.Nodes) == 1 {
		return []mna.Signal{orRest(in.Single)}
	}
	share := modeShare(in)
	signals := make([]mna.Signal, 2)
	for pin, sign := range []float64{share, -share} {
		signals[pin] = devices.Sum(orRest(in.Common), devices.Scaled(orRest(in.Differential), sign))
	}
	return signals
}

// modeShare is the share of the differential drive that each pin of a pair carries: half the
// voltage, but the whole current, which goes in at one pin and out at the other.
func modeShare(in *netlist.Input) float64 {
	if in.Current {
		return 1
	}
	return 0.5
}

func orRest(s mna.Signal) mna.Signal {
	if s == nil {
		return devices.Constant(0)
	}
	return s
}

// unknown returns the unknown of the node called name.
func (m *model) unknown(name string) (mna.Unknown, error) {
	node, ok := m.node[name]
	if !ok {
		return 0, &InputError{Message: "there is no node " + name}
	}
	return m.system.Unknown(node), nil
}

// input and output return the port called name, or the only one if name is empty.
func (m *model) input(name string) (*netlist.Input, error) {
	for i := range m.circuit.Inputs {
		if in := &m.circuit.Inputs[i]; in.Name == name || name == "" && len(m.circuit.Inputs) == 1 {
			return in, nil
		}
	}
	return nil, &InputError{Message: portMissing("input", name)}
}

func (m *model) output(name string) (*netlist.Output, error) {
	for i := range m.circuit.Outputs {
		if out := &m.circuit.Outputs[i]; out.Name == name || name == "" && len(m.circuit.Outputs) == 1 {
			return out, nil
		}
	}
	return nil, &InputError{Message: portMissing("output", name)}
}

func portMissing(kind, name string) string {
	if name == "" {
		return "the circuit has not exactly one " + kind + "; name the one that is meant"
	}
	return "there is no " + kind + " " + name
}
