package mna

import "math"

// The method takes a trapezoidal step over gamma h and a second-order backward differentiation over the rest: Bank, Coughran,
// Fichtner, Grosse, Rose & Smith, Transient simulation of silicon devices and circuits, IEEE Trans. Electron Devices 32, 1985, 1992-2007;
// Hosea & Shampine, Analysis and implementation of TR-BDF2, Appl. Numer. Math. 20, 1996, 21-37. With this gamma both stages
// have the same Jacobian and the method is L-stable. All of it is applied to the charges, never to capacitances.
const (
	gamma   = 2 - math.Sqrt2
	share   = gamma / 2      // weight of a stage's own slope
	earlier = math.Sqrt2 / 4 // weight of the slopes at the start and in the middle in the second stage

	// Weights of the slopes in the difference to the embedded third-order result (Hosea & Shampine, table 1).
	errorStart  = earlier - (1-earlier)/3
	errorMiddle = earlier - (3*earlier+1)/3
	errorEnd    = share - share/3

	trbdf2Order = 2
)

// trbdf2 is the TR-BDF2 method.
type trbdf2 struct {
	r        *integration
	control  control
	newton   stageNewton
	constant []float64

	// The step attempted runs over start, middle and finish; the two earlier points belong to the step before it. accept moves all of
	// them back by one step, after which the last step runs over earlierStart, earlierMiddle and start, and middle is the one before.
	earlierStart, earlierMiddle point
	start, middle, finish       point
	steps                       int // since the restart

	h float64 // s, of the step attempted
}

func newTRBDF2(r *integration) *trbdf2 {
	s := r.s
	return &trbdf2{
		r: r, control: newControl(trbdf2Order + 1), newton: stageNewton{r: r, curvature: math.Inf(1)}, constant: make([]float64, len(s.names)),
		earlierStart: s.newPoint(), earlierMiddle: s.newPoint(), start: s.newPoint(), middle: s.newPoint(), finish: s.newPoint(),
	}
}

func (m *trbdf2) restart(from *point) {
	m.start.t = from.t
	copy(m.start.x, from.x)
	copy(m.start.q, from.q)
	copy(m.start.rate, from.rate)
	m.steps = 0
	m.control.restart()
}

func (m *trbdf2) end() *point { return &m.start }

// attempt solves both stages of the step to end, in s.
func (m *trbdf2) attempt(end float64) error {
	a, b, x := &m.start, &m.middle, m.r.w.eval.X
	m.h = end - a.t
	alpha := 1 / (share * m.h)
	for i := range m.constant {
		m.constant[i] = -alpha*a.q[i] - a.rate[i]
	}
	t := a.t + gamma*m.h
	if m.steps > 0 {
		blend(x, t, &m.earlierStart, &m.earlierMiddle, a)
	} else {
		copy(x, a.x)
	}
	if err := m.stage(b, t, alpha); err != nil {
		return err
	}
	for i := range m.constant {
		m.constant[i] = -alpha * (a.q[i] + m.h*earlier*(a.rate[i]+b.rate[i]))
	}
	if m.steps > 0 {
		blend(x, end, &m.earlierStart, &m.earlierMiddle, a, b)
	} else {
		blend(x, end, a, b)
	}
	return m.stage(&m.finish, end, alpha)
}

// stage solves f + alpha q + constant = 0 at time t in s, from the prediction in the workspace.
func (m *trbdf2) stage(p *point, t, alpha float64) error {
	problem := problem{time: m.r.inside(t), drive: 1, alpha: alpha, constant: m.constant}
	if err := m.newton.solve(&problem); err != nil {
		return err
	}
	p.t = t
	copy(p.x, m.r.w.eval.X)
	copy(p.q, m.r.w.eval.Q)
	for i, q := range p.q {
		p.rate[i] = alpha*q + m.constant[i]
	}
	return nil
}

// judge estimates the error of every unknown at the end of the step and of its interpolation within.
//
// The estimate of the charges, the difference to the embedded third-order result, is carried to the unknowns by the Jacobian of the
// last stage, which also keeps it bounded for stiff components (Hosea & Shampine, section 3). That of the interpolation is the fourth divided
// difference.
func (m *trbdf2) judge() (float64, int, float64) {
	r := m.r
	first := r.s.first()
	update := r.w.update
	for i := range update {
		k := first + i
		update[i] = (errorStart*m.start.rate[k] + errorMiddle*m.middle.rate[k] + errorEnd*m.finish.rate[k]) / share
	}
	r.w.lu.Solve(update)
	r.w.work.Solves++
	bend := m.bend()
	ratio, worst := 0.0, 0
	for i, e := range update {
		k := first + i
		e = max(math.Abs(e), localShare/denseShare*math.Abs(bend.of(m, k))) // NaN stays
		e /= r.local(k, m.finish.x[k]-m.start.x[k])
		if !(e <= math.MaxFloat64) {
			return math.Inf(1), k, m.h * m.control.factor(math.Inf(1))
		}
		if e > ratio {
			ratio, worst = e, k
		}
	}
	return ratio, worst, m.h * m.control.factor(ratio)
}

// bending holds the weights of five points in the error of the cubic through the last four of them.
type bending [5]float64

// bend returns the weights at the place within the step where the error of the interpolation is largest. In the first step after a restart, short
// beside the scale of the signals, they are 0.
func (m *trbdf2) bend() bending {
	var b bending
	if m.steps == 0 {
		return b
	}
	t := [5]float64{m.earlierStart.t, m.earlierMiddle.t, m.start.t, m.middle.t, m.finish.t}
	// |u (u - gamma) (1 - u)| is largest at u = 0.25 and 0.82, where it is 0.063 and 0.035; the fourth factor is the distance from
	// the earlier middle.
	back := (t[2] - t[1]) / m.h
	largest := math.Max(0.063*(0.25+back), 0.035*(0.82+back)) * m.h * m.h * m.h * m.h
	for i := range b {
		b[i] = largest
		for j := range t {
			if j != i {
				b[i] /= t[i] - t[j]
			}
		}
	}
	return b
}

func (b *bending) of(m *trbdf2, k int) float64 {
	return b[0]*m.earlierStart.x[k] + b[1]*m.earlierMiddle.x[k] + b[2]*m.start.x[k] + b[3]*m.middle.x[k] + b[4]*m.finish.x[k]
}

func (m *trbdf2) accept() {
	m.control.accept()
	m.earlierStart, m.start, m.finish = m.start, m.finish, m.earlierStart
	m.earlierMiddle, m.middle = m.middle, m.earlierMiddle
	m.steps++
}

// interpolate fills x with the cubic through the three points of the last step and the middle of the step before, or with the parabola through the
// three points in the first step after a restart.
func (m *trbdf2) interpolate(t float64, x []float64) {
	if m.steps > 1 {
		blend(x, t, &m.middle, &m.earlierStart, &m.earlierMiddle, &m.start)
		return
	}
	blend(x, t, &m.earlierStart, &m.earlierMiddle, &m.start)
}

// blend fills x with the polynomial through the points at time t in s (Lagrange).
func blend(x []float64, t float64, points ...*point) {
	clear(x)
	for i, p := range points {
		weight := 1.0
		for j, o := range points {
			if j != i {
				weight *= (t - o.t) / (p.t - o.t)
			}
		}
		for k, v := range p.x {
			x[k] += weight * v
		}
	}
}
