package netlist

import (
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// Circuit is a flat circuit with every number evaluated for one set-up: what the
// analyses turn into a system of equations. Node 0 is gnd.
type Circuit struct {
	Temperature float64 // K
	Accuracy    float64 // relative error of a waveform, 0..1
	Nodes       []string
	Elements    []Element
	Rails       []Rail
	Inputs      []Input
	Outputs     []Output
}

// Element is one device of the flat circuit.
type Element struct {
	Name   string // full name: Rload, A1.Q2
	Kind   string // resistor, capacitor, inductor, voltage source, current source, or the family's name
	Part   string // name of the part an instance is made of, "" for a plain path part
	Pins   []string
	Nodes  []int // node of each pin
	Device mna.Device
	Value  float64     // SI value of a resistor, capacitor or inductor; value at 0 s of a source
	Signal mna.Signal  // of an independent source
	Span   syntax.Span // where it is written

	// Of a family's device: whether both pins alone form a path part, and its description.
	Path bool
}

// Rail is a node held at a voltage against gnd.
type Rail struct {
	Name   string
	Node   int
	Signal mna.Signal
	Span   syntax.Span
}

// Input is a port that is driven in modes.
type Input struct {
	Name    string
	Nodes   []int // one or two
	Current bool  // driven by currents
	Open    bool  // not driven at all
	// Drive in each mode, V or A; a pair has Differential and Common, a single pin has only Single.
	Differential, Common, Single mna.Signal
	Span                         syntax.Span
}

// Output is a pair of nodes, or a node against gnd.
type Output struct {
	Name    string
	Nodes   []int
	Rest    float64 // V, intended quiescent value; 0 unless HasRest
	HasRest bool
	Span    syntax.Span
}

// Bench is one set-up with what is expected of it.
type Bench struct {
	Name  string
	Title string
	Span  syntax.Span
	Vary  []Vary // the grid, in the order written
	// Expectations and plots as written, in order. Their quantities and limits at one point
	// of the grid come from Setup.
	Expectations []Expectation
	HasRun       bool

	design *Design
	tree   *syntax.Bench
}

// Vary is one axis of a bench's grid.
type Vary struct {
	Target string
	Values []float64 // SI
	Unit   string    // SI unit of the values, as written in the language; "" for a number
	Span   syntax.Span

	target    syntax.Ref
	dimension unit.Dimension
}

// Expectation is one expect statement.
type Expectation struct {
	Label string
	Text  string // as written, formatted, without "expect" and the label
	Span  syntax.Span
	Unit  string // SI unit of the quantity, as written in the language; "" for a number
	Ratio bool   // a limit is written in dB: people see value, limits and margin in dB
	Word  string // the wanted word, if the quantity is one
}

// The kinds of elements that are no family's devices.
const (
	KindResistor      = "resistor"
	KindCapacitor     = "capacitor"
	KindInductor      = "inductor"
	KindVoltageSource = "voltage source"
	KindCurrentSource = "current source"
)

// Setup is a bench at one point of its grid.
type Setup struct {
	Circuit  *Circuit
	Run      *Run // nil without a run
	Expected []Expected
	Plots    []Plotted

	measurer *measurer
}

// Run is a transient.
type Run struct {
	Until float64 // s
	From  float64 // s, start of the window of measurement
	Step  float64 // s, largest step; 0: none given
	Cold  bool
	Span  syntax.Span
}

// Expected is an expectation at one point of the grid.
type Expected struct {
	Quantity Quantity
	Limit    Limit
}

// Plotted is a plot statement at one point of the grid.
type Plotted struct {
	Quantities []Quantity
	Title      string
	Span       syntax.Span
}
