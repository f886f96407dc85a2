package mna

import "math"

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
	ndfDegree = ndfMost + 2 // of the highest divided difference
	// ndfShare is the share of the accuracy that is allowed as the error of a step. Errors of up to a hundred steps that add up leave room for it; see
	// forgotten for longer memories.
	ndfShare = 0.03
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

	started bool    // the starter has taken its step
	order   int     // of the step to try, and of the last one
	since   int     // accepted steps since the order changed
	memory  float64 // by how much the allowed error is reduced, see recall
	lasting float64 // number of steps that the share of an error that lasts does, at the last choice of the order
	choices int     // of the order
	ramp    bool    // no step since the start was limited by its error

	known  int                // points that the differences rest on
	times  [ndfDegree]float64 // s, the newest first
	x, q   []ladder           // at the newest point, by unknown
	newest point

	attempted point
	nextX     []ladder // the differences if the attempted step is accepted
	nextQ     []ladder
	degree    int                    // up to which they are known
	ratios    [ndfMost + 1]float64   // largest of estimated to allowed error since the order was chosen, by order
	distance  [ndfDegree]float64     // s, of the attempted point from those before it
	inverse   [ndfDegree]float64     // 1/s
	reach     [ndfDegree + 1]float64 // s^m, product of the first m distances
	alpha     float64                // 1/s
	constant  []float64
	weights   []float64 // 1/allowed error, of the free unknowns
	error     []float64 // of the free unknowns
	noise     []float64 // of the free unknowns
	ratio     float64   // of the attempted step
	nextOrder int
	last      int  // order of the last accepted step, or byStarter or afterJump
	failures  int  // in a row
	doubted   bool // the past is to be given up before the next attempt
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
		m.order, m.since, m.ramp = max(1, m.order-1), 0, false
		return err
	}
	e := &m.r.w.eval
	a := &m.attempted
	a.t = end
	copy(a.x, e.X)
	copy(a.q, e.Q)
	a.setRate(e.F)
	m.extend(min(m.known, m.order+2))
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

// share is the error that a formula of the given order makes in dq/dt, beside the difference of the charges to their extrapolation, in 1/s.
func (m *ndf) share(order int) (share, alpha float64) {
	sum := 0.0
	for j := range order {
		sum += m.inverse[j]
	}
	return m.inverse[order] + kappa(order)*sum, (1 - kappa(order)) * sum
}

// bend is the largest error within the step of the polynomial through its end and as many points before as the order says, beside the
// divided difference of the unknowns of the next degree.
func (m *ndf) bend(order int) float64 {
	largest := 0.0
	h := m.distance[0]
	for _, s := range [...]float64{0.4, 0.6, 0.8} {
		product := h * (1 - s)
		for j := range order {
			product *= m.distance[j] - h + s*h
		}
		largest = max(largest, product)
	}
	return bentMargin * largest
}

// bentMargin is what the largest of the places looked at may lack of the largest of all.
const bentMargin = 1.1

// judge estimates the error of every unknown at the end of the step and of its interpolation within.
//
// The error of the rates of the charges is carried to the unknowns by the Jacobian of the step. For unknowns without a charge the points are exact, but
// the interpolation between them is not.
func (m *ndf) judge() (float64, int, float64) {
	if !m.started {
		return m.starter.judge()
	}
	ratio, worst := m.largest(m.order)
	if ratio > 1 {
		m.listen()
		ratio, worst = m.beyondNoise()
	}
	m.ratio = ratio
	m.control.power = float64(m.order + 1)
	h := m.distance[0]
	if !(ratio <= 1) {
		return ratio, worst, h * m.refuse(ratio)
	}
	return ratio, worst, h * m.propose(ratio)
}

// extend takes the differences to the attempted point, up to the given degree.
func (m *ndf) extend(degree int) {
	m.degree = degree
	inverse := m.inverse[:degree]
	for i := m.r.s.first(); i < len(m.x); i++ {
		x, q := &m.nextX[i], &m.nextQ[i]
		pastX, pastQ := &m.x[i], &m.q[i]
		dx, dq := m.attempted.x[i], m.attempted.q[i]
		x[0], q[0] = dx, dq
		m.weights[i-m.r.s.first()] = m.r.weight(i, dx-pastX[0])
		for j, s := range inverse {
			dx, dq = (dx-pastX[j])*s, (dq-pastQ[j])*s
			x[j+1], q[j+1] = dx, dq
		}
	}
}

// estimate returns the largest ratio of the estimated to the allowed error at the end of a step of the given order, whose differences must be known, and
// where it is. It leaves the errors in the workspace's update.
func (m *ndf) estimate(order int) (float64, int) {
	w, r := m.r.w, m.r
	first := r.s.first()
	share, alpha := m.share(order)
	scale := share * m.reach[order+1] * alpha * m.distance[0] * m.memory
	for i := range w.update {
		w.update[i] = scale * m.nextQ[first+i][order+1]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
	ratio, worst := 0.0, 0
	weights := m.weights[:len(w.update)]
	for i, e := range w.update {
		if e = math.Abs(e) * weights[i]; !(e <= ratio) {
			ratio, worst = e, first+i
			if !(e <= math.MaxFloat64) {
				return math.Inf(1), worst
			}
		}
	}
	return ratio, worst
}

// largest returns the larger of the errors at the end of the step and within it.
func (m *ndf) largest(order int) (float64, int) {
	ratio, worst := m.estimate(order)
	if b, at := m.bent(order); !(b <= ratio) {
		ratio, worst = b, at
	}
	return ratio, worst
}

// bent returns the largest ratio of the estimated to the allowed error of the interpolation of the given order.
func (m *ndf) bent(order int) (float64, int) {
	scale := m.bend(order) / m.r.dense
	ratio, worst := 0.0, 0
	for i := m.r.s.first(); i < len(m.x); i++ {
		if e := math.Abs(scale*m.nextX[i][order+1]) * m.weights[i-m.r.s.first()]; !(e <= ratio) {
			ratio, worst = e, i
			if !(e <= math.MaxFloat64) {
				return math.Inf(1), i
			}
		}
	}
	return ratio, worst
}

// listen finds how much of the unknowns is rounding.
func (m *ndf) listen() {
	w := m.r.w
	copy(m.error, w.update)
	w.rounding(m.noise, m.alpha)
}

// differenceMargin is how many times the sum of the weights of a difference over equal steps the rounding of unknowns may count in it over others.
const differenceMargin = 32

// beyondNoise returns the largest error beside the allowed one after the rounding is taken off, which differences of high degree enlarge.
func (m *ndf) beyondNoise() (float64, int) {
	k, first := m.order, m.r.s.first()
	bend := m.bend(k) / m.r.dense
	share, _ := m.share(k)
	margin := differenceMargin * math.Ldexp(1, k+1) * math.Max(math.Abs(share)*m.distance[0]*m.memory, bend/m.reach[k+1])
	ratio, worst := 0.0, 0
	for i, e := range m.error {
		e = max(math.Abs(e), math.Abs(bend*m.nextX[first+i][k+1])) - margin*m.noise[i]
		e *= m.weights[i]
		if !(e <= math.MaxFloat64) {
			return math.Inf(1), first + i
		}
		if e > ratio {
			ratio, worst = e, first+i
		}
	}
	return ratio, worst
}

const (
	// lowerGain and raiseGain are by how much longer a step another order must allow to be taken.
	lowerGain = 1.2
	raiseGain = 1.1
	// growStart is the most that steps grow by as long as no error has limited them, growNDF later.
	growStart = 3.0
	growNDF   = 1.7
	// patience is how many steps in a row may be refused before the past is given up.
	patience = 3
)

// refuse returns the factor for another try.
func (m *ndf) refuse(ratio float64) float64 {
	m.ramp = false
	m.newton.forget()
	m.failures++
	f := m.control.factor(ratio)
	if k := m.order; m.failures >= patience {
		// The error is not one of the step but of the past: a kink, or rounding that differences enlarge.
		m.doubted = true
	} else if k > 1 {
		if below, _ := m.largest(k - 1); below < ratio {
			m.setOrder(k - 1)
		}
	}
	return f
}

// setOrder sets the order of the next step.
func (m *ndf) setOrder(k int) {
	m.order, m.since = k, 0
	m.ratios = [ndfMost + 1]float64{}
}

// propose returns the factor for the next step after an accepted one, and sets its order.
//
// The order is chosen by the largest errors of some steps: the differences of a waveform pass through zero at different times.
func (m *ndf) propose(ratio float64) float64 {
	k := m.order
	m.ramp = m.ramp && ratio <= 0.5
	m.ratios[k] = max(m.ratios[k], ratio)
	if m.ramp || (k-m.since)%2 == 0 {
		if k > 1 {
			below, _ := m.largest(k - 1)
			m.ratios[k-1] = max(m.ratios[k-1], below)
		}
		if k < ndfMost && m.degree > k+1 {
			above, _ := m.largest(k + 1)
			m.ratios[k+1] = max(m.ratios[k+1], above)
		}
	}
	most := growNDF
	if m.ramp {
		most = growStart
	}
	if m.ramp || m.since >= k {
		if m.choices++; m.choices%recallEvery == 0 {
			m.memory = m.recall()
		}
		if f := m.choose(); m.nextOrder != k {
			return math.Min(f, most)
		}
	}
	return math.Min(m.control.factor(ratio), most)
}

const (
	// forgotten is the number of steps over which errors may add up in the same direction as far as the allowed error of a step provides for it.
	forgotten = 60
	// recallEvery is the number of choices of the order after which the memory is looked at again: it changes with the region the devices work in.
	recallEvery = 3
	// recallMost bounds what a longer memory takes off the allowed error.
	recallMost = 16
)

// recall returns by how much the circuit's memory reduces the allowed error of a step: in a resonance, or behind a reservoir, what hundreds of steps leave adds up.
//
// Of an error e of the unknowns, e1 = A e with A = (G + alpha C)^-1 alpha C is what lasts longer than a step, and e2 = (2 A - 1) e1 what a trapezoidal step
// of 2/alpha, which damps no oscillation, leaves of that. The energies of e1 and e2 tell how long it lasts. The lesser of two choices of the order counts: a
// circuit with gain may enlarge an error at first.
func (m *ndf) recall() float64 {
	made, _ := m.estimate(m.order)
	if made == 0 {
		return 1
	}
	e := m.r.w.update
	m.keep()
	lasting := m.largestOf(e) / made
	before := m.keep()
	for i, v := range m.error {
		e[i] = 2*e[i] - v
	}
	if after := m.energy(); after < before {
		lasting *= math.Min(recallMost*forgotten, 4/(m.alpha*m.distance[0])*before/(before-after))
	} else {
		lasting *= recallMost * forgotten
	}
	lesser := math.Min(lasting, m.lasting)
	m.lasting = lasting
	return math.Max(1, math.Min(recallMost, lesser/forgotten))
}

// largestOf returns the largest of errors beside the allowed ones.
func (m *ndf) largestOf(errors []float64) float64 {
	largest := 0.0
	for i, e := range errors {
		largest = max(largest, math.Abs(e)*m.weights[i])
	}
	return largest
}

// keep applies (G + alpha C)^-1 alpha C to the workspace's update, leaves in m.error what that was before, and returns its energy.
func (m *ndf) keep() float64 {
	energy := m.energy()
	m.r.w.lu.Solve(m.r.w.update)
	m.r.w.work.Solves++
	return energy
}

// energy moves the workspace's update to m.error and leaves alpha C times it there. It returns the energy, in W, that it stands for.
func (m *ndf) energy() float64 {
	w := m.r.w
	copy(m.error, w.update)
	w.chargeRates(w.update, m.error, m.alpha)
	sum := 0.0
	for i, e := range m.error {
		sum += math.Abs(e * w.update[i])
	}
	return sum
}

// choose sets the order that allows the longest step, and returns the factor for it.
func (m *ndf) choose() float64 {
	k := m.order
	best := plain(m.ratios[k], k)
	if k > 1 {
		if f := plain(m.ratios[k-1], k-1); f > lowerGain*best {
			m.nextOrder, best = k-1, f
		}
	}
	if k < ndfMost && m.ratios[k+1] > 0 {
		if f := plain(m.ratios[k+1], k+1); f > raiseGain*best {
			m.nextOrder, best = k+1, f
		}
	}
	return best
}

// plain is the factor for the next step that the error of one step says.
func plain(ratio float64, order int) float64 {
	return math.Pow(math.Max(ratio, leastError)/aim, -1/float64(order+1))
}

func (m *ndf) accept() {
	if !m.started {
		m.starter.accept()
		m.begin()
		return
	}
	m.control.accept()
	if !(m.ratio <= 1) {
		// The error was not asked for: this was a jump, and the past says nothing about what follows.
		m.restart(&m.attempted)
		m.last = afterJump
		return
	}
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
	copy(m.newest.rate, p.rate)
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
