package analyses

import (
	"fmt"
	"math"
	"slices"
)

// An accumulator makes a result of the pieces of a waveform, which it is given in the order of time, each piece once. It keeps nothing
// of them but what the result needs, so that the length of a run does not matter.
type accumulator interface {
	add(p *piece)
}

// window is the time over which a waveform is looked at.
type window struct {
	from, until float64 // s
}

// span returns the length of the window in s.
func (w window) span() float64 { return w.until - w.from }

// compensated is a sum that keeps the rounding of its additions (Neumaier, Rundungsfehleranalyse einiger Verfahren zur Summation endlicher
// Summen, Z. Angew. Math. Mech. 54, 1974, 39-51, algorithm IV): the error of ten million terms is that of a few.
type compensated struct{ sum, lost float64 }

func (s *compensated) add(x float64) {
	t := s.sum + x
	if math.Abs(s.sum) >= math.Abs(x) {
		s.lost += (s.sum - t) + x
	} else {
		s.lost += (x - t) + s.sum
	}
	s.sum = t
}

// value returns the sum; an infinite one has no rounding.
func (s *compensated) value() float64 {
	if math.IsInf(s.sum, 0) {
		return s.sum
	}
	return s.sum + s.lost
}

// integral accumulates the integral over a window, exact for the pieces' cubics.
type integral struct {
	window
	sum compensated
}

func newIntegral(w window) *integral { return &integral{window: w} }

func (a *integral) add(p *piece) {
	lo, hi := max(a.from, p.t0), min(a.until, p.t1)
	if lo >= hi {
		return
	}
	h := p.length()
	part := p.c.primitive((hi - p.t0) / h)
	if lo > p.t0 {
		part -= p.c.primitive((lo - p.t0) / h)
	}
	a.sum.add(h * part)
}

// mean returns the average over the window.
func (a *integral) mean() float64 { return a.sum.value() / a.span() }

// power accumulates the mean square over a window.
type power struct {
	window
	sum compensated
}

func newPower(w window) *power { return &power{window: w} }

func (a *power) add(p *piece) {
	part := 0.0
	for _, g := range gauss4 {
		v := p.c.at(g[0])
		part += g[1] * v * v
	}
	a.sum.add(p.length() * part)
}

// root returns the root of the mean square.
func (a *power) root() float64 { return math.Sqrt(a.sum.value() / a.span()) }

// drift accumulates the means of the first and the last tenth of a window.
type drift struct{ first, last integral }

func newDrift(w window) *drift {
	tenth := w.span() / 10
	return &drift{first: integral{window: window{w.from, w.from + tenth}}, last: integral{window: window{w.until - tenth, w.until}}}
}

func (a *drift) add(p *piece) {
	a.first.add(p)
	a.last.add(p)
}

// rise returns the mean of the last tenth less that of the first.
func (a *drift) rise() float64 { return a.last.mean() - a.first.mean() }

// extreme is the largest of numbers and the time in s at which it was first met. NaN is larger than any.
type extreme struct {
	value, at float64
	some      bool // seen
}

func newExtreme() extreme { return extreme{value: math.NaN(), at: math.NaN()} }

// open reports whether v would change e.
func (e *extreme) open(v float64) bool { return !e.some || !math.IsNaN(e.value) && !(v <= e.value) }

func (e *extreme) note(v, at float64) {
	if e.open(v) {
		e.value, e.at, e.some = v, at, true
	}
}

// extremes accumulates the largest and the smallest value.
type extremes struct {
	high extreme
	low  extreme // of the values' negatives
}

func newExtremes() *extremes { return &extremes{newExtreme(), newExtreme()} }

func (a *extremes) add(p *piece) {
	low, high := p.c.hull()
	if !a.high.open(high) && !a.low.open(-low) {
		return
	}
	var buf [4]float64
	for _, u := range p.c.turns(buf[:0]) {
		v, t := p.c.at(u), p.time(u)
		a.high.note(v, t)
		a.low.note(-v, t)
	}
}

// peak and trough return the extremes and the times in s at which they are first met.
func (a *extremes) peak() (value, at float64)   { return a.high.value, a.high.at }
func (a *extremes) trough() (value, at float64) { return -a.low.value, a.low.at }

// difference returns the largest value less the smallest.
func (a *extremes) difference() float64 { return a.high.value + a.low.value }

// steepest accumulates the largest magnitude of the slope, per second. A jump between two pieces has none.
type steepest struct{ extreme }

func newSteepest() *steepest { return &steepest{newExtreme()} }

func (a *steepest) add(p *piece) {
	s := max(math.Abs(p.c.slope(0)), math.Abs(p.c.slope(1)))
	if u := -p.c[2] / (3 * p.c[3]); u > 0 && u < 1 {
		s = max(s, math.Abs(p.c.slope(u)))
	}
	a.note(s/p.length(), p.t0)
}

// instant reads the value at one time, after a jump there.
type instant struct {
	window
	t     float64 // s
	value float64
}

func newInstant(w window, t float64) *instant { return &instant{w, t, math.NaN()} }

func (a *instant) add(p *piece) {
	if a.t >= p.t0 && a.t <= p.t1 {
		a.value = p.at(a.t)
	}
}

func (a *instant) read() (float64, error) {
	if !(a.t >= a.from && a.t <= a.until) {
		return math.NaN(), &InputError{Message: fmt.Sprintf("the time %s lies outside the window %s..%s", showSeconds(a.t), showSeconds(a.from), showSeconds(a.until))}
	}
	return a.value, nil
}

// passing follows a waveform through a level. A jump through the level counts.
type passing struct {
	level        float64
	begun, below bool
}

// each calls yield with the time in s of every passage within a piece, its start included, and whether it is upwards, until yield says false.
func (s *passing) each(p *piece, yield func(t float64, up bool) bool) bool {
	now := p.c[0] < s.level
	if !s.begun {
		s.begun, s.below = true, now
	}
	if now != s.below {
		if s.below = now; !yield(p.t0, !now) {
			return false
		}
	}
	if low, high := p.c.hull(); low >= s.level || high < s.level {
		return true
	}
	var marks [samplesPerStep]float64
	for _, u := range p.c.crossings(s.level, marks[:0]) {
		if s.below = !s.below; !yield(p.time(u), !s.below) {
			return false
		}
	}
	return true
}

// crossing finds the n-th passage through a level, counted from 1, in either direction.
type crossing struct {
	passing
	n, count int
	at       float64 // s; NaN until found, or if the waveform was not a number before
	lost     bool
}

func newCrossing(level float64, n int) *crossing {
	return &crossing{passing: passing{level: level}, n: n, at: math.NaN()}
}

func (a *crossing) add(p *piece) {
	if a.lost || a.count >= a.n {
		return
	}
	if a.lost = p.isNaN(); a.lost {
		return
	}
	a.each(p, func(t float64, _ bool) bool {
		if a.count++; a.count == a.n {
			a.at = t
		}
		return a.count < a.n
	})
}

func (a *crossing) time() (float64, error) {
	if a.count < a.n && !a.lost {
		return math.NaN(), &InputError{Message: fmt.Sprintf("the level is crossed %s only, not %d times", times(a.count), a.n)}
	}
	return a.at, nil
}

func times(n int) string {
	switch n {
	case 0:
		return "never"
	case 1:
		return "once"
	}
	return fmt.Sprintf("%d times", n)
}

// outside accumulates the time in s spent outside a range. Where the waveform is not a number, it is outside.
type outside struct {
	low, high float64
	time      compensated
}

func newOutside(low, high float64) *outside { return &outside{low: low, high: high} }

func (a *outside) add(p *piece) {
	if low, high := p.c.hull(); low >= a.low && high <= a.high {
		return
	}
	var buf [2 + 2*samplesPerStep]float64
	marks := append(buf[:0], 0, 1)
	marks = p.c.crossings(a.low, marks)
	marks = p.c.crossings(a.high, marks)
	slices.Sort(marks)
	for k := 1; k < len(marks); k++ {
		if v := p.c.at((marks[k-1] + marks[k]) / 2); !(v >= a.low && v <= a.high) {
			a.time.add(p.length() * (marks[k] - marks[k-1]))
		}
	}
}
