package unit

import (
	"fmt"
	"math"
	"strings"
	"sync"
)

// Mul returns the dimension of a product.
func (d Dimension) Mul(e Dimension) Dimension {
	return Dimension{d.Mass + e.Mass, d.Length + e.Length, d.Time + e.Time, d.Current + e.Current, d.Temperature + e.Temperature}
}

// Div returns the dimension of a quotient.
func (d Dimension) Div(e Dimension) Dimension {
	return Dimension{d.Mass - e.Mass, d.Length - e.Length, d.Time - e.Time, d.Current - e.Current, d.Temperature - e.Temperature}
}

// Pow returns the dimension of a power p, a multiple of 1/2 that keeps the exponents multiples of 1/2.
func (d Dimension) Pow(p float64) (Dimension, bool) {
	ok := true
	power := func(x int8) int8 {
		y := float64(x) * p
		if y != math.Trunc(y) || math.Abs(y) > 100 {
			ok = false
			return 0
		}
		return int8(y)
	}
	r := Dimension{power(d.Mass), power(d.Length), power(d.Time), power(d.Current), power(d.Temperature)}
	return r, ok
}

// Sqrt returns the dimension of a square root, if it has one in halves.
func (d Dimension) Sqrt() (Dimension, bool) { return d.Pow(0.5) }

// named holds the symbol by which a dimension is written.
var named = sync.OnceValue(func() map[Dimension]string {
	m := map[Dimension]string{
		VoltageNoise: "V/rtHz", CurrentNoise: "A/rtHz", Voltage.Div(Time): "V/s", Current.Div(Time): "A/s", Voltage.Div(Temperature): "V/K",
		Current.Div(Voltage).Div(Voltage): "A/V^2", Number.Div(Voltage): "1/V", Temperature.Div(Power): "K/W", Energy.Div(Temperature): "J/K",
		Number.Div(Temperature): "1/K", Number.Div(Temperature).Div(Temperature): "1/K^2", Time.Mul(Time): "s^2",
		Voltage.Mul(Voltage): "V^2", Current.Mul(Current): "A^2", Voltage.root(): "V^0.5", Voltage.Mul(Time): "V s",
	}
	for _, s := range symbols {
		if s.noun != "" {
			m[s.dimension] = s.name
		}
	}
	return m
})

// Symbol returns the SI unit as written in the language, "" for a plain number.
func (d Dimension) Symbol() string {
	if d == Number {
		return ""
	}
	if s, ok := named()[d]; ok {
		return s
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

// Noun names the dimension for a message: "a voltage (V)", "a plain number".
func (d Dimension) Noun() string {
	if d == Number {
		return "a plain number"
	}
	for _, s := range symbols {
		if s.noun != "" && s.dimension == d {
			return fmt.Sprintf("%s (%s)", s.noun, s.name)
		}
	}
	return "a value in " + d.Symbol()
}
