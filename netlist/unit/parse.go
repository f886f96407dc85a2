package unit

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"
)

// LiteralError says what is wrong with a number or a unit.
type LiteralError struct {
	Text string // the part that is wrong
	Want string // what is wrong with it: "is not a unit"
	Hint string // what was meant perhaps, may be empty
}

func (e *LiteralError) Error() string {
	s := fmt.Sprintf("`%s` %s", e.Text, e.Want)
	if e.Hint != "" {
		s += " (" + e.Hint + ")"
	}
	return s
}

const (
	notNumber   = "is not a number"
	outOfRange  = "is outside what a number can hold"
	needsUnit   = "needs a unit behind its prefix"
	standsAlone = "stands alone: it takes no power and no quotient"
)

// ZeroCelsius is 0 degC in K.
const ZeroCelsius = 273.15

// Parse reads a number with its unit as the language writes it: 39kohm, 4k7ohm, 0R5, -40degC, 3.2nV/rtHz, 20mVpp, 47. There is no
// blank between number and unit.
//
// The letter of a prefix may stand for the decimal point, and R for that of a resistance (IEC 60062:2016, clause 4): 4k7ohm, 2n2F,
// 0R5. Only R names its unit; 4k7 and 4k are errors, since a bare number has no dimension.
// A sign belongs to the literal: -40degC is 233.15 K, -6dB is 0.501. degC is an absolute temperature. m, k and the other letters
// are prefixes only before a unit that takes them, and a unit as it stands goes before a prefix with a unit: none of
// the language's units can be read both ways.
//
// The result is the float64 nearest to the written value wherever the scale is a power of ten. Errors are *LiteralError.
func Parse(text string) (Value, error) {
	mantissa, exponent, tail := splitNumber(normal(text))
	if strings.Trim(mantissa, "+-") == "" {
		return Value{}, &LiteralError{Text: text, Want: notNumber}
	}
	if fraction, scale, name, ok, err := pointLetter(text, mantissa, exponent, tail); err != nil {
		return Value{}, err
	} else if ok {
		mantissa, exponent, tail = mantissa+"."+fraction+"0", "", name
		return scaled(text, mantissa, exponent, scale, tail)
	}
	return scaled(text, mantissa, exponent, 0, tail)
}

// scaled returns mantissa times 10^(exponent + shift) of a unit in SI.
func scaled(text, mantissa, exponent string, shift int, name string) (Value, error) {
	s, err := parseUnit(name)
	if err != nil {
		return Value{}, err
	}
	if s.scaling == linear {
		shift += s.exponent
	}
	x, err := decimal(mantissa, exponent, shift)
	if err != nil {
		return Value{}, &LiteralError{Text: text, Want: outOfRange}
	}
	v := Value{Dimension: s.dimension, Crest: s.crest}
	switch s.scaling {
	case celsius:
		v.SI = x + ZeroCelsius
	case decibel:
		v.SI, v.Ratio = math.Pow(10, x/20), true
	default:
		v.SI = x * s.factor
	}
	if math.IsInf(v.SI, 0) {
		return Value{}, &LiteralError{Text: text, Want: outOfRange}
	}
	return v, nil
}

// decimal returns mantissa times 10^(exponent + shift), rounded once. A number that is not 0 and rounds to it is an error.
func decimal(mantissa, exponent string, shift int) (float64, error) {
	e := 0
	if exponent != "" {
		var err error
		if e, err = strconv.Atoi(exponent); err != nil {
			return 0, err
		}
	}
	x, err := strconv.ParseFloat(fmt.Sprintf("%se%d", mantissa, e+shift), 64)
	if err == nil && x == 0 && strings.ContainsAny(mantissa, "123456789") {
		err = strconv.ErrRange
	}
	return x, err
}

// splitNumber cuts a literal into its mantissa with the sign, its exponent of ten without the letter, and what follows.
func splitNumber(text string) (mantissa, exponent, tail string) {
	i := 0
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		i++
	}
	first := i
	i = pastDigits(text, i)
	if i > first && i < len(text) && text[i] == '.' && pastDigits(text, i+1) > i+1 {
		i = pastDigits(text, i+1)
	}
	mantissa, tail = text[:i], text[i:]
	if i == first || tail == "" || (tail[0] != 'e' && tail[0] != 'E') {
		return mantissa, "", tail
	}
	k := 1
	if k < len(tail) && (tail[k] == '-' || tail[k] == '+') {
		k++
	}
	if end := pastDigits(tail, k); end > k {
		return mantissa, tail[1:end], tail[end:]
	}
	return mantissa, "", tail
}

func pastDigits(text string, i int) int {
	for i < len(text) && text[i] >= '0' && text[i] <= '9' {
		i++
	}
	return i
}

// pointLetter reads the rest of a value code in which a letter stands for the decimal point: the k7ohm of 4k7ohm, the R5 of 0R5.
func pointLetter(text, mantissa, exponent, tail string) (fraction string, shift int, name string, ok bool, err error) {
	letter, size := utf8.DecodeRuneInString(tail)
	if size == 0 {
		return "", 0, "", false, nil
	}
	rest := tail[size:]
	end := pastDigits(rest, 0)
	fraction, name = rest[:end], rest[end:]
	shift, isPrefix := prefix(letter)
	switch {
	case letter == 'R' && (fraction != "" || name == "" || name == "ohm" || name == "Ω"):
		if name != "" && name != "ohm" && name != "Ω" {
			return "", 0, "", false, &LiteralError{Text: text, Want: "has R for the point of a value in ohms; no other unit may follow"}
		}
		shift, name = 0, "ohm"
	case isPrefix && name == "" && (fraction != "" || size == len(tail)):
		return "", 0, "", false, &LiteralError{Text: text, Want: needsUnit, Hint: fmt.Sprintf("write the unit too, as in %sohm or %sF", text, text)}
	case !isPrefix || fraction == "":
		return "", 0, "", false, nil
	}
	if exponent != "" || strings.Contains(mantissa, ".") {
		return "", 0, "", false, &LiteralError{Text: text, Want: fmt.Sprintf("has a point and the letter %c, which stands for one", letter)}
	}
	return fraction, shift, name, true, nil
}

// ParseUnit reads a unit alone, with a prefix on its numerator or without: nV/rtHz, A/V^2, ohm, V^0.5, 1/V, "". The value is one of the
// unit in SI; of degC, it is a difference of 1 K. Errors are *LiteralError.
func ParseUnit(text string) (Value, error) {
	s, err := parseUnit(normal(text))
	if err != nil {
		return Value{}, err
	}
	scale, err := decimal("1", "", s.exponent)
	if err != nil {
		return Value{}, &LiteralError{Text: text, Want: outOfRange}
	}
	return Value{SI: scale * s.factor, Dimension: s.dimension, Crest: s.crest}, nil
}

// parseUnit reads "", a unit, a power of one, or a quotient.
func parseUnit(text string) (symbol, error) {
	if text == "" {
		return symbol{factor: 1}, nil
	}
	above, below, quotient := strings.Cut(text, "/")
	v := symbol{factor: 1}
	if !quotient || (above != "" && above != "1") {
		var err error
		if v, err = parsePower(above, true); err != nil || !quotient {
			return v, err
		}
	}
	w, err := parseBelow(below)
	if err != nil {
		return symbol{}, err
	}
	if v.crest != Plain || v.scaling != linear {
		return symbol{}, &LiteralError{Text: above, Want: standsAlone}
	}
	return symbol{dimension: v.dimension.Div(w.dimension), factor: v.factor / w.factor, exponent: v.exponent - w.exponent}, nil
}

// parseBelow reads what stands under the stroke. Of the units with a prefix only parts of a second are written there.
func parseBelow(text string) (symbol, error) {
	if text == "rtHz" {
		return symbol{dimension: Frequency.root(), factor: 1}, nil
	}
	s, err := parsePower(text, text == "us" || text == "µs" || text == "μs" || text == "ms" || text == "ns")
	switch {
	case text == "degC":
		return s, &LiteralError{Text: text, Want: standsAlone, Hint: "did you mean K?"}
	case err == nil && (s.crest != Plain || s.scaling != linear):
		return s, &LiteralError{Text: text, Want: standsAlone}
	}
	return s, err
}

// parsePower reads unit or unit^n.
func parsePower(text string, prefixed bool) (symbol, error) {
	base, power, has := strings.Cut(text, "^")
	s, err := parseSymbol(base, prefixed)
	if err != nil || !has {
		return s, err
	}
	p, err := strconv.ParseFloat(power, 64)
	if err != nil {
		return symbol{}, &LiteralError{Text: text, Want: "wants a number as the power of a unit"}
	}
	d, ok := s.dimension.Pow(p)
	if !ok {
		return symbol{}, &LiteralError{Text: text, Want: "has a power that is no multiple of 1/2"}
	}
	if s.crest != Plain || s.scaling != linear {
		return symbol{}, &LiteralError{Text: base, Want: standsAlone}
	}
	exponent := float64(s.exponent) * p
	whole := math.Round(exponent)
	if !(math.Abs(whole) < 1000) {
		return symbol{}, &LiteralError{Text: text, Want: outOfRange}
	}
	return symbol{dimension: d, factor: math.Pow(s.factor, p) * math.Pow(10, exponent-whole), exponent: int(whole)}, nil
}

// parseSymbol reads one unit. A unit as it stands goes before a prefix with a unit.
func parseSymbol(text string, prefixed bool) (symbol, error) {
	if s, ok := lookUp(text); ok {
		return s, nil
	}
	letter, size := utf8.DecodeRuneInString(text)
	if shift, ok := prefix(letter); ok && prefixed {
		if s, known := lookUp(text[size:]); known && s.prefixes {
			s.exponent += shift
			return s, nil
		}
	}
	return symbol{}, &LiteralError{Text: text, Want: "is not a unit", Hint: unitHint(text)}
}
