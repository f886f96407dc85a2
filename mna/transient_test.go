package mna

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"math"
	"os"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"
)

// transient runs an integration and hands every step to look.
func transient(t testing.TB, s *System, o TransientOptions, look func(p *Step)) *TransientStats {
	t.Helper()
	stats, err := s.Transient(context.Background(), o, func(p *Step) error {
		if look != nil {
			look(p)
		}
		return nil
	})
	require.NoError(t, err)
	require.Equal(t, stats.Steps > 0, true)
	return stats
}

// eachMethod runs a test with every integration method.
func eachMethod(t *testing.T, test func(t *testing.T, method Method)) {
	for _, method := range []Method{NDF, TRBDF2} {
		t.Run(method.String(), func(t *testing.T) { test(t, method) })
	}
}

// looks is the number of places within a step at which a solution is compared.
const looks = 7

// worst returns the largest difference between an unknown and its exact waveform, within all steps of a run.
func worst(t testing.TB, s *System, o TransientOptions, u Unknown, exact func(t float64) float64) (float64, *TransientStats) {
	t.Helper()
	x := make([]float64, s.Size())
	largest, last := 0.0, 0.0
	stats := transient(t, s, o, func(p *Step) {
		require.Equal(t, last, p.T0, "steps follow each other")
		last = p.T1
		for k := range looks {
			at := p.T0 + (p.T1-p.T0)*float64(k)/(looks-1)
			if k == looks-1 {
				at = p.T1
			}
			p.At(at, x)
			if d := math.Abs(x[u] - exact(at)); !(d <= largest) {
				largest = d
			}
		}
	})
	require.Equal(t, o.Until, last)
	return largest, stats
}

func steps(from, to, at, over float64) Signal { return slope{from, to, at, at + over} }

// ramped is the response of a first-order lag tau to a ramp of slope 1 from t = 0.
func ramped(t, tau float64) float64 {
	if t <= 0 {
		return 0
	}
	return t + tau*math.Expm1(-t/tau)
}

// waveforms are circuits whose waveforms are known in closed form, every one compared at several accuracies.
var waveforms = []struct {
	name  string
	until float64
	cold  bool
	swing float64
	// most is the number of evaluations allowed for 8 steps: a linear circuit takes little more than one a stage. Currents and voltages that are
	// derivatives begin at their extreme, where their swing is below rounding for a while.
	most  int
	make  func(n *net) func() Unknown
	exact func(t float64) float64
}{
	{"RC under a ramp", 5e-3, false, 2, 17, func(n *net) func() Unknown {
		n.hold("in", steps(1, 3, 1e-3, 1e-4))
		n.add("R", resistor(1e3), "in", "a")
		n.add("C", capacitor{0.7e-6, 0}, "a", "gnd")
		return func() Unknown { return n.u("a") }
	}, func(t float64) float64 {
		return 1 + 2/1e-4*(ramped(t-1e-3, 0.7e-3)-ramped(t-1.1e-3, 0.7e-3))
	}},
	{"RL under a ramp, its current", 5e-3, false, 0.5, 17, func(n *net) func() Unknown {
		n.hold("in", steps(0, 2, 1e-3, 1e-5))
		n.add("R", resistor(4), "in", "a")
		l := n.add("L", inductor{2e-3, 0}, "a", "gnd")
		return func() Unknown { _, inside := n.sys.Unknowns(l); return inside[0] }
	}, func(t float64) float64 {
		return 0.5 / 1e-5 * (ramped(t-1e-3, 0.5e-3) - ramped(t-1.01e-3, 0.5e-3))
	}},
	{"RLC from a charge", 2e-4, true, 3, 17, func(n *net) func() Unknown {
		n.add("C", capacitor{1e-9, 2}, "a", "gnd")
		n.add("L", inductor{1e-3, 0}, "a", "b")
		n.add("R", resistor(300), "b", "gnd")
		return func() Unknown { return n.u("a") }
	}, func(t float64) float64 {
		decay := 300 / 2e-3
		omega := math.Sqrt(1e12 - decay*decay)
		return 2 * math.Exp(-decay*t) * (math.Cos(omega*t) + decay/omega*math.Sin(omega*t))
	}},
	{"the current of a capacitor across an ideal source", 2e-3, false, 2, 24, func(n *net) func() Unknown {
		v := n.add("V", voltage{sine{1, 1e3}}, "a", "gnd")
		n.add("C", capacitor{1 / (2 * math.Pi * 1e3), 0}, "a", "gnd")
		return func() Unknown { _, inside := n.sys.Unknowns(v); return inside[0] }
	}, func(t float64) float64 { return -math.Cos(2 * math.Pi * 1e3 * t) }},
	{"the voltage of an inductor in series with a current source", 2e-3, false, 2, 24, func(n *net) func() Unknown {
		n.add("I", current{sine{1, 1e3}}, "gnd", "a")
		n.add("L", inductor{1 / (2 * math.Pi * 1e3), 0}, "a", "gnd")
		return func() Unknown { return n.u("a") }
	}, func(t float64) float64 { return math.Cos(2 * math.Pi * 1e3 * t) }},
	{"a divider without any charge", 0.1, false, 1, 17, func(n *net) func() Unknown {
		n.hold("in", sine{2, 50})
		n.add("R1", resistor(1e3), "in", "a")
		n.add("R2", resistor(1e3), "a", "gnd")
		return func() Unknown { return n.u("a") }
	}, func(t float64) float64 { return math.Sin(2 * math.Pi * 50 * t) }},
	{"RC at a carrier far above its corner", 50e-6, false, 0.032, 17, func(n *net) func() Unknown {
		n.hold("in", sine{1, 1e6})
		n.add("R", resistor(1e3), "in", "a")
		n.add("C", capacitor{10e-9, 0}, "a", "gnd")
		return func() Unknown { return n.u("a") }
	}, func(t float64) float64 {
		w, tau := 2*math.Pi*1e6, 1e-5
		return (math.Sin(w*t) - w*tau*math.Cos(w*t) + w*tau*math.Exp(-t/tau)) / (1 + w*w*tau*tau)
	}},
}

// TestWaveforms holds the promise of the accuracy setting: the error of a waveform within every step stays below it, and falls with it.
func TestWaveforms(t *testing.T) { eachMethod(t, waveformsKeepAccuracy) }

func waveformsKeepAccuracy(t *testing.T, method Method) {
	for _, c := range waveforms {
		t.Run(c.name, func(t *testing.T) {
			previous := math.Inf(1)
			for _, accuracy := range []float64{1e-3, 1e-4, 1e-5, 1e-6} {
				n := newNet(t)
				u := c.make(n)
				s := n.build()
				d, stats := worst(t, s, TransientOptions{Method: method, Until: c.until, Accuracy: accuracy, Cold: c.cold}, u(), c.exact)
				t.Logf("accuracy %g: error %.2e of the swing, %d steps, %d evaluations", accuracy, d/c.swing, stats.Steps, stats.Work.Evaluations)
				near(t, 0, d/c.swing, accuracy, "accuracy", accuracy)
				require.Less(t, d, previous)
				previous = d / 2
				attempts := stats.Steps + stats.Rejected
				require.LessOrEqual(t, stats.Work.Evaluations, c.most*attempts/8+8*stats.Restarts+2)
				require.Less(t, stats.Rejected, stats.Steps/4+4)
			}
		})
	}
}

// reference reads an independent solution; see testdata/reference/stiff.py.
func reference(t testing.TB, problem string) []float64 {
	f, err := os.Open("../testdata/reference/stiff.txt")
	require.NoError(t, err)
	defer f.Close()
	var values []float64
	for lines := bufio.NewScanner(f); lines.Scan(); {
		var name string
		var i int
		var v float64
		_, err := fmt.Sscan(lines.Text(), &name, &i, &v)
		require.NoError(t, err)
		if name == problem {
			require.Len(t, values, i)
			values = append(values, v)
		}
	}
	require.NotEmpty(t, values)
	return values
}

// vanDerPol is the relaxation oscillator with epsilon = 1e-6.
func vanDerPol(_ float64, y, f []float64, df [][]float64) {
	const epsilon = 1e-6
	f[0], df[0][1] = -y[1], -1
	f[1] = -((1-y[0]*y[0])*y[1] - y[0]) / epsilon
	df[1][0], df[1][1] = (2*y[0]*y[1]+1)/epsilon, -(1-y[0]*y[0])/epsilon
}

// robertson is the chemical reaction of Robertson, 1966.
func robertson(_ float64, y, f []float64, df [][]float64) {
	f[0] = 0.04*y[0] - 1e4*y[1]*y[2]
	f[2] = -3e7 * y[1] * y[1]
	f[1] = -f[0] - f[2]
	df[0][0], df[0][1], df[0][2] = 0.04, -1e4*y[2], -1e4*y[1]
	df[2][1] = -6e7 * y[1]
	df[1][0], df[1][1], df[1][2] = -0.04, 1e4*y[2]+6e7*y[1], 1e4*y[1]
}

// hires is the growth of a plant under light of high irradiance (Schaefer, 1975).
func hires(_ float64, y, f []float64, df [][]float64) {
	linear := [8][8]float64{
		{-1.71, 0.43, 8.32}, {1.71, -8.75}, {0, 0, -10.03, 0.43, 0.035}, {0, 8.32, 1.71, -1.12},
		{0, 0, 0, 0, -1.745, 0.43, 0.43}, {0, 0, 0, 0.69, 1.71, -0.43, 0.69}, {0, 0, 0, 0, 0, 0, -1.81}, {0, 0, 0, 0, 0, 0, 1.81},
	}
	f[0] -= 0.0007
	for i, row := range linear {
		for j, a := range row {
			f[i] -= a * y[j]
			df[i][j] -= a
		}
	}
	for i, sign := range map[int]float64{5: -1, 6: 1, 7: -1} {
		f[i] -= sign * 280 * y[5] * y[7]
		df[i][5] -= sign * 280 * y[7]
		df[i][7] -= sign * 280 * y[5]
	}
}

// stiff are the test problems of Hairer & Wanner, Solving Ordinary Differential Equations II, 1996.
var stiff = []stiffProblem{
	{"vanderpol", vanDerPol, []float64{2, 0}, 2, 4500},
	{"robertson", robertson, []float64{1, 0, 0}, 40, 1400},
	{"hires", hires, []float64{1, 0, 0, 0, 0, 0, 0, 0.0057}, 321.8122, 2600},
}

type stiffProblem struct {
	name  string
	law   func(t float64, y, f []float64, df [][]float64)
	start []float64
	until float64
	// evaluations allowed at the default accuracy
	most int
}

// rate is the slope of the solution at the end.
func (c *stiffProblem) rate(end []float64) []float64 {
	f, df := make([]float64, len(end)), make([][]float64, len(end))
	for i := range df {
		df[i] = make([]float64, len(end))
	}
	c.law(c.until, end, f, df)
	return f
}

// TestStiffProblems compares the end with the reference. The end of hires lies in a steep fall after a long delay, which the problem is known for: there a
// waveform is as far from the reference as the smaller of its distances in value, beside the swing, and in time, beside the whole time.
func TestStiffProblems(t *testing.T) { eachMethod(t, stiffProblemsEndRight) }

func stiffProblemsEndRight(t *testing.T, method Method) {
	for _, c := range stiff {
		t.Run(c.name, func(t *testing.T) {
			want := reference(t, c.name)
			previous := math.Inf(1)
			for _, accuracy := range []float64{1e-3, 1e-4, 1e-5} {
				n := newNet(t)
				var nodes []string
				for i := range want {
					nodes = append(nodes, fmt.Sprint("y", i))
				}
				n.add("law", law{pins: len(want), f: c.law}, nodes...)
				s := n.build()
				low, high := append([]float64{0}, c.start...), append([]float64{0}, c.start...)
				var end []float64
				stats := transient(t, s, TransientOptions{Method: method, Until: c.until, Accuracy: accuracy, Start: append([]float64{0}, c.start...)}, func(p *Step) {
					end = append(end[:0], p.End()...)
					for i, v := range end {
						low[i], high[i] = math.Min(low[i], v), math.Max(high[i], v)
					}
				})
				rate := c.rate(want)
				largest := 0.0
				for i, v := range want {
					largest = math.Max(largest, math.Abs(end[i+1]-v)/(high[i+1]-low[i+1]+math.Abs(rate[i]*c.until)))
				}
				t.Logf("accuracy %g: error %.2e, %+v", accuracy, largest, *stats)
				near(t, 0, largest, accuracy, "accuracy", accuracy)
				require.Less(t, largest, previous/3)
				previous = largest
				if accuracy == defaultAccuracy {
					require.LessOrEqual(t, stats.Work.Evaluations, c.most)
				}
			}
		})
	}
}

// amplifierTransistor is the transistor of the transistor amplifier: pins c b e.
func amplifierTransistor() Device {
	const uf, alpha, beta = 0.026, 0.99, 1e-6
	return law{pins: 3, f: func(_ float64, x, f []float64, df [][]float64) {
		value, slope := boundedExp((x[1] - x[2]) / uf)
		i, g := beta*(value-1), beta/uf*slope
		for k, share := range []float64{alpha, 1 - alpha, -1} {
			f[k] = share * i
			df[k][1], df[k][2] = share*g, -share*g
		}
	}, q: func(_, _ []float64, _ [][]float64) {}}
}

// transistorAmplifier is the two-stage amplifier of Hairer & Wanner, 1996, section VI.1, as a circuit.
func transistorAmplifier(t testing.TB) *net {
	n := newNet(t)
	n.hold("ub", level(6))
	n.hold("ue", sine{0.1, 100})
	n.add("R0", resistor(1000), "ue", "y1")
	n.add("C1", capacitor{1e-6, 0}, "y1", "y2")
	for k, r := range [][2]string{{"y2", "gnd"}, {"y2", "ub"}, {"y3", "gnd"}, {"y4", "ub"}, {"y5", "gnd"}, {"y5", "ub"}, {"y6", "gnd"}, {"y7", "ub"}, {"y8", "gnd"}} {
		n.add(fmt.Sprint("R", k+1), resistor(9000), r[0], r[1])
	}
	n.add("C2", capacitor{2e-6, 0}, "y3", "gnd")
	n.add("C3", capacitor{3e-6, 0}, "y4", "y5")
	n.add("C4", capacitor{4e-6, 0}, "y6", "gnd")
	n.add("C5", capacitor{5e-6, 0}, "y7", "y8")
	n.add("T1", amplifierTransistor(), "y4", "y2", "y3")
	n.add("T2", amplifierTransistor(), "y7", "y5", "y6")
	return n
}

func TestTransistorAmplifier(t *testing.T) { eachMethod(t, amplifierEndsRight) }

func amplifierEndsRight(t *testing.T, method Method) {
	want := reference(t, "amplifier")
	for _, accuracy := range []float64{1e-3, 1e-4, 1e-5} {
		n := transistorAmplifier(t)
		s := n.build()
		start := make([]float64, s.Size())
		for i, v := range []float64{0, 3, 3, 6, 3, 3, 6, 0} {
			start[n.u(fmt.Sprint("y", i+1))] = v
		}
		low, high := append([]float64(nil), start...), append([]float64(nil), start...)
		var end []float64
		stats := transient(t, s, TransientOptions{Method: method, Until: 0.2, Accuracy: accuracy, Start: start}, func(p *Step) {
			end = append(end[:0], p.End()...)
			for i, v := range end {
				low[i], high[i] = math.Min(low[i], v), math.Max(high[i], v)
			}
		})
		largest := 0.0
		for i, v := range want {
			u := n.u(fmt.Sprint("y", i+1))
			largest = math.Max(largest, math.Abs(end[u]-v)/(high[u]-low[u]))
		}
		t.Logf("accuracy %g: error %.2e of the swing, %+v", accuracy, largest, *stats)
		near(t, 0, largest, accuracy, "accuracy", accuracy)
	}
}

func TestJumps(t *testing.T) { eachMethod(t, jumpsAreSeen) }

func jumpsAreSeen(t *testing.T, method Method) {
	// Unknowns that no charge holds jump with the source, and each side of the jump sees its own value.
	n := newNet(t)
	n.add("V", voltage{jump{1, 4, 0.3}}, "in", "gnd")
	n.add("R1", resistor(1e3), "in", "a")
	n.add("R2", resistor(1e3), "a", "gnd")
	n.add("R3", resistor(1e3), "in", "c")
	n.add("C", capacitor{1e-4, 0}, "c", "gnd")
	s := n.build()
	a, c := n.u("a"), n.u("c")
	landed := false
	x := make([]float64, s.Size())
	transient(t, s, TransientOptions{Method: method, Until: 1}, func(p *Step) {
		landed = landed || p.T1 == 0.3
		for k := range looks {
			at := p.T0 + (p.T1-p.T0)*float64(k)/(looks-1)
			p.At(at, x)
			if p.T1 <= 0.3 {
				near(t, 0.5, x[a], 1e-9, at)
				near(t, 1, x[c], 1e-9, at)
			} else {
				near(t, 2, x[a], 1e-9, at)
				near(t, 4-3*math.Exp(-(at-0.3)/0.1), x[c], 3*defaultAccuracy, at)
			}
		}
	})
	require.True(t, landed)
}

func TestHeldJump(t *testing.T) { eachMethod(t, heldJumpIsSeen) }

func heldJumpIsSeen(t *testing.T, method Method) {
	n := newNet(t)
	n.hold("in", jump{1, -2, 0.25})
	n.add("R", resistor(1e3), "in", "a")
	n.add("R2", resistor(2e3), "a", "gnd")
	n.add("C", capacitor{1e-6, 0}, "in", "a")
	s := n.build()
	x := make([]float64, s.Size())
	transient(t, s, TransientOptions{Method: method, Until: 0.5}, func(p *Step) {
		p.At(p.T0, x)
		if p.T0 < 0.25 {
			require.Equal(t, 1.0, x[n.u("in")])
		} else {
			require.Equal(t, -2.0, x[n.u("in")])
		}
		p.At(p.T1, x)
		if p.T1 <= 0.25 {
			require.Equal(t, 1.0, x[n.u("in")])
			require.Equal(t, x, p.End())
		} else {
			require.Equal(t, -2.0, x[n.u("in")])
		}
		if p.T0 == 0.25 {
			// The capacitor carries the jump of -3 V over to a: 2/3 - 3.
			p.At(p.T0, x)
			near(t, 2.0/3-3, x[n.u("a")], 1e-3)
		}
	})
}

func TestCornersAreLandedOn(t *testing.T) {
	n := newNet(t)
	n.hold("in", steps(0, 1, 0.1, 1e-9))
	n.add("V", voltage{steps(0, -1, 0.15, 0.2)}, "b", "in")
	n.add("I", current{jump{0, 1e-3, 0.6}}, "b", "gnd")
	n.add("R", resistor(50), "b", "gnd")
	n.add("C", capacitor{1e-9, 0}, "b", "gnd")
	s := n.build()
	ends := map[float64]bool{}
	stats := transient(t, s, TransientOptions{Until: 1}, func(p *Step) { ends[p.T1] = true })
	for _, corner := range []float64{0.1, 0.1 + 1e-9, 0.15, 0.15 + 0.2, 0.6, 1} {
		require.True(t, ends[corner], corner)
	}
	require.Equal(t, 6, stats.Restarts)
	require.Less(t, stats.Steps, 800)
}

func TestColdStart(t *testing.T) { eachMethod(t, coldStartIsConsistent) }

func coldStartIsConsistent(t *testing.T, method Method) {
	n := newNet(t)
	n.hold("vp", level(5))
	n.add("R", resistor(2e3), "vp", "a")
	n.add("C", capacitor{1e-6, 1.5}, "a", "gnd")
	l := n.add("L", inductor{1e-3, 2e-3}, "vp", "b")
	n.add("RL", resistor(10), "b", "gnd")
	s := n.build()
	_, inside := s.Unknowns(l)
	first := true
	d, _ := worst(t, s, TransientOptions{Method: method, Until: 20e-3, Cold: true}, n.u("a"), func(t float64) float64 { return 5 - 3.5*math.Exp(-t/2e-3) })
	near(t, 0, d/3.5, defaultAccuracy)
	x := make([]float64, s.Size())
	transient(t, s, TransientOptions{Method: method, Until: 1e-3, Cold: true}, func(p *Step) {
		if first {
			p.At(0, x)
			near(t, 2e-3, x[inside[0]], 1e-6)
			near(t, 20e-3, x[n.u("b")], 1e-5)
			first = false
		}
	})
}

// TestChargeIsConserved watches the charge of a node that only capacitors touch.
func TestChargeIsConserved(t *testing.T) { eachMethod(t, chargeIsConserved) }

func chargeIsConserved(t *testing.T, method Method) {
	n := newNet(t)
	n.hold("in", sine{3, 1e3})
	n.add("C1", capacitor{1e-9, 0.4}, "in", "x")
	n.add("C2", capacitor{3e-9, 0.9}, "x", "gnd")
	n.add("R", resistor(1e3), "in", "gnd")
	s := n.build()
	x, want := n.u("x"), 3e-9*0.9-1e-9*0.4
	transient(t, s, TransientOptions{Method: method, Until: 1e-2, Cold: true}, func(p *Step) {
		near(t, want, p.r.method.end().q[x], 1e-12*want)
	})
}

// TestTellegen checks at every accepted point that the powers of all devices and sources sum to zero, dynamic currents included.
func TestTellegen(t *testing.T) { eachMethod(t, powersSumToZero) }

func powersSumToZero(t *testing.T, method Method) {
	n := pair(t, sine{0.5, 1e6})
	s := n.build()
	points := 0
	transient(t, s, TransientOptions{Method: method, Until: 2e-6}, func(p *Step) {
		e := p.r.method.end()
		sum, gross := 0.0, 0.0
		// The sum over the devices of volts times current leaving is X (F + dQ/dt); free rows must vanish by themselves.
		w := s.newWorkspace()
		copy(w.eval.X, e.x)
		w.evaluate(&problem{time: p.T1, drive: 1, alpha: 1})
		for u := s.Held() + 1; u < s.Size(); u++ {
			sum += e.x[u] * (w.eval.F[u] + rateOf(p, u))
		}
		for _, stamp := range s.stamps {
			clear(w.eval.F)
			stamp.Eval(&w.eval)
			for u, f := range w.eval.F {
				gross += math.Abs(f * e.x[u])
			}
		}
		near(t, 0, sum/gross, 1e-6, p.T1)
		points++
	})
	require.Greater(t, points, 20)
}

// rateOf is dq/dt of an unknown at the end of a step, as the method has it.
func rateOf(p *Step, u int) float64 {
	m, ok := p.r.method.(*ndf)
	switch {
	case !ok:
		return p.r.method.end().rate[u]
	case m.last == byStarter:
		return m.starter.end().rate[u]
	}
	return m.constant[u] + m.alpha*(m.newest.q[u]-m.attempted.q[u]) // attempted is the point before
}

func TestDeterminism(t *testing.T) { eachMethod(t, runsRepeat) }

func runsRepeat(t *testing.T, method Method) {
	s := pair(t, sine{0.5, 1e6}).build()
	run := func() []float64 {
		var all []float64
		x := make([]float64, s.Size())
		transient(t, s, TransientOptions{Method: method, Until: 3e-6}, func(p *Step) {
			p.At(p.T0+0.3*(p.T1-p.T0), x)
			all = append(append(all, p.T1), x...)
		})
		return all
	}
	want := run()
	results := make([][]float64, 4)
	var group sync.WaitGroup
	for k := range results {
		group.Go(func() { results[k] = run() })
	}
	group.Wait()
	for _, got := range results {
		require.Equal(t, want, got)
	}
}

func TestMaxStep(t *testing.T) {
	n := newNet(t)
	n.hold("in", level(1))
	n.add("R", resistor(1e3), "in", "a")
	n.add("C", capacitor{1e-9, 0}, "a", "gnd")
	transient(t, n.build(), TransientOptions{Until: 1, MaxStep: 3e-3}, func(p *Step) { require.LessOrEqual(t, p.T1-p.T0, 3e-3*(1+1e-9)) })
}

// TestNothingHappens: a circuit without a volt in it is followed to its end.
func TestNothingHappens(t *testing.T) {
	eachMethod(t, func(t *testing.T, method Method) {
		n := newNet(t)
		n.hold("in", sine{0, 1})
		n.add("R", resistor(1e3), "in", "a")
		n.add("R2", resistor(1e3), "a", "gnd")
		n.add("C", capacitor{1e-6, 0}, "a", "gnd")
		stats := transient(t, n.build(), TransientOptions{Until: 1, Method: method}, func(p *Step) { require.Zero(t, p.End()[n.u("a")]) })
		require.Less(t, stats.Steps, 60)
	})
}

// hurried is a signal that asks for steps so short that no end is in sight.
type hurried struct{ level }

func (hurried) Scale(float64) float64 { return 1e-15 }

func TestARunThatGetsNowhereEnds(t *testing.T) {
	n := newNet(t)
	n.hold("in", hurried{1})
	n.add("R", resistor(1e3), "in", "a")
	n.add("C", capacitor{1e-6, 0}, "a", "gnd")
	_, err := n.build().Transient(context.Background(), TransientOptions{Until: 1}, func(*Step) error { return nil })
	var e *StepError
	require.ErrorAs(t, err, &e)
	require.ErrorIs(t, err, errCreeping)
	require.Less(t, e.Time, creepShare)
	require.NotContains(t, err.Error(), "shortest")
}

// TestBlowUp integrates y' = y^2 from 1, which ends at t = 1.
func TestBlowUp(t *testing.T) { eachMethod(t, blowUpIsReported) }

func blowUpIsReported(t *testing.T, method Method) {
	n := newNet(t)
	n.add("square", law{pins: 1, f: func(_ float64, y, f []float64, df [][]float64) { f[0], df[0][0] = -y[0]*y[0], -2*y[0] }}, "y")
	s := n.build()
	stats, err := s.Transient(context.Background(), TransientOptions{Method: method, Until: 2, Start: []float64{0, 1}}, func(*Step) error { return nil })
	var e *StepError
	require.ErrorAs(t, err, &e)
	near(t, 1, e.Time, 1e-3)
	require.Equal(t, "y", e.Unknown)
	require.Equal(t, []string{"square"}, e.Devices)
	require.Error(t, e.Unwrap())
	require.Positive(t, stats.Steps)
	t.Log(err)
}

func TestTransientOptionsAndEnds(t *testing.T) {
	n := newNet(t)
	n.hold("in", sine{1, 1})
	n.add("R", resistor(1e3), "in", "a")
	n.add("C", capacitor{1e-6, 0}, "a", "gnd")
	s := n.build()
	for want, o := range map[string]TransientOptions{
		"Until":    {Until: 0},
		"MaxStep":  {Until: 1, MaxStep: -1},
		"Accuracy": {Until: 1, Accuracy: math.NaN()},
		"Start":    {Until: 1, Start: []float64{1}},
		"Method":   {Until: 1, Method: -1},
	} {
		_, err := s.Transient(context.Background(), o, func(*Step) error { return nil })
		var e *OptionError
		require.ErrorAs(t, err, &e)
		require.Equal(t, want, e.Option)
	}
	stop := errors.New("enough")
	_, err := s.Transient(context.Background(), TransientOptions{Until: 1}, func(*Step) error { return stop })
	require.Equal(t, stop, err)
	ctx, cancel := context.WithCancel(context.Background())
	taken := 0
	_, err = s.Transient(ctx, TransientOptions{Until: 1}, func(*Step) error {
		if taken++; taken == 5 {
			cancel()
		}
		return nil
	})
	require.ErrorIs(t, err, context.Canceled)
	require.Equal(t, 5, taken)
}

// TestStepsFollowTheScale: even where hardly any accuracy is asked for, and nothing moves, a signal is not stepped over.
func TestStepsFollowTheScale(t *testing.T) { eachMethod(t, stepsFollowTheScale) }

func stepsFollowTheScale(t *testing.T, method Method) {
	n := newNet(t)
	n.hold("in", sine{1e-12, 1e3})
	n.hold("vp", level(5))
	n.add("R", resistor(1e3), "vp", "a")
	n.add("R2", resistor(1e9), "in", "a")
	transient(t, n.build(), TransientOptions{Method: method, Until: 10e-3, Accuracy: 0.9}, func(p *Step) {
		require.LessOrEqual(t, p.T1-p.T0, 1e-3/stepsPerScale*(1+1e-9))
	})
}

// TestStagesAreSolved: of the error that a waveform may have, Newton's method takes next to nothing. Without charges it is all there is at the ends
// of the steps.
func TestStagesAreSolved(t *testing.T) { eachMethod(t, stagesAreSolved) }

func stagesAreSolved(t *testing.T, method Method) {
	for _, accuracy := range []float64{1e-3, 1e-4, 1e-5, 1e-6} {
		n := newNet(t)
		n.hold("in", sine{3, 50})
		n.add("R", resistor(1e3), "in", "a")
		n.add("D", junction{1e-14, 0.0259, 0}, "a", "gnd")
		s := n.build()
		largest := 0.0
		stats := transient(t, s, TransientOptions{Method: method, Until: 0.1, Accuracy: accuracy}, func(p *Step) {
			x := p.End()
			v := x[n.u("a")]
			slope := 1/1e3 + 1e-14/0.0259*math.Exp(v/0.0259)
			left := (v-x[n.u("in")])/1e3 + 1e-14*math.Expm1(v/0.0259)
			largest = math.Max(largest, math.Abs(left/slope))
		})
		t.Logf("accuracy %g: %.2e of the swing, %+v", accuracy, largest/3.7, *stats)
		near(t, 0, largest/3.7, 0.05*accuracy)
	}
}
