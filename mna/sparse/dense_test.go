package sparse

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// denseError is the difference allowed to the dense solution for each unit of the condition number: some hundred roundings.
const denseError = 1e-13

// drawn is a random matrix that need not be regular.
type drawn struct {
	n          int
	rows, cols []int32
	values     []float64
	dense      *mat.Dense
}

func draw(t *rapid.T) drawn {
	n := rapid.IntRange(1, 30).Draw(t, "n")
	d := drawn{n: n, dense: mat.NewDense(n, n, nil)}
	add := func(i, j int, v float64) {
		d.rows, d.cols, d.values = append(d.rows, int32(i)), append(d.cols, int32(j)), append(d.values, v)
		d.dense.Set(i, j, d.dense.At(i, j)+v)
	}
	shift := rapid.IntRange(0, n-1).Draw(t, "shift") // the large entries stand beside the diagonal
	for i := range n {
		add(i, (i+shift)%n, math.Exp(rapid.Float64Range(-12, 12).Draw(t, "size")))
	}
	for range rapid.IntRange(0, 3*n).Draw(t, "more") {
		add(rapid.IntRange(0, n-1).Draw(t, "row"), rapid.IntRange(0, n-1).Draw(t, "column"), rapid.Float64Range(-5, 5).Draw(t, "value"))
	}
	return d
}

// TestAgreesWithDenseFactors compares solutions, of the transpose too, with those of gonum's dense LU.
func TestAgreesWithDenseFactors(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		d := draw(t)
		var dense mat.LU
		dense.Factorize(d.dense)
		condition := dense.Cond()
		if !(condition < 1e10) {
			return
		}
		p, err := NewPattern(d.n, d.rows, d.cols)
		require.NoError(t, err)
		a, err := Analyse(p)
		require.NoError(t, err, "every column has its own large entry")
		f := NewLU[float64](a)
		require.NoError(t, f.Factor(d.values))
		require.NoError(t, f.Refactor(d.values))
		b := make([]float64, d.n)
		for i := range b {
			b[i] = rapid.Float64Range(-1, 1).Draw(t, "b")
		}
		for _, transposed := range []bool{false, true} {
			var want mat.VecDense
			require.NoError(t, dense.SolveVecTo(&want, transposed, mat.NewVecDense(d.n, append([]float64(nil), b...))))
			got := append([]float64(nil), b...)
			if transposed {
				f.SolveTranspose(got)
			} else {
				f.Solve(got)
			}
			size := mat.Norm(&want, math.Inf(1))
			for i := range got {
				if e := math.Abs(got[i] - want.AtVec(i)); !(e <= denseError*condition*size+1e-300) {
					t.Fatalf("transposed %t: x[%d] is %g, dense says %g (condition %g)", transposed, i, got[i], want.AtVec(i), condition)
				}
			}
		}
	})
}

func TestSingularMatricesAreSaidSo(t *testing.T) {
	p, err := NewPattern(2, []int32{0, 0}, []int32{0, 1})
	require.NoError(t, err)
	_, err = Analyse(p)
	var structural *StructuralError
	require.ErrorAs(t, err, &structural)
	assert.Equal(t, []int{1}, structural.Rows)

	p, err = NewPattern(2, []int32{0, 0, 1, 1}, []int32{0, 1, 0, 1})
	require.NoError(t, err)
	a, err := Analyse(p)
	require.NoError(t, err)
	f := NewLU[float64](a)
	var singular *SingularError
	require.ErrorAs(t, f.Factor([]float64{1, 2, 2, 4}), &singular)
	require.ErrorAs(t, f.Factor([]float64{1, math.NaN(), 2, 4}), &singular)
	assert.True(t, singular.NotFinite)
	require.NoError(t, f.Factor([]float64{0, 2, 3, 0}), "a zero diagonal is no obstacle")
	b := []float64{4, 9}
	f.Solve(b)
	assert.Equal(t, []float64{3, 2}, b)
}

// TestHilbert solves with the Hilbert matrix of order 6, the first column of whose inverse is known: 36, -630, 3360, -7560, 7560, -2772
// (Choi, Tricks or treats with the Hilbert matrix, Amer. Math. Monthly 90, 1983).
func TestHilbert(t *testing.T) {
	const n = 6
	var rows, cols []int32
	var values []float64
	var complexes []complex128
	for i := range n {
		for j := range n {
			rows, cols = append(rows, int32(i)), append(cols, int32(j))
			values = append(values, 1/float64(i+j+1))
			complexes = append(complexes, complex(0, 1/float64(i+j+1)))
		}
	}
	p, err := NewPattern(n, rows, cols)
	require.NoError(t, err)
	a, err := Analyse(p)
	require.NoError(t, err)
	want := []float64{36, -630, 3360, -7560, 7560, -2772}
	f, g := NewLU[float64](a), NewLU[complex128](a)
	require.NoError(t, f.Factor(values))
	require.NoError(t, g.Factor(complexes))
	x, z := []float64{1, 0, 0, 0, 0, 0}, []complex128{1i, 0, 0, 0, 0, 0}
	f.Solve(x)
	g.Solve(z)
	const tolerance = 1e-8 // the condition number is 1.5e7
	for i := range want {
		assert.InEpsilon(t, want[i], x[i], tolerance)
		assert.InEpsilon(t, want[i], real(z[i]), tolerance)
	}
}

func TestEmptyAndSingleMatrices(t *testing.T) {
	for n := range 2 {
		var index []int32
		var values []float64
		if n == 1 {
			index, values = []int32{0}, []float64{4}
		}
		p, err := NewPattern(n, index, index)
		require.NoError(t, err)
		a, err := Analyse(p)
		require.NoError(t, err)
		f := NewLU[float64](a)
		require.NoError(t, f.Refactor(values))
		f.Solve(make([]float64, n))
	}
	_, err := NewPattern(1, []int32{1}, []int32{0})
	assert.Error(t, err)
}
