package unit

import (
	"fmt"
	"math"
	"strings"
	"sync"
)

// Mul returns the dimension of a product. Exponents beyond an int8 stay at its bound: no quantity comes near it.
func (d Dimension) Mul(e Dimension) Dimension {
	return Dimension{
		saturated(int(d.Mass) + int(e.Mass)), saturated(int(d.Length) + int(e.Length)), saturated(int(d.Time) + int(e.Time)),
		saturated(int(d.Current) + int(e.Current)), saturated(int(d.Temperature) + int(e.Temperature)),
	}
}

// Div returns the dimension of a quotient, with the same bound as Mul.
func (d Dimension) Div(e Dimension) Dimension {
	return Dimension{
		saturated(int(d.Mass) - int(e.Mass)), saturated(int(d.Length) - int(e.Length)), saturated(int(d.Time) - int(e.Time)),
		saturated(int(d.Current) - int(e.Current)), saturated(int(d.Temperature) - int(e.Temperature)),
	}
}

// saturated keeps a sum from wrapping round to the exponent of something else.
func saturated(half int) int8 { return int8(max(math.MinInt8, min(math.MaxInt8, half))) }

// Pow returns the dimension of a power p. It reports false if an exponent would not be a multiple of 1/2, or beyond 50.
func (d Dimension) Pow(p float64) (Dimension, bool) {
	ok := true
	power := func(half int8) int8 {
		y := float64(half) * p
		if y != math.Trunc(y) || math.Abs(y) > 100 {
			ok = false
			return 0
		}
		return int8(y)
	}
	r := Dimension{power(d.Mass), power(d.Length), power(d.Time), power(d.Current), power(d.Temperature)}
	if !ok {
		return Number, false
	}
	return r, true
}

// Sqrt returns the dimension of a square root, if it has one in halves.
func (d Dimension) Sqrt() (Dimension, bool) { return d.Pow(0.5) }

// name is how a dimension is written and spoken of.
type name struct{ symbol, noun string }

// compound are the dimensions that have a name and no unit symbol of their own in the language.
func compound() map[Dimension]name {
	return map[Dimension]name{
		VoltageNoise:                             {"V/rtHz", "a voltage noise density"},
		CurrentNoise:                             {"A/rtHz", "a current noise density"},
		Slew:                                     {"V/s", "a slew rate"},
		Flux:                                     {"V s", "a flux"},
		Current.Div(Time):                        {"A/s", "a rate of current"},
		Voltage.Div(Temperature):                 {"V/K", "a voltage per kelvin"},
		Temperature.Div(Power):                   {"K/W", "a thermal resistance"},
		Energy.Div(Temperature):                  {"J/K", "a heat capacity"},
		Current.Div(Voltage).Div(Voltage):        {"A/V^2", "a transconductance factor"},
		Number.Div(Voltage):                      {"1/V", "a reciprocal voltage"},
		Number.Div(Current):                      {"1/A", "a reciprocal current"},
		Number.Div(Temperature):                  {"1/K", "a temperature coefficient"},
		Number.Div(Temperature).Div(Temperature): {"1/K^2", "a quadratic temperature coefficient"},
		Time.Mul(Time):                           {"s^2", "a time squared"},
		Voltage.Mul(Voltage):                     {"V^2", "a voltage squared"},
		Current.Mul(Current):                     {"A^2", "a current squared"},
		VoltageNoise.Mul(VoltageNoise):           {"V^2/Hz", "a power density of voltage"},
		CurrentNoise.Mul(CurrentNoise):           {"A^2/Hz", "a power density of current"},
		Voltage.root():                           {"V^0.5", "a root of a voltage"},
		Current.root():                           {"A^0.5", "a root of a current"},
		Frequency.root():                         {"Hz^0.5", "a root of a frequency"},
	}
}

// names holds the symbol and the noun of every dimension that has them.
var names = sync.OnceValue(func() map[Dimension]name {
	m := compound()
	for _, s := range symbols() {
		if s.noun != "" {
			m[s.dimension] = name{s.name, s.noun}
		}
	}
	return m
})

// Symbol returns the SI unit as written in the language, "" for a plain number.
func (d Dimension) Symbol() string {
	if d == Number {
		return ""
	}
	if n, ok := names()[d]; ok {
		return n.symbol
	}
	var parts []string
	for _, x := range []struct {
		unit string
		half int8
	}{{"kg", d.Mass}, {"m", d.Length}, {"s", d.Time}, {"A", d.Current}, {"K", d.Temperature}} {
		switch {
		case x.half == 2:
			parts = append(parts, x.unit)
		case x.half != 0:
			parts = append(parts, fmt.Sprintf("%s^%g", x.unit, float64(x.half)/2))
		}
	}
	return strings.Join(parts, " ")
}

// String returns the SI unit, "1" for a plain number.
func (d Dimension) String() string {
	if d == Number {
		return "1"
	}
	return d.Symbol()
}

// Noun names the dimension for a message: "a voltage (V)", "a plain number".
func (d Dimension) Noun() string {
	if d == Number {
		return "a plain number"
	}
	if n, ok := names()[d]; ok {
		return fmt.Sprintf("%s (%s)", n.noun, n.symbol)
	}
	return "a value in " + d.Symbol()
}
