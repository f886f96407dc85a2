// Package unit knows the dimensions, units, prefixes and number spellings of
// the language: what 4k7ohm, 2n2F, -40degC, 3.2nV/rtHz or 20mVpp mean in SI units, how a
// number is shown to a person, and the preferred values of IEC 60063.
//
// Dimensions exist only while a file is checked; the engine sees plain float64 in SI units.
package unit

// Dimension is a product of powers of the SI base units the language needs.
// Exponents count halves, so that V/rtHz has an exact dimension. The zero
// value is a plain number. Angles and ratios (rad, deg, %, ppm, dB) are plain numbers.
type Dimension struct {
	Mass, Length, Time, Current, Temperature int8 // half powers of kg, m, s, A, K
}

// Crest says how an amplitude was written; only a waveform can turn it into its own peak.
type Crest uint8

const (
	Plain      Crest = iota // not an amplitude: V, A
	PeakToPeak              // Vpp App
	Peak                    // Vpk Apk
	RMS                     // Vrms Arms
)

// Value is a number with its dimension.
type Value struct {
	SI        float64
	Dimension Dimension
	Crest     Crest
	Ratio     bool // written in dB: a band around it is a band of ratios
}
