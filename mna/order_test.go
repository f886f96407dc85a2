package mna

import (
	"context"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// slopeTolerance is how far a measured order may be from that of the method: the next term of the error is still seen.
const slopeTolerance = 0.15

// marched is a method in equal steps: TR-BDF2, or a numerical differentiation formula of one order with an exact past.
type marched struct {
	name  string
	order int // of an NDF, 0 for TR-BDF2
}

func marches() []marched {
	list := []marched{{"TR-BDF2", 0}}
	for order := 1; order <= ndfMost; order++ {
		list = append(list, marched{fmt.Sprint("NDF ", order), order})
	}
	return list
}

// begin starts at time 0, where exact is the solution of all unknowns.
func (c marched) begin(t testing.TB, s *System, o TransientOptions, h float64, exact func(t float64, x []float64)) *integration {
	t.Helper()
	if c.order == 0 {
		o.Method = TRBDF2
	}
	r := newIntegration(context.Background(), s, o)
	require.NoError(t, r.begin())
	m, ok := r.method.(*ndf)
	if !ok {
		return r
	}
	r.t = 0
	m.forget()
	for k := -c.order; k <= 0; k++ {
		p := s.newPoint()
		p.t = float64(k) * h
		exact(p.t, p.x)
		copy(r.w.eval.X, p.x)
		r.w.evaluate(&problem{time: p.t, drive: 1, alpha: 1})
		copy(p.q, r.w.eval.Q)
		m.append(&p)
	}
	m.setOrder(c.order)
	return r
}

// march takes equal steps, without error control, and returns the largest error of an unknown at the ends of the steps and within them.
func (c marched) march(t testing.TB, s *System, o TransientOptions, u Unknown, steps int, exact func(t float64, x []float64)) (ends, within float64) {
	t.Helper()
	h := o.Until / float64(steps)
	r := c.begin(t, s, o, h, exact)
	x, want, begun := make([]float64, s.Size()), make([]float64, s.Size()), r.t
	miss := func(at float64) float64 {
		r.method.interpolate(at, x, r.free)
		exact(at, want)
		return math.Abs(x[u] - want[u])
	}
	for k := 1; k <= steps; k++ {
		from, to := r.t, begun+(o.Until-begun)*float64(k)/float64(steps)
		require.NoError(t, r.method.attempt(to))
		r.method.accept()
		r.t = to
		exact(to, want)
		if ends = math.Max(ends, math.Abs(r.method.end().x[u]-want[u])); k == 1 {
			continue // the first step of TR-BDF2 has a parabola only
		}
		for _, share := range []float64{0.17, 0.44, 0.81} {
			within = math.Max(within, miss(from+share*(to-from)))
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
	for _, c := range marches() {
		t.Run(c.name, func(t *testing.T) {
			n := newNet(t)
			n.add("law", logistic(), "x")
			s := n.build()
			var ends, within []float64
			for _, steps := range []int{50, 100, 200} {
				e, w := c.march(t, s, TransientOptions{Until: 5, Start: []float64{0, 0.2}, Accuracy: 1e-9}, n.u("x"), steps, func(t float64, x []float64) {
					x[1] = 0.2 / (0.2 + 0.8*math.Exp(-t))
				})
				ends, within = append(ends, e), append(within, w)
			}
			checkOrder(t, "ends", ends, c.converges())
			checkOrder(t, "within", within, c.converges())
		})
	}
}

// converges is the order of the method.
func (c marched) converges() float64 {
	if c.order == 0 {
		return trbdf2Order
	}
	return float64(c.order)
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
	for _, c := range marches() {
		t.Run(c.name, func(t *testing.T) {
			n := newNet(t)
			n.add("V", voltage{sine{1, 1}}, "a", "gnd")
			n.add("C", capacitor{1, 0}, "a", "gnd")
			s := n.build()
			_, inside := s.Unknowns(0)
			a, i := n.u("a"), inside[0]
			var ends []float64
			for _, steps := range []int{50, 100, 200} {
				e, _ := c.march(t, s, TransientOptions{Until: 1}, i, steps, func(t float64, x []float64) {
					x[a], x[i] = math.Sin(2*math.Pi*t), -2*math.Pi*math.Cos(2*math.Pi*t)
				})
				ends = append(ends, e)
			}
			checkOrder(t, "slope", ends, c.converges())
		})
	}
}

// TestDenseOrder isolates the interpolation: without charges the points are exact, and a polynomial of degree k has an error of order k+1.
func TestDenseOrder(t *testing.T) {
	for _, c := range marches() {
		t.Run(c.name, func(t *testing.T) {
			n := newNet(t)
			n.hold("in", sine{1, 1})
			n.add("R1", resistor(1), "in", "a")
			n.add("R2", resistor(1), "a", "gnd")
			s := n.build()
			in, a := n.u("in"), n.u("a")
			var within []float64
			for _, steps := range []int{40, 80, 160} {
				e, w := c.march(t, s, TransientOptions{Until: 1}, a, steps, func(t float64, x []float64) {
					x[in] = math.Sin(2 * math.Pi * t)
					x[a] = x[in] / 2
				})
				near(t, 0, e, 1e-12)
				within = append(within, w)
			}
			degree := c.order
			if c.order == 0 {
				degree = 3
			}
			checkOrder(t, "within", within, float64(degree+1))
		})
	}
}

// TestProtheroRobinson follows y' = -lambda (y - sin t) + cos t (Prothero & Robinson, On the stability and accuracy of one-step methods for solving stiff
// systems, Math. Comp. 28, 1974): the error must not grow with the stiffness.
func TestProtheroRobinson(t *testing.T) { eachMethod(t, stiffnessCostsNoAccuracy) }

func stiffnessCostsNoAccuracy(t *testing.T, method Method) {
	for _, lambda := range []float64{1, 1e2, 1e4, 1e6, 1e8} {
		n := newNet(t)
		n.add("law", law{pins: 1, f: func(t float64, y, f []float64, df [][]float64) {
			f[0], df[0][0] = lambda*(y[0]-math.Sin(t))-math.Cos(t), lambda
		}}, "y")
		s := n.build()
		d, stats := worst(t, s, TransientOptions{Method: method, Until: 10, Start: []float64{0, 0}}, n.u("y"), math.Sin)
		t.Logf("lambda %g: error %.2e of the swing, %d steps, %d evaluations", lambda, d/2, stats.Steps, stats.Work.Evaluations)
		near(t, 0, d/2, defaultAccuracy, lambda)
		require.Less(t, stats.Work.Evaluations, 1500)
	}
}

// TestStiffDecay: components that have died out must not ring (L-stability).
func TestStiffDecay(t *testing.T) { eachMethod(t, decaysDoNotRing) }

func decaysDoNotRing(t *testing.T, method Method) {
	n := newNet(t)
	n.add("R", resistor(1), "a", "gnd")
	n.add("C", capacitor{1e-9, 1}, "a", "gnd")
	s := n.build()
	u := n.u("a")
	x := make([]float64, s.Size())
	stats := transient(t, s, TransientOptions{Method: method, Until: 1, Cold: true}, func(p *Step) {
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
		r.method.interpolate(r.t, x, r.free)
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
