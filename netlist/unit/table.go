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
	Flux         = dim(1, 2, -2, -1, 0)
	Temperature  = dim(0, 0, 0, 0, 1)
	Slew         = dim(1, 2, -4, -1, 0)
	VoltageNoise = Voltage.Div(Frequency.root())
	CurrentNoise = Current.Div(Frequency.root())
)

// root returns the square root of a dimension that has one, for the table of names.
func (d Dimension) root() Dimension {
	r, _ := d.Sqrt()
	return r
}

// scaling says how the number before a unit becomes the number in SI.
type scaling uint8

const (
	linear  scaling = iota
	celsius         // an absolute temperature: K = degC + 273.15
	decibel         // an amplitude ratio: 10^(dB/20)
)

// symbol is a unit that stands by itself. One of it is factor times 10^exponent in SI.
type symbol struct {
	name      string
	dimension Dimension
	noun      string // of its dimension, if this is the symbol it is written with
	factor    float64
	exponent  int
	prefixes  bool
	crest     Crest
	scaling   scaling
}

// symbols returns all units of the language.
func symbols() []symbol {
	si := func(name string, d Dimension, noun string) symbol {
		return symbol{name: name, dimension: d, noun: noun, factor: 1, prefixes: true}
	}
	amplitude := func(name string, d Dimension, c Crest) symbol {
		return symbol{name: name, dimension: d, factor: 1, prefixes: true, crest: c}
	}
	ratio := func(name string, exponent int) symbol { return symbol{name: name, factor: 1, exponent: exponent} }
	return []symbol{
		si("V", Voltage, "a voltage"), si("A", Current, "a current"), si("ohm", Resistance, "a resistance"), si("Ω", Resistance, ""),
		si("S", Conductance, "a conductance"), si("F", Capacitance, "a capacitance"), si("H", Inductance, "an inductance"),
		si("s", Time, "a time"), si("Hz", Frequency, "a frequency"), si("W", Power, "a power"), si("J", Energy, "an energy"),
		si("C", Charge, "a charge"), si("K", Temperature, "a temperature"),
		amplitude("Vpp", Voltage, PeakToPeak), amplitude("Vpk", Voltage, Peak), amplitude("Vrms", Voltage, RMS),
		amplitude("App", Current, PeakToPeak), amplitude("Apk", Current, Peak), amplitude("Arms", Current, RMS),
		ratio("rad", 0), ratio("%", -2), ratio("ppm", -6),
		{name: "deg", factor: math.Pi / 180},
		{name: "degC", dimension: Temperature, factor: 1, scaling: celsius},
		{name: "dB", factor: 1, scaling: decibel},
	}
}

// isQuotient reports whether the language has a quotient of two units as a unit. A file may carry only these, so that 4.6V/Iq
// is a division; a catalogue may name any quotient of known units.
func isQuotient(text string) bool {
	switch text {
	case "V/s", "V/us", "A/s", "ppm/K", "ppm/K^2", "%/K", "V/K", "K/W", "J/K", "ppm/V", "V/rtHz", "A/rtHz", "V/V", "A/V", "A/V^2", "1/V":
		return true
	}
	return false
}

// prefix returns the power of ten of an SI prefix, case-sensitive. The two code points of micro are U+00B5 and U+03BC.
func prefix(letter rune) (exponent int, ok bool) {
	switch letter {
	case 'f':
		return -15, true
	case 'p':
		return -12, true
	case 'n':
		return -9, true
	case 'u', '\u00B5', '\u03BC':
		return -6, true
	case 'm':
		return -3, true
	case 'k':
		return 3, true
	case 'M':
		return 6, true
	case 'G':
		return 9, true
	case 'T':
		return 12, true
	}
	return 0, false
}

// normal writes the two code points of ohm, U+03A9 and U+2126, one way.
func normal(text string) string { return strings.ReplaceAll(text, "\u2126", "\u03A9") }

func lookUp(name string) (symbol, bool) {
	s, ok := byName()[name]
	return s, ok
}

var byName = sync.OnceValue(func() map[string]symbol {
	m := map[string]symbol{}
	for _, s := range symbols() {
		m[s.name] = s
	}
	return m
})

// IsQuotient reports whether a numerator, with or without a prefix, over a denominator is a unit that a literal may carry: the lexer
// asks, to tell 1.2V/us from 4.6V/Iq. An empty numerator stands for 1.
func IsQuotient(above, below string) bool {
	if above == "" {
		above = "1"
	}
	if isQuotient(above + "/" + below) {
		return true
	}
	letter, size := utf8.DecodeRuneInString(above)
	_, ok := prefix(letter)
	if !ok || size == len(above) {
		return false
	}
	s, known := lookUp(above[size:])
	return known && s.prefixes && isQuotient(above[size:]+"/"+below)
}

// IsUnitName reports whether name is a unit, with or without a prefix: V, ms, kohm. Such a name cannot name a value.
func IsUnitName(name string) bool {
	_, err := parseSymbol(normal(name), true)
	return name != "" && err == nil
}
