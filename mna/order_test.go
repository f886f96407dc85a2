package mna

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// slopeTolerance is how far a measured order may be from that of the method: the next term of the error is still seen.
const slopeTolerance = 0.15

// march integrates in equal steps, without error control, and returns the largest error of an unknown at the ends of the steps and within them.
func march(t testing.TB, n *net, node string, start []float64, until float64, steps int, exact func(t float64) float64) (ends, within float64) {
	t.Helper()
	s := n.build()
	r := newIntegration(context.Background(), s, TransientOptions{Until: until, Start: start, Accuracy: 1e-9})
	require.NoError(t, r.begin())
	u, x := n.u(node), make([]float64, s.Size())
	begun := r.t
	for k := 1; k <= steps; k++ {
		from := r.t
		to := begun + (until-begun)*float64(k)/float64(steps)
		require.NoError(t, r.method.attempt(to))
		r.method.accept()
		r.t = to
		if ends = math.Max(ends, math.Abs(r.method.end().x[u]-exact(to))); k == 1 {
			continue // the first step has a parabola only
		}
		for _, share := range []float64{0.17, 0.44, 0.81} {
			at := from + share*(to-from)
			r.method.interpolate(at, x)
			within = math.Max(within, math.Abs(x[u]-exact(at)))
		}
	}
	return ends, within
}

// logistic is x' = x (1 - x) on nonlinear charges: q = x + x^3/3.
func logistic() Device {
	return law{pins: 1, f: func(_ float64, x, f []float64, df [][]float64) {
		f[0] = -x[0] * (1 - x[0]) * (1 + x[0]*x[0])
		df[0][0] = -((1-2*x[0])*(1+x[0]*x[0]) + x[0]*(1-x[0])*2*x[0])
	}, q: func(x, q []float64, dq [][]float64) {
		q[0], dq[0][0] = x[0]+x[0]*x[0]*x[0]/3, 1+x[0]*x[0]
	}}
}

func TestOrderOnNonlinearCharges(t *testing.T) {
	exact := func(t float64) float64 { return 0.2 / (0.2 + 0.8*math.Exp(-t)) }
	var ends, within []float64
	for _, steps := range []int{20, 40, 80, 160} {
		n := newNet(t)
		n.add("law", logistic(), "x")
		e, w := march(t, n, "x", []float64{0, 0.2}, 5, steps, exact)
		ends, within = append(ends, e), append(within, w)
	}
	checkOrder(t, "ends", ends, 2)
	checkOrder(t, "within", within, 2)
}

// checkOrder checks the slopes of errors that belong to steps halved each time.
func checkOrder(t testing.TB, what string, errors []float64, order float64) {
	t.Helper()
	for i := 1; i < len(errors); i++ {
		measured := math.Log2(errors[i-1] / errors[i])
		t.Logf("%s: error %.3e, order %.3f", what, errors[i], measured)
		near(t, order, measured, slopeTolerance, what)
	}
}

// TestOrderOfSlopes checks a current that is the derivative of a charge (index 2).
func TestOrderOfSlopes(t *testing.T) {
	var ends []float64
	for _, steps := range []int{50, 100, 200, 400} {
		n := newNet(t)
		n.add("V", voltage{sine{1, 1}}, "a", "gnd")
		n.add("C", capacitor{1, 0}, "a", "gnd")
		s := n.build()
		_, inside := s.Unknowns(0)
		r := newIntegration(context.Background(), s, TransientOptions{Until: 1})
		require.NoError(t, r.begin())
		begun, largest := r.t, 0.0
		for k := 1; k <= steps; k++ {
			to := begun + (1-begun)*float64(k)/float64(steps)
			require.NoError(t, r.method.attempt(to))
			r.method.accept()
			r.t = to
			largest = math.Max(largest, math.Abs(r.method.end().x[inside[0]]+2*math.Pi*math.Cos(2*math.Pi*to)))
		}
		ends = append(ends, largest)
	}
	checkOrder(t, "slope", ends, 2)
}

// TestDenseOrder isolates the interpolation: without charges the points are exact, and the cubic has a fourth-order error.
func TestDenseOrder(t *testing.T) {
	var within []float64
	for _, steps := range []int{40, 80, 160} {
		n := newNet(t)
		n.hold("in", sine{1, 1})
		n.add("R1", resistor(1), "in", "a")
		n.add("R2", resistor(1), "a", "gnd")
		ends, w := march(t, n, "a", nil, 1, steps, func(t float64) float64 { return math.Sin(2*math.Pi*t) / 2 })
		near(t, 0, ends, 1e-12)
		within = append(within, w)
	}
	checkOrder(t, "cubic", within, 4)
}

// TestProtheroRobinson follows y' = -lambda (y - sin t) + cos t (Prothero & Robinson, On the stability and accuracy of one-step methods for solving stiff
// systems, Math. Comp. 28, 1974): the error must not grow with the stiffness.
func TestProtheroRobinson(t *testing.T) {
	for _, lambda := range []float64{1, 1e2, 1e4, 1e6, 1e8} {
		n := newNet(t)
		n.add("law", law{pins: 1, f: func(t float64, y, f []float64, df [][]float64) {
			f[0], df[0][0] = lambda*(y[0]-math.Sin(t))-math.Cos(t), lambda
		}}, "y")
		s := n.build()
		d, stats := worst(t, s, TransientOptions{Until: 10, Start: []float64{0, 0}}, n.u("y"), math.Sin)
		t.Logf("lambda %g: error %.2e of the swing, %d steps, %d evaluations", lambda, d/2, stats.Steps, stats.Work.Evaluations)
		near(t, 0, d/2, defaultAccuracy, lambda)
		require.Less(t, stats.Work.Evaluations, 1500)
	}
}

// TestStiffDecay: components that have died out must not ring (L-stability).
func TestStiffDecay(t *testing.T) {
	n := newNet(t)
	n.add("R", resistor(1), "a", "gnd")
	n.add("C", capacitor{1e-9, 1}, "a", "gnd")
	s := n.build()
	u := n.u("a")
	x := make([]float64, s.Size())
	stats := transient(t, s, TransientOptions{Until: 1, Cold: true}, func(p *Step) {
		p.At(p.T1, x)
		near(t, math.Exp(-p.T1/1e-9), x[u], 1e-4, p.T1)
	})
	require.Less(t, stats.Steps, 900)
}

func TestNoAllocations(t *testing.T) {
	n := pair(t, sine{0.3, 1e6})
	b := n.bias()
	w := n.sys.newWorkspace()
	copy(w.eval.X, b.X)
	p := problem{drive: 1, alpha: 1e9, constant: make([]float64, n.sys.Size())}
	require.NoError(t, w.step(&p))
	require.Zero(t, testing.AllocsPerRun(100, func() {
		if w.step(&p) != nil || !w.apply(1).finite {
			panic("the iteration failed")
		}
		copy(w.eval.X, b.X)
	}), "a Newton iteration")

	r := newIntegration(context.Background(), n.sys, TransientOptions{Until: 1, Start: b.X})
	require.NoError(t, r.begin())
	x := make([]float64, n.sys.Size())
	for range 10 {
		_, err := r.try()
		require.NoError(t, err)
	}
	require.Zero(t, testing.AllocsPerRun(100, func() {
		if _, err := r.try(); err != nil {
			panic(err)
		}
		r.widen(r.method.end().x)
		r.method.interpolate(r.t, x)
	}), "a step")
}

func BenchmarkNewtonIteration(b *testing.B) {
	n := pair(b, sine{0.3, 1e6})
	bias := n.bias()
	w := n.sys.newWorkspace()
	p := problem{drive: 1, alpha: 1e9, constant: make([]float64, n.sys.Size())}
	b.ReportAllocs()
	for b.Loop() {
		copy(w.eval.X, bias.X)
		if w.step(&p) != nil || !w.apply(1).finite {
			b.Fatal("the iteration failed")
		}
	}
}

func BenchmarkBias(b *testing.B) {
	s := pair(b, level(0)).build()
	b.ReportAllocs()
	for b.Loop() {
		if _, err := s.Bias(context.Background(), BiasOptions{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkTransient(b *testing.B) {
	for name, frequency := range map[string]float64{"hum": 50, "carrier": 1e6} {
		b.Run(name, func(b *testing.B) {
			s := pair(b, sine{0.5, frequency}).build()
			b.ReportAllocs()
			evaluations := 0
			for b.Loop() {
				stats, err := s.Transient(context.Background(), TransientOptions{Until: 50 / frequency}, func(*Step) error { return nil })
				if err != nil {
					b.Fatal(err)
				}
				evaluations = stats.Work.Evaluations
			}
			b.ReportMetric(float64(evaluations), "evaluations/op")
		})
	}
}
