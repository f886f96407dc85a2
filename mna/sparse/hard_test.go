package sparse

import (
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
)

// backwardError is what is allowed of |A x - b| beside |A| |x| + |b|, largest elements of equilibrated rows, in units of the order times the unit
// roundoff. Threshold pivoting with a share of 1e-3 may let elements grow by that much.
const backwardError = 1000

// problem is a matrix with what a test needs of it.
type problem[T Scalar] struct {
	n          int
	rows, cols []int32
	values     []T
}

func (p *problem[T]) add(i, j int, v T) {
	p.rows, p.cols, p.values = append(p.rows, int32(i)), append(p.cols, int32(j)), append(p.values, v)
}

func dense[T Scalar](n int, at func(i, j int) T) *problem[T] {
	p := &problem[T]{n: n}
	for i := range n {
		for j := range n {
			p.add(i, j, at(i, j))
		}
	}
	return p
}

func (p *problem[T]) analyse(t testing.TB) *Analysis {
	pattern, err := NewPattern(p.n, p.rows, p.cols)
	require.NoError(t, err)
	a, err := Analyse(pattern)
	require.NoError(t, err)
	return a
}

// residual is the backward error of x as a solution of A x = b, or of its transpose, in units of n eps: that of the matrix with equilibrated rows, whose
// columns the elimination keeps to their own size each.
func (p *problem[T]) residual(x, b []T, transpose bool) float64 {
	row, col := make([]float64, p.n), make([]float64, p.n)
	for k, v := range p.values {
		row[p.rows[k]] = max(row[p.rows[k]], modulus(v))
	}
	for k, v := range p.values {
		col[p.cols[k]] = max(col[p.cols[k]], modulus(v)/row[p.rows[k]])
	}
	r := append([]T(nil), b...)
	for k, v := range p.values {
		if i, j := p.rows[k], p.cols[k]; transpose {
			r[j] -= v * x[i]
		} else {
			r[i] -= v * x[j]
		}
	}
	worst, sides, size := 0.0, 0.0, 0.0
	for i := range r {
		weight, unknown := 1/row[i], col[i]
		if transpose {
			weight, unknown = 1/col[i], row[i]
		}
		if e := modulus(r[i]) * weight; !(e <= worst) {
			worst = e
		}
		sides = max(sides, modulus(b[i])*weight)
		size += modulus(x[i]) * unknown
	}
	if p.n == 0 {
		return 0
	}
	return worst / (sides + size) / (float64(p.n) * 0x1p-52)
}

// check factors and solves, the transpose and several sides at once too, and holds the backward error.
func (p *problem[T]) check(t testing.TB, name string) *LU[T] {
	f := NewLU[T](p.analyse(t))
	require.NoError(t, f.Factor(p.values), name)
	p.checkSolutions(t, name, f, backwardError)
	return f
}

func (p *problem[T]) checkSolutions(t testing.TB, name string, f *LU[T], allowed float64) {
	const sides = 3
	random := rand.New(rand.NewPCG(1, uint64(p.n)))
	many := make([]T, p.n*sides)
	for i := range many {
		many[i] = fromFloat[T](random.NormFloat64())
	}
	wanted := append([]T(nil), many...)
	f.SolveMany(many, sides)
	for side := range sides {
		b, x := make([]T, p.n), make([]T, p.n)
		for i := range b {
			b[i], x[i] = wanted[i*sides+side], many[i*sides+side]
		}
		e := p.residual(x, b, false)
		require.True(t, e <= allowed, "%s: backward error %g of several sides", name, e)
		copy(x, b)
		f.Solve(x)
		e = p.residual(x, b, false)
		require.True(t, e <= allowed, "%s: backward error %g", name, e)
		copy(x, b)
		f.SolveTranspose(x)
		e = p.residual(x, b, true)
		require.True(t, e <= allowed, "%s: backward error %g of the transpose", name, e)
	}
}

// random is a sparse matrix with a full transversal somewhere, its rows and columns scaled over the given number of decades.
func random(n int, seed uint64, decades float64) *problem[float64] {
	r := rand.New(rand.NewPCG(seed, uint64(n)))
	p := &problem[float64]{n: n}
	row, col := make([]float64, n), make([]float64, n)
	for i := range row {
		row[i], col[i] = math.Pow(10, decades*(r.Float64()-0.5)), math.Pow(10, decades*(r.Float64()-0.5))
	}
	add := func(i, j int) { p.add(i, j, r.NormFloat64()*row[i]*col[j]) }
	for i, j := range r.Perm(n) {
		add(i, j)
	}
	for range 2 * n {
		add(r.IntN(n), r.IntN(n))
	}
	return p
}

func TestRandomMatrices(t *testing.T) {
	for n := range 61 {
		for seed := range uint64(4) {
			for _, decades := range []float64{0, 12} {
				p := random(n, seed, decades)
				p.check(t, fmt.Sprint(n, " ", seed, " ", decades))
				c := &problem[complex128]{n: n, rows: p.rows, cols: p.cols}
				for k, v := range p.values {
					c.values = append(c.values, cmplx.Rect(v, float64(k)))
				}
				c.check(t, fmt.Sprint("complex ", n, " ", seed, " ", decades))
			}
		}
	}
}

// saddle is the shape of equations with ideal sources: conductances and, for every source, a row and a column without a diagonal.
func saddle(nodes, sources int, seed uint64) *problem[float64] {
	r := rand.New(rand.NewPCG(seed, 3))
	p := &problem[float64]{n: nodes + sources}
	for k := range 3 * nodes {
		i, j, g := k%nodes, r.IntN(nodes), math.Pow(10, 12*(r.Float64()-0.75))
		p.add(i, i, g)
		if i != j {
			p.add(j, j, g)
			p.add(i, j, -g)
			p.add(j, i, -g)
		}
	}
	for k := range sources {
		p.add(nodes+k, 2*k, 1)
		p.add(nodes+k, 2*k+1, -1)
		p.add(2*k, nodes+k, 1)
		p.add(2*k+1, nodes+k, -1)
	}
	return p
}

func TestZeroDiagonals(t *testing.T) {
	for seed := range uint64(50) {
		saddle(25, 9, seed).check(t, fmt.Sprint("saddle ", seed))
	}
	// A cycle has no diagonal at all.
	for n := 2; n < 20; n++ {
		p := &problem[float64]{n: n}
		for i := range n {
			p.add(i, (i+1)%n, float64(i+1))
		}
		p.check(t, fmt.Sprint("cycle ", n))
	}
}

// Hilbert matrices have known condition numbers (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., 2002, table 28.1 and section 28.1; the exact
// inverse has integer elements). Here the 1-norm of the inverse is computed from those elements.
func TestConditionOfHilbert(t *testing.T) {
	binomial := func(n, k int) float64 { return math.Round(math.Exp(lg(n) - lg(k) - lg(n-k))) }
	for n := 2; n <= 9; n++ {
		p := dense(n, func(i, j int) float64 { return 1 / float64(i+j+1) })
		f := p.check(t, fmt.Sprint("hilbert ", n))
		inverse := 0.0
		for j := range n {
			sum := 0.0
			for i := range n {
				b := binomial(i+j, i)
				sum += float64(i+j+1) * binomial(n+i, n-j-1) * binomial(n+j, n-i-1) * b * b
			}
			inverse = math.Max(inverse, sum)
		}
		norm := 0.0
		for i := range n {
			norm += 1 / float64(i+1)
		}
		conditionWithin(t, fmt.Sprint("hilbert ", n), norm*inverse, f.Condition(p.values))
	}
}

// lg is the logarithm of n!.
func lg(n int) float64 {
	v, _ := math.Lgamma(float64(n + 1))
	return v
}

const (
	// conditionBelow is how far an estimate of the condition may be below the true one: what Higham, 1988, observed at most in thousands of matrices.
	conditionBelow = 10
	// conditionAbove is what rounding may add, beside the condition times the unit roundoff.
	conditionAbove = 1 + 1e-8
)

func conditionWithin(t testing.TB, name string, want, got float64) {
	t.Helper()
	require.True(t, got >= want/conditionBelow && got <= want*(conditionAbove+want*0x1p-48), "%s: condition %g, estimated as %g", name, want, got)
}

// Kahan's matrices look harmless on their diagonal (Kahan, Numerical linear algebra, Canad. Math. Bull. 9, 1966, 757-801, page 791).
func TestKahan(t *testing.T) {
	for n := 2; n <= 30; n++ {
		s, c := math.Sin(1.2), math.Cos(1.2)
		p := &problem[float64]{n: n}
		d := mat.NewDense(n, n, nil)
		for i := range n {
			for j := i; j < n; j++ {
				v := math.Pow(s, float64(i))
				if j > i {
					v *= -c
				}
				p.add(i, j, v)
				d.Set(i, j, v)
			}
		}
		f := p.check(t, fmt.Sprint("kahan ", n))
		conditionWithin(t, fmt.Sprint("kahan ", n), mat.Cond(d, 1), f.Condition(p.values))
	}
}

func TestConditionOfRandomMatrices(t *testing.T) {
	for seed := range uint64(100) {
		p := random(20, seed, 4)
		d := mat.NewDense(p.n, p.n, nil)
		for k, v := range p.values {
			i, j := int(p.rows[k]), int(p.cols[k])
			d.Set(i, j, d.At(i, j)+v)
		}
		f := p.check(t, fmt.Sprint(seed))
		if want := mat.Cond(d, 1); want < 1e12 {
			conditionWithin(t, fmt.Sprint("random ", seed), want, f.Condition(p.values))
		}
	}
}

// TestNearlySingular moves the last pivot towards zero: the factors stay backward stable and the condition tells.
func TestNearlySingular(t *testing.T) {
	for _, gap := range []float64{1e-3, 1e-6, 1e-9, 1e-12, 1e-15} {
		p := dense(3, func(i, j int) float64 { return float64(3*i + j + 1) })
		p.values[8] += gap
		f := p.check(t, fmt.Sprint("gap ", gap))
		require.Greater(t, f.Condition(p.values), 1/gap)
	}
}

// TestVanishingPivots changes values so that frozen pivots become useless: new ones are looked for by themselves.
func TestVanishingPivots(t *testing.T) {
	repivots := 0
	for seed := range uint64(40) {
		p := random(20, seed, 0)
		f := NewLU[float64](p.analyse(t))
		require.NoError(t, f.Factor(p.values))
		// What was the first pivot of the largest block is almost nothing now.
		first, size := int32(0), int32(0)
		for i, from := range f.a.blocks[:len(f.a.blocks)-1] {
			if n := f.a.blocks[i+1] - from; n > size {
				first, size = from, n
			}
		}
		for k := range p.values {
			if p.rows[k] == f.pivotRow[first] && p.cols[k] == f.a.order[first] {
				p.values[k] *= 1e-14
			}
		}
		err := f.Refactor(p.values)
		if _, singular := err.(*SingularError); singular {
			continue
		}
		require.NoError(t, err)
		p.checkSolutions(t, fmt.Sprint("seed ", seed), f, backwardError)
		repivots += f.Repivots()
	}
	require.Greater(t, repivots, 10)
}

func TestStructurallySingular(t *testing.T) {
	p, err := NewPattern(4, []int32{0, 1, 2, 3, 0, 1}, []int32{0, 0, 1, 1, 2, 2})
	require.NoError(t, err)
	_, err = Analyse(p)
	var e *StructuralError
	require.ErrorAs(t, err, &e)
	require.Equal(t, []int{3}, e.Columns)
	require.Len(t, e.Rows, 1)
}

// TestBlocks: a pattern that falls into blocks is factored within them, and the entries above stay as they are.
func TestBlocks(t *testing.T) {
	const blocks, size = 8, 5
	p := &problem[float64]{n: blocks * size}
	r := rand.New(rand.NewPCG(2, 2))
	shuffled := r.Perm(p.n)
	add := func(i, j int) { p.add(shuffled[i], j, r.NormFloat64()) }
	above := map[[2]int]bool{}
	for b := range blocks {
		for i := range size {
			add(b*size+i, b*size+i)
			add(b*size+i, b*size+(i+1)%size)
			for c := b + 1; c < blocks; c++ {
				j := c*size + r.IntN(size)
				above[[2]int{b*size + i, j}] = true
				add(b*size+i, j)
				add(b*size+i, j) // the same place again
			}
		}
	}
	f := p.check(t, "blocks")
	require.Len(t, f.a.blocks, blocks+1)
	kept := 0
	for k := range f.pivot {
		kept += int(f.upper[k] - f.start[k])
	}
	require.Len(t, above, kept, "entries at the same place are one")
	require.LessOrEqual(t, f.FillIn()-kept, blocks*3*size, "a cycle fills one column")
	again := f.FillIn()
	require.NoError(t, f.Refactor(p.values))
	require.Equal(t, again, f.FillIn())
	p.checkSolutions(t, "blocks again", f, backwardError)
}

// TestSchedulesAgree: following the schedule gives the bits of the dense column.
func TestSchedulesAgree(t *testing.T) {
	for seed := range uint64(20) {
		p := random(40, seed, 6)
		f := NewLU[float64](p.analyse(t))
		require.NoError(t, f.Factor(p.values))
		require.NoError(t, f.Refactor(p.values))
		want := append([]float64(nil), f.values...)
		require.NotEmpty(t, f.schedule.first)
		f.schedule = schedule{}
		require.NoError(t, f.Refactor(p.values))
		require.Equal(t, want, f.values)
		require.Zero(t, f.Repivots())
	}
}

func TestNothingIsAllocated(t *testing.T) {
	s := array(3)
	f := NewLU[float64](s.analysis(t))
	require.NoError(t, f.Factor(s.values))
	b := make([]float64, s.n)
	require.Zero(t, testing.AllocsPerRun(50, func() {
		for i := range b {
			b[i] = 1
		}
		if f.Refactor(s.values) != nil {
			panic("singular")
		}
		f.Solve(b)
		f.SolveTranspose(b)
	}))
}

// TestFill holds the fill of the subjects of the benchmarks; their arithmetic follows from it.
func TestFill(t *testing.T) {
	most := map[string]int{"pair": 38, "array-64": 3700, "array-1000": 64_000, "array-10000": 660_000, "ladder-100000": 300_000, "grid-100": 420_000, "grid-300": 6_000_000}
	for _, c := range subjects {
		s := c.make()
		if testing.Short() && s.n > 20_000 {
			continue
		}
		f := NewLU[float64](s.analysis(t))
		require.NoError(t, f.Factor(s.values))
		require.LessOrEqual(t, f.FillIn(), most[c.name], c.name)
	}
}

// growth is how much larger the factors are than the matrix: the largest element of |L| |U| beside the largest of its column. The backward
// error goes with it (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., 2002, theorem 9.4).
func growth(f *LU[float64], values []float64) float64 {
	p := f.a.pattern
	lower, upper := mat.NewDense(p.n, p.n, nil), mat.NewDense(p.n, p.n, nil)
	largest := make([]float64, p.n) // of each position's column
	for k, j := range f.a.order {
		lower.Set(k, k, 1)
		upper.Set(k, k, math.Abs(1/f.values[f.pivot[k]]))
		for e := f.start[k]; e < f.pivot[k]; e++ {
			upper.Set(int(f.row[e]), k, math.Abs(f.values[e]))
		}
		for e := f.pivot[k] + 1; e < f.start[k+1]; e++ {
			lower.Set(int(f.row[e]), k, math.Abs(f.values[e]))
		}
		for e := p.colStart[j]; e < p.colStart[j+1]; e++ {
			largest[k] = max(largest[k], math.Abs(values[p.entry[e]]*f.scale[p.row[e]]))
		}
	}
	var product mat.Dense
	product.Mul(lower, upper)
	grown := 1.0
	for i := range p.n {
		for k, size := range largest {
			grown = max(grown, product.At(i, k)/size)
		}
	}
	return grown
}

// FuzzLU builds a small matrix from bytes: whatever it is, it is solved backward stably or said to be singular, and numbers that change on the same pattern too.
func FuzzLU(f *testing.F) {
	f.Add([]byte{3, 0, 0, 200, 1, 1, 50, 2, 2, 120, 0, 2, 7})
	f.Add([]byte{2, 0, 1, 1, 1, 0, 1})
	f.Add([]byte{4, 0, 0, 0, 1, 1, 255, 2, 3, 128, 3, 2, 128, 0, 3, 9})
	f.Fuzz(func(t *testing.T, data []byte) {
		if len(data) == 0 || len(data) > 600 {
			return
		}
		p := &problem[float64]{n: int(data[0])%12 + 1}
		for d := data[1:]; len(d) >= 3; d = d[3:] {
			p.add(int(d[0])%p.n, int(d[1])%p.n, (float64(d[2])-128)*math.Pow(10, float64(d[0]%7)-3))
		}
		pattern, err := NewPattern(p.n, p.rows, p.cols)
		require.NoError(t, err)
		a, err := Analyse(pattern)
		if err != nil {
			var e *StructuralError
			require.ErrorAs(t, err, &e)
			return
		}
		lu := NewLU[float64](a)
		for range 2 {
			if err := lu.Refactor(p.values); err != nil {
				var e *SingularError
				require.ErrorAs(t, err, &e)
				require.True(t, e.Row >= 0 && e.Row < p.n && e.Column >= 0 && e.Column < p.n)
				return
			}
			if lu.Condition(p.values) > 1e12 {
				return
			}
			p.checkSolutions(t, "fuzz", lu, backwardError*growth(lu, p.values))
			for k := range p.values {
				p.values[k] *= 1 + float64(k%3)
			}
		}
	})
}
