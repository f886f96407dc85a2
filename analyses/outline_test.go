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
		accuracy := math.Pow(10, rapid.Float64Range(-5, -2).Draw(t, "accuracy"))
		frequency, decay := rapid.Float64Range(1, 40).Draw(t, "frequency"), rapid.Float64Range(0, 20).Draw(t, "decay")
		jump := rapid.Float64Range(0, 1).Draw(t, "jump")
		f := func(x float64) float64 {
			v := math.Exp(-decay*x) * math.Sin(2*math.Pi*frequency*x)
			if x >= jump {
				v++
			}
			return v
		}
		w := waveformOf(f, 0, 1, 5_000)
		o := outlined(w, accuracy)
		peak, _ := w.Peak()
		trough, _ := w.Trough()
		allowed := allowance(accuracy, trough, peak)
		assert.Less(t, o.wave.steps(), w.steps()/2, "a smooth waveform needs fewer pieces")
		require.Len(t, o.slack, o.wave.steps())
		from, until := o.wave.Window()
		assert.Equal(t, [2]float64{0, 1}, [2]float64{from, until})
		i := 0
		for p := range w.pieces() {
			for p.t1 > o.wave.knots[i+1] {
				i++
			}
			require.LessOrEqual(t, o.slack[i], allowed)
			var merged piece
			o.wave.set(&merged, i)
			for k, v := range p.y {
				if off := math.Abs(merged.at(p.time(float64(k)/3)) - v); !(off <= o.slack[i]+1e-12) {
					t.Fatalf("off by %g in %g..%g s, said to be %g", off, merged.t0, merged.t1, o.slack[i])
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

// TestSlackAddsUp: what a piece is off by already counts when it is merged again.
func TestSlackAddsUp(t *testing.T) {
	const allowed = 1e-3
	bend := waveformOf(func(x float64) float64 { return 1e-4 * math.Pow(x, 4) }, 0, 2, 2)
	for _, before := range []samples{{0, 0}, {0.9e-3, 0}, {0, 0.9e-3}, {0.999999e-3, 0.999999e-3}} {
		o := accumulated(bend, newOutline(1e-4))
		copy(o.slack, before[:2])
		most := max(before[0], before[1])
		if !o.join(0, allowed) {
			assert.Greater(t, most, 0.99e-3)
			assert.Equal(t, before[:2], o.slack)
			continue
		}
		assert.Less(t, most, 0.99e-3)
		assert.Greater(t, o.slack[0], most+1e-6)
	}
}
