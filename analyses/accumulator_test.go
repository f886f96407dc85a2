package analyses

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// TestEndsOfAPieceAreExact: start and length do not add up to the end for every pair of numbers.
func TestEndsOfAPieceAreExact(t *testing.T) {
	for i := 1; i < 100; i++ {
		p := piece{t0: -1 / float64(i), t1: 0.1 * float64(i)}
		require.Equal(t, [2]float64{p.t0, p.t1}, [2]float64{p.time(0), p.time(1)})
	}
}

func TestHullHoldsTheCubic(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var c cubic
		for k := range c {
			c[k] = rapid.Float64Range(-10, 10).Draw(t, "coefficient")
		}
		low, high := c.hull()
		for k := range 101 {
			v := c.at(float64(k) / 100)
			require.True(t, v >= low-rounding && v <= high+rounding, "%g outside %g..%g", v, low, high)
		}
	})
}

func TestCompensatedSumKeepsEveryTerm(t *testing.T) {
	var s compensated
	s.add(1e16)
	const n = 1_000_000
	for range n {
		s.add(0.25)
	}
	s.add(-1e16)
	assert.Equal(t, 0.25*n, s.value(), "none of the terms would change 1e16")
	s.add(math.Inf(1))
	assert.Equal(t, math.Inf(1), s.value())
	s.add(math.Inf(-1))
	assert.True(t, math.IsNaN(s.value()))
}

// TestMeanOfALongRun: the mean of ten million pieces is exact to the last digits.
func TestMeanOfALongRun(t *testing.T) {
	if testing.Short() {
		t.Skip("ten million pieces")
	}
	const n = 10_000_000
	mean, power := newIntegral(window{0, n}), newPower(window{0, n})
	y := samples{0.1, 0.1, 0.1, 0.1}
	var p piece
	for i := range n {
		p.set(float64(i), float64(i+1), &y)
		mean.add(&p)
		power.add(&p)
	}
	near(t, 0.1, mean.mean(), 1e-16)
	near(t, 0.1, power.root(), 1e-16)
}

func TestEmptyWaveform(t *testing.T) {
	w := &Waveform{}
	for _, knots := range [][]float64{nil, {1}} {
		w.knots = knots
		peak, at := w.Peak()
		for _, v := range []float64{peak, at, w.PeakToPeak(), w.Mean(), w.RMS(), w.Slew(), w.Drift(), w.Settling(1)} {
			assert.True(t, math.IsNaN(v))
		}
		assert.Zero(t, w.Outside(0, 1))
		for _, f := range []func() error{
			func() error { _, err := w.At(2); return err },
			func() error { _, err := w.Crossing(0, 1); return err },
			func() error { _, err := w.Tone(1); return err },
			func() error { _, err := w.Rise(); return err },
			func() error { _, err := w.Fall(); return err },
			func() error { _, err := w.Overshoot(); return err },
		} {
			var e *InputError
			assert.ErrorAs(t, f(), &e)
		}
	}
}

func TestConstantWaveform(t *testing.T) {
	w := waveformOf(func(float64) float64 { return -2.5 }, 1, 3, 7)
	peak, at := w.Peak()
	assert.Equal(t, -2.5, peak)
	assert.Equal(t, 1.0, at)
	near(t, 0, w.PeakToPeak(), 1e-15)
	near(t, -2.5, w.Mean(), 1e-15)
	near(t, 2.5, w.RMS(), 1e-15)
	near(t, 0, w.Slew(), 1e-13)
	near(t, 0, w.Drift(), 1e-15)
	assert.Zero(t, w.Settling(1e-9))
	assert.Zero(t, w.Outside(-3, -2))
	assert.Equal(t, 2.0, w.Outside(-2, 0))
	_, err := w.Crossing(-2, 1)
	assert.ErrorContains(t, err, "never")
	_, err = w.Overshoot()
	assert.ErrorContains(t, err, "constant")
	tone, err := w.Tone(2)
	require.NoError(t, err)
	near(t, 0, math.Hypot(real(tone), imag(tone)), 1e-12)
}

// TestWhatIsNotANumberStaysSo looks for the reducers that would hide it.
func TestWhatIsNotANumberStaysSo(t *testing.T) {
	good := waveformOf(func(t float64) float64 { return math.Sin(2 * math.Pi * 7 * t) }, 0, 1, 100)
	numbers := numbers{"at": 0.305, "frequency": 7, "within": 0.5, "level": 0.1, "n": 10, "low": -2, "high": 2}
	for name, r := range reducers {
		v, err := r.of(good, numbers)
		require.NoError(t, err, name)
		require.False(t, math.IsNaN(v), name)
		for _, at := range []int{30, 99} { // around 0.305, and in the last tenth
			if (name == "value" || name == "crosses") && at != 30 || (name == "drift" || name == "settles") && at == 30 {
				continue
			}
			w := good.mapped(same, same)
			w.values[4*at+1] = math.NaN()
			v, err := r.of(w, numbers)
			switch {
			case name == "outside":
				near(t, 0.01, v, 1e-12, "a piece that is not a number is outside")
			case err == nil:
				assert.True(t, math.IsNaN(v), "%s is %g", name, v)
			}
		}
	}
}
