package analyses

import (
	"iter"
	"math"
	"slices"
	"sort"
)

// Waveform is a quantity over time: a cubic on every accepted step of the integrator, given by its values at
// four equally spaced points of the step. It may jump between two steps, at a
// corner of a stimulus. Reducers work on the cubics, so that no result depends on where steps happen to end.
type Waveform struct {
	knots  []float64 // s, n+1 ascending times
	values []float64 // 4n values: at 0, 1/3, 2/3 and 1 of each step
}

// steps returns the number of steps.
func (w *Waveform) steps() int { return max(0, len(w.knots)-1) }

// set makes p the cubic of step i.
func (w *Waveform) set(p *piece, i int) {
	p.set(w.knots[i], w.knots[i+1], (*samples)(w.values[samplesPerStep*i:]))
}

// pieces returns the cubics in the order of time. Each is valid until the next is asked for.
func (w *Waveform) pieces() iter.Seq[*piece] {
	return func(yield func(*piece) bool) {
		var p piece
		for i := range w.steps() {
			if w.set(&p, i); !yield(&p) {
				return
			}
		}
	}
}

// append adds a piece that begins where w ends.
func (w *Waveform) append(p *piece) {
	if len(w.knots) == 0 {
		w.knots = append(w.knots, p.t0)
	}
	w.knots = append(w.knots, p.t1)
	w.values = append(w.values, p.y[:]...)
}

// accumulated gives all pieces of w to a and returns it.
func accumulated[A accumulator](w *Waveform, a A) A {
	for p := range w.pieces() {
		a.add(p)
	}
	return a
}

// Window returns the first and the last time of the waveform in s, NaN of an empty one.
func (w *Waveform) Window() (from, until float64) {
	if len(w.knots) == 0 {
		return math.NaN(), math.NaN()
	}
	return w.knots[0], w.knots[len(w.knots)-1]
}

func (w *Waveform) window() window {
	from, until := w.Window()
	return window{from, until}
}

// Times returns the ends of the steps in s, a fresh slice of n+1 times.
func (w *Waveform) Times() []float64 { return append([]float64(nil), w.knots...) }

// At returns the value at time t in s, and an [InputError] if t lies outside the window. At a
// jump it is the value after it.
func (w *Waveform) At(t float64) (float64, error) {
	a := newInstant(w.window(), t)
	if t >= a.from && t <= a.until {
		var p piece
		i := sort.Search(len(w.knots), func(i int) bool { return w.knots[i] > t }) - 1
		w.set(&p, min(i, w.steps()-1))
		a.add(&p)
	}
	return a.read()
}

// Peak returns the largest value and the time in s at which it is first met.
func (w *Waveform) Peak() (value, at float64) { return accumulated(w, newExtremes()).peak() }

// Trough returns the smallest value and the time in s at which it is first met.
func (w *Waveform) Trough() (value, at float64) { return accumulated(w, newExtremes()).trough() }

// PeakToPeak returns the largest value less the smallest.
func (w *Waveform) PeakToPeak() float64 { return accumulated(w, newExtremes()).difference() }

// Mean returns the time average over the window.
func (w *Waveform) Mean() float64 { return accumulated(w, newIntegral(w.window())).mean() }

// RMS returns the root of the mean square over the window, the mean included.
func (w *Waveform) RMS() float64 { return accumulated(w, newPower(w.window())).root() }

// Slew returns the largest magnitude of the slope, per second. A jump between two steps does not count.
func (w *Waveform) Slew() float64 { return accumulated(w, newSteepest()).value }

// Crossing returns the time in s of the n-th passage through level, counted from 1, in either direction.
// A jump through the level counts. It is NaN if the waveform is not a number before that time.
func (w *Waveform) Crossing(level float64, n int) (float64, error) {
	return accumulated(w, newCrossing(level, n)).time()
}

// Outside returns the time in s that the waveform spends below low or above high.
func (w *Waveform) Outside(low, high float64) float64 {
	return accumulated(w, newOutside(low, high)).time.value()
}

// Drift returns the mean of the last tenth of the window less that of the first.
func (w *Waveform) Drift() float64 { return accumulated(w, newDrift(w.window())).rise() }

// Tone returns the component of the waveform at frequency F in Hz: amplitude (peak) and phase, as the complex A
// with A = a exp(j p) for a sin(2 pi F t + p), t in absolute time.
//
// It is a least-squares fit of a constant, a slope and the tone, weighted by a raised cosine
// over the window (Harris, On the use of windows for harmonic analysis, Proc. IEEE 66, 1978), so that neither a broken number
// of periods nor other components far from F matter.
func (w *Waveform) Tone(frequency float64) (complex128, error) {
	return accumulated(w, newToneFit(w.window(), frequency)).tone()
}

// Settling returns the time in s, from the start of the window, after which the waveform stays within
// the given distance of its last value.
func (w *Waveform) Settling(within float64) float64 {
	if w.steps() == 0 {
		return math.NaN()
	}
	from, _ := w.Window()
	final := w.values[len(w.values)-1]
	var p piece
	for i := w.steps() - 1; i >= 0; i-- {
		w.set(&p, i)
		switch u := p.c.leaves(final-within, final+within); {
		case p.isNaN():
			return math.NaN()
		case u > 0:
			return p.time(u) - from
		}
	}
	return 0
}

// leaves returns the last point of (0, 1] that c is outside low..high at or enters it at; 0 if it stays inside.
func (c *cubic) leaves(low, high float64) float64 {
	if end := c.at(1); end < low || end > high {
		return 1
	}
	var buf [2 * samplesPerStep]float64
	marks := c.crossings(high, c.crossings(low, buf[:0]))
	if len(marks) == 0 {
		return 0
	}
	return slices.Max(marks)
}
