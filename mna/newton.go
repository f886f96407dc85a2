package mna

import (
	"context"
	"errors"
	"math"
)

// Newton's method stops when the last update of every unknown is below this share of the unknown, or below the
// floor of its kind: far below what any measurement resolves.
const (
	updateShare  = 1e-9
	voltageFloor = 1e-15 // V
	currentFloor = 1e-18 // A
	// stallShare is what rounding may leave of an update beside the largest unknown of the same kind. An iteration that has come
	// so near and gets no nearer has arrived; the balance of the currents then decides.
	stallShare = 1e-10
	// stallRatio is the ratio of two updates from which on an iteration gets no nearer.
	stallRatio = 0.5
)

const (
	biasIterations = 100
	// runaway is a voltage or current beyond any that linear extrapolation of a junction's current can lead to on the way.
	runaway = 1e25
)

var (
	errDiverged = errors.New("the iteration diverged")
	errSlow     = errors.New("the iteration did not settle")
	errStuck    = errors.New("no shorter step improves the balance")
)

// arrival says how near an update has come.
type arrival struct {
	small  bool    // every unknown moved less than its tolerance
	finite bool    // no unknown has run away or is NaN
	move   float64 // largest update beside the largest unknown of its kind
}

// apply adds a share of the update to the free unknowns.
func (w *workspace) apply(share float64) arrival {
	first := w.sys.first()
	x, branch := w.eval.X, w.sys.branch
	a := arrival{small: true, finite: true}
	moved, largest := [2]float64{}, [2]float64{voltageFloor, currentFloor}
	for _, v := range x[:first] {
		largest[0] = max(largest[0], math.Abs(v))
	}
	for i, d := range w.update {
		d *= share
		k := first + i
		x[k] += d
		kind, floor := 0, voltageFloor
		if branch[k] {
			kind, floor = 1, currentFloor
		}
		d, size := math.Abs(d), math.Abs(x[k])
		if !(d <= updateShare*size+floor) {
			a.small = false
		}
		if !(size <= runaway) {
			a.finite = false
		}
		moved[kind], largest[kind] = max(moved[kind], d), max(largest[kind], size)
	}
	a.move = max(moved[0]/largest[0], moved[1]/largest[1])
	return a
}

// newton solves p from eval.X by Newton's method, with the steps of junctions limited by their devices. It returns the number of iterations.
// The last evaluation was not limited if it returns nil.
func (w *workspace) newton(ctx context.Context, p *problem, most int) (int, error) {
	e := &w.eval
	w.sys.hold(e.X, p.time, p.drive)
	e.Limit = true
	defer func() { e.Limit = false }()
	last := math.Inf(1)
	for i := 1; i <= most; i++ {
		if err := ctx.Err(); err != nil {
			return i, err
		}
		if err := w.step(p); err != nil {
			return i, err
		}
		if e.Limited {
			w.shorten()
		}
		a := w.apply(1)
		switch {
		case !a.finite:
			return i, errDiverged
		case e.Limited:
		case a.small, a.move <= stallShare && a.move >= stallRatio*last:
			return i, nil
		}
		w.repivot = !e.Limited && a.move > stallRatio*last
		last = a.move
	}
	return most, errSlow
}

const (
	stride      = 1e3 // V
	strideShare = 1e3
)

// shorten bounds how far the update of a limited iteration moves a voltage: to a thousand times its size and a kilovolt. Driven by a current, a
// junction at rest asks for up to 1e17 V, in which the next update would lose the volts that the junction settles at.
func (w *workspace) shorten() {
	first := w.sys.first()
	for i, d := range w.update {
		if !w.sys.branch[first+i] {
			most := stride + strideShare*math.Abs(w.eval.X[first+i])
			w.update[i] = math.Max(-most, math.Min(most, d))
		}
	}
}

// The damping of Deuflhard, Newton Methods for Nonlinear Problems, 2004, algorithm NLEQ-ERR, section 3.3.3: a step is
// accepted if the simplified Newton update at its end is shorter than the update at its start. The test does not change
// when equations are scaled, which spares a weighing of amperes against volts over twelve decades of conductance.
const (
	leastDamping  = 1e-8
	firstDamping  = 1.0
	dampingShrink = 0.1 // the least ratio of two tries
	// The update of an unknown counts beside its size and at least beside these.
	dampingVoltage = 1e-3 // V
	dampingCurrent = 1e-9 // A
)

// damped solves p from eval.X by Newton's method with a line search on the equations as they are, without limits.
func (w *workspace) damped(ctx context.Context, p *problem, most int) (int, error) {
	e := &w.eval
	w.sys.hold(e.X, p.time, p.drive)
	e.Limit = false
	w.evaluate(p)
	w.assemble(p)
	damping := firstDamping
	step := make([]float64, len(w.update))
	for i := 1; i <= most; i++ {
		if err := ctx.Err(); err != nil {
			return i, err
		}
		if err := w.factor(); err != nil {
			return i, err
		}
		w.solve()
		copy(step, w.update)
		copy(w.trial, e.X)
		length := w.length(step)
		if length == 0 {
			return i, nil
		}
		next, a, err := w.search(p, step, length, damping)
		if err != nil {
			return i, err
		}
		if a.small && next == 1 {
			return i, nil
		}
		damping = next
	}
	return most, errSlow
}

// search shortens the step from trial until the balance improves, leaves eval there and returns the damping to begin the next step
// with: 1 after a full step.
func (w *workspace) search(p *problem, step []float64, length, damping float64) (float64, arrival, error) {
	for damping >= leastDamping {
		copy(w.eval.X, w.trial)
		copy(w.update, step)
		a := w.apply(damping)
		w.evaluate(p)
		w.assemble(p)
		w.solve()
		after := w.length(w.update)
		for i, d := range step {
			w.update[i] -= (1 - damping) * d
		}
		ideal := math.Min(1, damping*damping*length/(2*w.length(w.update)))
		if a.small && damping == 1 || after <= (1-damping/4)*length {
			if damping == 1 {
				ideal = 1
			}
			return math.Max(ideal, leastDamping), a, nil
		}
		if !(ideal < damping/2) {
			ideal = damping / 2
		}
		damping = math.Max(ideal, dampingShrink*damping)
	}
	copy(w.eval.X, w.trial)
	return 0, arrival{}, errStuck
}

// length is the root mean square of an update beside the size of each unknown.
func (w *workspace) length(update []float64) float64 {
	first := w.sys.first()
	sum := 0.0
	for i, d := range update {
		floor := dampingVoltage
		if w.sys.branch[first+i] {
			floor = dampingCurrent
		}
		d /= math.Abs(w.trial[first+i]) + floor
		sum += d * d
	}
	return math.Sqrt(sum / float64(max(1, len(update))))
}
