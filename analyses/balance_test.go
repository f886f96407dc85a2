package analyses

import (
	"math"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"

	"poise/devices"
	"poise/mna"
)

// alone is where a device is bound by itself: local unknown i+1 is pin i, then what is inside.
type alone struct {
	next       mna.Unknown
	rows, cols []mna.Unknown
	junctions  int
}

func (a *alone) Pin(i int) mna.Unknown { return mna.Unknown(i + 1) }

func (a *alone) Internal(string) mna.Unknown {
	a.next++
	return a.next - 1
}

func (a *alone) Branch(name string) mna.Unknown { return a.Internal(name) }

func (a *alone) Slot(row, col mna.Unknown) mna.Slot {
	a.rows, a.cols = append(a.rows, row), append(a.cols, col)
	return mna.Slot(len(a.rows) - 1)
}

func (a *alone) Junction() int {
	a.junctions++
	return a.junctions - 1
}

// sums are the equations at a point, added up device by device without the solver.
type sums struct {
	left, around []float64   // of each row: its sum, and the sum of the magnitudes of its terms
	volts        []float64   // of each row: the largest voltage that it depends on
	slopes       [][]float64 // the Jacobian
	current      []bool      // of each unknown: a current, not a voltage
}

func newSums(n int) *sums {
	s := &sums{left: make([]float64, n), around: make([]float64, n), volts: make([]float64, n), current: make([]bool, n)}
	for range n {
		s.slopes = append(s.slopes, make([]float64, n))
	}
	return s
}

// add evaluates a device at the solution x; at holds its unknowns, pins first.
func (s *sums) add(d mna.Device, pins int, at []mna.Unknown, x []float64) {
	a := &alone{next: mna.Unknown(pins + 1)}
	stamp := d.Bind(a)
	n := len(at) + 1
	e := &mna.Eval{X: make([]float64, n), F: make([]float64, n), Q: make([]float64, n), G: make([]float64, len(a.rows)), C: make([]float64, len(a.rows)),
		Drive: 1, Junctions: make([]float64, a.junctions)}
	for i, u := range at {
		e.X[i+1] = x[u]
	}
	stamp.Eval(e)
	for i, u := range at {
		s.left[u] += e.F[i+1]
		s.around[u] += math.Abs(e.F[i+1])
	}
	for k, g := range e.G {
		row, col := at[a.rows[k]-1], at[a.cols[k]-1]
		s.slopes[row][col] += g
		if g != 0 && !s.current[col] {
			s.volts[row] = math.Max(s.volts[row], math.Abs(x[col]))
		}
	}
}

// part is a device with its number in a system.
type part struct {
	device mna.Device
	index  int
}

// parts lists the devices of a model.
func (m *model) parts() []part {
	var all []part
	for i := range m.circuit.Elements {
		if m.device[i] != held {
			all = append(all, part{m.circuit.Elements[i].Device, m.device[i]})
		}
	}
	for i := range m.circuit.Inputs {
		in := &m.circuit.Inputs[i]
		signals := pinSignals(in)
		for pin, index := range m.inject[in.Name] {
			all = append(all, part{devices.NewCurrentSource(signals[pin]), index})
		}
	}
	return all
}

// sumsAt adds up the equations of a system of parts at the solution x.
func sumsAt(system *mna.System, parts []part, x []float64) *sums {
	s := newSums(len(x))
	for _, p := range parts {
		_, inside := system.Unknowns(p.index)
		for _, u := range inside {
			s.current[u] = isBranch(p.device)
		}
	}
	for _, p := range parts {
		pins, inside := system.Unknowns(p.index)
		s.add(p.device, len(pins), append(pins, inside...), x)
	}
	return s
}

// isBranch tells devices with an unknown current from those with nodes inside: their first row is not their own.
func isBranch(d mna.Device) bool {
	b := &branchFinder{}
	d.Bind(b)
	return b.found
}

type branchFinder struct {
	alone
	found bool
}

func (b *branchFinder) Branch(name string) mna.Unknown {
	b.found = true
	return b.alone.Branch(name)
}

const (
	// sumShare is the share of the currents of a node that may be left: what the solver promises.
	sumShare = 1e-12
	// sumRounding is how far the rounding of a voltage may move a current, beside the voltage and the conductance.
	sumRounding = 32 * 0x1p-52
	// leastLeft is what the inner differences of a device leave, in A or V.
	leastLeft = 1e-15
	// denseMost is the number of unknowns up to which dense elimination is quick.
	denseMost = 500
	// offShare and offVolts bound how far the answer is from where one more exact step of Newton's method would lead: the solver promises 1e-9 of every unknown.
	// A node that only leakage holds beside conductances twelve decades larger is known to no more.
	offShare = 1e-6
	offVolts = 1e-9 // V
	offAmps  = 1e-9 // A, of a branch
)

// verifyBalance sums the currents of every node at x.
func verifyBalance(t testing.TB, system *mna.System, s *sums, x []float64) {
	for u := system.Held() + 1; u < len(x); u++ {
		slopes := 0.0
		for col, g := range s.slopes[u] {
			if !s.current[col] {
				slopes += math.Abs(g)
			}
		}
		allowed := sumShare*s.around[u] + sumRounding*slopes*s.volts[u] + leastLeft
		if !(math.Abs(s.left[u]) <= allowed) {
			require.Failf(t, "the currents do not add up", "%s: %g is left of %g", system.Name(mna.Unknown(u)), s.left[u], s.around[u])
		}
	}
}

// oneMoreStep wants Newton's method by dense elimination to have nothing left to do, in all but the largest circuits.
func oneMoreStep(t testing.TB, system *mna.System, s *sums, x []float64) {
	first := system.Held() + 1
	n := len(x) - first
	if n == 0 || n > denseMost {
		return
	}
	jacobian, residual := mat.NewDense(n, n, nil), mat.NewVecDense(n, nil)
	for i := range n {
		residual.SetVec(i, s.left[first+i])
		for k := range n {
			jacobian.Set(i, k, s.slopes[first+i][first+k])
		}
	}
	var lu mat.LU
	lu.Factorize(jacobian)
	var step mat.VecDense
	_ = lu.SolveVecTo(&step, false, residual) // it complains of a bad condition, and is right, and the step is good enough
	for i := range n {
		floor := offVolts
		if s.current[first+i] {
			floor = offAmps
		}
		if d := step.AtVec(i); !(math.Abs(d) <= offShare*math.Abs(x[first+i])+floor) {
			require.Failf(t, "not at the solution", "%s: %g, %g off", system.Name(mna.Unknown(first+i)), x[first+i], d)
		}
	}
}
