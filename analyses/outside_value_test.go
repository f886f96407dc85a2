package analyses_test

import (
	"fmt"
	"math"
	"strconv"
	"testing"

	"pgregory.net/rapid"
)

// preferred returns the numbers of a series of IEC 60063 in one decade, 100 to 999 (values from memory): those up to E24 as the standard lists them, those from E48 on
// by the rounded powers of 10 to which it keeps but for 920.
func preferred(n int) []float64 {
	e24 := []float64{100, 110, 120, 130, 150, 160, 180, 200, 220, 240, 270, 300, 330, 360, 390, 430, 470, 510, 560, 620, 680, 750, 820, 910}
	var out []float64
	if n <= 24 {
		for k := 0; k < 24; k += 24 / n {
			out = append(out, e24[k])
		}
		return out
	}
	for k := range n {
		x := math.Round(100 * math.Pow(10, float64(k)/float64(n)))
		if x == 919 {
			x = 920
		}
		out = append(out, x)
	}
	return out
}

// nearest returns the members of a series that stand nearest to x in ratio: two if x lies between them to a part in 10^9.
func nearest(n int, x float64) (best, second float64) {
	near, next := math.Inf(1), math.Inf(1)
	scale := math.Pow(10, math.Floor(math.Log10(x))-3)
	for decade := range 3 {
		for _, p := range preferred(n) {
			v := p * scale * math.Pow(10, float64(decade))
			if d := math.Abs(math.Log(v / x)); d < near {
				best, second, near, next = v, best, d, near
			} else if d < next {
				second, next = v, d
			}
		}
	}
	if next > near+1e-9 {
		second = best
	}
	return best, second
}

// IEC 60063: a resistor of a preferred value, seen by a current.
func TestPreferredValues(t *testing.T) {
	check := func(t tester, n int, x float64) {
		t.Helper()
		v := scalars(t, fmt.Sprintf("x -- R1 e%d(%sohm) -- gnd\nx -- I1 -1A -- gnd\n", n, strconv.FormatFloat(x, 'g', -1, 64)), "volts(x)")
		best, second := nearest(n, x)
		if math.Abs(v[0]/best-1) > rounded && math.Abs(v[0]/second-1) > rounded {
			t.Errorf("e%d(%g) = %g, want %g", n, x, v[0], best)
		}
	}
	series := []int{6, 12, 24, 48, 96, 192}
	for _, n := range series {
		for _, p := range preferred(n) {
			check(t, n, p*0.37)
			check(t, n, p)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.SampledFrom(series).Draw(t, "series")
		check(t, n, math.Pow(10, rapid.Float64Range(-3, 8).Draw(t, "decades")))
	})
}

// BIPM, The International System of Units, 9th edition, 2019, section 2.2: the Boltzmann constant and the elementary charge are exact; as a let and as quantities.
func TestConstantsOfTheSI(t *testing.T) {
	v := scalars(t, `
let VT = k_B * temperature / q_e
set temperature = 16.85degC
a -- V1 VT -- gnd
a -- R1 1kohm -- gnd
`, "k_B", "q_e", "VT", "volts(a)", "pi", "temperature")
	for k, want := range []float64{1.380649e-23, 1.602176634e-19, 1.380649e-23 * 290 / 1.602176634e-19, 1.380649e-23 * 290 / 1.602176634e-19, math.Pi, 290} {
		relative(t, want, v[k], 4e-16, "constant %d, to two roundings", k)
	}
}

// IEC 60062 (value codes), the SI's prefixes, and operators of the language: two ways to write one number.
func TestWaysToWriteAValue(t *testing.T) {
	for text, want := range map[string]float64{
		"4k7ohm": 4700, "0R5": 0.5, "2M2ohm": 2.2e6, "4.7kohm": 4700, "1.5e3ohm": 1500, "39mohm": 0.039, "1Gohm": 1e9, "250uS": 4000, "2mS": 500,
		"(1kohm || 1kohm || 500ohm)": 250, "(2^3^2 * 1ohm)": 512, "(-2^2 * -1ohm)": 4, "(1V / 2mA)": 500, "(1ohm + 2ohm * 3)": 7, "(sqrt(9ohm * 4ohm))": 6,
		"(100ohm * 6dB)": 100 * math.Pow(10, 0.3), "(exp(ln(47)) * 1ohm)": 47, "(1kohm * (1 + 250ppm))": 1000.25, "(1kohm * (1 - 2%))": 980,
		"(1ohm * log10(1e5))": 5, "(1ohm * max(2, 3) * min(5, 4) / abs(-2))": 6, "(1ohm * (sin(90deg) + cos(0rad) + atan(1) * 4 / pi + tanh(0)))": 3,
		"(1s / 1uF)": 1e6, "(1H / 1ms)": 1000, "(1W / (1A * 1A))": 1, "(1V * 1V / 2W)": 0.5, "(1J / (1A^2 * 1s))": 1, "(2V/1C * 1s)": 2, "(1V / (1C * 5Hz))": 0.2,
		"(100kohm * (37degC - 27degC) / 1K)": 1e6,
	} {
		v := scalars(t, fmt.Sprintf("x -- R1 %s -- gnd\nx -- I1 -1A -- gnd\n", text), "volts(x)")
		relative(t, want, v[0], 1e-14, "%s", text)
	}
}
