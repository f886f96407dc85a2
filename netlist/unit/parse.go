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
	Want string
	Hint string // what was meant perhaps, may be empty
}

func (e *LiteralError) Error() string {
	s := fmt.Sprintf("%q: %s", e.Text, e.Want)
	if e.Hint != "" {
		s += " (" + e.Hint + ")"
	}
	return s
}

// ZeroCelsius is 0 degC in K.
const ZeroCelsius = 273.15

// Parse reads a number with its unit as the language writes it: 39kohm, 4k7ohm, 0R5, -40degC, 3.2nV/rtHz, 20mVpp, 47. The letter
// of a prefix may stand for the decimal point, and R for that of a resistance (IEC 60062:2016, clause 4). A
// sign belongs to the literal, so that -40degC is 233.15 K and -6dB is 0.501. It returns *LiteralError.
func Parse(text string) (Value, error) {
	rest := normal(text)
	digits, unit := splitNumber(rest)
	if digits == "" || digits == "-" || digits == "+" {
		return Value{}, &LiteralError{Text: text, Want: "want a number"}
	}
	number, err := strconv.ParseFloat(digits, 64)
	if err != nil {
		return Value{}, &LiteralError{Text: digits, Want: "want a number that can be represented"}
	}
	if v, ok, err := parseCode(digits, unit); ok || err != nil {
		return v, err
	}
	u, err := ParseUnit(unit)
	if err != nil {
		return Value{}, err
	}
	switch unit {
	case "degC":
		u.SI = number + ZeroCelsius
	case "dB":
		u.SI, u.Ratio = math.Pow(10, number/20), true
	default:
		u.SI *= number
	}
	if math.IsInf(u.SI, 0) {
		return Value{}, &LiteralError{Text: text, Want: "want a number that can be represented"}
	}
	return u, nil
}

// splitNumber cuts a literal behind its digits, exponent included.
func splitNumber(text string) (digits, unit string) {
	i := 0
	if i < len(text) && (text[i] == '-' || text[i] == '+') {
		i++
	}
	isDigit := func(k int) bool { return k < len(text) && text[k] >= '0' && text[k] <= '9' }
	for isDigit(i) {
		i++
	}
	if i < len(text) && text[i] == '.' && isDigit(i+1) {
		for i++; isDigit(i); i++ {
		}
	}
	if i > 0 && i < len(text) && (text[i] == 'e' || text[i] == 'E') {
		k := i + 1
		if k < len(text) && (text[k] == '-' || text[k] == '+') {
			k++
		}
		if isDigit(k) {
			for i = k; isDigit(i); i++ {
			}
		}
	}
	return text[:i], text[i:]
}

// parseCode reads a value code in which a letter stands for the decimal point: 4k7ohm, 2n2F, 0R5, 4R7ohm.
func parseCode(digits, unit string) (Value, bool, error) {
	letter, size := utf8.DecodeRuneInString(unit)
	if size == 0 {
		return Value{}, false, nil
	}
	rest := unit[size:]
	fraction := rest[:len(rest)-len(strings.TrimLeft(rest, "0123456789"))]
	name := rest[len(fraction):]
	scale, isPrefix := prefixes[letter]
	switch {
	case letter == 'R' && (fraction != "" || name == "" || name == "ohm" || name == "Ω"):
		if name != "" && name != "ohm" && name != "Ω" {
			return Value{}, false, &LiteralError{Text: digits + unit, Want: "R marks ohms; no other unit may follow"}
		}
		scale, name = 1, "ohm"
	case !isPrefix || fraction == "":
		return Value{}, false, nil
	}
	if strings.ContainsAny(digits, ".eE") {
		return Value{}, false, &LiteralError{Text: digits + unit, Want: fmt.Sprintf("the letter %c already stands for the decimal point", letter)}
	}
	u, err := ParseUnit(name)
	if err != nil {
		return Value{}, false, err
	}
	if name == "" {
		return Value{}, false, &LiteralError{Text: digits + unit, Want: "a prefix needs a unit behind it", Hint: fmt.Sprintf("did you mean %s%sohm?", digits, unit)}
	}
	number, err := strconv.ParseFloat(digits+"."+fraction+"0", 64)
	if err != nil {
		return Value{}, false, &LiteralError{Text: digits + unit, Want: "want a number that can be represented"}
	}
	u.SI *= number * scale
	return u, true, nil
}

// ParseUnit reads a unit alone, with a prefix on its numerator or without: nV/rtHz, A/V^2, ohm, V^0.5, 1/V, "". The value is the unit
// in SI. It returns *LiteralError.
func ParseUnit(text string) (Value, error) {
	text = normal(text)
	if text == "" {
		return Value{SI: 1}, nil
	}
	above, below, quotient := strings.Cut(text, "/")
	v, err := parsePower(above, true)
	if (above == "1" || above == "") && quotient {
		v, err = Value{SI: 1}, nil
	}
	if err != nil {
		return Value{}, err
	}
	if !quotient {
		return v, nil
	}
	w, err := parseBelow(below)
	if err != nil {
		return Value{}, err
	}
	v.SI /= w.SI
	v.Dimension = v.Dimension.Div(w.Dimension)
	if v.Crest != Plain {
		return Value{}, &LiteralError{Text: text, Want: "an amplitude unit stands alone"}
	}
	return v, nil
}

// parseBelow reads what stands under the stroke.
func parseBelow(text string) (Value, error) {
	if text == "rtHz" {
		return Value{SI: 1, Dimension: Frequency.root()}, nil
	}
	return parsePower(text, text == "us" || text == "ms" || text == "ns")
}

// parsePower reads unit or unit^n.
func parsePower(text string, prefixed bool) (Value, error) {
	base, power, has := strings.Cut(text, "^")
	v, err := parseSymbol(base, prefixed)
	if err != nil || !has {
		return v, err
	}
	p, err := strconv.ParseFloat(power, 64)
	if err != nil {
		return Value{}, &LiteralError{Text: text, Want: "want a number as the power of a unit"}
	}
	d, ok := v.Dimension.Pow(p)
	if !ok {
		return Value{}, &LiteralError{Text: text, Want: "want a power that is a multiple of 1/2"}
	}
	return Value{SI: math.Pow(v.SI, p), Dimension: d}, nil
}

// parseSymbol reads one unit.
func parseSymbol(text string, prefixed bool) (Value, error) {
	if s, ok := lookUp(text); ok {
		return Value{SI: s.scale, Dimension: s.dimension, Crest: s.crest}, nil
	}
	letter, size := utf8.DecodeRuneInString(text)
	scale, ok := prefixes[letter]
	if ok && prefixed {
		if s, known := lookUp(text[size:]); known && s.prefixes {
			return Value{SI: scale * s.scale, Dimension: s.dimension, Crest: s.crest}, nil
		}
	}
	return Value{}, &LiteralError{Text: text, Want: "is not a unit", Hint: unitHint(text)}
}

// unitHint guesses what was meant.
func unitHint(text string) string {
	if letter, size := utf8.DecodeRuneInString(text); size > 0 && size == len(text) {
		if _, ok := prefixes[letter]; ok {
			return "a prefix needs a unit behind it, as in 1" + text + "V"
		}
	}
	swap := map[string]string{
		"volt": "V", "volts": "V", "v": "V", "amp": "A", "amps": "A", "a": "A", "Ohm": "ohm", "ohms": "ohm", "Ohms": "ohm", "OHM": "ohm", "farad": "F", "f": "F",
		"henry": "H", "h": "H", "hz": "Hz", "HZ": "Hz", "sec": "s", "S": "S", "watt": "W", "w": "W", "db": "dB", "DB": "dB", "percent": "%", "Kelvin": "K",
		"kelvin": "K", "C": "degC", "degF": "degC", "vpp": "Vpp", "VPP": "Vpp", "vrms": "Vrms", "VRMS": "Vrms",
	}
	if s, ok := swap[text]; ok {
		return "did you mean " + s + "?"
	}
	letter, size := utf8.DecodeRuneInString(text)
	tail := text[size:]
	fix := map[rune]string{'K': "k", 'U': "u", 'N': "n", 'P': "p", 'g': "G", 't': "T"}
	better := tail
	if s, ok := swap[tail]; ok {
		better = s
	}
	if p, ok := fix[letter]; ok {
		if _, known := lookUp(better); known {
			return "did you mean " + p + better + "?"
		}
	}
	if _, ok := prefixes[letter]; ok && better != tail {
		return "did you mean " + string(letter) + better + "?"
	}
	return ""
}
