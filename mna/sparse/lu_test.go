package sparse

import (
	"math/rand/v2"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestQuick(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	for trial := range 300 {
		n := 1 + trial%40
		var rows, cols []int32
		var vals []float64
		for i := range n {
			rows = append(rows, int32(i))
			cols = append(cols, int32((i*7+3)%n))
			vals = append(vals, 1+r.Float64())
			for range 2 {
				rows = append(rows, int32(r.IntN(n)))
				cols = append(cols, int32(r.IntN(n)))
				vals = append(vals, r.NormFloat64())
			}
		}
		p, err := NewPattern(n, rows, cols)
		require.NoError(t, err)
		a, err := Analyse(p)
		if err != nil {
			continue
		}
		f := NewLU[float64](a)
		if f.Factor(vals) != nil {
			continue
		}
		require.NoError(t, f.Refactor(vals))
		x := make([]float64, n)
		b := make([]float64, n)
		bt := make([]float64, n)
		for i := range x {
			x[i] = r.NormFloat64()
		}
		for k := range rows {
			b[rows[k]] += vals[k] * x[cols[k]]
			bt[cols[k]] += vals[k] * x[rows[k]]
		}
		f.Solve(b)
		f.SolveTranspose(bt)
		for i := range x {
			require.InDelta(t, x[i], b[i], 1e-5)
			require.InDelta(t, x[i], bt[i], 1e-5)
		}
	}
}
