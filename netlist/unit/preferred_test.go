package unit

import (
	"math"
	"slices"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// TestSeries holds values of IEC 60063:2015, tables 1 and 2 (values from memory).
func TestSeries(t *testing.T) {
	for n, want := range map[int][]float64{
		6:  {1, 1.5, 2.2, 3.3, 4.7, 6.8},
		12: {1, 1.2, 1.5, 1.8, 2.2, 2.7, 3.3, 3.9, 4.7, 5.6, 6.8, 8.2},
		24: {1, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2, 2.2, 2.4, 2.7, 3, 3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1},
		48: {
			1, 1.05, 1.1, 1.15, 1.21, 1.27, 1.33, 1.4, 1.47, 1.54, 1.62, 1.69, 1.78, 1.87, 1.96, 2.05, 2.15, 2.26, 2.37, 2.49, 2.61, 2.74, 2.87, 3.01,
			3.16, 3.32, 3.48, 3.65, 3.83, 4.02, 4.22, 4.42, 4.64, 4.87, 5.11, 5.36, 5.62, 5.9, 6.19, 6.49, 6.81, 7.15, 7.5, 7.87, 8.25, 8.66, 9.09, 9.53,
		},
	} {
		got, err := Series(n)
		require.NoError(t, err)
		assert.Equal(t, want, got, "E%d", n)
	}
	e192, err := Series(192)
	require.NoError(t, err)
	assert.Len(t, e192, 192)
	assert.Contains(t, e192, 9.2)
	assert.NotContains(t, e192, 9.19)
	for i, x := range e192 { // every other value is the rounded power, clause 4
		if x != 9.2 {
			assert.InDelta(t, math.Pow(10, float64(i)/192), x, 0.005000001)
		}
	}
	_, err = Series(13)
	assert.EqualError(t, err, "there is no series E13")
}

func TestPreferred(t *testing.T) {
	for _, c := range []struct {
		series  int
		x, want float64
	}{
		{24, 4.6 / 120e-6, 39e3},
		{24, (9 - 0.63) / 240e-6, 36e3},
		{24, 2.61, 2.7},
		{24, 8.25, 8.2},
		{12, 5e-12, 4.7e-12},
		{6, 9.9, 10},
		{6, 0.099, 0.1},
		{6, 8.24, 6.8}, // 8.246 is the geometric middle of 6.8 and 10
		{6, 8.26, 10},
		{192, 9.19, 9.2},
		{96, 1e6, 1e6},
		{48, 1e-300, 1e-300},
		{24, 1.79e308, 1.6e308}, // 1.8e308 is more than a float64 holds
	} {
		got, err := Preferred(c.series, c.x)
		require.NoError(t, err)
		assert.Equal(t, c.want, got, "E%d of %g", c.series, c.x)
	}
	for _, x := range []float64{0, -1, math.NaN(), math.Inf(1)} {
		_, err := Preferred(24, x)
		assert.EqualError(t, err, "a preferred value needs a positive number")
	}
	_, err := Preferred(25, 1)
	assert.EqualError(t, err, "there is no series E25")
}

// TestPreferredIsNearest searches three decades for a nearer value.
func TestPreferredIsNearest(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.SampledFrom([]int{6, 12, 24, 48, 96, 192}).Draw(t, "series")
		x := math.Pow(10, rapid.Float64Range(-14, 9).Draw(t, "log10 x"))
		got, err := Preferred(n, x)
		require.NoError(t, err)
		values, err := Series(n)
		require.NoError(t, err)
		decade := math.Pow(10, math.Floor(math.Log10(got)+1e-9))
		assert.True(t, slices.ContainsFunc(values, func(v float64) bool { return math.Abs(v*decade/got-1) < 1e-12 }), "%g is in no decade of E%d", got, n)
		for _, v := range values {
			for _, d := range []float64{decade / 10, decade, decade * 10} {
				assert.True(t, math.Abs(math.Log(got/x)) <= math.Abs(math.Log(v*d/x))+1e-12, "E%d of %g: %g is nearer than %g", n, x, v*d, got)
			}
		}
	})
}
