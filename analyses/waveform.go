package analyses

import (
	"fmt"
	"math"
	"sort"
)

// Waveform is a quantity over time: a cubic on every accepted step of the integrator, given by its values at
// four equally spaced points of the step. It may jump between two steps, at a
// corner of a stimulus. Reducers work on the cubics, so that no result depends on where steps happen to end.
type Waveform struct {
	knots  []float64 // s, n+1 ascending times
	values []float64 // 4n values: at 0, 1/3, 2/3 and 1 of each step
}

// samplesPerStep is the number of values kept of each step: those of a cubic.
const samplesPerStep = 4

// cubic is c[0] + c[1] u + c[2] u^2 + c[3] u^3 on u in 0..1.
type cubic [4]float64

// newCubic interpolates y at u = 0, 1/3, 2/3, 1 (Lagrange).
func newCubic(y []float64) cubic {
	return cubic{
		y[0],
		-5.5*y[0] + 9*y[1] - 4.5*y[2] + y[3],
		9*y[0] - 22.5*y[1] + 18*y[2] - 4.5*y[3],
		-4.5*y[0] + 13.5*y[1] - 13.5*y[2] + 4.5*y[3],
	}
}

func (c cubic) at(u float64) float64 { return c[0] + u*(c[1]+u*(c[2]+u*c[3])) }

// slope is the derivative by u.
func (c cubic) slope(u float64) float64 { return c[1] + u*(2*c[2]+u*3*c[3]) }

// turns returns the points of 0..1 between which c is monotonic, both ends included, in buf.
func (c cubic) turns(buf []float64) []float64 {
	buf = append(buf[:0], 0)
	r1, r2, n := quadraticRoots(3*c[3], 2*c[2], c[1])
	if n == 2 && r1 > r2 {
		r1, r2 = r2, r1
	}
	if n >= 1 && r1 > 0 && r1 < 1 {
		buf = append(buf, r1)
	}
	if n == 2 && r2 > 0 && r2 < 1 && r2 > buf[len(buf)-1] {
		buf = append(buf, r2)
	}
	return append(buf, 1)
}

// quadraticRoots returns the n real roots of a u^2 + b u + c without cancellation.
func quadraticRoots(a, b, c float64) (r1, r2 float64, n int) {
	if a == 0 {
		if b == 0 {
			return 0, 0, 0
		}
		return -c / b, 0, 1
	}
	d := b*b - 4*a*c
	if !(d >= 0) {
		return 0, 0, 0
	}
	q := -0.5 * (b + math.Copysign(math.Sqrt(d), b))
	if q == 0 {
		return 0, 0, 1
	}
	return q / a, c / q, 2
}

// crossings appends to out the points of (0, 1] where c passes through level, in order. A point of
// touching without passing does not count.
func (c cubic) crossings(level float64, out []float64) []float64 {
	var buf [4]float64
	turns := c.turns(buf[:0])
	for i := 1; i < len(turns); i++ {
		a, b := turns[i-1], turns[i]
		fa, fb := c.at(a)-level, c.at(b)-level
		if (fa < 0) != (fb < 0) {
			out = append(out, bisect(func(u float64) float64 { return c.at(u) - level }, a, b))
		}
	}
	return out
}

// bisect returns the root of f in a..b, where f changes its sign once, to the last bit of the larger end.
func bisect(f func(float64) float64, a, b float64) float64 {
	negative := f(a) < 0
	for range 200 {
		m := a + (b-a)/2
		if m == a || m == b {
			break
		}
		if (f(m) < 0) == negative {
			a = m
		} else {
			b = m
		}
	}
	return b
}

// steps returns the number of steps.
func (w *Waveform) steps() int { return len(w.knots) - 1 }

// piece returns the cubic of step i, its start in s and its length in s.
func (w *Waveform) piece(i int) (c cubic, t0, h float64) {
	return newCubic(w.values[samplesPerStep*i : samplesPerStep*i+samplesPerStep]), w.knots[i], w.knots[i+1] - w.knots[i]
}

// Window returns the first and the last time of the waveform in s.
func (w *Waveform) Window() (from, until float64) { return w.knots[0], w.knots[len(w.knots)-1] }

// Times returns the ends of the steps in s, a fresh slice of n+1 times.
func (w *Waveform) Times() []float64 { return append([]float64(nil), w.knots...) }

// At returns the value at time t in s, and an [InputError] if t lies outside the window. At a
// jump it is the value after it.
func (w *Waveform) At(t float64) (float64, error) {
	from, until := w.Window()
	if !(t >= from && t <= until) {
		return math.NaN(), &InputError{Message: fmt.Sprintf("the time %s lies outside the window %s..%s", showSeconds(t), showSeconds(from), showSeconds(until))}
	}
	i := sort.Search(len(w.knots), func(i int) bool { return w.knots[i] > t }) - 1
	i = min(i, w.steps()-1)
	c, t0, h := w.piece(i)
	return c.at((t - t0) / h), nil
}

// extreme returns the largest value of sign*w and the time at which it is met first.
func (w *Waveform) extreme(sign float64) (value, at float64) {
	value, at = math.NaN(), math.NaN()
	var buf [4]float64
	for i := range w.steps() {
		c, t0, h := w.piece(i)
		for _, u := range c.turns(buf[:0]) {
			if v := sign * c.at(u); !(v <= value) {
				if math.IsNaN(v) {
					return math.NaN(), t0 + u*h
				}
				value, at = v, t0+u*h
			}
		}
	}
	return sign * value, at
}

// Peak returns the largest value and the time in s at which it is first met.
func (w *Waveform) Peak() (value, at float64) { return w.extreme(1) }

// Trough returns the smallest value and the time in s at which it is first met.
func (w *Waveform) Trough() (value, at float64) { return w.extreme(-1) }

// PeakToPeak returns the largest value less the smallest.
func (w *Waveform) PeakToPeak() float64 {
	high, _ := w.Peak()
	low, _ := w.Trough()
	return high - low
}

// Mean returns the time average over the window.
func (w *Waveform) Mean() float64 {
	from, until := w.Window()
	return w.integral(from, until) / (until - from)
}

// integral returns the integral over a..b within the window, exact for the cubics.
func (w *Waveform) integral(a, b float64) float64 {
	sum := 0.0
	for i := range w.steps() {
		c, t0, h := w.piece(i)
		lo, hi := max(a, t0), min(b, t0+h)
		if lo >= hi {
			continue
		}
		sum += h * (c.primitive((hi-t0)/h) - c.primitive((lo-t0)/h))
	}
	return sum
}

// primitive is the integral of c over 0..u.
func (c cubic) primitive(u float64) float64 {
	return u * (c[0] + u*(c[1]/2+u*(c[2]/3+u*c[3]/4)))
}

// gauss4 holds the nodes and weights of the Gauss-Legendre rule of four points on 0..1
// (Abramowitz & Stegun, table 25.4), exact for the square of a cubic.
var gauss4 = [4][2]float64{
	{0.5 - 0.43056815579702628761, 0.17392742256872692869},
	{0.5 - 0.16999052179242813145, 0.32607257743127307131},
	{0.5 + 0.16999052179242813145, 0.32607257743127307131},
	{0.5 + 0.43056815579702628761, 0.17392742256872692869},
}

// RMS returns the root of the mean square over the window, the mean included.
func (w *Waveform) RMS() float64 {
	sum := 0.0
	for i := range w.steps() {
		c, _, h := w.piece(i)
		for _, g := range gauss4 {
			v := c.at(g[0])
			sum += h * g[1] * v * v
		}
	}
	from, until := w.Window()
	return math.Sqrt(sum / (until - from))
}

// Slew returns the largest magnitude of the slope, per second. A jump between two steps does not count.
func (w *Waveform) Slew() float64 {
	largest := 0.0
	for i := range w.steps() {
		c, _, h := w.piece(i)
		s := max(math.Abs(c.slope(0)), math.Abs(c.slope(1)))
		if u := -c[2] / (3 * c[3]); u > 0 && u < 1 {
			s = max(s, math.Abs(c.slope(u)))
		}
		largest = max(largest, s/h)
	}
	return largest
}

// Crossing returns the time in s of the n-th passage through level, counted from 1, in either direction.
// A jump through the level counts.
func (w *Waveform) Crossing(level float64, n int) (float64, error) {
	count := 0
	found := math.NaN()
	w.eachCrossing(level, func(t float64, _ bool) bool {
		if count++; count == n {
			found = t
			return false
		}
		return true
	})
	if count < n {
		return found, &InputError{Message: fmt.Sprintf("the level is crossed %s only, not %d times", times(count), n)}
	}
	return found, nil
}

// eachCrossing calls yield with the time of every passage through level and whether it is upwards, until yield says false.
func (w *Waveform) eachCrossing(level float64, yield func(t float64, up bool) bool) {
	var buf []float64
	below := w.values[0] < level
	for i := range w.steps() {
		c, t0, h := w.piece(i)
		if now := c.at(0) < level; now != below {
			if below = now; !yield(t0, !now) {
				return
			}
		}
		buf = c.crossings(level, buf[:0])
		for _, u := range buf {
			if below = !below; !yield(t0+u*h, !below) {
				return
			}
		}
	}
}

// Outside returns the time in s that the waveform spends below low or above high.
func (w *Waveform) Outside(low, high float64) float64 {
	total := 0.0
	var marks []float64
	for i := range w.steps() {
		c, _, h := w.piece(i)
		marks = append(marks[:0], 0, 1)
		marks = c.crossings(low, marks)
		marks = c.crossings(high, marks)
		sort.Float64s(marks)
		for k := 1; k < len(marks); k++ {
			if v := c.at((marks[k-1] + marks[k]) / 2); !(v >= low && v <= high) {
				total += h * (marks[k] - marks[k-1])
			}
		}
	}
	return total
}

// Settling returns the time in s, from the start of the window, after which the waveform stays within
// the given distance of its last value.
func (w *Waveform) Settling(within float64) float64 {
	from, _ := w.Window()
	final := w.values[len(w.values)-1]
	for i := w.steps() - 1; i >= 0; i-- {
		c, t0, h := w.piece(i)
		marks := c.crossings(final-within, nil)
		marks = c.crossings(final+within, marks)
		if math.Abs(c.at(1)-final) > within {
			return t0 + h - from
		}
		if len(marks) > 0 {
			sort.Float64s(marks)
			return t0 + marks[len(marks)-1]*h - from
		}
	}
	return 0
}

// Drift returns the mean of the last tenth of the window less that of the first.
func (w *Waveform) Drift() float64 {
	from, until := w.Window()
	tenth := (until - from) / 10
	return (w.integral(until-tenth, until) - w.integral(from, from+tenth)) / tenth
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
