package analyses

import (
	"fmt"
	"math"
)

// The levels and transitions of a waveform follow IEEE Std 181-2011, clause 5 (IEC 60469:2013): the
// low and the high state are the most frequented levels of the lower and the upper half of its range.
const (
	stateBins    = 200  // of the histogram over the range
	stateSamples = 8    // of each step in the histogram
	stateShare   = 0.01 // values within this share of the range around the mode give the state's mean
	lowMark      = 0.1  // of the way from the low to the high state: the start of a rise
	highMark     = 0.9
)

// States returns the levels of the low and the high state.
func (w *Waveform) States() (low, high float64) {
	bottom, _ := w.Trough()
	top, _ := w.Peak()
	if !(top > bottom) {
		return bottom, top
	}
	weights := w.histogram(bottom, top)
	half := stateBins / 2
	mode := func(a, b int) float64 {
		best := a
		for k := a; k < b; k++ {
			if weights[k] > weights[best] {
				best = k
			}
		}
		return bottom + (float64(best)+0.5)*(top-bottom)/stateBins
	}
	spread := stateShare * (top - bottom)
	return w.meanNear(mode(0, half), spread), w.meanNear(mode(half, stateBins), spread)
}

// histogram returns the time spent in each of stateBins equal bins from bottom to top.
func (w *Waveform) histogram(bottom, top float64) [stateBins]float64 {
	var weights [stateBins]float64
	w.eachSample(func(v, dt float64) {
		k := int(stateBins * (v - bottom) / (top - bottom))
		weights[max(0, min(stateBins-1, k))] += dt
	})
	return weights
}

// eachSample calls f with stateSamples values of each step and the time each stands for.
func (w *Waveform) eachSample(f func(v, dt float64)) {
	for i := range w.steps() {
		c, _, h := w.piece(i)
		for k := range stateSamples {
			f(c.at((float64(k)+0.5)/stateSamples), h/stateSamples)
		}
	}
}

// meanNear returns the time average of the values within spread of level.
func (w *Waveform) meanNear(level, spread float64) float64 {
	sum, time := 0.0, 0.0
	w.eachSample(func(v, dt float64) {
		if math.Abs(v-level) <= spread {
			sum += v * dt
			time += dt
		}
	})
	if time == 0 {
		return level
	}
	return sum / time
}

// Rise returns the time in s that the first rising transition takes from 10 % to 90 % of
// the way from the low to the high state.
func (w *Waveform) Rise() (float64, error) { return w.transition(true) }

// Fall returns the time in s that the first falling transition takes from 90 % to 10 %.
func (w *Waveform) Fall() (float64, error) { return w.transition(false) }

func (w *Waveform) transition(up bool) (float64, error) {
	low, high := w.States()
	begin, end := low+lowMark*(high-low), low+highMark*(high-low)
	name := "rising"
	if !up {
		begin, end, name = end, begin, "falling"
	}
	if !(high > low) {
		return math.NaN(), &InputError{Message: "the waveform has no " + name + " transition: it is constant"}
	}
	// The start is the last passage through the first mark before the other one is reached.
	finish := math.NaN()
	start := math.NaN()
	w.eachCrossing(end, func(t float64, rising bool) bool {
		if rising != up {
			return true
		}
		w.eachCrossing(begin, func(b float64, r bool) bool {
			if b > t {
				return false
			}
			if r == up {
				start = b
			}
			return true
		})
		finish = t
		return math.IsNaN(start)
	})
	if math.IsNaN(start) {
		return math.NaN(), &InputError{Message: fmt.Sprintf("the waveform has no complete %s transition in the window", name)}
	}
	return finish - start, nil
}

// Overshoot returns how far the waveform goes beyond its states, as a share of the difference between them.
func (w *Waveform) Overshoot() (float64, error) {
	low, high := w.States()
	if !(high > low) {
		return math.NaN(), &InputError{Message: "the waveform has no overshoot: it is constant"}
	}
	top, _ := w.Peak()
	bottom, _ := w.Trough()
	return max(top-high, low-bottom, 0) / (high - low), nil
}
