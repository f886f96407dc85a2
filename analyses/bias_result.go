package analyses

import "poise/mna"

// BiasResult is the quiescent state of a circuit.
type BiasResult struct {
	Temperature float64 // K
	Nodes       []NodeVoltage
	Rails       []SourceState
	Inputs      []InputState
	Sources     []SourceState // voltage and current sources of the circuit, other than rails
	Devices     []DeviceState // those of a family, in the order written
	Parts       []PartState   // two-terminal path parts, in the order written
	Power       float64       // W, all that the rails and sources deliver together
	Rung        string        // how the solution was found
	Iterations  int           // of Newton's method
}

// NodeVoltage is the voltage of a node against gnd.
type NodeVoltage struct {
	Name  string
	Volts float64
}

// SourceState is what a rail or a source holds and delivers.
type SourceState struct {
	Name  string
	Volts float64
	Amps  float64 // delivered out of the positive end (a rail: into the circuit)
	Watts float64 // delivered
}

// InputState is what flows from an input's ideal sources into the circuit.
type InputState struct {
	Name string
	Pins []PinState
}

// PinState is the state of one pin.
type PinState struct {
	Node  string
	Volts float64
	Amps  float64 // into the circuit
}

// DeviceState is an operating point.
type DeviceState struct {
	Name       string
	Part       string // name of the part it is made of
	Family     string
	Quantities []mna.Quantity
}

// PartState is the current and power of a two-terminal part.
type PartState struct {
	Name  string
	Kind  string
	Volts float64 // left minus right
	Amps  float64 // left to right
	Watts float64 // taken in
}
