package devices

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

func TestLimitFindsTheVoltageOfACurrent(t *testing.T) {
	x := newExponential(1e-15, 0.026)
	// From rest, where the conductance is Is/nVt, a current source of 1 A asks for 26e12 V.
	v, limited := x.shorten(1/x.gain, 0)
	assert.True(t, limited)
	i, g := x.at(v)
	assert.InDelta(t, 1, i, 1e-12)
	// Down from there to 1 mA, as the tangent asks for.
	v, limited = x.shorten(v+(1e-3-i)/g, v)
	assert.True(t, limited)
	i, _ = x.at(v)
	assert.InDelta(t, 1e-3, i, 1e-12)
}

func TestLimitOfAVoltage(t *testing.T) {
	x := newExponential(1e-15, 0.026)
	for _, c := range []struct {
		name          string
		last, v, want float64
	}{
		{"a small step up", 0.7, 0.75, 0.75},
		{"a small step down", 0.7, 0.69, 0.69},
		{"below the knee", 0.1, 0.5, 0.5},
		{"from rest to some volts", 0, 5, x.knee},
		{"turned off", 0.7, -3, 0},
		{"turned down to less than a tangent holds", 0.7, 0.4, 0.4},
		{"reversed", -1, -50, -50},
		{"from reversed", -50, 0.3, 0.3},
	} {
		v, limited := x.shorten(c.v, c.last)
		assert.Equal(t, c.want, v, c.name)
		assert.Equal(t, c.want != c.v, limited, c.name)
	}
}

// TestLimitLetsGo: whatever a junction's size, an iteration that goes on asking for the same voltage gets it.
func TestLimitLetsGo(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		x := newExponential(math.Pow(10, rapid.Float64Range(-40, 2).Draw(t, "decades")), rapid.Float64Range(0.005, 0.3).Draw(t, "nVt"))
		v := rapid.Float64Range(-50, 3).Draw(t, "asked")
		last := rapid.Float64Range(-50, 3).Draw(t, "last")
		const most = 200 // 3 V are 600 of the smallest nVt, and every evaluation brings a few
		for range most {
			u, limited := x.shorten(v, last)
			require.False(t, math.IsNaN(u))
			if !limited {
				require.Equal(t, v, u)
				return
			}
			last = u
		}
		t.Fatalf("after %d evaluations %g V is not allowed yet", most, v)
	})
}
