package unit

import (
	"math"
	"strings"
	"sync"
	"unicode/utf8"
)

// dim makes a dimension of whole powers of kg, m, s, A and K.
func dim(mass, length, time, current, temperature int8) Dimension {
	return Dimension{2 * mass, 2 * length, 2 * time, 2 * current, 2 * temperature}
}

// Dimensions of the quantities that the language deals in.
var (
	Number       = Dimension{}
	Voltage      = dim(1, 2, -3, -1, 0)
	Current      = dim(0, 0, 0, 1, 0)
	Resistance   = dim(1, 2, -3, -2, 0)
	Conductance  = dim(-1, -2, 3, 2, 0)
	Capacitance  = dim(-1, -2, 4, 2, 0)
	Inductance   = dim(1, 2, -2, -2, 0)
	Time         = dim(0, 0, 1, 0, 0)
	Frequency    = dim(0, 0, -1, 0, 0)
	Power        = dim(1, 2, -3, 0, 0)
	Energy       = dim(1, 2, -2, 0, 0)
	Charge       = dim(0, 0, 1, 1, 0)
	Temperature  = dim(0, 0, 0, 0, 1)
	VoltageNoise = Voltage.Div(Frequency.root())
	CurrentNoise = Current.Div(Frequency.root())
)

func (d Dimension) root() Dimension {
	r, _ := d.Sqrt()
	return r
}

// symbol is a unit that stands by itself.
type symbol struct {
	name      string
	dimension Dimension
	scale     float64 // SI per unit
	prefixes  bool
	crest     Crest
	noun      string
}

// symbols are all units, the longest names first where one begins another.
var symbols = []symbol{
	{"Vrms", Voltage, 1, true, RMS, ""}, {"Vpp", Voltage, 1, true, PeakToPeak, ""}, {"Vpk", Voltage, 1, true, Peak, ""},
	{"Arms", Current, 1, true, RMS, ""}, {"App", Current, 1, true, PeakToPeak, ""}, {"Apk", Current, 1, true, Peak, ""},
	{"ohm", Resistance, 1, true, Plain, "a resistance"}, {"Ω", Resistance, 1, true, Plain, ""},
	{"degC", Temperature, 1, false, Plain, ""}, {"deg", Number, math.Pi / 180, false, Plain, ""}, {"rad", Number, 1, true, Plain, ""},
	{"ppm", Number, 1e-6, false, Plain, ""}, {"dB", Number, 1, false, Plain, ""}, {"%", Number, 1e-2, false, Plain, ""},
	{"Hz", Frequency, 1, true, Plain, "a frequency"}, {"V", Voltage, 1, true, Plain, "a voltage"}, {"A", Current, 1, true, Plain, "a current"},
	{"S", Conductance, 1, true, Plain, "a conductance"}, {"F", Capacitance, 1, true, Plain, "a capacitance"}, {"H", Inductance, 1, true, Plain, "an inductance"},
	{"s", Time, 1, true, Plain, "a time"}, {"W", Power, 1, true, Plain, "a power"}, {"J", Energy, 1, true, Plain, "an energy"},
	{"C", Charge, 1, true, Plain, "a charge"}, {"K", Temperature, 1, true, Plain, "a temperature"},
}

// quotients are the units that the language writes as a quotient. Any quotient of known units parses in a catalogue; in a
// file only these do.
var quotients = map[string]bool{
	"V/s": true, "V/us": true, "A/s": true, "ppm/K": true, "ppm/K^2": true, "%/K": true, "V/K": true, "K/W": true, "J/K": true,
	"ppm/V": true, "V/rtHz": true, "A/rtHz": true, "V/V": true, "A/V": true, "A/V^2": true, "1/V": true,
}

// prefixes of the SI that the language knows, case-sensitive.
var prefixes = map[rune]float64{
	'f': 1e-15, 'p': 1e-12, 'n': 1e-9, 'u': 1e-6, 'µ': 1e-6, 'μ': 1e-6, 'm': 1e-3, 'k': 1e3, 'M': 1e6, 'G': 1e9, 'T': 1e12,
}

// normal writes the several code points of ohm and micro one way.
func normal(text string) string {
	if strings.IndexFunc(text, func(r rune) bool { return r >= utf8.RuneSelf }) < 0 {
		return text
	}
	return strings.NewReplacer("Ω", "Ω", "μ", "µ").Replace(text)
}

func lookUp(name string) (symbol, bool) {
	s, ok := byName()[name]
	return s, ok
}

var byName = sync.OnceValue(func() map[string]symbol {
	m := make(map[string]symbol, len(symbols))
	for _, s := range symbols {
		m[s.name] = s
	}
	return m
})

// IsQuotient reports whether a numerator, with or without a prefix, over a denominator is a unit that a literal may carry: the lexer
// asks, to tell 1.2V/us from 4.6V/Iq. An empty numerator stands for 1.
func IsQuotient(above, below string) bool {
	above = normal(above)
	if above == "" {
		above = "1"
	}
	if quotients[above+"/"+below] {
		return true
	}
	letter, size := utf8.DecodeRuneInString(above)
	_, ok := prefixes[letter]
	return ok && size < len(above) && quotients[above[size:]+"/"+below]
}

// IsUnitName reports whether name is a unit, with or without a prefix, and so cannot be the name of a value.
// One letter with a prefix counts only if it is written as units are: mV is one, and so is ms.
func IsUnitName(name string) bool {
	_, err := ParseUnit(name)
	return name != "" && err == nil && !strings.ContainsAny(name, "/^")
}
