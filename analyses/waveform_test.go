package analyses

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// sampled returns f over from..until as n cubics.
func waveformOf(f func(t float64) float64, from, until float64, n int) *Waveform {
	w := &Waveform{}
	for i := range n + 1 {
		w.knots = append(w.knots, from+(until-from)*float64(i)/float64(n))
	}
	for i := range n {
		h := w.knots[i+1] - w.knots[i]
		for k := range samplesPerStep {
			w.values = append(w.values, f(w.knots[i]+h*float64(k)/(samplesPerStep-1)))
		}
	}
	return w
}

// near fails unless got is within tol of want; NaN is never near.
func near(t assert.TestingT, want, got, tol float64, message ...any) bool {
	if d := math.Abs(got - want); !(d <= tol) {
		return assert.Fail(t, "not near", append([]any{"want %g, got %g, off by %g, allowed %g", want, got, d, tol}, message...)...)
	}
	return true
}

// cubicError bounds the error of a sine cut into pieces of a hundredth of its period, interpolated by
// cubics: (2 pi/100)^4/24/16 of its amplitude is 4e-8.
const cubicError = 1e-7

func TestCubicIsExactForCubics(t *testing.T) {
	f := func(t float64) float64 { return 3 - 2*t + 0.7*t*t - 0.25*t*t*t }
	w := waveformOf(f, -1, 4, 3)
	for _, at := range []float64{-1, -0.83, 0.5, 2.2, 4} {
		v, err := w.At(at)
		require.NoError(t, err)
		near(t, f(at), v, 1e-13)
	}
	// The integral of f over -1..4 is [3t - t^2 + 0.7 t^3/3 - 0.0625 t^4].
	primitive := func(t float64) float64 { return 3*t - t*t + 0.7*t*t*t/3 - 0.0625*t*t*t*t }
	near(t, (primitive(4)-primitive(-1))/5, w.Mean(), 1e-13)
}

func TestReducersOfASine(t *testing.T) {
	const amplitude, mean, frequency = 2.5, 0.3, 10.0
	w := waveformOf(func(t float64) float64 { return mean + amplitude*math.Sin(2*math.Pi*frequency*t) }, 0.1, 0.6, 500)
	peak, at := w.Peak()
	near(t, mean+amplitude, peak, cubicError)
	near(t, 0.125, at, 1e-5)
	trough, at := w.Trough()
	near(t, mean-amplitude, trough, cubicError)
	near(t, 0.75, math.Mod(at*frequency, 1), 1e-4, "at three quarters of any period")
	near(t, 2*amplitude, w.PeakToPeak(), cubicError)
	near(t, mean, w.Mean(), cubicError)
	near(t, math.Sqrt(mean*mean+amplitude*amplitude/2), w.RMS(), cubicError)
	near(t, amplitude*2*math.Pi*frequency, w.Slew(), 1e-3)
	third, err := w.Crossing(mean+amplitude/2, 3)
	require.NoError(t, err)
	near(t, 0.2+0.1/12, third, 1e-6, "a sine reaches half its amplitude after a twelfth of its period")
	_, err = w.Crossing(mean+2*amplitude, 1)
	assert.ErrorContains(t, err, "never")
	// Outside +-half the amplitude a sine spends 2/3 of its time.
	near(t, 0.5*2/3, w.Outside(mean-amplitude/2, mean+amplitude/2), 1e-6)
	near(t, -4*amplitude/math.Pi, w.Drift(), 1e-6, "each tenth is half a period: the first positive, the last negative")
}

func TestReducersOfAnExponential(t *testing.T) {
	const tau = 1e-3
	step := func(t float64) float64 {
		if t < 0 {
			return 0
		}
		return 1 - math.Exp(-t/tau)
	}
	w := waveformOf(step, -5e-3, 15e-3, 2000)
	rise, err := w.Rise()
	require.NoError(t, err)
	// 10-90 % of a single pole: ln 9 tau. The high state is a mean over values within 1 % of the mode, so it lies
	// a little below 1, and a rise to 90 % of 1 - d takes about 9 d less: d is at most half of that 1 %.
	near(t, math.Log(9)*tau, rise, 0.045*tau)
	_, err = w.Fall()
	assert.ErrorContains(t, err, "falling")
	near(t, 5e-3+math.Log(100)*tau, w.Settling(0.01), 1e-6)
	over, err := w.Overshoot()
	require.NoError(t, err)
	near(t, 0, over, 0.005)
	near(t, 1/tau, w.Slew(), 1)
	v, err := w.At(0.7e-3)
	require.NoError(t, err)
	near(t, step(0.7e-3), v, 1e-9)
	_, err = w.At(0.1)
	assert.ErrorContains(t, err, "outside the window")
}

func TestOvershootOfASecondOrderStep(t *testing.T) {
	// Overshoot exp(-pi z/sqrt(1-z^2)) of a step through two poles of damping z (textbook).
	const z, omega = 0.4, 2 * math.Pi * 1e3
	d := math.Sqrt(1 - z*z)
	w := waveformOf(func(t float64) float64 {
		if t < 0 {
			return 0
		}
		return 1 - math.Exp(-z*omega*t)*(math.Cos(d*omega*t)+z/d*math.Sin(d*omega*t))
	}, -3e-3, 9e-3, 6000)
	over, err := w.Overshoot()
	require.NoError(t, err)
	near(t, math.Exp(-math.Pi*z/d), over, 2e-3, "the state level is a mean of values within 1 %")
}

func TestToneIsFoundAmongOthers(t *testing.T) {
	// 50 Hz beside a larger 4 Hz and an offset, in a window of 23.7 periods.
	f := func(t float64) float64 {
		return 0.7 + 0.3*math.Sin(2*math.Pi*50*t+0.6) + 2*math.Sin(2*math.Pi*4*t-1)
	}
	w := waveformOf(f, 0.2, 0.674, 3000)
	a, err := w.Tone(50)
	require.NoError(t, err)
	// A raised cosine lets less than 60 dB of a component eleven of its widths away through: 2 V gives 0.5 mV.
	near(t, 0.3, math.Hypot(real(a), imag(a)), 1e-3)
	near(t, 0.6, math.Atan2(imag(a), real(a)), 3e-3)
	_, err = w.Tone(1)
	assert.ErrorContains(t, err, "at least one")
}

func TestToneOfAPureToneIsExact(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		frequency := rapid.Float64Range(20, 400).Draw(t, "frequency")
		phase := rapid.Float64Range(-3, 3).Draw(t, "phase")
		slope := rapid.Float64Range(-5, 5).Draw(t, "slope")
		w := waveformOf(func(x float64) float64 { return 1 + slope*x + 0.25*math.Sin(2*math.Pi*frequency*x+phase) }, 0.01, 0.12, 6000)
		a, err := w.Tone(frequency)
		require.NoError(t, err)
		near(t, 0.25, math.Hypot(real(a), imag(a)), cubicError)
		near(t, 0, math.Remainder(math.Atan2(imag(a), real(a))-phase, 2*math.Pi), 10*cubicError)
	})
}

func TestJumpsBetweenStepsAreSeen(t *testing.T) {
	// Two constant steps with a jump between them.
	w := &Waveform{knots: []float64{0, 1, 2}, values: []float64{0, 0, 0, 0, 5, 5, 5, 5}}
	at, err := w.Crossing(2, 1)
	require.NoError(t, err)
	assert.Equal(t, 1.0, at)
	assert.Equal(t, 2.5, w.Mean())
	assert.Equal(t, 1.0, w.Outside(-1, 1))
	assert.Zero(t, w.Slew())
	assert.Equal(t, 1.0, w.Settling(0.1))
}

func TestNaNIsNeverHidden(t *testing.T) {
	w := &Waveform{knots: []float64{0, 1, 2}, values: []float64{0, 0, 0, 0, 1, math.NaN(), 2, 3}}
	peak, _ := w.Peak()
	trough, _ := w.Trough()
	assert.True(t, math.IsNaN(peak))
	assert.True(t, math.IsNaN(trough))
}
