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
	for p := range w.pieces() {
		for k := range stateSamples {
			f(p.c.at((float64(k)+0.5)/stateSamples), p.length()/stateSamples)
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

// distinctStates returns the levels of the states of a waveform that has two, for what is wanted of it.
func (w *Waveform) distinctStates(wanted string) (low, high float64, err error) {
	low, high = w.States()
	switch {
	case math.IsNaN(high - low):
		err = &InputError{Message: "the waveform has no " + wanted + ": it is not a number everywhere"}
	case !(high > low):
		err = &InputError{Message: "the waveform has no " + wanted + ": it is constant"}
	}
	return low, high, err
}

// transition returns the time in s that the first complete transition takes between the marks. Its start is the last passage through
// the first mark before the other one is reached.
func (w *Waveform) transition(up bool) (float64, error) {
	name := "falling transition"
	if up {
		name = "rising transition"
	}
	low, high, err := w.distinctStates(name)
	if err != nil {
		return math.NaN(), err
	}
	begin, end := passing{level: low + lowMark*(high-low)}, passing{level: low + highMark*(high-low)}
	if !up {
		begin, end = end, begin
	}
	start := math.NaN()
	for p := range w.pieces() {
		passages := begin.through(p, up)
		for _, t := range end.through(p, up) {
			for _, b := range passages {
				if b <= t {
					start = b
				}
			}
			if !math.IsNaN(start) {
				return t - start, nil
			}
		}
		if n := len(passages); n > 0 {
			start = passages[n-1]
		}
	}
	return math.NaN(), &InputError{Message: fmt.Sprintf("the waveform has no complete %s in the window", name)}
}

// through returns the times in s at which a piece passes through the level in one direction.
func (s *passing) through(p *piece, up bool) (ts []float64) {
	s.each(p, func(t float64, rising bool) bool {
		if rising == up {
			ts = append(ts, t)
		}
		return true
	})
	return ts
}

// Overshoot returns how far the waveform goes beyond its states, as a share of the difference between them.
func (w *Waveform) Overshoot() (float64, error) {
	low, high, err := w.distinctStates("overshoot")
	if err != nil {
		return math.NaN(), err
	}
	top, _ := w.Peak()
	bottom, _ := w.Trough()
	return max(top-high, low-bottom, 0) / (high - low), nil
}
