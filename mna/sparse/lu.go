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
	// growthShare is the share of its column that a frozen pivot must keep when only numbers change: a step of the elimination then costs four digits at
	// most.
	growthShare = 1e-4
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

// LU holds the factors L U = P R A Q of the diagonal blocks of a matrix in block triangular form, with R scaling each row by its largest entry, and the entries
// above the blocks as they are. It belongs to one goroutine.
//
// Column k of the factors lies in values[start[k]:start[k+1]]: the entries above its block, those of U, the inverse of the pivot at pivot[k], and those of L.
// Places in the order of elimination are called positions.
type LU[T Scalar] struct {
	a     *Analysis
	scale []T // of each row, a power of two

	values []T
	row    []int32 // position of each value
	start  []int32
	upper  []int32 // where the entries of U begin in a column
	pivot  []int32

	pivotRow []int32 // of each position
	position []int32 // of each row, -1 before it is pivotal
	factored bool
	repivots int

	gather   []load
	schedule schedule

	work    []T
	many    []T       // for several right-hand sides
	largest []float64 // magnitude of each row
	b       builder[T]
}

// load says where an entry of the matrix goes.
type load struct{ value, entry, row int32 }

// NewLU returns a factorisation without factors yet.
func NewLU[T Scalar](a *Analysis) *LU[T] {
	n := a.pattern.n
	return &LU[T]{
		a: a, scale: make([]T, n), start: make([]int32, n+1), upper: make([]int32, n), pivot: make([]int32, n),
		pivotRow: make([]int32, n), position: make([]int32, n), work: make([]T, n), largest: make([]float64, n),
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
	f.b.reset(f.a.pattern.n)
	for i := range f.position {
		f.position[i] = -1
	}
	for k := range int32(f.a.pattern.n) {
		if err := f.column(k, values); err != nil {
			return err
		}
	}
	f.pack()
	f.freeze()
	f.factored = true
	return nil
}

// measure scales the rows and checks that every value is finite.
func (f *LU[T]) measure(values []T) error {
	p := f.a.pattern
	largest := f.largest
	clear(largest)
	for j := range p.n {
		for k := p.colStart[j]; k < p.colStart[j+1]; k++ {
			m := magnitude(values[p.entry[k]])
			if !(m <= math.MaxFloat64) {
				return &SingularError{Row: int(p.row[k]), Column: j, NotFinite: true}
			}
			largest[p.row[k]] = max(largest[p.row[k]], m)
		}
	}
	for i, s := range largest {
		f.scale[i] = 1
		if s > 0 {
			// A power of two, so that scaling rounds nothing.
			_, exponent := math.Frexp(s)
			f.scale[i] = fromFloat[T](math.Ldexp(1, -exponent))
		}
	}
	return nil
}

// builder holds the factors while pivots are looked for. Rows are those of the matrix.
type builder[T Scalar] struct {
	offStart, lStart, uStart []int32
	offRow, lRow, uRow       []int32 // uRow: positions
	off, l, u                []T
	inverse                  []T // of the pivots

	x           []T // dense column
	reach       []int32
	depth, path []int32
	marked      []int32
}

func (b *builder[T]) reset(n int) {
	if len(b.inverse) != n {
		*b = builder[T]{
			offStart: make([]int32, n+1), lStart: make([]int32, n+1), uStart: make([]int32, n+1), inverse: make([]T, n),
			x: make([]T, n), reach: make([]int32, n), depth: make([]int32, n), path: make([]int32, n), marked: make([]int32, n),
		}
	}
	b.offRow, b.lRow, b.uRow = b.offRow[:0], b.lRow[:0], b.uRow[:0]
	b.off, b.l, b.u = b.off[:0], b.l[:0], b.u[:0]
	for i := range b.marked {
		b.marked[i] = -1
	}
}

// column eliminates the k-th column of the order.
func (f *LU[T]) column(k int32, values []T) error {
	p, b := f.a.pattern, &f.b
	j := f.a.order[k]
	block := f.a.block[j]
	top := f.symbolic(j, k)
	for _, i := range b.reach[top:] {
		b.x[i] = 0
	}
	for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
		row := p.row[e]
		v := values[p.entry[e]] * f.scale[row]
		if f.a.rowBlock[row] == block {
			b.x[row] += v
			continue
		}
		if n := len(b.off); n > int(b.offStart[k]) && b.offRow[n-1] == row {
			b.off[n-1] += v // entries at the same place follow each other
			continue
		}
		b.offRow, b.off = append(b.offRow, row), append(b.off, v)
	}
	for _, i := range b.reach[top:] {
		at := f.position[i]
		if at < 0 {
			continue
		}
		x := b.x[i]
		b.uRow, b.u = append(b.uRow, at), append(b.u, x)
		for e := b.lStart[at]; e < b.lStart[at+1]; e++ {
			b.x[b.lRow[e]] -= b.l[e] * x
		}
	}
	pivot, err := f.choose(j, k, top)
	if err != nil {
		return err
	}
	f.pivotRow[k], f.position[pivot] = pivot, k
	inverse := 1 / b.x[pivot]
	b.inverse[k] = inverse
	for _, i := range b.reach[top:] {
		if f.position[i] < 0 {
			b.lRow, b.l = append(b.lRow, i), append(b.l, b.x[i]*inverse)
		}
	}
	b.lStart[k+1], b.uStart[k+1], b.offStart[k+1] = int32(len(b.l)), int32(len(b.u)), int32(len(b.off))
	return nil
}

// choose takes the matched row if it is large enough, else the largest.
func (f *LU[T]) choose(j, k, top int32) (int32, error) {
	b := &f.b
	best, largest := int32(-1), 0.0
	for _, i := range b.reach[top:] {
		if f.position[i] < 0 {
			if m := magnitude(b.x[i]); m > largest {
				best, largest = i, m
			}
		}
	}
	preferred := f.a.rowOf[j]
	if best < 0 || !(largest <= math.MaxFloat64) {
		return 0, &SingularError{Row: int(preferred), Column: int(j), Rank: int(k)}
	}
	if f.position[preferred] < 0 && b.marked[preferred] == k && magnitude(b.x[preferred]) >= pivotShare*largest {
		best = preferred
	}
	return best, nil
}

// symbolic finds the rows that column j fills within its block, in topological order, in reach[top:].
func (f *LU[T]) symbolic(j, k int32) int32 {
	p := f.a.pattern
	top := int32(p.n)
	for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
		if row := p.row[e]; f.b.marked[row] != k && f.a.rowBlock[row] == f.a.block[j] {
			top = f.search(row, k, top)
		}
	}
	return top
}

// search goes depth first from a row through the columns of L.
func (f *LU[T]) search(row, k, top int32) int32 {
	b := &f.b
	depth := 0
	b.path[0] = row
	b.marked[row] = k
	b.depth[0] = -1
	for depth >= 0 {
		i := b.path[depth]
		at := f.position[i]
		descended := false
		if at >= 0 {
			if b.depth[depth] < 0 {
				b.depth[depth] = b.lStart[at]
			}
			for e := b.depth[depth]; e < b.lStart[at+1]; e++ {
				next := b.lRow[e]
				if b.marked[next] == k {
					continue
				}
				b.depth[depth] = e + 1
				depth++
				b.path[depth], b.depth[depth], b.marked[next] = next, -1, k
				descended = true
				break
			}
		}
		if !descended {
			depth--
			top--
			b.reach[top] = i
		}
	}
	return top
}

// Repivots returns how often Refactor had to look for new pivots.
func (f *LU[T]) Repivots() int { return f.repivots }

// FillIn returns the number of entries of L and U, the diagonal once, and of those above the diagonal blocks.
func (f *LU[T]) FillIn() int { return len(f.values) }
