package mna

import "poise/mna/sparse"

// Small is a system linearised at a point: G and C. It is immutable and shared by any number of solvers.
type Small struct {
	s    *System
	x    []float64
	time float64
	g, c []float64
}

// Small linearises the system at a solution x and time t in s.
func (s *System) Small(x []float64, t float64) *Small {
	w := s.newWorkspace()
	copy(w.eval.X, x)
	w.evaluate(&problem{time: t, drive: 1, alpha: 1})
	return &Small{s: s, x: append([]float64(nil), x...), time: t, g: w.eval.G, c: w.eval.C}
}

// PinCurrent returns the small-signal current into a pin of a device, in A, for the solution x at omega in rad/s.
func (m *Small) PinCurrent(device, pin int, omega float64, x []complex128) complex128 {
	p := m.s.Probe(device)
	p.Load(m.x, m.time)
	return p.Small(pin, omega, x)
}

// SmallSolver solves (G + j omega C) x = b. It belongs to one goroutine.
type SmallSolver struct {
	m      *Small
	matrix []complex128
	lu     *sparse.LU[complex128]
}

// Solver returns a solver without a frequency.
func (m *Small) Solver() *SmallSolver {
	return &SmallSolver{m: m, matrix: make([]complex128, m.s.slots), lu: sparse.NewLU[complex128](m.s.analysis)}
}

// At factors the equations at the angular frequency omega in rad/s. It returns *SingularError.
func (v *SmallSolver) At(omega float64) error {
	for k, g := range v.m.g {
		v.matrix[k] = complex(g, omega*v.m.c[k])
	}
	return v.m.s.explain(v.lu.Refactor(v.matrix))
}

// Solve solves for the free unknowns. On entry the held entries of x are the voltages of the held nodes and the free entries
// what is injected: A into a node, V in a branch equation. On return x holds all unknowns.
func (v *SmallSolver) Solve(x []complex128) {
	s := v.m.s
	first := int32(s.first())
	x[0] = 0
	for k, row := range s.rows {
		if col := s.cols[k]; row >= first && col > 0 && col < first {
			x[row] -= v.matrix[k] * x[col]
		}
	}
	v.lu.Solve(x[first:])
}

// SolveTranspose solves the adjoint equations for the free unknowns: the free entries of y are the right side on entry.
func (v *SmallSolver) SolveTranspose(y []complex128) {
	v.lu.SolveTranspose(y[v.m.s.first():])
}

// Leaving returns the current that leaves a node through the devices, in A: what the source of a held node delivers.
func (v *SmallSolver) Leaving(x []complex128, u Unknown) complex128 {
	sum := complex128(0)
	for k, row := range v.m.s.rows {
		if Unknown(row) == u && v.m.s.cols[k] > 0 {
			sum += v.matrix[k] * x[v.m.s.cols[k]]
		}
	}
	return sum
}
