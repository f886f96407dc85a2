package mna

import (
	"math"

	"poise/mna/sparse"
)

const (
	// tieShare is the share of a row's largest coefficient that is added to its diagonal to make singular equations regular.
	tieShare = 1e-9
	// inverseIterations sharpen the direction in which the equations are free.
	inverseIterations = 3
	// freeShare is the share of the largest movement from which on an unknown counts as free.
	freeShare = 1e-3
)

// undetermined names the unknowns that the Jacobian leaves free: those that move in the direction in which it is singular. The direction is
// found by inverse iteration on the Jacobian with a small diagonal added (Wielandt, 1944; Golub & Van Loan, Matrix
// Computations, section 7.6.1).
func (w *workspace) undetermined() error {
	s := w.sys
	v, err := w.freeDirection()
	if err != nil {
		return s.singular(false)
	}
	largest := [2]float64{}
	kind := func(i int) int {
		if s.branch[i] {
			return 1
		}
		return 0
	}
	for i, x := range v {
		k := kind(s.first() + i)
		largest[k] = max(largest[k], math.Abs(x))
	}
	// A floating group drags rounding into currents and the other way round: only the kind that is free counts.
	most := max(largest[0], largest[1])
	for k := range largest {
		if largest[k] < freeShare*most {
			largest[k] = math.Inf(1)
		}
	}
	var free []Unknown
	for i, x := range v {
		if u := s.first() + i; math.Abs(x) >= freeShare*largest[kind(u)] {
			free = append(free, Unknown(u))
		}
	}
	return s.singular(false, free...)
}

// freeDirection returns the direction of the free unknowns in which the Jacobian changes least.
func (w *workspace) freeDirection() ([]float64, error) {
	s := w.sys
	first := int32(s.first())
	n := len(w.update)
	rows, cols, values := make([]int32, 0, s.slots+n), make([]int32, 0, s.slots+n), make([]float64, 0, s.slots+n)
	for k, j := range w.jacobian {
		rows, cols, values = append(rows, s.rows[k]-first), append(cols, s.cols[k]-first), append(values, j)
	}
	tie := w.rowScale()[first:]
	for i := range n {
		tie[i] *= tieShare
		rows, cols, values = append(rows, int32(i)), append(cols, int32(i)), append(values, tie[i])
	}
	p, err := sparse.NewPattern(n, rows, cols)
	if err != nil {
		return nil, err
	}
	a, err := sparse.Analyse(p)
	if err != nil {
		return nil, err
	}
	lu := sparse.NewLU[float64](a)
	if err := lu.Factor(values); err != nil {
		return nil, err
	}
	v := make([]float64, n)
	for i := range v {
		v[i] = mixedSign(i)
	}
	for range inverseIterations {
		largest := 0.0
		for i := range v {
			largest = max(largest, math.Abs(v[i]))
		}
		for i := range v {
			v[i] *= tie[i] / largest
		}
		lu.Solve(v)
	}
	return v, nil
}
