package devices

import (
	"maps"
	"math"
	"slices"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"poise/mna"
)

// bench is a layout of a device alone: local unknown i+1 is pin i, then what is inside.
type bench struct {
	pins, junctions int
	next            mna.Unknown
	rows, cols      []mna.Unknown
}

func (b *bench) Pin(i int) mna.Unknown { return mna.Unknown(i + 1) }

func (b *bench) Internal(string) mna.Unknown {
	b.next++
	return b.next - 1
}

func (b *bench) Branch(name string) mna.Unknown { return b.Internal(name) }

func (b *bench) Slot(row, col mna.Unknown) mna.Slot {
	b.rows, b.cols = append(b.rows, row), append(b.cols, col)
	return mna.Slot(len(b.rows) - 1)
}

func (b *bench) Junction() int {
	b.junctions++
	return b.junctions - 1
}

// bound is a device on a bench.
type bound struct {
	*bench
	stamp mna.Stamp
	n     int
}

func bind(d mna.Device, pins int) *bound {
	b := &bench{pins: pins, next: mna.Unknown(pins + 1)}
	s := d.Bind(b)
	return &bound{b, s, int(b.next)}
}

// newEval returns an evaluation at x that wants everything.
func (b *bound) newEval(x []float64) *mna.Eval {
	return &mna.Eval{X: x, F: make([]float64, b.n), Q: make([]float64, b.n), G: make([]float64, len(b.rows)), C: make([]float64, len(b.rows)),
		Dynamic: true, Drive: 1, Junctions: make([]float64, b.junctions)}
}

// eval evaluates at x and returns f, q and the dense G and C.
func (b *bound) eval(x []float64) (f, q []float64, g, c [][]float64) {
	e := b.newEval(x)
	b.stamp.Eval(e)
	g, c = make([][]float64, b.n), make([][]float64, b.n)
	for i := range g {
		g[i], c[i] = make([]float64, b.n), make([]float64, b.n)
	}
	for k := range b.rows {
		g[b.rows[k]][b.cols[k]] += e.G[k]
		c[b.rows[k]][b.cols[k]] += e.C[k]
	}
	return e.F, e.Q, g, c
}

// differenceStep and differenceError: the fourth-order formula errs by h^4 times the fifth derivative, for an exponential
// (h/V_T)^4/30 of the value, 1e-8 here, and by rounding over h.
const (
	differenceStep  = 2e-4 // V
	differenceError = 1e-6
)

// checkDerivatives compares G and C at x with differences of f and q.
func checkDerivatives(t require.TestingT, b *bound, x []float64) {
	_, _, g, c := b.eval(x)
	size := func(m [][]float64, i int) float64 {
		s := 0.0
		for _, v := range m[i] {
			s = math.Max(s, math.Abs(v))
		}
		return s
	}
	for j := 1; j < b.n; j++ {
		var df, dq [4][]float64
		var dg, dc [4][][]float64
		for k, step := range []float64{-2, -1, 1, 2} {
			y := append([]float64(nil), x...)
			y[j] += step * differenceStep
			df[k], dq[k], dg[k], dc[k] = b.eval(y)
		}
		for i := 1; i < b.n; i++ {
			slope := func(d *[4][]float64) (value, noise float64) {
				largest := 0.0
				for k := range d {
					largest = math.Max(largest, math.Abs(d[k][i]))
				}
				return (d[0][i] - 8*d[1][i] + 8*d[2][i] - d[3][i]) / (12 * differenceStep), 4e-16 * largest / differenceStep * 4
			}
			s, noise := slope(&df)
			if d := math.Abs(s - g[i][j]); smooth(&dg, g, i, j, size(g, i)) && !(d <= differenceError*size(g, i)+noise+1e-18) {
				assert.Fail(t, "G is not the derivative of f", "row %d column %d at %v: %g, differences say %g", i, j, x, g[i][j], s)
			}
			s, noise = slope(&dq)
			if d := math.Abs(s - c[i][j]); smooth(&dc, c, i, j, size(c, i)) && !(d <= differenceError*size(c, i)+noise+1e-28) {
				assert.Fail(t, "C is not the derivative of q", "row %d column %d at %v: %g, differences say %g", i, j, x, c[i][j], s)
			}
		}
	}
}

// seamShare is the bend of a derivative over the stencil, as a share of its row, above which one of the model's seams lies within it (the
// base resistance at zero base current, the knee of a depletion layer) and differences mean nothing: an exponential bends by (2h/V_T)^2, 4e-4 at 230 K.
const seamShare = 2e-3

func smooth(d *[4][][]float64, m [][]float64, i, j int, size float64) bool {
	return math.Abs(d[0][i][j]-2*m[i][j]+d[3][i][j]) <= seamShare*size && math.Abs(d[1][i][j]-2*m[i][j]+d[2][i][j]) <= seamShare*size
}

// drawBipolar draws a transistor whose every parameter matters.
func drawBipolar(t *rapid.T) *bound {
	f := Families()[rapid.IntRange(0, 1).Draw(t, "polarity")]
	v := f.Defaults()
	set := func(name string, low, high float64) {
		v[f.Index(name)] = math.Exp(rapid.Float64Range(math.Log(low), math.Log(high)).Draw(t, name))
	}
	ranges := map[string][2]float64{
		"Is": {1e-16, 1e-13}, "betaF": {20, 800}, "betaR": {0.5, 20}, "emF": {0.98, 1.1}, "emR": {0.98, 1.1}, "earlyF": {15, 150}, "earlyR": {5, 50}, "kneeF": {5e-3, 0.2},
		"kneeR": {2e-3, 0.1}, "leakE": {1e-17, 1e-13}, "emE": {1.3, 2}, "leakC": {1e-17, 1e-13}, "emC": {1.3, 2.2}, "rB": {20, 500}, "rBmin": {2, 19}, "rE": {0.1, 5}, "rC": {0.5, 50},
		"capE": {1e-12, 5e-11}, "phiE": {0.6, 0.9}, "gradE": {0.2, 0.6}, "capC": {1e-12, 2e-11}, "phiC": {0.5, 0.9}, "gradC": {0.2, 0.6}, "splitC": {0.2, 0.9}, "capS": {1e-12, 1e-11},
		"phiS": {0.5, 0.9}, "gradS": {0.2, 0.5}, "fcap": {0.3, 0.8}, "tauF": {1e-11, 1e-9}, "tauR": {1e-9, 1e-7}, "tauFbias": {0.5, 20}, "tauFvolt": {1, 20}, "tauFcurr": {1e-3, 0.2},
	}
	for _, name := range slices.Sorted(maps.Keys(ranges)) {
		set(name, ranges[name][0], ranges[name][1])
	}
	if rapid.Bool().Draw(t, "base by current") {
		set("rBknee", 1e-6, 1e-2)
	}
	d, err := f.New(v, Place{Temperature: rapid.Float64Range(230, 400).Draw(t, "temperature"), Area: 1.7})
	require.NoError(t, err)
	return bind(d, 4)
}

func TestDerivativesOfTheBipolarTransistor(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBipolar(t)
		x := make([]float64, b.n)
		for i := 1; i < b.n; i++ {
			x[i] = rapid.Float64Range(-0.45, 0.45).Draw(t, "volts")
		}
		if baseCurrentTurns(b, x) {
			return // the slope of the base resistance jumps where the base current changes its sign
		}
		checkDerivatives(t, b, x)
	})
}

// baseCurrentTurns reports whether the base current changes its sign within the stencil of the differences, in a transistor whose base
// resistance follows it.
func baseCurrentTurns(b *bound, x []float64) bool {
	s := b.stamp.(*bipolarStamp)
	if s.base.invKnee == 0 {
		return false
	}
	v1, v2 := s.sign*(x[s.bi]-x[s.ei]), s.sign*(x[s.bi]-x[s.ci])
	const reach = 3 * differenceStep
	var low, high core
	s.at(&low, v1-reach, v2-reach)
	s.at(&high, v1+reach, v2+reach)
	return low.be+low.bc <= 0 && high.be+high.bc >= 0
}

func TestDerivativesOfTheDiode(t *testing.T) {
	f := Families()[2]
	rapid.Check(t, func(t *rapid.T) {
		v := f.Defaults()
		for name, x := range map[string]float64{"Is": 3e-14, "em": 1.3, "rS": 4, "cap": 7e-12, "phi": 0.8, "grad": 0.41, "tau": 3e-9, "breakdown": 5} {
			v[f.Index(name)] = x
		}
		d, err := f.New(v, Place{Temperature: rapid.Float64Range(230, 400).Draw(t, "temperature"), Area: 0.6})
		require.NoError(t, err)
		b := bind(d, 2)
		x := make([]float64, b.n)
		x[3] = rapid.Float64Range(-5.3, 0.9).Draw(t, "inside")
		x[1] = x[3] + rapid.Float64Range(-0.2, 0.2).Draw(t, "outside")
		checkDerivatives(t, b, x)
	})
}

// TestChargeAndCurrentAreConserved wants what goes in to come out, at any voltage.
func TestChargeAndCurrentAreConserved(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBipolar(t)
		x := make([]float64, b.n)
		for i := 1; i < b.n; i++ {
			x[i] = rapid.Float64Range(-30, 30).Draw(t, "volts")
		}
		f, q, _, _ := b.eval(x)
		var sum, size, charge, stored float64
		for i := 1; i < b.n; i++ {
			sum, size = sum+f[i], size+math.Abs(f[i])
			charge, stored = charge+q[i], stored+math.Abs(q[i])
		}
		if !(math.Abs(sum) <= 1e-14*size) || !(math.Abs(charge) <= 1e-14*stored) {
			t.Fatalf("current %g of %g, charge %g of %g", sum, size, charge, stored)
		}
	})
}

// TestNothingIsEverNotANumber evaluates far outside of any use.
func TestNothingIsEverNotANumber(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		b := drawBipolar(t)
		x := make([]float64, b.n)
		for i := 1; i < b.n; i++ {
			x[i] = rapid.Float64Range(-1e4, 1e4).Draw(t, "volts")
		}
		f, q, g, c := b.eval(x)
		for i := range f {
			for _, v := range append(append([]float64{f[i], q[i]}, g[i]...), c[i]...) {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("not finite at %v", x)
				}
			}
		}
	})
}

// TestPNPIsAMirroredNPN reverses all voltages and currents.
func TestPNPIsAMirroredNPN(t *testing.T) {
	families := Families()
	v := families[0].Defaults()
	for name, x := range map[string]float64{"rB": 50, "rE": 1, "capE": 1e-11, "capC": 5e-12, "tauF": 3e-10, "earlyF": 60} {
		v[families[0].Index(name)] = x
	}
	at := Place{Temperature: 310, Area: 1}
	n, err := families[0].New(v, at)
	require.NoError(t, err)
	p, err := families[1].New(v, at)
	require.NoError(t, err)
	bn, bp := bind(n, 4), bind(p, 4)
	x := []float64{0, 3, 0.7, 0.02, 0, 0.69, 0.03}
	y := make([]float64, len(x))
	for i := range x {
		y[i] = -x[i]
	}
	fn, qn, _, _ := bn.eval(x)
	fp, qp, _, _ := bp.eval(y)
	for i := range fn {
		assert.Equal(t, fn[i], -fp[i])
		assert.Equal(t, qn[i], -qp[i])
	}
}

// TestAreaIsThatManyInParallel compares a threefold device with three times its currents.
func TestAreaIsThatManyInParallel(t *testing.T) {
	f := Families()[0]
	v := f.Defaults()
	for name, x := range map[string]float64{"kneeF": 10e-3, "leakE": 1e-15, "capE": 1e-11, "tauF": 1e-10, "tauFbias": 3, "tauFcurr": 5e-3} {
		v[f.Index(name)] = x
	}
	one, err := f.New(v, Place{Temperature: 300, Area: 1})
	require.NoError(t, err)
	three, err := f.New(v, Place{Temperature: 300, Area: 3})
	require.NoError(t, err)
	x := []float64{0, 2, 0.81, 0, 0}
	f1, q1, _, _ := bind(one, 4).eval(x)
	f3, q3, _, _ := bind(three, 4).eval(x)
	for i := range f1 {
		assert.InDelta(t, 3*f1[i], f3[i], 1e-13*math.Abs(f3[i]))
		assert.InDelta(t, 3*q1[i], q3[i], 1e-13*math.Abs(q3[i]))
	}
}

// TestConstants checks the exact values of the SI (2019).
func TestConstants(t *testing.T) {
	assert.Equal(t, 1.380649e-23, Boltzmann)
	assert.Equal(t, 1.602176634e-19, ElementaryCharge)
	assert.InDelta(t, 25.865e-3, ThermalVoltage(ReferenceTemperature), 1e-6)
}

// TestBurstConstants compares the double exponential of IEC 61000-4-4's 5/50 ns pulse with constants found elsewhere by another solver
// (testdata/reference/pair.poise).
func TestBurstConstants(t *testing.T) {
	d, err := newDoubleExponential(5e-9, 50e-9)
	require.NoError(t, err)
	assert.InDelta(t, 1.26977455856, d.factor, 1e-9)
	assert.InDelta(t, 55.6097010238e-9, d.fall, 1e-17)
	assert.InDelta(t, 3.29097434884e-9, d.rise, 1e-17)
}

// TestCornersAscend walks over the corners of periodic waveforms.
func TestCornersAscend(t *testing.T) {
	for _, make := range []func() (mna.Signal, error){
		Triangle{Peak: 1, Frequency: 4, Skew: 0.3, Phase: 1}.New,
		Square{Peak: 1, Frequency: 3e3, Duty: 0.4}.New,
		Pulse{High: 1, Start: 1e-3, Width: 2e-3, Every: 7e-3}.New,
		Bursts{Peak: 1, Front: 5e-9, Tail: 50e-9, Rate: 5e3, Length: 1.5e-3, Every: 30e-3}.New,
	} {
		s, err := make()
		require.NoError(t, err)
		at := 0.0
		for range 5000 {
			next := s.Corner(at)
			require.Greater(t, next, at)
			require.Greater(t, next-at, 1e-12*next, "a corner is met twice")
			at = next
		}
	}
}
