package analyses

import "math"

// samplesPerStep is the number of values kept of each step: those of a cubic.
const samplesPerStep = 4

// samples are the values of a quantity at four equally spaced points of a step, its ends included.
type samples [samplesPerStep]float64

// isNaN reports whether any of the samples is not a number.
func (y *samples) isNaN() bool { return math.IsNaN(y[0] + y[1] + y[2] + y[3]) }

// piece is a waveform over a time in which it is one cubic.
type piece struct {
	c      cubic
	y      samples
	t0, t1 float64 // s
}

// set makes p the cubic through y from t0 to t1 in s.
func (p *piece) set(t0, t1 float64, y *samples) {
	p.c, p.y, p.t0, p.t1 = newCubic(y[:]), *y, t0, t1
}

// line makes l the straight line between samples k and k+1 of p. It reports false if times are too coarse to tell its ends apart.
func (p *piece) line(k int, l *piece) bool {
	const n = samplesPerStep - 1
	a, d := p.y[k], p.y[k+1]-p.y[k]
	l.set(p.time(float64(k)/n), p.time(float64(k+1)/n), &samples{a, a + d/3, a + d*2/3, p.y[k+1]})
	return l.t1 > l.t0
}

// length returns the length in s.
func (p *piece) length() float64 { return p.t1 - p.t0 }

// at returns the value at time t in s.
func (p *piece) at(t float64) float64 { return p.c.at((t - p.t0) / p.length()) }

// time returns the time in s at u in 0..1.
func (p *piece) time(u float64) float64 {
	if u == 1 {
		return p.t1
	}
	return p.t0 + u*p.length()
}

// isNaN reports whether the piece is not a number somewhere.
func (p *piece) isNaN() bool { return p.y.isNaN() }

// cubic is c[0] + c[1] u + c[2] u^2 + c[3] u^3 on u in 0..1.
type cubic [4]float64

// newCubic interpolates y at u = 0, 1/3, 2/3, 1 (Lagrange). It takes differences first, so that a constant stays one and a large mean does not
// blur what is small beside it.
func newCubic(y []float64) cubic {
	d1, d2, d3 := y[1]-y[0], y[2]-y[0], y[3]-y[0]
	return cubic{y[0], 9*d1 - 4.5*d2 + d3, -22.5*d1 + 18*d2 - 4.5*d3, 13.5*d1 - 13.5*d2 + 4.5*d3}
}

func (c *cubic) at(u float64) float64 { return c[0] + u*(c[1]+u*(c[2]+u*c[3])) }

// slope is the derivative by u.
func (c *cubic) slope(u float64) float64 { return c[1] + u*(2*c[2]+u*3*c[3]) }

// primitive is the integral of c over 0..u.
func (c *cubic) primitive(u float64) float64 {
	return u * (c[0] + u*(c[1]/2+u*(c[2]/3+u*c[3]/4)))
}

// hull returns numbers that c stays between on 0..1: its smallest and its largest coefficient in the basis of Bernstein (Farouki & Rajan, On the
// numerical condition of polynomials in Bernstein form, Computer Aided Geometric Design 4, 1987, 191-216). Both are NaN if any coefficient is.
func (c *cubic) hull() (low, high float64) {
	b1 := c[0] + c[1]/3
	b2 := b1 + (c[1]+c[2])/3
	b3 := c[0] + c[1] + c[2] + c[3]
	return min(c[0], b1, b2, b3), max(c[0], b1, b2, b3)
}

// turns returns the points of 0..1 between which c is monotonic, both ends included, in buf.
func (c *cubic) turns(buf []float64) []float64 {
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
func (c *cubic) crossings(level float64, out []float64) []float64 {
	var buf [4]float64
	turns := c.turns(buf[:0])
	for i := 1; i < len(turns); i++ {
		a, b := turns[i-1], turns[i]
		if (c.at(a) < level) != (c.at(b) < level) {
			out = append(out, c.bisect(level, a, b))
		}
	}
	return out
}

// bisect returns where c passes through level in a..b, where it does so once, to the last bit of the larger end.
func (c *cubic) bisect(level, a, b float64) float64 {
	below := c.at(a) < level
	for range 200 {
		m := a + (b-a)/2
		if m == a || m == b {
			break
		}
		if (c.at(m) < level) == below {
			a = m
		} else {
			b = m
		}
	}
	return b
}

// gauss4 holds the nodes and weights of the Gauss-Legendre rule of four points on 0..1
// (Abramowitz & Stegun, table 25.4), exact for the square of a cubic.
var gauss4 = [4][2]float64{
	{0.5 - 0.43056815579702628761, 0.17392742256872692869},
	{0.5 - 0.16999052179242813145, 0.32607257743127307131},
	{0.5 + 0.16999052179242813145, 0.32607257743127307131},
	{0.5 + 0.43056815579702628761, 0.17392742256872692869},
}
