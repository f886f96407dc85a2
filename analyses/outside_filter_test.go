package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// Matthaei, Young & Jones is Microwave Filters, Impedance-Matching Networks, and Coupling Structures, 1964; Zverev is Handbook of Filter
// Synthesis, 1967.

// butterworth returns the element values g_1...g_n+1 of a doubly terminated Butterworth low-pass (Matthaei, Young & Jones, equation 4.05-1; value
// from memory).
func butterworth(n int) []float64 {
	var g []float64
	for k := 1; k <= n; k++ {
		g = append(g, 2*math.Sin(float64(2*k-1)*math.Pi/float64(2*n)))
	}
	return append(g, 1)
}

// chebyshev returns those of a Chebyshev low-pass of a ripple in dB (equation 4.05-2, where 17.37 stands for 40/ln 10; from memory).
func chebyshev(n int, ripple float64) []float64 {
	beta := math.Log(1 / math.Tanh(ripple/(40/math.Ln10)))
	gamma := math.Sinh(beta / float64(2*n))
	a := func(k int) float64 { return math.Sin(float64(2*k-1) * math.Pi / float64(2*n)) }
	b := func(k int) float64 {
		return gamma*gamma + math.Pow(math.Sin(float64(k)*math.Pi/float64(n)), 2)
	}
	g := []float64{2 * a(1) / gamma}
	for k := 2; k <= n; k++ {
		g = append(g, 4*a(k-1)*a(k)/(b(k-1)*g[k-2]))
	}
	if n%2 == 1 {
		return append(g, 1)
	}
	return append(g, math.Pow(1/math.Tanh(beta/4), 2))
}

// Tables 4.05-1(a) and 4.05-2(a) of Matthaei, Young & Jones, the same in Zverev (values from memory).
func TestElementValuesOfTables(t *testing.T) {
	const digits = 1e-4 // a unit of the fourth decimal: the tables cut some values off (1.30618 stands as 1.3061) and round others
	for _, c := range []struct{ table, formula []float64 }{
		{[]float64{0.6180, 1.6180, 2.0000, 1.6180, 0.6180, 1}, butterworth(5)},
		{[]float64{0.4450, 1.2470, 1.8019, 2.0000, 1.8019, 1.2470, 0.4450, 1}, butterworth(7)},
		{[]float64{1.1468, 1.3712, 1.9750, 1.3712, 1.1468, 1}, chebyshev(5, 0.1)},
		{[]float64{1.1088, 1.3061, 1.7703, 0.8180, 1.3554}, chebyshev(4, 0.1)},
		{[]float64{1.7058, 1.2296, 2.5408, 1.2296, 1.7058, 1}, chebyshev(5, 0.5)},
		{[]float64{1.5963, 1.0967, 1.5963, 1}, chebyshev(3, 0.5)},
	} {
		for k := range c.table {
			absolute(t, c.table[k], c.formula[k], digits, "g%d of %d", k+1, len(c.table)-1)
		}
	}
}

// ladderFilter writes a low-pass of a corner in Hz between a source of r ohms and its load, first element in parallel, whose values are g.
func ladderFilter(g []float64, r, corner float64) string {
	w := 2 * math.Pi * corner
	src := fmt.Sprintf("a -- Rs %.17gohm -- n0\n", r)
	node, n := 0, len(g)-1
	load := r * g[n] // a resistance behind a shunt element, a conductance behind a series one (Matthaei, Young & Jones, figure 4.04-1)
	for k := range n {
		if k%2 == 0 {
			src += fmt.Sprintf("n%d -- C%d %.17gF -- gnd\n", node, k, g[k]/(r*w))
		} else {
			src += fmt.Sprintf("n%d -- L%d %.17gH -- n%d\n", node, k, g[k]*r/w, node+1)
			node++
		}
	}
	if n%2 == 0 {
		load = r / g[n]
	}
	return src + fmt.Sprintf("n%d -- Rl %.17gohm -- gnd\ninput i = (a)\noutput o = (n%d)\n", node, load, node)
}

// filterDigits: eight reactances that cancel each other to the fourth decimal.
const filterDigits = 1e-10

// Matthaei, Young & Jones, section 4.03, equation 4.03-1 and figure 4.03-2: the power lost by a Butterworth ladder is 1 + w^2n, by a Chebyshev ladder 1 + e^2 T_n(w)^2, against
// what the source can give, which is a quarter of V^2/r.
func TestLadderFilters(t *testing.T) {
	const r, corner = 620.0, 12.5e3
	for _, c := range []struct {
		name string
		n    int
		dB   float64 // ripple; 0 for Butterworth
	}{{"Butterworth", 3, 0}, {"Butterworth", 4, 0}, {"Butterworth", 7, 0}, {"Chebyshev 0.1 dB", 3, 0.1}, {"Chebyshev 0.1 dB", 4, 0.1},
		{"Chebyshev 0.5 dB", 5, 0.5}, {"Chebyshev 0.5 dB", 8, 0.5}, {"Chebyshev 3 dB", 5, 3}} {
		g, e2 := butterworth(c.n), math.Pow(10, c.dB/10)-1
		loss := func(x float64) float64 { return 1 + math.Pow(x, 2*float64(c.n)) }
		if c.dB > 0 {
			g = chebyshev(c.n, c.dB)
			loss = func(x float64) float64 {
				// T_n(x) = cos(n arccos x), the cosine of a complex angle beyond 1.
				tn := real(cmplx.Cos(complex(float64(c.n), 0) * cmplx.Acos(complex(x, 0))))
				return 1 + e2*tn*tn
			}
		}
		load := g[c.n]
		if c.n%2 == 0 {
			load = 1 / load
		}
		ratios := []float64{0.01, 0.3, 0.62, 0.9, 0.99, 1, 1.03, 1.3, 2.2, 6}
		var ask []string
		for _, x := range ratios {
			ask = append(ask, fmt.Sprintf("abs(dm_gain at %.17gHz)", x*corner))
		}
		v := scalars(t, ladderFilter(g, r, corner), append(ask, "bandwidth")...)
		for k, x := range ratios {
			want := math.Sqrt(load/4) / math.Sqrt(loss(x))
			relative(t, want, v[k], filterDigits, "%s, n = %d, at %g of the corner", c.name, c.n, x)
		}
		// Where the loss is twice its least value, which is 1 in every case: 3 dB exactly.
		edge := 1.0
		if c.dB > 0 {
			edge = math.Cosh(math.Acosh(1/math.Sqrt(e2)) / float64(c.n))
		}
		relative(t, edge*corner, v[len(ratios)], 1e-4, "%s, n = %d, bandwidth (stated to 0.01 %%)", c.name, c.n)
	}
}

// Zverev, chapter 2 (from memory): the group delay of a Butterworth low-pass at low frequency is the sum of 1/sin((2k-1) pi/2n) halves, i.e.
// half the sum of its ladder's element values.
func TestGroupDelayOfALadder(t *testing.T) {
	const corner = 12.5e3
	for _, n := range []int{3, 5, 6} {
		g := butterworth(n)
		sum := 0.0
		for _, x := range g[:n] {
			sum += x / 2
		}
		v := scalars(t, ladderFilter(g, 620, corner), "group_delay at 1Hz")
		// It rises by a part of (f/f0)^2, 6e-9; differences in frequency may cost three digits more.
		relative(t, sum/(2*math.Pi*corner), v[0], 1e-6, "Butterworth, n = %d", n)
	}
}

// Closed form, every textbook of circuits (for instance Desoer & Kuh, Basic Circuit Theory, 1969, chapter 7): a series RLC circuit passes
// f0 (sqrt(1 + 1/4Q^2) +- 1/2Q), f0/Q apart, with a phase of +-45 degrees at the edges and 1 between.
func TestResonance(t *testing.T) {
	const l, c = 3.3e-3, 10e-9
	f0 := 1 / (2 * math.Pi * math.Sqrt(l*c))
	for _, q := range []float64{0.4, 3, 70, 2000} {
		r := math.Sqrt(l/c) / q
		v := scalars(t, fmt.Sprintf(`
a -- L1 3.3mH -- _ -- C1 10nF -- x -- R1 %.17gohm -- gnd
input i = (a)
output o = (x)
`, r), "bandwidth", "low_corner", "peak_gain", fmt.Sprintf("phase(dm_gain at %.17gHz)", f0*(math.Sqrt(1+1/(4*q*q))-1/(2*q))),
			fmt.Sprintf("abs(gain(i.signal, volts(a, x))) at %.17gHz", 3*f0))
		// Both edges are stated to 0.01 %.
		relative(t, f0*(math.Sqrt(1+1/(4*q*q))+1/(2*q)), v[0], 1e-4, "upper edge, Q = %g", q)
		relative(t, f0*(math.Sqrt(1+1/(4*q*q))-1/(2*q)), v[1], 1e-4, "lower edge, Q = %g", q)
		// The crest is refined to 1e-5 in frequency, so off by (2 Q 1e-5)^2/2 in height at most.
		relative(t, 1, v[2], 1e-9+2*math.Pow(q*1e-5, 2), "crest, Q = %g", q)
		relative(t, math.Pi/4, v[3], 1e-9, "phase at the lower edge, Q = %g", q)
		x := q * (3 - 1/3.0)
		relative(t, x/math.Sqrt(1+x*x), v[4], filterDigits, "across L and C at 3 f0, Q = %g", q)
	}
}

// lineSections writes a line of n sections, half of each section's series part on either side of its shunt part.
func lineSections(n int, r, l, c, g float64) string {
	src := ""
	node := "a"
	for k := range n {
		src += fmt.Sprintf("%s -- R%da %.17gohm -- _ -- L%da %.17gH -- m%d\n", node, k, r/float64(2*n), k, l/float64(2*n), k)
		src += fmt.Sprintf("m%d -- C%d %.17gF -- gnd\nm%d -- G%d %.17gS -- gnd\n", k, k, c/float64(n), k, k, g/float64(n))
		src += fmt.Sprintf("m%d -- R%db %.17gohm -- _ -- L%db %.17gH -- n%d\n", k, k, r/float64(2*n), k, l/float64(2*n), k)
		node = fmt.Sprintf("n%d", k)
	}
	return src + fmt.Sprintf("input i = (a)\noutput o = (%s)\n", node)
}

// Heaviside's line, open at its end, has the transfer 1/cosh(g) and the input admittance tanh(g)/Z, with g = sqrt((R + sL)(G + sC)), Z = sqrt((R + sL)/(G + sC)) (any
// textbook of transmission lines); n sections of R and C come nearer with 1/n^2, each by cosh(g_n) = 1 + g^2/2n^2 exactly.
func TestLineOfManySections(t *testing.T) {
	const r, l, c, g = 4.7e3, 90e-6, 10e-9, 20e-6
	for _, f := range []float64{1e3, 15e3, 80e3} {
		s := complex(0, 2*math.Pi*f)
		series, shunt := complex(r, 0)+s*complex(l, 0), complex(g, 0)+s*complex(c, 0)
		gamma, z := cmplx.Sqrt(series*shunt), cmplx.Sqrt(series/shunt)
		last := math.NaN()
		for _, n := range []int{10, 20, 40, 80} {
			v := bench(t, lineSections(n, r, l, c, g), fmt.Sprintf("dm_gain at %gHz", f), fmt.Sprintf("gain(i.signal, amps(R0a)) at %gHz", f))
			// A chain of symmetrical sections (Zobel, 1923; image parameters) is a line of gamma n arcosh(1 + g^2/2n^2) itself.
			nn := complex(float64(n), 0)
			chain := nn * cmplx.Acosh(1+gamma*gamma/(2*nn*nn))
			phasor(t, 1/cmplx.Cosh(chain), v[0].Number, 1e-9, "chain of %d sections at %g Hz", n, f)
			off := cmplx.Abs(v[0].Number*cmplx.Cosh(gamma) - 1)
			if n > 10 {
				// The next term of the error is of relative order |g|^2/n^2.
				m := cmplx.Abs(gamma * gamma / (nn * nn))
				relative(t, 4, last/off, 4*m+1e-6, "gain in accuracy from %d to %d sections at %g Hz", n/2, n, f)
			}
			last = off
			input := cmplx.Tanh(gamma) / z
			if n == 80 {
				phasor(t, input, v[1].Number, cmplx.Abs(gamma*gamma)/float64(n*n)+1e-6, "input admittance at %g Hz", f)
			}
		}
	}
}
