package mna

import "math"

const (
	// lowerGain and raiseGain are logarithms of how much longer a step another order must allow to be taken: a fifth and a tenth.
	lowerGain = 0.182
	raiseGain = 0.095
	// growStart is the most that steps grow by as long as no error has limited them, growNDF later.
	growStart = 3.0
	growNDF   = 1.7
	// rampMost is the ratio of estimated to allowed error up to which a step counts as limited by its growth alone.
	rampMost = 0.5
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
	} else if k > 1 && m.largest(k-1) < ratio {
		m.setOrder(k - 1)
	}
	return f
}

// setOrder sets the order of the next step.
func (m *ndf) setOrder(k int) {
	m.order, m.since = k, 0
	for i := range m.room {
		m.room[i] = math.Inf(1)
	}
}

// propose returns the factor for the next step after an accepted one, and sets its order.
//
// The order is chosen by the largest errors of some steps: the differences of a waveform pass through zero at different times.
func (m *ndf) propose(ratio float64) float64 {
	k := m.order
	f := m.control.factor(ratio)
	m.ramp = m.ramp && ratio <= rampMost
	m.room[k] = min(m.room[k], -m.control.now/float64(k+1))
	if m.ramp || (k-m.since)%2 == 0 {
		if k > 1 {
			m.consider(k-1, lowerGain)
		}
		if k < ndfMost && m.degree > k+1 {
			m.consider(k+1, raiseGain)
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
		if other := m.choose(); m.nextOrder != k {
			f = other
		}
	}
	return math.Min(f, most)
}

const (
	// forgotten is the number of steps over which errors may add up in the same direction: at the error that steps are chosen for, they come to half of the
	// accuracy.
	forgotten = 0.5 / (ndfShare * aim)
	// recallEvery is the number of choices of the order after which the memory is looked at again: it changes with the region the devices work in.
	recallEvery = 3
	// recallMost bounds what a longer memory takes off the allowed error: a resonance that rings over a quarter of a million steps needs it.
	recallMost = 1e4
	// recallWeight is that of the newest look in the mean: a rectifier forgets while it conducts and remembers in between, and a circuit with gain may
	// enlarge an error at first.
	recallWeight = 0.25
)

// recall returns by how much the circuit's memory reduces the allowed error of a step: in a resonance, or behind a reservoir, what hundreds of steps leave adds up.
//
// Of an error e of the unknowns, e1 = A e with A = (G + alpha C)^-1 alpha C is what lasts longer than a step, and e2 = (2 A - 1) e1 what a trapezoidal step
// of 2/alpha, which damps no oscillation, leaves of that. The energies of e1 and e2 tell how long it lasts; not longer than the run.
func (m *ndf) recall() float64 {
	made := m.estimate(m.order)
	if made == 0 {
		return 1
	}
	e := m.r.w.update
	m.keep()
	lasting := m.size(e) / made
	before := m.keep()
	for i, v := range m.error {
		e[i] = 2*e[i] - v
	}
	steps := m.r.o.Until / m.distance[0]
	if after := m.energy(); after < before {
		steps = min(steps, 4/(m.alpha*m.distance[0])*before/(before-after))
	}
	fading := 1 / max(1, lasting*steps)
	if math.IsNaN(fading) {
		return m.memory
	}
	if m.fading == 0 {
		m.fading = fading
	}
	m.fading += recallWeight * (fading - m.fading)
	return max(1, min(recallMost, 1/(m.fading*forgotten)))
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

// consider takes the error of another order into the choice. Where the interpolation alone rules it out, the error at the end of the step is not asked for.
func (m *ndf) consider(order int, gain float64) {
	ratio := m.bent(order)
	room := -excess(ratio) / float64(order+1)
	if room > m.room[m.order]+gain {
		if end := m.estimate(order); !(end <= ratio) {
			room = -excess(end) / float64(order+1)
		}
	}
	m.room[order] = min(m.room[order], room)
}

// choose sets the order that allows the longest step, and returns the factor for it.
func (m *ndf) choose() float64 {
	k := m.order
	best := m.room[k]
	if k > 1 && m.room[k-1] > best+lowerGain {
		m.nextOrder, best = k-1, m.room[k-1]
	}
	if k < ndfMost && m.room[k+1] > best+raiseGain && !math.IsInf(m.room[k+1], 1) {
		m.nextOrder, best = k+1, m.room[k+1]
	}
	return math.Exp(best)
}
