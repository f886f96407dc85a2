package devices

import (
	"math"

	"poise/mna"
)

// Param describes one parameter of a family, as the catalogue prints it.
type Param struct {
	Name    string  // as written in the language
	Symbol  string  // as textbooks write it, plain text, may be empty
	Meaning string  // one line
	Unit    string  // as written in the language, "" for a number
	Default float64 // SI; NaN: derived from others, see Derived
	Derived string  // how the default follows, when Default is NaN
	Min     float64 // SI, physical range, limits included unless MinOpen
	Max     float64
	MinOpen bool // Min itself is outside the range
	MaxOpen bool // Max itself is outside the range
}

// Pin describes one pin of a family.
type Pin struct {
	Name     string
	Meaning  string
	Optional bool
	// Joins names what an optional pin is joined to when it is not written: another pin's name, or "gnd".
	Joins string
	// Insulated says that no direct current flows through the pin: it fixes no node's voltage.
	Insulated bool
}

// OperatingQuantity describes one operating quantity of a family's devices.
type OperatingQuantity struct {
	Name    string
	Meaning string
	Unit    string   // as written in the language, "" for a number
	Words   []string // not empty: the quantity is one of these words
}

// Place is where and how an instance stands: what is not a parameter of its part.
type Place struct {
	Temperature float64 // ambient, K
	Warmer      float64 // K above the ambient
	Area        float64 // relative area, 1 for the part as described
}

// Family is a kind of device with its own equations: pins, parameters and a constructor.
type Family struct {
	Name      string
	Title     string
	Source    string // where the equations come from
	Pins      []Pin
	Params    []Param
	Operating []OperatingQuantity
	// New makes a device from its parameters in the order of Params, SI units, with every
	// default filled in (NaN where Derived). It rejects combinations outside the physical range with a
	// *ParamError.
	New func(values []float64, at Place) (mna.Device, error)
}

// ParamError says that a parameter's value is outside its physical range.
type ParamError struct {
	Param string
	Value float64 // SI
	Want  string  // the range or relation wanted
}

func (e *ParamError) Error() string { return e.Param + ": want " + e.Want }

// Exact constants of the SI (Resolution 1 of the 26th CGPM, 2018).
const (
	Boltzmann        = 1.380649e-23    // J/K
	ElementaryCharge = 1.602176634e-19 // C
)

// ReferenceTemperature is the temperature at which parameters hold unless they say otherwise: 27 degC in K.
const ReferenceTemperature = 300.15

// ThermalVoltage returns kT/q in V at the temperature t in K.
func ThermalVoltage(t float64) float64 { return Boltzmann / ElementaryCharge * t }

// Index returns the position of the parameter called name, or -1.
func (f *Family) Index(name string) int {
	for i := range f.Params {
		if f.Params[i].Name == name {
			return i
		}
	}
	return -1
}

// Defaults returns a fresh slice with every parameter's default.
func (f *Family) Defaults() []float64 {
	v := make([]float64, len(f.Params))
	for i := range f.Params {
		v[i] = f.Params[i].Default
	}
	return v
}

// Holds reports whether v lies in the physical range of p. NaN does not.
func (p *Param) Holds(v float64) bool {
	if math.IsNaN(v) {
		return false
	}
	low := v > p.Min || (!p.MinOpen && v == p.Min)
	high := v < p.Max || (!p.MaxOpen && v == p.Max)
	return low && high
}
