package analyses

import (
	"context"

	"poise/mna"
	"poise/netlist"
)

// Bias solves the quiescent state of a circuit: every signal at its value at time 0.
//
// It returns *mna.SingularError if the equations have no unique solution, *mna.NoConvergenceError if
// none was found, and the context's error if that ends first.
func Bias(ctx context.Context, c *netlist.Circuit) (*BiasResult, error) {
	m, err := newModel(c)
	if err != nil {
		return nil, err
	}
	b, err := m.system.Bias(ctx, mna.BiasOptions{})
	if err != nil {
		return nil, err
	}
	r := &BiasResult{Temperature: c.Temperature, Rung: b.Rung, Iterations: b.Iterations}
	for i, name := range c.Nodes[1:] {
		r.Nodes = append(r.Nodes, NodeVoltage{name, b.X[m.system.Unknown(i+1)]})
	}
	if err := m.rails(r, b.X); err != nil {
		return nil, err
	}
	if err := m.inputs(r, b.X); err != nil {
		return nil, err
	}
	return r, m.elements(r, b.X)
}

// delivered is the current that the ideal source of a node delivers into the circuit.
func (m *model) delivered(node int, x []float64) (float64, error) {
	return m.currentTap(1, m.fed[node]...).rest(x)
}

func (m *model) rails(r *BiasResult, x []float64) error {
	for _, rail := range m.circuit.Rails {
		amps, err := m.delivered(rail.Node, x)
		if err != nil {
			return err
		}
		volts := x[m.system.Unknown(rail.Node)]
		r.Rails = append(r.Rails, SourceState{rail.Name, volts, amps, volts * amps})
		r.Power += volts * amps
	}
	return nil
}

func (m *model) inputs(r *BiasResult, x []float64) error {
	for i := range m.circuit.Inputs {
		in := &m.circuit.Inputs[i]
		state := InputState{Name: in.Name}
		for pin, node := range in.Nodes {
			s := PinState{Node: m.circuit.Nodes[node], Volts: x[m.system.Unknown(node)]}
			var err error
			switch {
			case in.Open:
			case in.Current:
				// What the current source drives into the node is what leaves it through ground.
				s.Amps, err = m.currentTap(1, pinOfDevice{m.inject[in.Name][pin], 0}).rest(x)
			default:
				s.Amps, err = m.delivered(node, x)
			}
			if err != nil {
				return err
			}
			state.Pins = append(state.Pins, s)
			r.Power += s.Volts * s.Amps
		}
		r.Inputs = append(r.Inputs, state)
	}
	return nil
}

// elements lists the parts, sources and devices.
func (m *model) elements(r *BiasResult, x []float64) error {
	for i := range m.circuit.Elements {
		e := &m.circuit.Elements[i]
		if e.Part != "" && m.device[i] != held {
			probe := m.system.Probe(m.device[i])
			probe.Load(x, 0)
			r.Devices = append(r.Devices, DeviceState{Name: e.Name, Part: e.Part, Family: e.Kind, Quantities: probe.Operating()})
			continue
		}
		volts := x[m.system.Unknown(e.Nodes[0])] - x[m.system.Unknown(e.Nodes[1])]
		sign, pins, err := m.currentPins(&netlist.Amps{Element: e.Name})
		if err != nil {
			return err
		}
		amps, err := m.currentTap(sign, pins...).rest(x)
		if err != nil {
			return err
		}
		if e.Signal != nil {
			// A source delivers what it does not take in: the current out of its left, positive end.
			r.Sources = append(r.Sources, SourceState{e.Name, volts, -amps, -volts * amps})
			r.Power -= volts * amps
			continue
		}
		r.Parts = append(r.Parts, PartState{Name: e.Name, Kind: e.Kind, Volts: volts, Amps: amps, Watts: volts * amps})
	}
	return nil
}
