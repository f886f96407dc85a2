package netlist

import (
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// Shape says what an expression in circuit quantities is when it is computed.
type Shape uint8

const (
	Scalar   Shape = iota // one number
	Waveform              // a number at every time of the window
	Curve                 // a number at every frequency of a range
	Word                  // a word, like a region of operation
)

// Quantity is a measurable expression with every number evaluated for one set-up: the
// left side of an expectation, an entry of a plot. It is one of the types below.
// Names are full names in the flat circuit (A1.x), "gnd" for the reference.
type Quantity interface {
	// Describe returns what is common to all quantities.
	Describe() Info
}

// Info is what is known of a quantity before it is computed.
type Info struct {
	Span    syntax.Span
	Text    string         // as written, formatted
	Unit    unit.Dimension // of its value
	Shape   Shape
	Complex bool // value is complex (a gain, an impedance)
}

// Describe returns i itself, so that embedding types are quantities.
func (i Info) Describe() Info { return i }

// Band says at which frequencies a metric is wanted, in Hz.
type Band struct {
	At        float64 // at F; 0 if a range
	Low, High float64 // over Low..High
	PerDecade int     // points a decade; 0: the analysis chooses
}

type (
	// Constant is a plain number.
	Constant struct {
		Info
		Value float64 // SI
	}
	// Volts is volts(n) or volts(n, m).
	Volts struct {
		Info
		Plus, Minus string // nodes; Minus is "gnd" for volts(n)
	}
	// Amps is amps(part), left to right, amps(Q1.c), into a pin, or amps(rail), what it delivers.
	Amps struct {
		Info
		Element string // full name of an element, or of a rail
		Pin     string // pin name; "" for a path part or a rail
		Rail    bool
	}
	// Watts is watts(part), the power the part takes in.
	Watts struct {
		Info
		Element string
	}
	// Operating is a device's operating quantity: Q1.gm.
	Operating struct {
		Info
		Element, Name string
	}
	// Quiescent is quiescent(x) in a bench with a run.
	Quiescent struct {
		Info
		X Quantity
	}
	// Metric is a response or bias metric: cmrr, dm_gain, bias_current ...
	Metric struct {
		Info
		Name   string
		Input  string // port name, "" if the metric needs none
		Output string
		Rail   string   // of psrr
		From   string   // of gain: a source, a rail, or a port
		Mode   string   // of gain from a port: differential, common, signal
		To     Quantity // of gain: Volts or Amps
		Band   Band
	}
	// Reduce makes a scalar of a waveform: peak, mean, tone ...
	Reduce struct {
		Info
		Name    string
		X       Quantity
		Numbers map[string]float64 // by the parameter names of the catalogue, SI
	}
	// Apply combines quantities point by point: + - * / ^ || neg, abs, phase, real, imag, sqrt, ...
	Apply struct {
		Info
		Op string
		X  []Quantity
	}
)

// Limit is the right side of an expectation, evaluated.
type Limit struct {
	Low, High         float64 // SI; -Inf or +Inf on an open side
	LowOpen, HighOpen bool    // the limit itself does not hold (> and <)
	Word              string  // wanted word, "" if numbers
	Ratio             bool    // a limit was written in dB: people see the value in dB
}
