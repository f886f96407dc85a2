package unit

import (
	"math"
	"strconv"
	"strings"
)

// ShownDigits is the number of significant digits that people are shown.
const ShownDigits = 4

// Show writes a value for people: 4.49 V, 38.7 kohm, -12.3 uA, 0.997. NaN and infinities are written as words.
func Show(si float64, d Dimension) string { return ShowDigits(si, d, ShownDigits) }

// ShowDigits writes a value with a number of significant digits.
func ShowDigits(si float64, d Dimension, digits int) string {
	symbol := d.Symbol()
	if symbol == "" {
		return Trim(si, digits)
	}
	if d == Temperature || !prefixable(symbol) || si == 0 || math.IsNaN(si) || math.IsInf(si, 0) {
		return Trim(si, digits) + " " + symbol
	}
	exponent := max(-15, min(12, engineering(si, digits)))
	return Trim(si*math.Pow(10, float64(-exponent)), digits) + " " + prefixLetter(exponent) + symbol
}

// engineering returns the power of ten, a multiple of 3, that leaves 1 to 999 of x when it is rounded to a number of digits.
func engineering(x float64, digits int) int {
	_, text, _ := strings.Cut(strconv.FormatFloat(x, 'e', digits-1, 64), "e")
	e, err := strconv.Atoi(text)
	if err != nil {
		return 0
	}
	return e - ((e%3)+3)%3
}

// prefixLetter returns the prefix of a power of ten from -15 to 12 in steps of 3.
func prefixLetter(exponent int) string { return strings.TrimSpace("fpnum kMGT"[exponent/3+5:][:1]) }

// prefixable reports whether a prefix may stand before the symbol.
func prefixable(symbol string) bool {
	head, _, _ := strings.Cut(symbol, "/")
	s, ok := lookUp(head)
	return ok && s.prefixes
}

func round(x float64, digits int) float64 {
	y, err := strconv.ParseFloat(strconv.FormatFloat(x, 'e', digits-1, 64), 64)
	if err != nil {
		return x
	}
	return y
}

// Trim writes a number with a number of significant digits and no trailing zeros.
func Trim(x float64, digits int) string {
	switch {
	case math.IsNaN(x):
		return "not a number"
	case math.IsInf(x, 1):
		return "infinite"
	case math.IsInf(x, -1):
		return "-infinite"
	case x == 0:
		return "0" // of either sign
	}
	return strconv.FormatFloat(round(x, digits), 'g', -1, 64)
}

// ShowRatio writes a ratio in dB: 20 log10 |x|.
func ShowRatio(x float64) string {
	db := 20 * math.Log10(math.Abs(x))
	if math.IsNaN(db) || math.IsInf(db, 0) {
		return Trim(db, ShownDigits) + " dB"
	}
	return strconv.FormatFloat(db, 'f', 2, 64) + " dB"
}
