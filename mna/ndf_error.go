package mna

import "math"

// The errors of a formula and of the interpolation are known beside the departure of the newest point from the extrapolation E of the past, as long as that
// comes from the next higher derivative. Where the past says nothing about what came (a junction has turned on), departures from the extrapolations of all
// degrees are the same, and the errors are a good part of it.
const (
	// leastDefect is the least part of the error of a backward differentiation formula that is expected of the formula made of it: that of order 3 over equal
	// steps. Over others kappa may cancel the first term of the error altogether, and the next ones count.
	leastDefect = 0.4
	// kinkDefect is the error of a step beside the departure, for a slope that sets in at its start: a backward Euler step takes the whole of a charge
	// of which half has come.
	kinkDefect = 0.5
	// kinkBend is that of the interpolation: a slope that sets in half-way is off a polynomial through its end and the five points before by a quarter of the
	// departure. The later it sets in, the larger the share, of a smaller departure.
	kinkBend = 0.3
)

// defect is the error that a formula of the given order makes in h dq/dt, beside the departure of the charges from the extrapolation. With it comes the
// alpha of that order.
func (m *ndf) defect(order int) (defect, alpha float64) {
	sum := 0.0
	for j := range order {
		sum += m.inverse[j]
	}
	own := m.inverse[order]
	smooth := m.distance[0] * max(math.Abs(own+kappa(order)*sum), leastDefect*own)
	return max(smooth, kinkDefect*m.kink), (1 - kappa(order)) * sum
}

// bend is the largest error within the step of the polynomial through its end and as many points before as the order says, beside the departure of the
// unknowns from their extrapolation.
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
	return max(bentMargin*largest/m.reach[order+1], kinkBend*m.kink)
}

// bentMargin is by how much more than at the places looked at the polynomial may be off: over equal steps of any order it is 5 % at most.
const bentMargin = 1.1

// look sees how far the newest point departs from the past, and how little of it the past foretold: the share of the departure that is left when the
// extrapolation rises by two degrees, where departure times share is largest. Of a smooth waveform it is next to nothing, after a kink 1. The larger departure of
// two degrees is taken as the one from below: differences of a waveform pass through zero.
func (m *ndf) look() {
	k, next := m.order, m.nextX[m.r.s.first():]
	now, before, earlier := m.reach[k+1], m.reach[k], m.reach[k-1]
	if k == 1 {
		earlier = 0 // an unknown is no departure
	}
	departure, left := 0.0, 0.0
	for i, w := range m.weights {
		d := &next[i]
		to := math.Abs(d[k+1]) * now * w
		departure = max(departure, to)
		if to <= left {
			continue
		}
		if from := max(math.Abs(d[k])*before, math.Abs(d[k-1])*earlier) * w; to < from {
			to *= to / from
		}
		left = max(left, to)
	}
	m.departure, m.kink = departure, 0
	if departure != 0 {
		m.kink = left / departure
	}
}

// judge estimates the error of every unknown at the end of the step and of its interpolation within.
//
// The error of the rates of the charges is carried to the unknowns by the Jacobian of the step. For unknowns without a charge the points are exact, but
// the interpolation between them is not.
func (m *ndf) judge() (float64, int, float64) {
	if !m.started {
		ratio, worst, next := m.starter.judge()
		m.ratio = ratio
		return ratio, worst, next
	}
	m.look()
	ratio, worst := max(m.estimate(m.order), m.departure*m.bend(m.order)/m.r.dense), m.r.worst
	if !(ratio <= 1) {
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

// estimate returns the largest ratio of the estimated to the allowed error at the end of a step of the given order, whose differences must be known; NaN if an error
// is. It leaves the errors in the workspace's update.
func (m *ndf) estimate(order int) float64 {
	w, first := m.r.w, m.r.s.first()
	defect, alpha := m.defect(order)
	scale := defect * m.reach[order+1] * alpha * m.memory
	for i := range w.update {
		w.update[i] = scale * m.nextQ[first+i][order+1]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
	return m.size(w.update)
}

// size returns the largest of errors beside the allowed ones, NaN if one is.
func (m *ndf) size(errors []float64) float64 {
	size, weights := 0.0, m.weights[:len(errors)]
	for i, e := range errors {
		size = max(size, math.Abs(e)*weights[i])
	}
	return size
}

// largest returns the larger of the errors at the end of the step and within it.
func (m *ndf) largest(order int) float64 { return max(m.estimate(order), m.bent(order)) }

// bent returns the largest ratio of the estimated to the allowed error of the interpolation of the given order.
func (m *ndf) bent(order int) float64 {
	size, next := 0.0, m.nextX[m.r.s.first():]
	for i, w := range m.weights {
		size = max(size, math.Abs(next[i][order+1])*w)
	}
	return size * m.reach[order+1] * m.bend(order) / m.r.dense
}

// listen finds how much of the unknowns is rounding.
func (m *ndf) listen() {
	w := m.r.w
	copy(m.error, w.update)
	w.rounding(m.noise, m.alpha)
}

// differenceMargin is by how much the weights of a difference may exceed those over equal steps, whose sum is a power of two: nearly what they do at order 4 if
// each step was growNDF times the one before.
const differenceMargin = 32

// beyondNoise returns the largest error beside the allowed one after the rounding is taken off, which differences of high degree enlarge.
func (m *ndf) beyondNoise() (float64, int) {
	k, first := m.order, m.r.s.first()
	defect, _ := m.defect(k)
	bend := m.bend(k) / m.r.dense
	margin := differenceMargin * math.Ldexp(1, k+1) * max(defect*m.memory, bend)
	bend *= m.reach[k+1]
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
