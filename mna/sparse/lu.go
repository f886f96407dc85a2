package sparse

import (
	"fmt"
	"math"
)

// Scalar is what a matrix is made of.
type Scalar interface{ float64 | complex128 }

const (
	// pivotShare is the share of the largest candidate that the preferred pivot must reach to be taken:
	// small enough to keep the fill-reducing order, large enough to bound the growth of a step by 1 + 1/pivotShare.
	pivotShare = 1e-3
	// growthShare is the share of the largest candidate that a frozen pivot must keep when only numbers change.
	growthShare = 1e-8
)

// SingularError says that a matrix has no factors to working precision.
type SingularError struct {
	Row, Column int // where no pivot was left, in the matrix's own indexes
	Rank        int // pivots found before
	NotFinite   bool
}

func (e *SingularError) Error() string {
	if e.NotFinite {
		return fmt.Sprintf("sparse: column %d holds a value that is not finite", e.Column)
	}
	return fmt.Sprintf("sparse: the matrix is singular: no pivot for column %d", e.Column)
}

// LU holds the factors L U = P R A Q of a matrix, with R scaling each row by its largest entry. It belongs to one goroutine.
type LU[T Scalar] struct {
	a     *Analysis
	scale []float64 // of each row, 1/largest magnitude

	// Columns of L (unit diagonal not stored) and of U (diagonal apart), by position k of the order.
	lStart, uStart []int32
	lRow, uRow     []int32 // after Factor: positions in the pivot order
	l, u           []T
	diagonal       []T // inverse pivots
	pivotRow       []int32
	position       []int32 // of each row in the pivot order, -1 before it is pivotal
	factored       bool
	repivots       int

	x      []T // dense column
	work   []T
	reach  []int32
	depth  []int32
	path   []int32
	marked []int32

	gather []gatherEntry
	start  []int32
}

// gatherEntry says where an entry of the matrix goes in the dense column: position and value index.
type gatherEntry struct{ position, entry, row int32 }

// NewLU returns a factorisation without factors yet.
func NewLU[T Scalar](a *Analysis) *LU[T] {
	n := a.pattern.n
	return &LU[T]{
		a: a, scale: make([]float64, n), lStart: make([]int32, n+1), uStart: make([]int32, n+1),
		diagonal: make([]T, n), pivotRow: make([]int32, n), position: make([]int32, n),
		x: make([]T, n), work: make([]T, n), reach: make([]int32, n), depth: make([]int32, n), path: make([]int32, n), marked: filled(n, -1),
	}
}

// magnitude is |x| or, of a complex number, |re| + |im|: within sqrt 2 of it and far cheaper.
func magnitude[T Scalar](x T) float64 {
	switch v := any(x).(type) {
	case float64:
		return math.Abs(v)
	case complex128:
		return math.Abs(real(v)) + math.Abs(imag(v))
	}
	return math.NaN()
}

// fromFloat converts a real number.
func fromFloat[T Scalar](x float64) T {
	var zero T
	switch any(zero).(type) {
	case float64:
		return any(x).(T)
	default:
		return any(complex(x, 0)).(T)
	}
}

// Factor finds pivots and factors for values, one for each entry of the pattern, by left-looking elimination (Gilbert & Peierls,
// Sparse partial pivoting in time proportional to arithmetic operations, SIAM J. Sci. Stat. Comput. 9, 1988,
// 862-874) with threshold pivoting that prefers the matched entry. It returns *SingularError.
func (f *LU[T]) Factor(values []T) error {
	f.factored = false
	if err := f.measure(values); err != nil {
		return err
	}
	n := f.a.pattern.n
	f.lRow, f.uRow, f.l, f.u = f.lRow[:0], f.uRow[:0], f.l[:0], f.u[:0]
	for i := range n {
		f.position[i] = -1
		f.marked[i] = -1
	}
	for k := range int32(n) {
		if err := f.column(k, values); err != nil {
			return err
		}
	}
	for i, row := range f.lRow {
		f.lRow[i] = f.position[row]
	}
	f.freeze()
	f.factored = true
	return nil
}

// measure scales the rows and checks that every value is finite.
func (f *LU[T]) measure(values []T) error {
	p := f.a.pattern
	clear(f.scale)
	for j := range p.n {
		for k := p.colStart[j]; k < p.colStart[j+1]; k++ {
			m := magnitude(values[p.entry[k]])
			if !(m <= math.MaxFloat64) {
				return &SingularError{Row: int(p.row[k]), Column: j, NotFinite: true}
			}
			f.scale[p.row[k]] = max(f.scale[p.row[k]], m)
		}
	}
	for i, s := range f.scale {
		f.scale[i] = 1
		if s > 0 {
			// A power of two, so that scaling rounds nothing.
			_, exponent := math.Frexp(s)
			f.scale[i] = math.Ldexp(1, -exponent)
		}
	}
	return nil
}

// column eliminates the k-th column of the order.
func (f *LU[T]) column(k int32, values []T) error {
	p := f.a.pattern
	j := f.a.order[k]
	top := f.symbolic(j, k)
	for _, i := range f.reach[top:] {
		f.x[i] = 0
	}
	for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
		row := p.row[e]
		f.x[row] += values[p.entry[e]] * fromFloat[T](f.scale[row])
	}
	for _, i := range f.reach[top:] {
		at := f.position[i]
		if at < 0 {
			continue
		}
		x := f.x[i]
		f.uRow = append(f.uRow, at)
		f.u = append(f.u, x)
		for e := f.lStart[at]; e < f.lStart[at+1]; e++ {
			f.x[f.lRow[e]] -= f.l[e] * x
		}
	}
	pivot, err := f.choose(j, k, top)
	if err != nil {
		return err
	}
	f.pivotRow[k], f.position[pivot] = pivot, k
	inverse := 1 / f.x[pivot]
	f.diagonal[k] = inverse
	for _, i := range f.reach[top:] {
		if f.position[i] < 0 {
			f.lRow = append(f.lRow, i)
			f.l = append(f.l, f.x[i]*inverse)
		}
	}
	f.lStart[k+1], f.uStart[k+1] = int32(len(f.l)), int32(len(f.u))
	return nil
}

// choose takes the matched row if it is large enough, else the largest.
func (f *LU[T]) choose(j, k, top int32) (int32, error) {
	best, largest := int32(-1), 0.0
	for _, i := range f.reach[top:] {
		if f.position[i] < 0 {
			if m := magnitude(f.x[i]); m > largest {
				best, largest = i, m
			}
		}
	}
	preferred := f.a.rowOf[j]
	if best < 0 || !(largest <= math.MaxFloat64) {
		return 0, &SingularError{Row: int(preferred), Column: int(j), Rank: int(k)}
	}
	if f.position[preferred] < 0 && f.marked[preferred] == k && magnitude(f.x[preferred]) >= pivotShare*largest {
		best = preferred
	}
	return best, nil
}

// symbolic finds the rows that column j fills, in topological order, in reach[top:].
func (f *LU[T]) symbolic(j, k int32) int32 {
	p := f.a.pattern
	top := int32(p.n)
	for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
		if row := p.row[e]; f.marked[row] != k {
			top = f.search(row, k, top)
		}
	}
	return top
}

// search goes depth first from a row through the columns of L.
func (f *LU[T]) search(row, k, top int32) int32 {
	depth := 0
	f.path[0] = row
	f.marked[row] = k
	f.depth[0] = -1
	for depth >= 0 {
		i := f.path[depth]
		at := f.position[i]
		descended := false
		if at >= 0 {
			if f.depth[depth] < 0 {
				f.depth[depth] = f.lStart[at]
			}
			for e := f.depth[depth]; e < f.lStart[at+1]; e++ {
				next := f.lRow[e]
				if f.marked[next] == k {
					continue
				}
				f.depth[depth] = e + 1
				depth++
				f.path[depth], f.depth[depth], f.marked[next] = next, -1, k
				descended = true
				break
			}
		}
		if !descended {
			depth--
			top--
			f.reach[top] = i
		}
	}
	return top
}

// freeze lays out, for every column of the order, which entries of the matrix go where.
func (f *LU[T]) freeze() {
	p := f.a.pattern
	f.gather = f.gather[:0]
	f.start = append(f.start[:0], 0)
	for _, j := range f.a.order {
		for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
			f.gather = append(f.gather, gatherEntry{f.position[p.row[e]], p.entry[e], p.row[e]})
		}
		f.start = append(f.start, int32(len(f.gather)))
	}
}

// Refactor computes the factors for new values on the pattern and pivots of the last [LU.Factor]. If a pivot has become
// small beside its column, or there are no factors yet, it calls Factor.
func (f *LU[T]) Refactor(values []T) error {
	if !f.factored {
		return f.Factor(values)
	}
	x := f.x
	for k := range f.a.order {
		u0, u1, l0, l1 := f.uStart[k], f.uStart[k+1], f.lStart[k], f.lStart[k+1]
		for _, at := range f.uRow[u0:u1] {
			x[at] = 0
		}
		for _, at := range f.lRow[l0:l1] {
			x[at] = 0
		}
		x[k] = 0
		for _, g := range f.gather[f.start[k]:f.start[k+1]] {
			x[g.position] += values[g.entry] * fromFloat[T](f.scale[g.row])
		}
		for e := u0; e < u1; e++ {
			at := f.uRow[e]
			v := x[at]
			f.u[e] = v
			if v == 0 {
				continue
			}
			rows, l := f.lRow[f.lStart[at]:f.lStart[at+1]], f.l[f.lStart[at]:f.lStart[at+1]]
			for i, row := range rows {
				x[row] -= l[i] * v
			}
		}
		largest := 0.0
		for _, at := range f.lRow[l0:l1] {
			largest = max(largest, magnitude(x[at]))
		}
		m := magnitude(x[k])
		if !(m > 0 && m >= growthShare*largest && m <= math.MaxFloat64) || math.IsNaN(largest) {
			f.repivots++
			return f.Factor(values)
		}
		inverse := 1 / x[k]
		f.diagonal[k] = inverse
		for e := l0; e < l1; e++ {
			f.l[e] = x[f.lRow[e]] * inverse
		}
	}
	return nil
}

// Repivots returns how often Refactor had to look for new pivots.
func (f *LU[T]) Repivots() int { return f.repivots }

// FillIn returns the number of entries of L and U, the diagonal once.
func (f *LU[T]) FillIn() int { return len(f.l) + len(f.u) + len(f.diagonal) }

// Solve overwrites b with the solution of A x = b.
func (f *LU[T]) Solve(b []T) {
	y := f.work
	for k, row := range f.pivotRow {
		y[k] = b[row] * fromFloat[T](f.scale[row])
	}
	for k := range y {
		v := y[k]
		if v == 0 {
			continue
		}
		for e := f.lStart[k]; e < f.lStart[k+1]; e++ {
			y[f.lRow[e]] -= f.l[e] * v
		}
	}
	for k := len(y) - 1; k >= 0; k-- {
		v := y[k] * f.diagonal[k]
		y[k] = v
		for e := f.uStart[k]; e < f.uStart[k+1]; e++ {
			y[f.uRow[e]] -= f.u[e] * v
		}
	}
	for k, j := range f.a.order {
		b[j] = y[k]
	}
}

// SolveTranspose overwrites b with the solution of A^T x = b (no conjugation).
func (f *LU[T]) SolveTranspose(b []T) {
	y := f.work
	for k, j := range f.a.order {
		y[k] = b[j]
	}
	for k := range y {
		v := y[k]
		for e := f.uStart[k]; e < f.uStart[k+1]; e++ {
			v -= f.u[e] * y[f.uRow[e]]
		}
		y[k] = v * f.diagonal[k]
	}
	for k := len(y) - 1; k >= 0; k-- {
		v := y[k]
		for e := f.lStart[k]; e < f.lStart[k+1]; e++ {
			v -= f.l[e] * y[f.lRow[e]]
		}
		y[k] = v
	}
	for k, row := range f.pivotRow {
		b[row] = y[k] * fromFloat[T](f.scale[row])
	}
}
