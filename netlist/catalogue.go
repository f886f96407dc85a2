package netlist

import (
	"sync"

	"poise/netlist/unit"
)

// MetricInfo describes a metric of the language.
type MetricInfo struct {
	Name    string
	Meaning string
	// Needs says at which frequencies it is defined.
	Needs Need
	// Rail: its argument is a rail.
	Rail bool
	// Pair: it needs an input with two nodes. PairOutput: an output with two nodes.
	Pair, PairOutput bool
	// Ports it depends on.
	Input, Output bool
	Rest          bool // an output with one node needs its rest
	Complex       bool
	unit          func(current bool) unit.Dimension
}

// Need says what a metric needs to be told of frequency.
type Need uint8

const (
	NeedsNothing   Need = iota // a quantity of the bias point
	NeedsFrequency             // `at F` or `over F1..F2`
	MayHaveRange               // `over F1..F2` gives the range searched
)

func always(d unit.Dimension) func(bool) unit.Dimension {
	return func(bool) unit.Dimension { return d }
}

// transfer is the dimension of an output voltage per unit of the input.
func transfer(current bool) unit.Dimension {
	if current {
		return unit.Resistance
	}
	return unit.Number
}

func drive(current bool) unit.Dimension {
	if current {
		return unit.Current
	}
	return unit.Voltage
}

// Metrics returns the catalogue of metrics in the order of the language reference, a fresh slice.
func Metrics() []MetricInfo {
	return []MetricInfo{
		{Name: "dm_gain", Meaning: "output per differential volt (or ampere) at the input", Needs: NeedsFrequency, Input: true, Output: true, Complex: true, unit: transfer},
		{Name: "cm_gain", Meaning: "output per common volt (or ampere) at the input", Needs: NeedsFrequency, Input: true, Output: true, Pair: true, Complex: true, unit: transfer},
		{Name: "cmrr", Meaning: "common-mode rejection, abs(dm_gain/cm_gain)", Needs: NeedsFrequency, Input: true, Output: true, Pair: true, unit: always(unit.Number)},
		{Name: "cm_to_dm", Meaning: "difference of the outputs per common volt", Needs: NeedsFrequency, Input: true, Output: true, Pair: true, PairOutput: true, Complex: true, unit: transfer},
		{Name: "dm_to_cm", Meaning: "mean of the outputs per differential volt", Needs: NeedsFrequency, Input: true, Output: true, Pair: true, PairOutput: true, Complex: true, unit: transfer},
		{Name: "psrr", Meaning: "supply rejection, abs(dm_gain / gain from the rail to the output)", Needs: NeedsFrequency, Input: true, Output: true, Rail: true, unit: transfer},
		{Name: "dm_impedance", Meaning: "differential input impedance, 2/(i_a - i_b) for one differential volt", Needs: NeedsFrequency, Input: true, Complex: true, unit: always(unit.Resistance)},
		{Name: "cm_impedance", Meaning: "common input impedance, one common volt over the total current into both pins", Needs: NeedsFrequency, Input: true, Pair: true, Complex: true, unit: always(unit.Resistance)},
		{Name: "out_impedance", Meaning: "output impedance with the inputs at rest", Needs: NeedsFrequency, Output: true, Complex: true, unit: always(unit.Resistance)},
		{Name: "group_delay", Meaning: "group delay of dm_gain", Needs: NeedsFrequency, Input: true, Output: true, unit: always(unit.Time)},
		{Name: "bandwidth", Meaning: "where dm_gain falls to 1/sqrt 2 of its largest value, above it; infinite if it does not within the range", Needs: MayHaveRange, Input: true, Output: true, unit: always(unit.Frequency)},
		{Name: "low_corner", Meaning: "where dm_gain falls to 1/sqrt 2 of its largest value, below it; 0 if it does not within the range", Needs: MayHaveRange, Input: true, Output: true, unit: always(unit.Frequency)},
		{Name: "peak_gain", Meaning: "largest magnitude of dm_gain", Needs: MayHaveRange, Input: true, Output: true, unit: transfer},
		{Name: "bias_current", Meaning: "mean current into the input pins at rest", Input: true, unit: always(unit.Current)},
		{Name: "offset_current", Meaning: "difference of the currents into the input pins at rest", Input: true, Pair: true, unit: always(unit.Current)},
		{Name: "offset", Meaning: "differential input that brings the output to its rest, or to zero for a pair", Input: true, Output: true, Rest: true, unit: drive},
	}
}

// ReducerInfo describes a function that makes a number of a waveform.
type ReducerInfo struct {
	Name    string
	Meaning string
	Args    []ReducerArg
	unit    func(x unit.Dimension) unit.Dimension
}

// ReducerArg is an argument behind the waveform.
type ReducerArg struct {
	Name  string
	Kind  ArgKind
	Named bool // must be written with its name
}

// ArgKind is what an argument of a reducer is.
type ArgKind uint8

const (
	ArgTime      ArgKind = iota // s
	ArgFrequency                // Hz
	ArgLevel                    // of the waveform's own unit
	ArgCount                    // a whole number from 1
	ArgRange                    // a..b of the waveform's own unit; its ends are called low and high
)

func same(d unit.Dimension) unit.Dimension    { return d }
func number(unit.Dimension) unit.Dimension    { return unit.Number }
func time(unit.Dimension) unit.Dimension      { return unit.Time }
func perTime(d unit.Dimension) unit.Dimension { return d.Div(unit.Time) }

// Reducers returns the catalogue of reducers in the order of the language reference, a fresh slice.
func Reducers() []ReducerInfo {
	return []ReducerInfo{
		{Name: "peak", Meaning: "largest value", unit: same},
		{Name: "trough", Meaning: "smallest value", unit: same},
		{Name: "pp", Meaning: "largest value less the smallest", unit: same},
		{Name: "mean", Meaning: "mean over the window", unit: same},
		{Name: "rms", Meaning: "root mean square over the window, mean included", unit: same},
		{Name: "value", Meaning: "value at an absolute time", Args: []ReducerArg{{Name: "at", Kind: ArgTime, Named: true}}, unit: same},
		{Name: "tone", Meaning: "peak amplitude of the component at a frequency", Args: []ReducerArg{{Name: "frequency", Kind: ArgFrequency}}, unit: same},
		{Name: "tone_phase", Meaning: "phase of the component at a frequency, of a sine at time 0", Args: []ReducerArg{{Name: "frequency", Kind: ArgFrequency}}, unit: number},
		{Name: "rise", Meaning: "10-90 % time of the first rise", unit: time},
		{Name: "fall", Meaning: "90-10 % time of the first fall", unit: time},
		{Name: "overshoot", Meaning: "excursion beyond the states as a share of their difference", unit: number},
		{Name: "settles", Meaning: "time from the start of the window after which it stays near its last value", Args: []ReducerArg{{Name: "within", Kind: ArgLevel, Named: true}}, unit: time},
		{Name: "slew", Meaning: "largest slope", unit: perTime},
		{Name: "crosses", Meaning: "absolute time of the n-th passage through a level", Args: []ReducerArg{{Name: "level", Kind: ArgLevel}, {Name: "n", Kind: ArgCount}}, unit: time},
		{Name: "outside", Meaning: "time spent outside a range", Args: []ReducerArg{{Name: "range", Kind: ArgRange}}, unit: time},
		{Name: "drift", Meaning: "mean of the last tenth less that of the first", unit: same},
	}
}

// metrics returns the catalogue by name.
var metrics = sync.OnceValue(func() map[string]*MetricInfo {
	m := map[string]*MetricInfo{}
	for _, x := range Metrics() {
		m[x.Name] = &x
	}
	return m
})

// reducers returns the catalogue by name.
var reducers = sync.OnceValue(func() map[string]*ReducerInfo {
	m := map[string]*ReducerInfo{}
	for _, x := range Reducers() {
		m[x.Name] = &x
	}
	return m
})
