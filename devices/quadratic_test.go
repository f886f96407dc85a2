package devices

import (
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"poise/mna"
)

const (
	// manufacturedOffset is how far the iterations begin from the solution: well within nVt, where an exponential is nearly its tangent.
	manufacturedOffset = 2e-3 // V
	// quadraticFactor bounds e' / e^2. An exponential has 1/(2 nVt), 22 1/V at 260 K, of the error of its junction, whose ends may be off by e each
	// in opposite directions: four times as much. The base resistance adds a little.
	quadraticFactor = 120.0 // 1/V
	// quadraticFloor is what rounding leaves of volts, currents of amperes in conductances of millisiemens included.
	quadraticFloor = 3e-13 // V
	// quadraticSteps must at least be seen where a junction conducts: from 2 mV errors go as 80 uV, 0.1 uV, 0.3 pV.
	quadraticSteps = 3
	// manufacturedLoad ties every pin to its voltage: what a circuit around the device does.
	manufacturedLoad = 1e-3 // S
)

// manufactured is a system of equations with a known solution: f(x) - f(x*) + alpha (q(x) - q(x*)) + g (x - x*) = 0, with
// the conductance g at the pins alone.
type manufactured struct {
	*bound
	exact []float64
	alpha float64 // 1/s
	f, q  []float64
}

func manufacture(b *bound, exact []float64, alpha float64) *manufactured {
	f, q, _, _ := b.eval(exact)
	return &manufactured{b, exact, alpha, f, q}
}

// step returns the next iterate of Newton's method.
func (m *manufactured) step(x []float64) []float64 {
	f, q, g, c := m.eval(x)
	n := m.n - 1
	jacobian, residual := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for i := range n {
		r := f[i+1] - m.f[i+1] + m.alpha*(q[i+1]-m.q[i+1])
		for k := range n {
			jacobian.Set(i, k, g[i+1][k+1]+m.alpha*c[i+1][k+1])
		}
		if i < m.pins {
			r += manufacturedLoad * (x[i+1] - m.exact[i+1])
			jacobian.Set(i, i, jacobian.At(i, i)+manufacturedLoad)
		}
		residual.SetVec(i, r)
	}
	var update mat.VecDense
	_ = update.SolveVec(jacobian, residual) // of a bad condition it complains, and the step is good
	next := append([]float64(nil), x...)
	for i := range n {
		next[i+1] -= update.AtVec(i)
	}
	return next
}

func (m *manufactured) off(x []float64) float64 {
	largest := 0.0
	for i := 1; i < m.n; i++ {
		d := math.Abs(x[i] - m.exact[i])
		if !(d <= largest) {
			largest = d
		}
	}
	return largest
}

// requireQuadratic iterates from near the solution and wants every error below a multiple of the square of the last, down to rounding; in several steps
// if the equations are curved there.
func requireQuadratic(t *testing.T, m *manufactured, curved bool) {
	x := append([]float64(nil), m.exact...)
	for i := 1; i < m.n; i++ {
		x[i] += manufacturedOffset * math.Cos(2.4*float64(i)) // of mixed signs, so that no derivative is left out
	}
	errors := []float64{m.off(x)}
	for steps := 0; errors[steps] > quadraticFloor; steps++ {
		require.Less(t, steps, 8, "%v", errors)
		x = m.step(x)
		e, last := m.off(x), errors[steps]
		errors = append(errors, e)
		require.True(t, e <= quadraticFactor*last*last+quadraticFloor, "%v: not the square, by %g", errors, e/(last*last))
	}
	if curved {
		require.GreaterOrEqual(t, len(errors)-1, quadraticSteps, "%v", errors)
	}
	t.Logf("%.1e, first factor %.1f", errors, errors[1]/errors[0]/errors[0])
}

// everyParameter are values at which each parameter of a transistor that matters at rest or for charges does.
func everyParameter() map[string]float64 {
	return map[string]float64{
		"Is": 4e-15, "betaF": 140, "betaR": 3, "emF": 1.02, "emR": 1.03, "earlyF": 60, "earlyR": 9, "kneeF": 20e-3, "kneeR": 4e-3, "leakE": 2e-14, "emE": 1.7, "leakC": 1e-14, "emC": 1.8,
		"rB": 220, "rBmin": 15, "rE": 0.8, "rC": 6, "capE": 12e-12, "phiE": 0.72, "gradE": 0.36, "capC": 5e-12, "phiC": 0.65, "gradC": 0.4, "splitC": 0.6, "capS": 3e-12, "phiS": 0.6, "gradS": 0.3,
		"tauF": 0.4e-9, "tauR": 30e-9, "tauFbias": 4, "tauFvolt": 5, "tauFcurr": 10e-3, "expBeta": 1.4,
	}
}

// bipolarPoint is where an npn works: the currents of its ideal junctions or, where they are 0, the voltages.
type bipolarPoint struct {
	name             string
	forward, reverse float64 // A
	v1, v2           float64 // V
	curved           bool    // Newton's method takes its time there
}

func bipolarPoints() []bipolarPoint {
	return []bipolarPoint{
		{name: "forward", forward: 1e-3, v2: -3, curved: true},
		{name: "beyond the knee", forward: 60e-3, v2: -5, curved: true},
		{name: "saturated", forward: 2e-3, reverse: 1e-3, curved: true},
		{name: "reverse", v1: -1.5, reverse: 1e-3, curved: true},
		{name: "hardly on", forward: 1e-9, v2: -1},
		{name: "off", v1: -0.4, v2: -8},
	}
}

// at returns the unknowns of a bound transistor that works there, with some volts across its resistances.
func (p bipolarPoint) at(b *bound) []float64 {
	s := b.stamp.(*bipolarStamp)
	v1, v2 := p.v1, p.v2
	if p.forward > 0 {
		v1 = s.forward.nVt * math.Log1p(p.forward/s.forward.is)
	}
	if p.reverse > 0 {
		v2 = s.reverse.nVt * math.Log1p(p.reverse/s.reverse.is)
	}
	x := make([]float64, b.n)
	const drop = 0.01 // V
	set := func(u mna.Unknown, v float64) { x[u] = s.sign * v }
	set(s.ei, drop)
	set(s.bi, drop+v1)
	set(s.ci, drop+v1-v2)
	set(s.b, 2*drop+v1)
	set(s.c, 2*drop+v1-v2)
	set(s.s, -1)
	return x
}

func TestQuadraticConvergenceOfTheBipolarTransistor(t *testing.T) {
	for polarity := range 2 {
		for _, law := range []float64{0, 30e-6} {
			for _, temperature := range []float64{260, 300, 370} {
				for _, p := range bipolarPoints() {
					f := Families()[polarity]
					t.Run(fmt.Sprintf("%s %s, %g K, rBknee %g", f.Name, p.name, temperature, law), func(t *testing.T) {
						values := f.Defaults()
						for name, x := range everyParameter() {
							values[f.Index(name)] = x
						}
						if law > 0 {
							values[f.Index("rBknee")] = law
						}
						d, err := f.New(values, Place{Temperature: temperature, Area: 1.3})
						require.NoError(t, err)
						for _, alpha := range []float64{0, 1e8} {
							b := bind(d, 4)
							requireQuadratic(t, manufacture(b, p.at(b), alpha), p.curved)
						}
					})
				}
			}
		}
	}
}

func TestQuadraticConvergenceOfTheDiode(t *testing.T) {
	f := Families()[2]
	for name, v := range map[string]float64{"forward": 0.68, "hardly on": 0.3, "at rest": 0, "reverse": -2, "breakdown": -5.1} {
		for _, temperature := range []float64{260, 300, 370} {
			t.Run(fmt.Sprintf("%s, %g K", name, temperature), func(t *testing.T) {
				values := f.Defaults()
				for name, x := range map[string]float64{"Is": 3e-14, "em": 1.3, "rS": 4, "cap": 7e-12, "phi": 0.8, "grad": 0.41, "tau": 3e-9, "breakdown": 5, "kneeBreak": 1e-4} {
					values[f.Index(name)] = x
				}
				d, err := f.New(values, Place{Temperature: temperature, Area: 0.6})
				require.NoError(t, err)
				for _, alpha := range []float64{0, 1e8} {
					b := bind(d, 2)
					s := b.stamp.(*diodeStamp)
					x := make([]float64, b.n)
					x[s.k], x[s.inner], x[s.a] = 0.5, 0.5+v, 0.51+v
					requireQuadratic(t, manufacture(b, x, alpha), name == "forward" || name == "breakdown")
				}
			})
		}
	}
}
