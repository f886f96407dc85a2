package mna

import (
	"context"
	"math"
	"math/cmplx"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"
)

// smallTolerance is rounding times the condition of a small circuit.
const smallTolerance = 1e-12

func nearComplex(t testing.TB, want, got complex128, tolerance float64, what ...any) {
	t.Helper()
	if d := cmplx.Abs(want - got); !(d <= tolerance*(1+cmplx.Abs(want))) {
		require.Failf(t, "not near", "%v: want %v, got %v", what, want, got)
	}
}

func TestSmallLowPass(t *testing.T) {
	n := newNet(t)
	n.hold("in", level(0.7))
	n.add("R", resistor(1.3e3), "in", "a")
	n.add("C", capacitor{2.1e-9, 0}, "a", "gnd")
	s := n.build()
	v := s.Small(make([]float64, s.Size()), 0).Solver()
	for _, f := range []float64{0, 1e3, 58e3, 1e7} {
		omega := 2 * math.Pi * f
		require.NoError(t, v.At(omega))
		x := make([]complex128, s.Size())
		x[n.u("in")] = 1
		v.Solve(x)
		lag := 1 / complex(1, omega*1.3e3*2.1e-9)
		nearComplex(t, lag, x[n.u("a")], smallTolerance, f)
		nearComplex(t, (1-lag)/1.3e3, v.Leaving(x, n.u("in")), smallTolerance, f)
		nearComplex(t, 0, v.Leaving(x, n.u("a")), smallTolerance, f)
		// One ampere into a meets R and C in parallel.
		clear(x)
		x[n.u("a")] = 1
		v.Solve(x)
		nearComplex(t, 1.3e3*lag, x[n.u("a")], smallTolerance*1.3e3, f)
	}
}

func TestSmallBranches(t *testing.T) {
	n := newNet(t)
	n.hold("in", level(0))
	l := n.add("L", inductor{1e-3, 0}, "in", "a")
	n.add("R", resistor(50), "a", "gnd")
	s := n.build()
	m := s.Small(make([]float64, s.Size()), 0)
	v := m.Solver()
	omega := 2 * math.Pi * 20e3
	require.NoError(t, v.At(omega))
	x := make([]complex128, s.Size())
	x[n.u("in")] = 2
	v.Solve(x)
	want := 2 / complex(50, omega*1e-3)
	_, inside := s.Unknowns(l)
	nearComplex(t, want, x[inside[0]], smallTolerance)
	nearComplex(t, want, m.PinCurrent(l, 0, omega, x), smallTolerance)
	nearComplex(t, -want, m.PinCurrent(l, 1, omega, x), smallTolerance)
	// The equation of the branch is v(in) - v(a) - j omega L i = what is injected: a volt against the current.
	clear(x)
	x[inside[0]] = 2
	v.Solve(x)
	nearComplex(t, -want, x[inside[0]], smallTolerance)
}

// TestAdjoint compares one solution of the transposed equations with as many of the plain ones as there are places to inject a current.
func TestAdjoint(t *testing.T) {
	n := pair(t, level(0))
	b := n.bias()
	s := n.sys
	v := s.Small(b.X, 0).Solver()
	require.NoError(t, v.At(2*math.Pi*3e5))
	y := make([]complex128, s.Size())
	y[n.u("out")], y[n.u("tail")] = 1, -0.3
	v.SolveTranspose(y)
	for u := s.Held() + 1; u < s.Size(); u++ {
		x := make([]complex128, s.Size())
		x[u] = 1
		v.Solve(x)
		nearComplex(t, x[n.u("out")]-0.3*x[n.u("tail")], y[u], 1e-9, s.Name(Unknown(u)))
	}
}

// TestResponseIsDerivativeOfBias compares the response at frequency 0 with differences of bias points.
func TestResponseIsDerivativeOfBias(t *testing.T) {
	const step = 1e-4 // V
	out := func(v float64) float64 {
		n := pair(t, level(v))
		return n.bias().X[n.u("out")]
	}
	n := pair(t, level(0.2))
	b := n.bias()
	v := n.sys.Small(b.X, 0).Solver()
	require.NoError(t, v.At(0))
	x := make([]complex128, n.sys.Size())
	x[n.u("sp")], x[n.u("sn")] = 1, 1
	v.Solve(x)
	near(t, (out(0.2+step)-out(0.2-step))/(2*step), real(x[n.u("out")]), 1e-7)
}

func TestSmallIsShared(t *testing.T) {
	n := pair(t, level(0))
	b := n.bias()
	m := n.sys.Small(b.X, 0)
	solve := func(k int) complex128 {
		v := m.Solver()
		if v.At(math.Pow(10, float64(k))) != nil {
			return cmplx.NaN()
		}
		x := make([]complex128, n.sys.Size())
		x[n.u("sp")] = 1
		v.Solve(x)
		return x[n.u("out")]
	}
	var group sync.WaitGroup
	got := make([]complex128, 10)
	for k := range got {
		group.Go(func() { got[k] = solve(k) })
	}
	group.Wait()
	for k, g := range got {
		require.Equal(t, solve(k), g)
	}
}

// TestSmallTransientIsResponse compares the steady state of a transient of a tiny sine with the response.
func TestSmallTransientIsResponse(t *testing.T) {
	const peak, frequency = 1e-4, 3e6
	n := pair(t, level(0))
	b := n.bias()
	v := n.sys.Small(b.X, 0).Solver()
	require.NoError(t, v.At(2*math.Pi*frequency))
	x := make([]complex128, n.sys.Size())
	x[n.u("sp")], x[n.u("sn")] = peak, peak
	v.Solve(x)
	want := x[n.u("out")]
	rest := b.X[n.u("out")]

	n = pair(t, sine{peak, frequency})
	s := n.build()
	at := make([]float64, s.Size())
	var got complex128 // two samples a quarter period apart tell amplitude and phase
	const cycles = 12
	end := cycles / frequency
	quarter := end - 0.25/frequency
	_, err := s.Transient(context.Background(), TransientOptions{Until: end, Start: b.X}, func(p *Step) error {
		if p.T0 < quarter && quarter <= p.T1 {
			p.At(quarter, at)
			got -= complex(at[n.u("out")]-rest, 0)
		}
		if p.T1 == end {
			p.At(end, at)
			got += complex(0, at[n.u("out")]-rest)
		}
		return nil
	})
	require.NoError(t, err)
	// x(t) = Im(want exp(j omega t)): at the end Im(want), a quarter before -Re(want).
	near(t, real(want), real(got), 3*defaultAccuracy*cmplx.Abs(want), "in phase")
	near(t, imag(want), imag(got), 3*defaultAccuracy*cmplx.Abs(want), "in quadrature")
}

func TestProbe(t *testing.T) {
	n := newNet(t)
	n.hold("in", level(5))
	r := n.add("R", resistor(1e3), "in", "in") // both pins on one node
	n.add("R2", resistor(1e3), "in", "a")
	c := n.add("C", capacitor{2e-9, 0}, "a", "gnd")
	d := n.add("D", junction{1e-14, 0.025, 1e-9}, "a", "gnd")
	b := n.bias()
	p := n.sys.Probe(r)
	p.Load(b.X, 0)
	require.Zero(t, p.Current(0))
	require.Nil(t, p.Operating())
	p = n.sys.Probe(c)
	p.Load(b.X, 0)
	near(t, 2e-9*b.X[n.u("a")], p.Charge(0), 1e-21)
	near(t, -p.Charge(0), p.Charge(1), 1e-21)
	p = n.sys.Probe(d)
	p.Load(b.X, 0)
	i := (5 - b.X[n.u("a")]) / 1e3
	near(t, i, p.Current(0), 1e-12*i)
	near(t, -i, p.Current(1), 1e-12*i)
	near(t, i*b.X[n.u("a")], p.Power(), 1e-12*i)
	near(t, 1e-9*i, p.Charge(0), 1e-20)
}
