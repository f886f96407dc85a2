package devices

import (
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/mna"
)

func waveform[T interface{ New() (mna.Signal, error) }](t require.TestingT, w T) mna.Signal {
	s, err := w.New()
	require.NoError(t, err)
	return s
}

// everyWaveform holds one of each kind, with peaks of 1.
func everyWaveform(t require.TestingT) map[string]mna.Signal {
	return map[string]mna.Signal{
		"constant":  Constant(1),
		"sine":      waveform(t, Sine{Peak: 1, Frequency: 1e6, Phase: 0.3, Delay: 1e-7}),
		"triangle":  waveform(t, Triangle{Peak: 1, Frequency: 1e6, Skew: 0.3}),
		"square":    waveform(t, Square{Peak: 1, Frequency: 1e6, Duty: 0.4}),
		"step":      waveform(t, Step{To: 1, Start: 1e-7, Edge: 2e-7}),
		"ramp":      waveform(t, Ramp{To: 1, Start: 1e-7, Over: 1e-6}),
		"pulse":     waveform(t, Pulse{High: 1, Start: 1e-7, Width: 3e-7, Every: 1e-6}),
		"points":    waveform(t, Points{Times: []float64{0, 1e-7, 3e-7, 1e-6}, Values: []float64{0, 1, -1, 0}}),
		"modulated": waveform(t, Modulated{Peak: 0.5, Carrier: 1e6, Tone: 1e5, Depth: 0.8}),
		"surge":     waveform(t, Surge{Peak: 1, Front: 5e-9, Tail: 50e-9, Start: 1e-7}),
		"ringing":   waveform(t, Ringing{Peak: 1, Frequency: 1e6, Decay: 1e-6, Start: 1e-7}),
		"bursts":    waveform(t, Bursts{Peak: 1, Front: 5e-9, Tail: 50e-9, Rate: 1e6, Length: 5e-6, Every: 20e-6}),
		"hiss":      waveform(t, Hiss{Density: 1e-3, Band: 1e6, Seed: 1}),
		"chirp":     waveform(t, Chirp{Peak: 1, From: 1e5, To: 1e6, Over: 1e-5}),
		"sum":       Sum(Constant(1), waveform(t, Sine{Peak: 1, Frequency: 1e6}), Scaled(waveform(t, Sine{Peak: 1, Frequency: 3e6}), 0.3)),
	}
}

func TestWaveformsAllocateNothing(t *testing.T) {
	for name, s := range everyWaveform(t) {
		at := 0.0
		require.Zero(t, testing.AllocsPerRun(50, func() {
			at += 1.7e-8
			_ = s.At(at) + s.Scale(at) + s.Corner(at)
		}), name)
	}
}

// missed is the largest share of its peak by which a signal may depart, within the longest step that its scale allows, from the parabola through
// the step's ends and middle: an eighth of the period of a sine has h^3 w^3/(72 sqrt 3), 0.4 %, about the middle of each half; it is what error
// control can work with.
const missed = 5e-3

// TestScalesMissNothing steps through every waveform as fast as corners and scales allow.
func TestScalesMissNothing(t *testing.T) {
	const stepsPerScale, until, longest = 8, 50e-6, 10e-6
	for name, s := range everyWaveform(t) {
		at, steps := 0.0, 0
		for at < until {
			corner := s.Corner(at)
			require.Greater(t, corner, at, name)
			end := min(at+s.Scale(at)/stepsPerScale, at+longest, corner)
			within := min(end, math.Nextafter(corner, 0))
			from, middle, to := s.At(at), s.At(at+(within-at)/2), s.At(within)
			for _, share := range []float64{0.1, 0.25, 0.4, 0.6, 0.75, 0.9} {
				parabola := from*(1-share)*(1-2*share) + 4*middle*share*(1-share) - to*share*(1-2*share)
				if d := math.Abs(s.At(at+share*(within-at)) - parabola); !(d <= missed) {
					t.Fatalf("%s misses %g between %g and %g", name, d, at, within)
				}
			}
			at = end
			steps++
		}
		t.Logf("%s: %d steps", name, steps)
	}
}

// TestASurgeIsSoonOver: once it has died down it asks for no more steps. The time constants of the front and of the tail are those of
// TestBurstConstants; steps of tau/8 e^(u/(3 tau)) end after 24 (1 - e^(-u/(3 tau))) of them, 24 for each.
func TestASurgeIsSoonOver(t *testing.T) {
	s := waveform(t, Surge{Peak: 5, Front: 5e-9, Tail: 50e-9, Start: 1e-6})
	assert.Equal(t, inf, s.Scale(0), "before its start the corner is enough")
	assert.Equal(t, 1e-6, s.Corner(0))
	assert.InEpsilon(t, 3.29097434884e-9, s.Scale(1e-6), 1e-6)
	steps, last := 0, 0.0
	for at := 1e-6; at < 1e-3; steps++ {
		scale := s.Scale(at)
		require.GreaterOrEqual(t, scale, last, "at %g", at)
		last = scale
		at += scale / 8
	}
	assert.LessOrEqual(t, steps, 2*24+6)
	assert.Equal(t, inf, s.Scale(1e-6+negligible*56e-9))
}

// TestBurstsBeginAtTheirCorners: rounding of a corner's time does not hide the pulse that begins there.
func TestBurstsBeginAtTheirCorners(t *testing.T) {
	s := waveform(t, Bursts{Peak: 1, Front: 5e-9, Tail: 50e-9, Rate: 5e3, Length: 15e-3, Every: 300e-3})
	at := 0.0
	for range 2000 {
		at = s.Corner(at)
		require.InEpsilon(t, 3.29097434884e-9, s.Scale(at), 1e-2, "at %v", at)
	}
	assert.Greater(t, at, 1.0)
}

// TestARingingKeepsItsPeriod: while it can still be seen, no step may be as long as its period.
func TestARingingKeepsItsPeriod(t *testing.T) {
	const decay = 3e-6
	s := waveform(t, Ringing{Peak: 1, Frequency: 1e6, Decay: decay, Start: 1e-6})
	for _, u := range []float64{0, 1, 5, 19.9} {
		assert.InEpsilon(t, 1e-6, s.Scale(1e-6+u*decay), 1e-12)
	}
	assert.Equal(t, inf, s.Scale(1e-6+20.1*decay))
	assert.Less(t, math.Exp(-negligible), 1e-8)
}

// TestLinearScales: a straight piece is crossed in a few steps at least, wherever in it and however its corners are rounded.
func TestLinearScales(t *testing.T) {
	s := waveform(t, Pulse{High: 1, Start: 1e-3, Width: 2e-3, Edge: 0.8e-6, Every: 7e-3})
	assert.Equal(t, inf, s.Scale(0))
	at := 0.0
	for k := range 4000 {
		at = s.Corner(at)
		want := inf
		if k%4 == 0 || k%4 == 2 {
			want = linearPieceScale * 1e-6
		}
		require.InEpsilon(t, 1/want+1, 1/s.Scale(at)+1, 1e-6, "corner %d at %v", k, at)
		require.InEpsilon(t, 1/want+1, 1/s.Scale(at+3e-7)+1, 1e-6, "after corner %d at %v", k, at)
	}
}

func BenchmarkSignals(b *testing.B) {
	for name, s := range everyWaveform(b) {
		b.Run(name+"/value", func(b *testing.B) {
			at, sum := 0.0, 0.0
			for b.Loop() {
				at += 1e-9
				sum += s.At(at)
			}
		})
		b.Run(name+"/scale", func(b *testing.B) {
			at, sum := 0.0, 0.0
			for b.Loop() {
				at += 1e-9
				sum += s.Scale(at)
			}
		})
	}
}
