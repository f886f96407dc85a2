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

	// errorConstant is the error of a step over h^3 times the third derivative (Bank et al., equation 29, for this gamma).
	errorConstant = (-3*gamma*gamma + 4*gamma - 2) / (12 * (2 - gamma))

	trbdf2Order = 2
	// trbdf2Share is the share of the accuracy that is allowed as the error of a step: errors of many steps add up.
	trbdf2Share = 0.07
)

// trbdf2 is the TR-BDF2 method.
type trbdf2 struct {
	r        *integration
	control  control
	newton   stageNewton
	constant []float64
	// Of the free unknowns: the error at the end of the step, what it leaves behind, and rounding.
	whole, left, noise []float64

	// The step attempted runs over start, middle and finish; the two earlier points belong to the step before it. accept moves all of
	// them back by one step, after which the last step runs over earlierStart, earlierMiddle and start, and middle is the one before.
	earlierStart, earlierMiddle point
	start, middle, finish       point
	steps                       int  // since the restart
	open                        bool // an attempt that was not accepted

	h float64 // s, of the step attempted
}

func newTRBDF2(r *integration) *trbdf2 {
	s, free := r.s, len(r.s.names)-r.s.first()
	return &trbdf2{
		r: r, control: newControl(trbdf2Order + 1), newton: newStageNewton(r), constant: make([]float64, len(s.names)),
		whole: make([]float64, free), left: make([]float64, free), noise: make([]float64, free),
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
	m.newton.forget()
}

func (m *trbdf2) end() *point { return &m.start }

// attempt solves both stages of the step to end, in s.
func (m *trbdf2) attempt(end float64) error {
	a, b, x := &m.start, &m.middle, m.r.w.eval.X
	if m.open {
		m.newton.forget()
	}
	m.open = true
	m.h = end - a.t
	alpha := 1 / (share * m.h)
	for i, rate := range a.rate {
		m.constant[i] = -rate
	}
	t := a.t + gamma*m.h
	if m.steps > 0 {
		blend(x, m.r.free, t, &m.earlierStart, &m.earlierMiddle, a)
	} else {
		copy(x, a.x)
	}
	if err := m.stage(b, t, alpha); err != nil {
		return err
	}
	for i, rate := range a.rate {
		m.constant[i] = -earlier / share * (rate + b.rate[i])
	}
	if m.steps > 0 {
		blend(x, m.r.free, end, &m.earlierStart, &m.earlierMiddle, a, b)
	} else {
		blend(x, m.r.free, end, a, b)
	}
	return m.stage(&m.finish, end, alpha)
}

// stage solves f + constant + alpha (q - q(start)) = 0 at time t in s, from the prediction in the workspace.
func (m *trbdf2) stage(p *point, t, alpha float64) error {
	problem := problem{time: m.r.inside(t), drive: 1, alpha: alpha, constant: m.constant, charge: m.start.q}
	if err := m.newton.solve(&problem); err != nil {
		return err
	}
	m.r.w.carryCurrents(m.newton.update)
	p.t = t
	copy(p.x, m.r.w.eval.X)
	copy(p.q, m.r.w.eval.Q)
	p.setRate(m.r.w.eval.F)
	return nil
}

// judge estimates the error of every unknown at the end of the step and of its interpolation within.
//
// The estimate of the charges, the difference to the embedded third-order result, is carried to the unknowns by the Jacobian of the
// last stage, which also keeps it bounded for stiff components (Hosea & Shampine, section 3). It takes an error of the slope at the start for one of this step; for the
// current of a capacitance across an ideal source, which is such a slope, that error does not fall with the step, yet the second stage
// removes it. So before a step is refused, the third divided difference of the charges, which knows no slopes, is asked as well, and
// then whether the error is more than rounding.
func (m *trbdf2) judge() (float64, int, float64) {
	update, first := m.r.w.update, m.r.s.first()
	for i := range update {
		k := first + i
		update[i] = (errorStart*m.start.rate[k] + errorMiddle*m.middle.rate[k] + errorEnd*m.finish.rate[k]) / share
	}
	m.carry()
	ratio, worst := m.rank(0)
	if ratio > 1 && m.steps > 0 {
		d := m.third()
		for i := range update {
			k := first + i
			update[i] = d[0]*m.earlierMiddle.q[k] + d[1]*m.start.q[k] + d[2]*m.middle.q[k] + d[3]*m.finish.q[k]
		}
		m.carry()
		if again, where := m.rank(0); again < ratio {
			ratio, worst = again, where
		}
	}
	if ratio > 1 {
		m.listen()
		if again, where := m.rank(noiseMargin); again < ratio {
			ratio, worst = again, where
		}
	}
	return ratio, worst, m.h * m.control.factor(ratio)
}

// carry takes the error of the charges, as a rate, from the workspace's update to the unknowns.
//
// Two errors count: what the step leaves in the charges, which adds up over the steps, and the whole error at the end of the step and within it, which
// does not. An error e of the unknowns leaves C e in the charges; what of that is still there at the end of the next stage is
// (G + alpha C)^-1 alpha C e. Of components that are fast beside the step next to nothing is, and they do not cost steps.
func (m *trbdf2) carry() {
	w := m.r.w
	w.lu.Solve(w.update)
	copy(m.whole, w.update)
	w.chargeRates(w.update, m.whole, 1/(share*m.h))
	w.lu.Solve(w.update)
	copy(m.left, w.update)
	w.work.Solves += 2
}

// noiseMargin is how many times the rounding of the unknowns an error must exceed to be one.
const noiseMargin = 16

// listen finds how much of the unknowns is rounding: in a short step the charges of nodes far from ground are large beside their change, and
// currents made of them carry their last bits.
func (m *trbdf2) listen() {
	m.r.w.rounding(m.noise, 1/(share*m.h))
}

// rank returns the largest error beside the allowed one, after a margin of noises is taken off, and where it is. It is infinite if
// any is not a number.
func (m *trbdf2) rank(margin float64) (float64, int) {
	r := m.r
	bend := m.bend()
	ratio, worst := 0.0, 0
	for i, left := range m.left {
		k := r.s.first() + i
		e := max(math.Abs(left), math.Abs(m.whole[i])/r.dense, math.Abs(bend.of(m, k))/r.dense) // NaN stays
		if margin > 0 {
			e -= margin * m.noise[i]
		}
		e /= r.local(k, m.finish.x[k]-m.start.x[k])
		if !(e <= math.MaxFloat64) {
			return math.Inf(1), k
		}
		if e > ratio {
			ratio, worst = e, k
		}
	}
	return ratio, worst
}

// third returns the weights of the charges at the last four points in the error of the end of the step, as a rate: alpha errorConstant h^3 times their third
// derivative.
func (m *trbdf2) third() [4]float64 {
	t := [4]float64{m.earlierMiddle.t, m.start.t, m.middle.t, m.finish.t}
	var d [4]float64
	for i := range d {
		d[i] = 6 * errorConstant * m.h * m.h / share
		for j := range t {
			if j != i {
				d[i] /= t[i] - t[j]
			}
		}
	}
	return d
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
	m.open = false
	m.earlierStart, m.start, m.finish = m.start, m.finish, m.earlierStart
	m.earlierMiddle, m.middle = m.middle, m.earlierMiddle
	m.steps++
}

// interpolate takes the cubic through the three points of the last step and the middle of the step before, or the parabola through the
// three points in the first step after a restart.
func (m *trbdf2) interpolate(t float64, x []float64, unknowns []Unknown) {
	if m.steps > 1 {
		blend(x, unknowns, t, &m.middle, &m.earlierStart, &m.earlierMiddle, &m.start)
		return
	}
	blend(x, unknowns, t, &m.earlierStart, &m.earlierMiddle, &m.start)
}

// blend fills some unknowns of x with the polynomial through the points at time t in s (Lagrange).
func blend(x []float64, unknowns []Unknown, t float64, points ...*point) {
	for _, u := range unknowns {
		x[u] = 0
	}
	for i, p := range points {
		weight := 1.0
		for j, o := range points {
			if j != i {
				weight *= (t - o.t) / (p.t - o.t)
			}
		}
		for _, u := range unknowns {
			x[u] += weight * p.x[u]
		}
	}
}
