package mna

import (
	"context"
	"errors"
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

const (
	// linearTolerance is that of a linear solution of moderate condition: rounding, times a margin for the condition.
	linearTolerance = 1e-12
	// biasTolerance is far below what the last Newton update (1e-9) squared leaves.
	biasTolerance = 1e-11
)

func TestLadderOfResistors(t *testing.T) {
	// Every node of a ladder of equal resistors, seen from its far end, follows the Fibonacci numbers.
	n := newNet(t)
	n.hold("n0", level(34))
	for k := range 4 {
		n.add(fmt.Sprint("S", k), resistor(1e3), fmt.Sprint("n", k), fmt.Sprint("n", k+1))
		n.add(fmt.Sprint("P", k), resistor(1e3), fmt.Sprint("n", k+1), "gnd")
	}
	b := n.bias()
	for k, want := range []float64{34, 13, 5, 2, 1} {
		near(t, want, b.X[n.u(fmt.Sprint("n", k))], 34*linearTolerance, k)
	}
	require.Equal(t, RungNewton, b.Rung)
	require.LessOrEqual(t, b.Iterations, 2, "a linear circuit takes one step and one to see that it has arrived")
}

func TestJunctionAgainstLambert(t *testing.T) {
	// v + R Is (exp(v/Vt) - 1) = E, checked by putting the answer into the equation.
	n := newNet(t)
	n.hold("in", level(5))
	n.add("R", resistor(1e3), "in", "a")
	n.add("D", junction{1e-14, 0.025, 0}, "a", "gnd")
	b := n.bias()
	v := b.X[n.u("a")]
	near(t, 5, v+1e3*1e-14*math.Expm1(v/0.025), 5*biasTolerance)
	require.LessOrEqual(t, b.Iterations, 15)
}

// hard lists circuits that are known to be hard to start, each with a bound on the iterations that they may take.
var hard = []struct {
	name string
	most int
	make func(n *net)
	test func(t *testing.T, n *net, b *Bias)
}{
	{"a chain of 60 junctions", 140, func(n *net) {
		n.hold("n0", level(60))
		for k := range 60 {
			n.add(fmt.Sprint("D", k), junction{1e-14, 0.025, 0}, fmt.Sprint("n", k), fmt.Sprint("n", k+1))
		}
		n.add("R", resistor(10e3), "n60", "gnd")
	}, func(t *testing.T, n *net, b *Bias) {
		i := b.X[n.u("n60")] / 10e3
		near(t, 60, 60*0.025*math.Log1p(i/1e-14)+10e3*i, 1e-9)
	}},
	{"a junction driven by one ampere", 40, func(n *net) {
		n.add("I", current{level(1)}, "gnd", "a")
		n.add("D", junction{1e-15, 0.0259, 0}, "a", "gnd")
	}, func(t *testing.T, n *net, b *Bias) { near(t, 0.0259*math.Log1p(1e15), b.X[n.u("a")], 1e-12) }},
	{"twelve decades of conductance", 10, func(n *net) {
		n.hold("in", level(1))
		n.add("R1", resistor(1e-3), "in", "a")
		n.add("R2", resistor(1e9), "a", "b")
		n.add("R3", resistor(3e9), "b", "gnd")
	}, func(t *testing.T, n *net, b *Bias) { near(t, 0.75, b.X[n.u("b")], 1e-11) }},
	{"a floating pair that leaks 1 Tohm", 10, func(n *net) {
		n.hold("in", level(1))
		n.add("R1", resistor(1), "a", "b")
		n.add("R2", resistor(1e12), "b", "gnd")
		n.add("R3", resistor(1e12), "in", "a")
	}, func(t *testing.T, n *net, b *Bias) {
		near(t, 0.5, b.X[n.u("a")], 1e-3, "twelve decades leave three to four digits")
	}},
	{"a node held by reverse junctions alone", 40, func(n *net) {
		n.hold("in", level(10))
		n.add("D1", junction{1e-15, 0.025, 0}, "mid", "in")
		n.add("D2", junction{1e-15, 0.025, 0}, "gnd", "mid")
	}, func(t *testing.T, n *net, b *Bias) {
		v := b.X[n.u("mid")]
		require.True(t, v > 0.1 && v < 9.9 || math.Abs(math.Expm1(-v/0.025)-math.Expm1((v-10)/0.025)) < 1e-12, "%g", v)
	}},
	{"a latch of two transistors", 200, latch, func(t *testing.T, n *net, b *Bias) {
		require.Less(t, b.X[n.u("q1")], 5.0)
		require.Less(t, b.X[n.u("q2")], 5.0)
	}},
	{"a loop gain of a million with junctions across it", 150, func(n *net) {
		n.hold("in", level(2))
		n.add("R1", resistor(10e3), "in", "m")
		n.add("A", amplifier(1e6, 12), "out", "m")
		n.add("D1", junction{1e-14, 0.025, 0}, "m", "k")
		n.add("R2", resistor(1), "k", "out")
		n.add("R3", resistor(1e12), "m", "out")
	}, func(t *testing.T, n *net, b *Bias) {
		near(t, 2e-4*1-0.025*math.Log(2e-4/1e-14)-4e-4, b.X[n.u("out")], 1e-4)
	}},
	{"a bridge of junctions without a load path at rest", 60, func(n *net) {
		n.hold("in", level(0))
		n.add("R", resistor(50), "in", "a")
		for _, d := range [][2]string{{"a", "p"}, {"gnd", "p"}, {"m", "a"}, {"m", "gnd"}} {
			n.add("D"+d[0]+d[1], junction{1e-12, 0.03, 0}, d[0], d[1])
		}
		n.add("RL", resistor(1e6), "p", "m")
	}, func(t *testing.T, n *net, b *Bias) { near(t, 0, b.X[n.u("p")], 1e-12) }},
	{"a stack of ten mirrors", 250, func(n *net) {
		n.hold("vp", level(15))
		n.add("Rref", resistor(10e3), "vp", "r0")
		q := npn{1e-15, 0.02585, 150, 2, 0}
		for k := range 10 {
			in, out := fmt.Sprint("r", k), fmt.Sprint("r", k+1)
			n.add("Qa"+in, q, in, in, "gnd")
			n.add("Qb"+in, q, "c"+out, in, "gnd")
			n.add("Rx"+in, resistor(100), "c"+out, "d"+out)
			n.add("Rl"+in, resistor(4.7e3), "vp", "d"+out)
			n.add("Rf"+in, resistor(10e3), "d"+out, out)
		}
		n.add("Rend", resistor(10e3), "r10", "gnd")
	}, nil},
}

func latch(n *net) {
	n.hold("vp", level(5))
	q := npn{1e-15, 0.02585, 200, 2, 0}
	n.add("Rc1", resistor(1e3), "vp", "q1")
	n.add("Rc2", resistor(1.01e3), "vp", "q2")
	n.add("Rb1", resistor(22e3), "q2", "b1")
	n.add("Rb2", resistor(22e3), "q1", "b2")
	n.add("Q1", q, "q1", "b1", "gnd")
	n.add("Q2", q, "q2", "b2", "gnd")
}

// amplifier is an inverting amplifier with the output limited to plus and minus most; pins out, in; its output resistance is 1 ohm.
func amplifier(gain, most float64) Device {
	return law{pins: 2, f: func(_ float64, x, f []float64, df [][]float64) {
		u := gain * x[1] / most
		f[0] = x[0] + most*math.Tanh(u)
		df[0][0] = 1
		c := math.Cosh(math.Min(300, math.Abs(u)))
		df[0][1] = gain / c / c
	}, q: func(_, _ []float64, _ [][]float64) {}}
}

func TestHardCircuits(t *testing.T) {
	for _, h := range hard {
		t.Run(h.name, func(t *testing.T) {
			n := newNet(t)
			h.make(n)
			b := n.bias()
			t.Logf("%s, %d iterations", b.Rung, b.Iterations)
			require.LessOrEqual(t, b.Iterations, h.most)
			if h.test != nil {
				h.test(t, n, b)
			}
		})
	}
}

// TestEveryRung climbs each rung alone on the circuits that it is there for.
func TestEveryRung(t *testing.T) {
	for _, h := range hard {
		want := func() []float64 {
			n := newNet(t)
			h.make(n)
			return n.bias().X
		}()
		for name, rung := range map[string]func(*climb) error{RungPseudo: (*climb).pseudo, RungSources: (*climb).sources, RungShunts: (*climb).shunts} {
			if h.name == "a latch of two transistors" || h.name == "a node held by reverse junctions alone" {
				continue // several solutions
			}
			t.Run(h.name+" by "+name, func(t *testing.T) {
				n := newNet(t)
				h.make(n)
				s := n.build()
				c := s.newClimb(context.Background(), s.newWorkspace(), problem{drive: 1}, nil)
				c.s.hold(c.w.eval.X, 0, 1)
				err := rung(c)
				t.Logf("%d iterations, %v", c.iterations, err)
				require.NoError(t, err)
				require.NoError(t, c.accept())
				for i, v := range want {
					near(t, v, c.w.eval.X[i], 1e-3*math.Abs(v)+1e-9, s.Name(Unknown(i)))
				}
			})
		}
	}
}

func TestLineSearch(t *testing.T) {
	// Newton's method on atan(x) diverges from beyond 1.39; the line search does not.
	n := newNet(t)
	n.add("A", law{pins: 1, f: func(_ float64, x, f []float64, df [][]float64) {
		f[0], df[0][0] = math.Atan(x[0]-1), 1/(1+(x[0]-1)*(x[0]-1))
	}}, "a")
	b, err := n.build().Bias(context.Background(), BiasOptions{Guess: []float64{0, 12}})
	require.NoError(t, err)
	near(t, 1, b.X[1], 1e-12)
	require.Equal(t, RungDamped, b.Rung)
}

func TestWithoutSolution(t *testing.T) {
	n := newNet(t)
	n.add("E", law{pins: 1, f: func(_ float64, x, f []float64, df [][]float64) {
		f[0], df[0][0] = 1+x[0]*x[0], 2*x[0]
	}}, "impossible")
	n.add("R", resistor(1e9), "impossible", "gnd")
	_, err := n.build().Bias(context.Background(), BiasOptions{Guess: []float64{0, 2}})
	var e *NoConvergenceError
	require.ErrorAs(t, err, &e)
	require.Equal(t, RungShunts, e.Rung)
	require.Positive(t, e.Iterations)
	require.Equal(t, "impossible", e.Worst[0].Unknown)
	require.Equal(t, []string{"E", "R"}, e.Worst[0].Devices)
	require.NotZero(t, e.Worst[0].Residual)
	require.ErrorContains(t, err, "impossible")
}

func TestSingular(t *testing.T) {
	cases := []struct {
		name       string
		make       func(n *net)
		unknowns   []string
		floating   []string
		structural bool
	}{
		{"a node between capacitors", func(n *net) {
			n.hold("in", level(1))
			n.add("C1", capacitor{1e-9, 0}, "in", "x")
			n.add("C2", capacitor{1e-9, 0}, "x", "gnd")
			n.add("R", resistor(1e3), "in", "y")
			n.add("R2", resistor(1e3), "y", "gnd")
		}, []string{"x"}, []string{"x"}, false},
		{"a group of nodes", func(n *net) {
			n.hold("in", level(1))
			n.add("C", capacitor{1e-9, 0}, "in", "x")
			n.add("R1", resistor(3.3e3), "x", "y")
			n.add("R2", resistor(4.7e3), "y", "z")
			n.add("R3", resistor(1e3), "in", "other")
			n.add("R4", resistor(1e3), "other", "gnd")
		}, []string{"x", "y", "z"}, []string{"x", "y", "z"}, false},
		{"two sources in parallel between free nodes", func(n *net) {
			n.hold("in", level(1))
			n.add("R", resistor(1e3), "in", "a")
			n.add("R2", resistor(1e3), "b", "gnd")
			n.add("V1", voltage{level(1)}, "a", "b")
			n.add("V2", voltage{level(1)}, "a", "b")
		}, []string{"V1.current", "V2.current"}, nil, false},
		{"a node that nothing touches but a source of current", func(n *net) {
			n.add("I", current{level(1e-3)}, "gnd", "a")
		}, []string{"a"}, []string{"a"}, false},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			n := newNet(t)
			c.make(n)
			s, err := n.Build()
			if err == nil {
				_, err = s.Bias(context.Background(), BiasOptions{})
			}
			var e *SingularError
			require.ErrorAs(t, err, &e)
			t.Log(err)
			require.ElementsMatch(t, c.unknowns, e.Unknowns)
			require.ElementsMatch(t, c.floating, e.Floating)
			require.Equal(t, c.structural, e.Structural)
			require.NotEmpty(t, e.Devices)
		})
	}
}

func TestNotANumber(t *testing.T) {
	n := newNet(t)
	n.hold("in", level(math.NaN()))
	n.add("R1", resistor(1e3), "in", "a")
	n.add("R2", resistor(1e3), "a", "gnd")
	_, err := n.build().Bias(context.Background(), BiasOptions{})
	require.Error(t, err)
	var e *NoConvergenceError
	require.ErrorAs(t, err, &e)
}

func TestBiasOptions(t *testing.T) {
	n := newNet(t)
	n.hold("in", sine{2, 1})
	n.add("R1", resistor(1e3), "in", "a")
	n.add("R2", resistor(1e3), "a", "gnd")
	s := n.build()
	b, err := s.Bias(context.Background(), BiasOptions{Time: 0.25})
	require.NoError(t, err)
	near(t, 1, b.X[n.u("a")], linearTolerance)
	var e *OptionError
	_, err = s.Bias(context.Background(), BiasOptions{Guess: make([]float64, 2)})
	require.ErrorAs(t, err, &e)
	require.Equal(t, "Guess", e.Option)
	_, err = s.Bias(context.Background(), BiasOptions{Time: math.NaN()})
	require.ErrorAs(t, err, &e)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	_, err = s.Bias(ctx, BiasOptions{})
	require.True(t, errors.Is(err, context.Canceled))
}

// TestBalance checks the answer on equations written down a second time.
func TestBalance(t *testing.T) {
	n := pair(t, level(0.3))
	b := n.bias()
	s := n.sys
	left := make([]float64, s.Size())
	around := make([]float64, s.Size())
	watts, grossWatts := 0.0, 0.0
	for i := range s.devices {
		p := s.Probe(i)
		p.Load(b.X, 0)
		pins, _ := s.Unknowns(i)
		for k, u := range pins {
			left[u] += p.Current(k)
			around[u] += math.Abs(p.Current(k))
		}
		watts += p.Power()
		grossWatts += math.Abs(p.Power())
	}
	for u := s.Held() + 1; u < s.Size(); u++ {
		near(t, 0, left[u], 1e-11*around[u], s.Name(Unknown(u)))
	}
	for u := 1; u <= s.Held(); u++ {
		watts -= left[u] * b.X[u]
	}
	near(t, 0, watts, 1e-11*grossWatts, "Tellegen")
}

func TestBuilderErrors(t *testing.T) {
	b := NewBuilder()
	a := b.Node("a")
	require.NoError(t, b.Hold(a, level(1)))
	var held *HoldError
	require.ErrorAs(t, b.Hold(a, level(1)), &held)
	require.Equal(t, "a", held.Node)
	require.ErrorAs(t, b.Hold(0, level(1)), &held)
	var node *NodeError
	require.ErrorAs(t, b.Hold(7, level(1)), &node)
	b.Add("R", resistor(1), a, 5)
	_, err := b.Build()
	require.ErrorAs(t, err, &node)
	require.Equal(t, NodeError{"R", 5, 1}, *node)
	b = NewBuilder()
	b.Add("R", resistor(1), 0)
	_, err = b.Build()
	require.ErrorAs(t, err, &node)
	require.Equal(t, NodeError{"R", -1, 1}, *node)
}

func TestEmptyAndHeldSystems(t *testing.T) {
	s, err := NewBuilder().Build()
	require.NoError(t, err)
	b, err := s.Bias(context.Background(), BiasOptions{})
	require.NoError(t, err)
	require.Equal(t, []float64{0}, b.X)
	n := newNet(t)
	n.hold("a", level(3))
	n.add("R", resistor(1), "a", "gnd")
	require.Equal(t, []float64{0, 3}, n.bias().X)
}

// TestFloatingRings: no arithmetic hides that a ring of resistors is tied to nothing, whatever their values.
func TestFloatingRings(t *testing.T) {
	for ring := 3; ring < 40; ring++ {
		n := newNet(t)
		var want []string
		for k := range ring {
			want = append(want, fmt.Sprint("x", k))
			n.add(fmt.Sprint("R", k), resistor(1e3*math.Pow(1.7, float64(k%11))/3), want[k], fmt.Sprint("x", (k+1)%ring))
		}
		n.add("C", capacitor{1e-9, 0}, "x0", "gnd")
		_, err := n.build().Bias(context.Background(), BiasOptions{})
		var e *SingularError
		require.ErrorAs(t, err, &e, "a ring of %d", ring)
		require.ElementsMatch(t, want, e.Floating)
	}
}

// slowly is a conductance of 1 S that moves its evaluation by no more than 0.1 V at a time: the unknowns are right at once, and it says until the end that it was
// not evaluated there.
type slowly struct{}

type slowlyStamp struct {
	twoPin
	memory int
}

func (slowly) Bind(b Binder) Stamp { return &slowlyStamp{bindTwo(b), b.Junction()} }

func (s *slowlyStamp) Eval(e *Eval) {
	v := s.volts(e)
	at := v
	if e.Limit {
		at = math.Max(math.Min(v, e.Junctions[s.memory]+0.1), e.Junctions[s.memory]-0.1)
		e.Limited = e.Limited || at != v
	}
	e.Junctions[s.memory] = at
	s.current(e, v, 1)
}

// TestLimitedIsNotAccepted: as long as a device has not been evaluated where the unknowns are, nothing has been solved.
func TestLimitedIsNotAccepted(t *testing.T) {
	n := newNet(t)
	n.add("I", current{level(2)}, "gnd", "a")
	n.add("S", slowly{}, "a", "gnd")
	s := n.build()
	w := s.newWorkspace()
	iterations, err := w.newton(context.Background(), &problem{drive: 1}, biasIterations)
	require.NoError(t, err)
	require.False(t, w.eval.Limited)
	require.GreaterOrEqual(t, iterations, 20, "2 V in steps of 0.1 V")
	near(t, 2, w.eval.X[n.u("a")], 1e-12)
}

// TestBestPointIsKept: a method that runs away does not spoil the start of the next.
func TestBestPointIsKept(t *testing.T) {
	n := newNet(t)
	n.add("A", law{pins: 1, f: func(_ float64, x, f []float64, df [][]float64) {
		f[0], df[0][0] = math.Atan(x[0]-1), 1/(1+(x[0]-1)*(x[0]-1))
	}}, "a")
	s := n.build()
	c := s.newClimb(context.Background(), s.newWorkspace(), problem{drive: 1}, nil)
	c.w.eval.X[1] = 12
	c.best.save(&c.w.eval)
	c.w.eval.X[1] = 1e9
	c.compare()
	require.Equal(t, 12.0, c.best.x[1])
	c.w.eval.X[1] = 1.3
	c.compare()
	require.Equal(t, 1.3, c.best.x[1])
}
