package mna

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// tangle is a random network: resistors and sources alone if linear, junctions, transistors and storage else.
func tangle(t testing.TB, r *rand.Rand, linear bool) *net {
	n := newNet(t)
	size := 2 + r.IntN(9)
	name := func() string {
		if k := r.IntN(size + 1); k > 0 {
			return fmt.Sprint("n", k)
		}
		return "gnd"
	}
	spread := func(low, high float64) float64 { return math.Pow(10, low+(high-low)*r.Float64()) }
	n.hold("n1", level(20*r.Float64()-10))
	for k := 2; k <= size; k++ {
		// Every node has a way to an earlier one, so that most networks have a solution.
		n.add(fmt.Sprint("R", k), resistor(spread(1, 6)), fmt.Sprint("n", k), fmt.Sprint("n", 1+r.IntN(k-1)))
	}
	for k := range 2 * size {
		label := fmt.Sprint("X", k)
		switch kind := r.IntN(9); {
		case kind < 3:
			n.add(label, resistor(spread(0, 9)), name(), name())
		case kind == 3:
			n.add(label, current{level(spread(-6, -2))}, name(), name())
		case kind == 4 && r.IntN(3) == 0:
			n.add(label, voltage{level(10*r.Float64() - 5)}, name(), name())
		case linear:
		case kind == 5:
			n.add(label, capacitor{spread(-12, -6), r.Float64()}, name(), name())
		case kind == 6:
			n.add(label, npn{spread(-17, -13), 0.0258, 50 + 300*r.Float64(), 1 + r.Float64(), 1e-9}, label+"c", label+"b", label+"e")
			n.add("Cbe"+label, capacitor{spread(-13, -10), 0}, label+"b", label+"e")
			n.add("Cbc"+label, capacitor{spread(-13, -11), 0}, label+"b", label+"c")
			for _, pin := range []string{"c", "b", "e"} {
				n.add("R"+label+pin, resistor(spread(-1, 3)), label+pin, name())
			}
		default:
			n.add(label, junction{spread(-16, -9), 0.02 + 0.03*r.Float64(), 1e-9}, label+"a", label+"k")
			n.add("Cak"+label, capacitor{spread(-13, -10), 0}, label+"a", label+"k")
			n.add("Rk"+label, resistor(spread(-1, 2)), label+"k", name())
			n.add("R"+label, resistor(spread(-1, 2)), label+"a", name())
		}
	}
	return n
}

// FuzzBias: a random network has a bias without a NaN, or a typed error.
func FuzzBias(f *testing.F) {
	for seed := range uint64(40) {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, seed uint64) {
		n := tangle(t, rand.New(rand.NewPCG(seed, 7)), false)
		s, err := n.Build()
		if err == nil {
			var b *Bias
			if b, err = s.Bias(context.Background(), BiasOptions{}); err == nil {
				checkBalance(t, s, b)
				return
			}
		}
		var singular *SingularError
		var stuck *NoConvergenceError
		require.True(t, errors.As(err, &singular) || errors.As(err, &stuck), "%v", err)
		if stuck != nil {
			t.Logf("seed %d: %v", seed, err)
		}
	})
}

// checkBalance sums the currents of every free node as the devices' probes give them.
func checkBalance(t *testing.T, s *System, b *Bias) {
	left, around := make([]float64, s.Size()), make([]float64, s.Size())
	for i := range s.devices {
		p := s.Probe(i)
		p.Load(b.X, 0)
		pins, _ := s.Unknowns(i)
		for k, u := range pins {
			left[u] += p.Current(k)
			around[u] += math.Abs(p.Current(k))
		}
	}
	for u := s.Held() + 1; u < s.Size(); u++ {
		require.False(t, math.IsNaN(b.X[u]) || math.IsInf(b.X[u], 0))
		if !s.branch[u] {
			// Rounding of the voltages: a conductance of up to 1 S and a junction of up to 1 kS at 1 V.
			near(t, 0, left[u], 1e-11*around[u]+1e-12, s.Name(Unknown(u)))
		}
	}
}

// TestRandomNetworksConverge: nearly all random networks of junctions and transistors have a bias, found without any setting.
func TestRandomNetworksConverge(t *testing.T) {
	const networks = 400
	failed, iterations, rungs := 0, 0, map[string]int{}
	for seed := range uint64(networks) {
		n := tangle(t, rand.New(rand.NewPCG(seed, 11)), false)
		s, err := n.Build()
		var singular *SingularError
		if errors.As(err, &singular) {
			continue // voltage sources in a loop
		}
		require.NoError(t, err)
		b, err := s.Bias(context.Background(), BiasOptions{})
		if err != nil && !errors.As(err, &singular) {
			failed++
			t.Logf("seed %d: %v: %v", seed, err, errors.Unwrap(err))
		}
		if err == nil {
			rungs[b.Rung]++
			iterations += b.Iterations
		}
	}
	t.Logf("%v, %.1f iterations in the mean, %d without a bias", rungs, float64(iterations)/networks, failed)
	require.Zero(t, failed)
	require.Less(t, iterations, 40*networks)
}

// TestLinearAgainstDense compares random linear networks with dense elimination of the same equations.
func TestLinearAgainstDense(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		seed := rapid.Uint64().Draw(rt, "seed")
		n := tangle(t, rand.New(rand.NewPCG(seed, 3)), true)
		s, err := n.Build()
		if err != nil {
			return
		}
		b, err := s.Bias(context.Background(), BiasOptions{})
		dense, rhs, first := denseEquations(s)
		var lu mat.LU
		lu.Factorize(dense)
		if err != nil {
			if lu.Cond() < 1e12 {
				rt.Fatalf("condition %g, but %v", lu.Cond(), err)
			}
			return
		}
		var want mat.VecDense
		if lu.SolveVecTo(&want, false, rhs) != nil && lu.Cond() > 1e13 {
			return
		}
		for i := range want.Len() {
			tolerance := 1e-15*lu.Cond()*mat.Norm(&want, math.Inf(1)) + 1e-9*math.Abs(want.AtVec(i))
			if d := math.Abs(b.X[first+i] - want.AtVec(i)); !(d <= tolerance) {
				rt.Fatalf("%s: want %g, got %g", s.Name(Unknown(first+i)), want.AtVec(i), b.X[first+i])
			}
		}
	})
}

// denseEquations linearises a system at zero: A x = b for the free unknowns.
func denseEquations(s *System) (*mat.Dense, *mat.VecDense, int) {
	w := s.newWorkspace()
	s.hold(w.eval.X, 0, 1)
	w.evaluate(&problem{drive: 1})
	first := s.first()
	n := s.Size() - first
	a, b := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for k, g := range w.eval.G {
		if i, j := int(s.rows[k])-first, int(s.cols[k])-first; i >= 0 && j >= 0 {
			a.Set(i, j, a.At(i, j)+g)
		}
	}
	for i := range n {
		b.SetVec(i, -w.eval.F[first+i])
	}
	return a, b, first
}

// TestRandomTransients runs random nonlinear networks under a sine and a pulse, from rest and cold, and compares the default
// accuracy with a run ten times as accurate.
func TestRandomTransients(t *testing.T) { eachMethod(t, randomTransientsAgree) }

func randomTransientsAgree(t *testing.T, method Method) {
	const networks, until, looked = 150, 2e-3, 97
	// A run returns samples and the swing of every unknown over all of its steps.
	run := func(s *System, o TransientOptions) (samples [][]float64, swing []float64, stats *TransientStats, err error) {
		o.Until = until
		low, high := make([]float64, s.Size()), make([]float64, s.Size())
		stats, err = s.Transient(context.Background(), o, func(p *Step) error {
			if p.T0 == 0 {
				copy(low, p.End())
				copy(high, p.End())
			}
			for u, v := range p.End() {
				low[u], high[u] = math.Min(low[u], v), math.Max(high[u], v)
			}
			// Not at 0: there a cold junction is on its way from nowhere to its voltage.
			for k := len(samples); k < looked && float64(k+1)*until/looked <= p.T1; k++ {
				x := make([]float64, s.Size())
				p.At(float64(k+1)*until/looked, x)
				samples = append(samples, x)
			}
			return nil
		})
		for u := range low {
			swing = append(swing, high[u]-low[u])
		}
		return samples, swing, stats, err
	}
	evaluations := 0
	for seed := range uint64(networks) {
		n := tangle(t, rand.New(rand.NewPCG(seed, 5)), false)
		n.hold("drive", sine{2, 1e3})
		n.hold("pulse", steps(0, 3, 0.4e-3, 1e-6))
		n.add("Rdrive", resistor(1e3), "drive", "n2")
		n.add("Cpulse", capacitor{1e-8, 0}, "pulse", "n2")
		s, err := n.Build()
		if err != nil {
			continue
		}
		cold := seed%2 == 1
		coarse, _, stats, err := run(s, TransientOptions{Method: method, Cold: cold})
		if singular := (*SingularError)(nil); errors.As(err, &singular) {
			continue
		}
		require.NoError(t, err, "seed %d", seed)
		evaluations += stats.Work.Evaluations
		fine, swing, _, err := run(s, TransientOptions{Method: method, Cold: cold, Accuracy: defaultAccuracy / 10})
		require.NoError(t, err, "seed %d", seed)
		for u := s.first(); u < s.Size(); u++ {
			// Unknowns that hardly move are measured by their size, and by what the signals swing by: 5 V, and 1 nA beside it.
			floor := 5 * stimulusShare
			if s.branch[u] {
				floor = 1e-9
			}
			allowed := defaultAccuracy * math.Max(math.Max(swing[u], floor), sizeShare*math.Abs(fine[0][u]))
			for k := range fine {
				near(t, fine[k][u], coarse[k][u], allowed, "seed", seed, s.Name(Unknown(u)), "swing", swing[u], "sample", k)
			}
		}
	}
	t.Logf("%d evaluations in the mean", evaluations/networks)
}
