package mna

// The method is the family of numerical differentiation formulas of orders 1 to 5 with variable coefficients: Shampine & Reichelt, The MATLAB ODE suite,
// SIAM J. Sci. Comput. 18, 1997, 1-22, section 2. With the polynomial E through the last k+1 points, extrapolated to the new time t, a
// formula of order k sets
//
//	dq/dt = E'(t) + alpha (q - E(t)),  alpha = (1 - kappa) (1/(t-t1) + ... + 1/(t-tk)),
//
// a backward differentiation formula where kappa = 0. It differs from the paper in three ways: E goes through the points as they were passed, whatever
// their distances (Brayton, Gustavson & Hachtel, A new efficient algorithm for solving differential-algebraic systems using implicit backward
// differentiation formulas, Proc. IEEE 60, 1972, 98-108), it is applied to charges, and the Jacobian is fresh in every iteration, so that one
// evaluation is enough for most steps.
const (
	ndfMost   = 5
	ndfDegree = ndfMost + 1 // of the highest divided difference
	// ndfShare is the share of the accuracy that is allowed as the error of a step. Errors that add up over a dozen steps leave room for it; see forgotten for
	// longer memories.
	ndfShare = 0.1
)

// kappa returns the coefficient of a formula, from table 1 of the paper.
func kappa(order int) float64 {
	return [...]float64{0, -0.1850, -1.0 / 9, -0.0823, -0.0415, 0}[order]
}

const (
	byStarter = 0
	afterJump = -1
)

// ladder holds the divided differences of one unknown at the newest point, of degrees 0 to ndfDegree: the coefficients of Newton's form of the
// interpolation polynomial.
type ladder [ndfDegree + 1]float64

// ndf is the method. It takes its first step after a restart, when there is no past, as TR-BDF2.
type ndf struct {
	r       *integration
	control control
	newton  stageNewton
	starter *trbdf2

	started  bool // the starter has taken its step
	order    int  // of the step to try
	last     int  // order of the last accepted step, or byStarter or afterJump
	failures int  // attempts refused in a row
	doubted  bool // the past is to be given up before the next attempt

	// Of the choice of the order.
	ramp      bool                 // no step since the start was limited by its error
	since     int                  // accepted steps since the last choice
	choices   int                  // made so far
	room      [ndfMost + 1]float64 // logarithm of the factor that the steps of each order could have been longer by, the least since the last choice
	nextOrder int                  // after the attempted step
	memory    float64              // by how much the allowed error is reduced, see recall
	fading    float64              // share of an error that a step takes away, in the mean over the last times it was looked at

	// The past.
	known  int                // points that the differences rest on
	times  [ndfDegree]float64 // s, the newest first
	x, q   []ladder           // at the newest point, by unknown
	newest point              // without rates

	// The attempted step.
	attempted    point                  // without rates
	nextX, nextQ []ladder               // the differences if it is accepted
	degree       int                    // up to which they are known
	distance     [ndfDegree]float64     // s, from the points before
	inverse      [ndfDegree]float64     // 1/s
	reach        [ndfDegree + 1]float64 // s^m, product of the first m distances
	alpha        float64                // 1/s
	constant     []float64              // A, by unknown
	kink         float64                // how little the past says of the newest point, 0..1
	departure    float64                // of it from the past, the largest of all unknowns beside the allowed error
	ratio        float64                // of estimated to allowed error; 0 if it was not judged

	// Of the free unknowns.
	weights []float64 // 1/allowed error
	error   []float64
	noise   []float64 // what rounding makes of them
}

func newNDF(r *integration) *ndf {
	s := r.s
	n := len(s.names)
	return &ndf{
		r: r, memory: 1, control: newControl(ndfMost + 1), newton: newStageNewton(r), starter: newTRBDF2(r),
		x: make([]ladder, n), q: make([]ladder, n), nextX: make([]ladder, n), nextQ: make([]ladder, n), newest: s.newPoint(), attempted: s.newPoint(),
		constant: make([]float64, n), error: make([]float64, n-s.first()), weights: make([]float64, n-s.first()), noise: make([]float64, n-s.first()),
	}
}

func (m *ndf) restart(from *point) {
	m.starter.restart(from)
	m.started, m.doubted, m.known, m.failures = false, false, 0, 0
	m.ramp = true
	m.control.restart()
	m.newton.forget()
}

func (m *ndf) end() *point {
	if m.started {
		return &m.newest
	}
	return m.starter.end()
}

// attempt solves the equations at the end of the step, in s.
func (m *ndf) attempt(end float64) error {
	if m.doubted {
		m.r.slope(&m.newest)
		m.restart(&m.newest)
	}
	if !m.started {
		return m.starter.attempt(end)
	}
	m.measure(end)
	m.predict(m.r.w.eval.X)
	p := problem{time: m.r.inside(end), drive: 1, alpha: m.alpha, constant: m.constant, charge: m.newest.q}
	if err := m.newton.solve(&p); err != nil {
		m.newton.forget()
		m.ramp = false
		m.setOrder(max(1, m.order-1))
		return err
	}
	e := &m.r.w.eval
	a := &m.attempted
	a.t = end
	copy(a.x, e.X)
	copy(a.q, e.Q)
	m.extend(min(m.known, m.order+2, ndfDegree))
	m.ratio, m.nextOrder = 0, m.order
	return nil
}

// measure takes the distances of a new point at t seconds and what follows from them.
func (m *ndf) measure(t float64) {
	m.reach[0] = 1
	sum := 0.0
	for j := range m.known {
		d := t - m.times[j]
		m.distance[j], m.inverse[j] = d, 1/d
		m.reach[j+1] = m.reach[j] * d
		if j < m.order {
			sum += m.inverse[j]
		}
	}
	m.alpha = (1 - kappa(m.order)) * sum
}

// predict fills x with the extrapolation of the past, and the constant with what the past gives to dq/dt beside alpha (q - newest q).
func (m *ndf) predict(x []float64) {
	k := m.order
	slope := 0.0
	var weights [ndfMost + 1]float64
	for j := 1; j <= k; j++ {
		slope = slope*m.distance[j-1] + m.reach[j-1]
		weights[j] = slope - m.alpha*m.reach[j]
	}
	reach, ahead := m.reach[1:k+1], weights[1:k+1]
	for i := m.r.s.first(); i < len(x); i++ {
		dx, dq := &m.x[i], &m.q[i]
		v, c := dx[0], 0.0
		for j, w := range ahead {
			v += reach[j] * dx[j+1]
			c += w * dq[j+1]
		}
		x[i], m.constant[i] = v, c
	}
}

func (m *ndf) accept() {
	// A step whose error was not asked for is a jump, and the past says nothing about what follows.
	jumped := !(m.ratio <= 1)
	switch {
	case !m.started:
		m.starter.accept()
		if m.begin(); jumped {
			m.restart(m.starter.end())
		}
		return
	case jumped:
		m.r.slope(&m.attempted)
		m.restart(&m.attempted)
		m.last = afterJump
		return
	}
	m.control.accept()
	m.failures = 0
	m.last = m.order
	m.x, m.nextX = m.nextX, m.x
	m.q, m.nextQ = m.nextQ, m.q
	m.newest, m.attempted = m.attempted, m.newest
	copy(m.times[1:], m.times[:ndfDegree-1])
	m.times[0] = m.newest.t
	m.known = min(m.degree+1, ndfDegree)
	m.since++
	if m.nextOrder != m.order || m.since > m.order || m.ramp {
		m.setOrder(m.nextOrder)
	}
}

// begin takes the points of the starter's step as the past.
func (m *ndf) begin() {
	m.forget()
	for _, p := range []*point{&m.starter.earlierStart, &m.starter.earlierMiddle, &m.starter.start} {
		m.append(p)
	}
	m.setOrder(trbdf2Order)
}

// forget makes room for a past without a point.
func (m *ndf) forget() { m.started, m.known, m.last = true, 0, byStarter }

// append adds a point to the past.
func (m *ndf) append(p *point) {
	for i := range m.x {
		x, q := ladder{p.x[i]}, ladder{p.q[i]}
		for j := range m.known {
			d := 1 / (p.t - m.times[j])
			x[j+1] = (x[j] - m.x[i][j]) * d
			q[j+1] = (q[j] - m.q[i][j]) * d
		}
		m.x[i], m.q[i] = x, q
	}
	copy(m.times[1:], m.times[:ndfDegree-1])
	m.times[0] = p.t
	m.known++
	m.newest.t = p.t
	copy(m.newest.x, p.x)
	copy(m.newest.q, p.q)
}

// interpolate takes the polynomial through the end of the last step and as many points before it as its order has.
func (m *ndf) interpolate(t float64, x []float64, unknowns []Unknown) {
	switch m.last {
	case byStarter:
		m.starter.interpolate(t, x, unknowns)
		return
	case afterJump:
		blend(x, unknowns, t, &m.newest, &m.attempted)
		return
	}
	var reach [ndfMost]float64
	product := 1.0
	for j := range m.last {
		product *= t - m.times[j]
		reach[j] = product
	}
	ahead := reach[:m.last]
	for _, u := range unknowns {
		d := &m.x[u]
		v := d[0]
		for j, w := range ahead {
			v += w * d[j+1]
		}
		x[u] = v
	}
}
