package devices

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"poise/mna"
)

// Tests that currents and charges are the integrals of conductances and capacitances: over a path in the space of the unknowns,
// f(end) - f(start) is the integral of G dx and q(end) - q(start) that of C dx. Unlike differences, integrals keep their digits, so that
// devices of any size can be checked at any voltage, and seams may lie on the way.

// Gauss-Legendre quadrature of five points on -1..1.
var (
	gaussAt     = [5]float64{0, 0.5384693101056831, -0.5384693101056831, 0.9061798459386640, -0.9061798459386640}
	gaussWeight = [5]float64{0.5688888888888889, 0.4786286704993665, 0.4786286704993665, 0.2369268850561891, 0.2369268850561891}
)

const (
	// pathPieces cuts a path of half a volt into pieces of a millivolt or so, a twentieth of a thermal voltage, where the formula is exact to
	// rounding. Where a slope has a bend within a piece of h volts, the formula errs by up to (h/V_T)^2/100 of the piece; finePieces then make it 1e-8.
	pathPieces = 400
	finePieces = 40 * pathPieces
	pathVolts  = 0.5
	// pathError is beside the path's largest contributions.
	pathError = 1e-6
	// pathRounding is beside the largest value on the way: exponentials of 80 lose 1e-14, those of voltages near 1 kV 1e-12.
	pathRounding = 1e-11
	// valueVolts times a slope is the least size of what a value is made of: the charge of a depletion layer is a difference from that at phi.
	valueVolts = 0.1
)

// path holds, for every row, the integral of its slopes along a path, that of their magnitudes, and the largest value on the way.
type path struct{ sum, size, largest []float64 }

func newPath(n int) path { return path{make([]float64, n), make([]float64, n), make([]float64, n)} }

// take adds a point of the path, where the unknowns move by d.
func (p *path) take(value []float64, slopes [][]float64, d []float64) {
	for i := 1; i < len(d); i++ {
		p.largest[i] = max(p.largest[i], math.Abs(value[i]))
		for j := 1; j < len(d); j++ {
			m := slopes[i][j]
			p.sum[i] += m * d[j]
			p.size[i] += math.Abs(m * d[j])
			p.largest[i] = max(p.largest[i], math.Abs(m)*valueVolts)
		}
	}
}

// unequal returns the row whose value does not change by its integral, 0 if there is none.
func (p *path) unequal(from, to []float64) int {
	for i := 1; i < len(from); i++ {
		if d := math.Abs(p.sum[i] - (to[i] - from[i])); !(d <= pathError*p.size[i]+pathRounding*p.largest[i]) {
			return i
		}
	}
	return 0
}

// alongPath integrates from x to y.
func alongPath(b *bound, x, y []float64, pieces int) (currents, charges path) {
	currents, charges = newPath(b.n), newPath(b.n)
	at, d := make([]float64, b.n), make([]float64, b.n)
	for piece := range pieces {
		for k, place := range gaussAt {
			share := (float64(piece) + (1+place)/2) / float64(pieces)
			for i := range at {
				at[i] = x[i] + share*(y[i]-x[i])
				d[i] = (y[i] - x[i]) * gaussWeight[k] / 2 / float64(pieces)
			}
			f, q, g, c := b.eval(at)
			currents.take(f, g, d)
			charges.take(q, c, d)
		}
	}
	return currents, charges
}

// checkPath compares the integrals from x to y, at most pathVolts apart in every unknown, with the differences.
func checkPath(t require.TestingT, b *bound, x, y []float64) {
	f0, q0, _, _ := b.eval(x)
	f1, q1, _, _ := b.eval(y)
	for _, pieces := range []int{pathPieces, finePieces} {
		currents, charges := alongPath(b, x, y, pieces)
		i, j := currents.unequal(f0, f1), charges.unequal(q0, q1)
		switch {
		case i == 0 && j == 0:
			return
		case pieces < finePieces:
		case i > 0:
			require.Failf(t, "a current is not the integral of its conductances", "row %d from %v to %v: %g, integral %g", i, x, y, f1[i]-f0[i], currents.sum[i])
		default:
			require.Failf(t, "a charge is not the integral of its capacitances", "row %d from %v to %v: %g, integral %g", j, x, y, q1[j]-q0[j], charges.sum[j])
		}
	}
}

// wideBipolar draws a transistor from far wider ranges than any real one has.
func wideBipolar(t *rapid.T) *bound {
	v := map[string]float64{}
	set := func(name string, low, high float64) {
		if rapid.IntRange(0, 3).Draw(t, "has "+name) > 0 {
			v[name] = math.Exp(rapid.Float64Range(math.Log(low), math.Log(high)).Draw(t, name))
		}
	}
	for _, p := range []struct {
		name      string
		low, high float64
	}{
		{"Is", 1e-30, 1e-9}, {"betaF", 1, 1e4}, {"betaR", 0.01, 100}, {"emF", 0.9, 2}, {"emR", 0.9, 2}, {"earlyF", 3, 1e3}, {"earlyR", 2, 1e3},
		{"kneeF", 1e-6, 10}, {"kneeR", 1e-6, 10}, {"leakE", 1e-30, 1e-9}, {"emE", 0.9, 4}, {"leakC", 1e-30, 1e-9}, {"emC", 0.9, 4}, {"rB", 1, 1e4}, {"rBmin", 0.01, 1},
		{"rE", 1e-3, 10}, {"rC", 1e-2, 1e3}, {"capE", 1e-15, 1e-8}, {"phiE", 0.65, 1.2}, {"gradE", 0.05, 0.95}, {"capC", 1e-15, 1e-8}, {"phiC", 0.65, 1.2},
		{"gradC", 0.05, 0.95}, {"splitC", 0.01, 1}, {"capS", 1e-15, 1e-8}, {"phiS", 0.65, 1.2}, {"gradS", 0.05, 0.95}, {"fcap", 0.01, 0.95},
		{"tauF", 1e-12, 1e-6}, {"tauR", 1e-10, 1e-4}, {"tauFbias", 0.1, 100}, {"tauFvolt", 0.5, 100}, {"tauFcurr", 1e-5, 1},
	} {
		set(p.name, p.low, p.high)
	}
	v["rB"] = max(v["rB"], v["rBmin"])
	at := Place{
		Temperature: rapid.Float64Range(220, 420).Draw(t, "temperature"), Warmer: rapid.Float64Range(0, 40).Draw(t, "warmer"),
		Area: math.Exp(rapid.Float64Range(-5, 5).Draw(t, "log area")),
	}
	family := rapid.SampledFrom([]string{"npn", "pnp"}).Draw(t, "family")
	return bind(made(t, family, v, at), 4)
}

// drawPath draws two points of b no further apart than pathVolts.
func drawPath(t *rapid.T, b *bound, volts float64) (x, y []float64) {
	x, y = make([]float64, b.n), make([]float64, b.n)
	for i := 1; i < b.n; i++ {
		x[i] = rapid.Float64Range(-volts, volts).Draw(t, "from")
		y[i] = x[i] + rapid.Float64Range(-pathVolts/2, pathVolts/2).Draw(t, "by")
	}
	return x, y
}

func TestChargesAndCurrentsAreIntegrals(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := wideBipolar(t)
		x, y := drawPath(t, b, rapid.SampledFrom([]float64{0.6, 0.6, 1.5, 20, 1000}).Draw(t, "volts"))
		checkPath(t, b, x, y)
	})
}

func TestDiodeChargesAndCurrentsAreIntegrals(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := map[string]float64{}
		for _, p := range []struct {
			name      string
			low, high float64
		}{
			{"Is", 1e-30, 1e-6}, {"em", 0.9, 4}, {"rS", 1e-3, 1e3}, {"breakdown", 0.5, 800}, {"kneeBreak", 1e-9, 1}, {"cap", 1e-15, 1e-7}, {"phi", 0.65, 2},
			{"grad", 0.05, 0.95}, {"fcap", 0.01, 0.95}, {"tau", 1e-12, 1e-5},
		} {
			v[p.name] = math.Exp(rapid.Float64Range(math.Log(p.low), math.Log(p.high)).Draw(t, p.name))
		}
		at := Place{Temperature: rapid.Float64Range(220, 420).Draw(t, "temperature"), Area: math.Exp(rapid.Float64Range(-5, 5).Draw(t, "log area"))}
		b := bind(made(t, "diode", v, at), 2)
		volts := rapid.SampledFrom([]float64{0.6, 2, 1000}).Draw(t, "volts")
		x, y := drawPath(t, b, volts)
		if rapid.Bool().Draw(t, "at the breakdown") {
			for _, p := range [][]float64{x, y} {
				p[3] = p[2] - v["breakdown"] + math.Mod(p[3], 2)
			}
			y[3] = x[3] + max(-pathVolts, min(pathVolts, y[3]-x[3]))
		}
		checkPath(t, b, x, y)
	})
}

// TestPassivePartsAreIntegrals: what is linear is its own slope.
func TestPassivePartsAreIntegrals(t *testing.T) {
	for _, d := range []mna.Device{NewResistor(270), NewCapacitor(3e-12, nan), NewInductor(2e-3, nan), NewVoltageSource(Constant(2)), NewCurrentSource(Constant(3))} {
		b := bind(d, 2)
		checkPath(t, b, []float64{0, 1.3, -0.4, 0.2}[:b.n], []float64{0, 1.1, -0.1, 0.5}[:b.n])
	}
}

// TestDepletionChargeIsTheIntegralOfItsCapacitance goes from far below to far above the knee.
func TestDepletionChargeIsTheIntegralOfItsCapacitance(t *testing.T) {
	for _, c := range []struct{ cap, phi, grade, fcap float64 }{
		{11e-12, 0.72, 0.36, 0.5}, {4e-12, 0.6, 0.5, 0.31}, {3e-15, 0.45, 0.12, 0.93}, {2e-9, 0.83, 0.99, 0.07}, {1e-12, 1.1, 0, 0.5}, {0, 0.7, 0.3, 0.5},
	} {
		d := newDepletion(c.cap, c.phi, c.grade, c.fcap)
		knee := c.fcap * c.phi
		for _, ends := range [][2]float64{{-1000, -30}, {-30, -0.2}, {-0.2, 0.3 * knee}, {0.3 * knee, knee}, {knee, 1.7 * c.phi}, {0, -1e-6}} {
			const pieces = 2000
			sum := 0.0
			for piece := range pieces {
				for k, place := range gaussAt {
					// Equal ratios of the distance from phi and beyond: the capacitance is a power of it.
					share := (float64(piece) + (1+place)/2) / pieces
					_, slope := d.at(ends[0] + share*(ends[1]-ends[0]))
					sum += slope * gaussWeight[k] / 2 / pieces * (ends[1] - ends[0])
				}
			}
			from, _ := d.at(ends[0])
			to, _ := d.at(ends[1])
			// The charges are differences of numbers of size c phi/(1 - grade).
			require.InDelta(t, to-from, sum, 1e-10*math.Abs(sum)+1e-14*d.span*c.cap, "%+v %v", c, ends)
		}
	}
}

// TestGuardedFormulasAreIntegrals: saturation currents beyond the knee currents and beyond tauFcurr, absurd but allowed, need the guards
// wherever the junctions are off.
func TestGuardedFormulasAreIntegrals(t *testing.T) {
	v := fullNPN()
	for name, x := range map[string]float64{"Is": 2e-3, "kneeF": 1.7e-3, "kneeR": 4e-3, "tauFcurr": 1e-3, "earlyF": 0.9, "earlyR": 0.7} {
		v[name] = x
	}
	b := bind(made(t, "npn", v, Place{Temperature: 304, Area: 0.4}), 4)
	for _, p := range [][2][]float64{
		{{0, 0.4, 0.1, 0.2, 0, 0.35, 0.11, 0.21}, {0, 0.5, 0, 0.3, 0.1, 0.45, -0.1, 0.3}},
		{{0, 0.1, 0.1, 0, 0, 0.034, 0.06, 0.1}, {0, 0.1, 0.1, 0, 0, 0.0332, 0.058, 0.1}}, // across the knee guard, which is narrow
		{{0, -0.4, 0.4, -0.4, 0, -0.35, 0.31, -0.21}, {0, -0.5, 0.5, -0.3, 0.1, -0.45, 0.5, -0.3}},
	} {
		checkPath(t, b, p[0], p[1])
	}
}
