package analyses

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// outlined gives w to an outline that merges early.
func outlined(w *Waveform, accuracy float64) *outline {
	o := newOutline(accuracy)
	o.limit = 64
	return accumulated(w, o)
}

func TestOutlineStaysWithinTheAccuracy(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		accuracy := math.Pow(10, rapid.Float64Range(-6, -2).Draw(t, "accuracy"))
		frequency, decay := rapid.Float64Range(1, 40).Draw(t, "frequency"), rapid.Float64Range(0, 20).Draw(t, "decay")
		jump := rapid.Float64Range(0, 1).Draw(t, "jump")
		f := func(x float64) float64 {
			v := math.Exp(-decay*x) * math.Sin(2*math.Pi*frequency*x)
			if x >= jump {
				v++
			}
			return v
		}
		w := waveformOf(f, 0, 1, 20_000)
		o := outlined(w, accuracy)
		peak, _ := w.Peak()
		trough, _ := w.Trough()
		allowed := allowance(accuracy, trough, peak)
		assert.Less(t, o.wave.steps(), w.steps()/4, "a smooth waveform needs fewer pieces")
		require.Len(t, o.slack, o.wave.steps())
		from, until := o.wave.Window()
		assert.Equal(t, [2]float64{0, 1}, [2]float64{from, until})
		// One step holds the jump.
		for x := range w.pieces() {
			for k, v := range x.y {
				at := x.time(float64(k) / 3)
				got, err := o.wave.At(at)
				require.NoError(t, err)
				if !(math.Abs(got-v) <= allowed) && !(x.t0 <= jump && x.t1 >= jump) {
					t.Fatalf("off by %g at %g s, allowed %g", math.Abs(got-v), at, allowed)
				}
			}
		}
	})
}

// TestReducersOfAnOutline: what needs an outline changes by no more than its accuracy.
func TestReducersOfAnOutline(t *testing.T) {
	const accuracy, tau, omega = 1e-4, 0.02, 2 * math.Pi * 30
	w := waveformOf(func(x float64) float64 {
		if x < 0.1 {
			return -1
		}
		return 1 - 2*math.Exp(-(x-0.1)/tau)*math.Cos(omega*(x-0.1))
	}, 0, 1, 50_000)
	o := outlined(w, accuracy)
	t.Logf("%d pieces of %d", o.wave.steps(), w.steps())
	for name, r := range reducers {
		if !r.whole {
			continue
		}
		switch want, err := r.of(w, numbers{"within": 0.01}); name {
		case "fall":
			assert.ErrorContains(t, err, "falling")
			_, err = r.value(o, nil)
			assert.ErrorContains(t, err, "falling")
		default:
			require.NoError(t, err)
			got, err := r.value(o, numbers{"within": 0.01})
			require.NoError(t, err)
			// Levels are off by a tenth of the accuracy, and the share of time that a piece's eight samples stand for in a state's mean is
			// coarser in longer pieces.
			near(t, want, got, 1e-3*want, name)
		}
	}
}

func TestOutlineIsTheWaveformUpToALimit(t *testing.T) {
	w := waveformOf(math.Cos, 0, 3, 1000)
	o := accumulated(w, newOutline(1e-2))
	assert.Equal(t, *w, o.wave)
	o = newOutline(0)
	o.limit = 100
	assert.Equal(t, *w, accumulated(w, o).wave, "nothing is merged where nothing may be off")
}

func TestOutlineOfAConstant(t *testing.T) {
	w := waveformOf(func(float64) float64 { return 0.1 }, 0, 1, 1<<12)
	o := outlined(w, 1e-4)
	assert.Less(t, o.wave.steps(), o.limit)
	near(t, 0.1, o.wave.Mean(), 1e-15)
	w.values[777] = math.NaN()
	o = outlined(w, 1e-4)
	assert.True(t, math.IsNaN(o.wave.Mean()), "what is not a number is not merged away")
}
