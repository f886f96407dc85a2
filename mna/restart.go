package mna

import "math"

const (
	// settleShare is the length of the implicit steps that make a point consistent, as a share of the first step.
	settleShare = 1e-6
	// settleBits is the same in last bits of the time: below it differences of signals are rounding.
	settleBits = 1024
	// settleMost bounds it, as a share of the first step.
	settleMost = 0.05
	// settleShrink is by how much the steps are shortened if something moves that they do not resolve.
	settleShrink = 1e-2
	// settleTries bounds how often.
	settleTries = 3
	// steadyShare is a change of the pace of a charge beside the pace that counts as none, and a movement after a jump beside the jump.
	steadyShare = 1e-2
	// settledShare is a movement beside a charge that is rounding.
	settledShare = 1e-12
)

// begin finds the state at time 0.
func (r *integration) begin() error {
	from := r.s.newPoint()
	if r.o.Start != nil {
		copy(from.x, r.o.Start)
	} else if !r.o.Cold {
		b, err := r.s.Bias(r.ctx, BiasOptions{Logger: r.o.Logger})
		if err != nil {
			return err
		}
		copy(from.x, b.X)
	}
	e := &r.w.eval
	copy(e.X, from.x)
	r.s.hold(e.X, 0, 1)
	e.Limit = false
	r.w.evaluate(&problem{drive: 1, alpha: 1, cold: r.o.Cold})
	copy(from.q, e.Q)
	from.setRate(e.F)
	return r.enter(&from)
}

// slope fills in the rates of a point.
func (r *integration) slope(p *point) {
	w := r.w
	copy(w.eval.X, p.x)
	w.eval.Limit = false
	w.evaluate(&problem{time: r.inside(p.t), drive: 1, alpha: 1})
	p.setRate(w.eval.F)
}

// enter starts afresh at a corner from the charges just before it.
func (r *integration) enter(from *point) error {
	r.stats.Restarts++
	r.corner = r.o.Until
	scale := math.Inf(1)
	for _, signal := range r.s.signals {
		r.corner = math.Min(r.corner, r.nextCorner(signal))
		scale = math.Min(scale, signal.Scale(r.t))
	}
	span := math.Min(r.corner-r.t, r.o.Until/leastSteps)
	if r.o.MaxStep > 0 {
		span = math.Min(span, r.o.MaxStep)
	}
	r.h = math.Min(span, scale) / firstPerScale
	r.first = r.h
	r.lookAhead(r.s.signals, r.t, r.o.Until)
	if r.stats.Restarts == 1 {
		r.anchor(from.x)
	}
	start, err := from, error(nil)
	if r.stats.Restarts > 1 || r.o.Cold || !r.still() {
		start, err = r.consistent(from)
	}
	if r.ctx.Err() != nil {
		return r.ctx.Err()
	}
	if err != nil {
		return err
	}
	if r.stats.Restarts == 1 {
		r.anchor(start.x)
	}
	r.widen(start.x)
	r.t = start.t
	r.method.restart(start)
	return nil
}

// still reports whether no signal moves in the first step, so that a bias point goes on as it is.
func (r *integration) still() bool {
	for _, signal := range r.s.signals {
		if signal.At(r.t+r.h) != signal.At(r.t) {
			return false
		}
	}
	return true
}

// consistent returns a point just after the corner that is consistent with the charges of from. The implicit steps to it are made shorter until they resolve
// what happens, and longer if rounding keeps Newton's method from solving them.
func (r *integration) consistent(from *point) (*point, error) {
	h := r.settleStep()
	first, second, err := r.settle(from, h, false)
	for longest := settleMost * r.h; err != nil; {
		last := !(h/settleShrink < longest)
		if h /= settleShrink; last {
			h = math.Max(longest, r.settleStep())
		}
		if first, second, err = r.settle(from, h, last); last && err != nil {
			return nil, err
		}
	}
	for range settleTries {
		shorter := math.Max(h*settleShrink, settleBits*bit(r.t))
		if !(shorter < h) || r.resolved(from, first, second) {
			break
		}
		a, b, err := r.settle(from, shorter, false)
		if err != nil {
			break
		}
		first, second, h = a, b, shorter
	}
	return second, nil
}

// settleStep is the length of the first two implicit steps that are tried.
func (r *integration) settleStep() float64 {
	h := math.Max(settleShare*r.h, settleBits*bit(r.t))
	return math.Max(math.Min(h, settleMost*r.h), 2*bit(r.t))
}

// resolved reports whether the two implicit steps tell what every charge does. A charge whose time constant is far shorter has jumped in the first step and rests in
// the second; one whose time constant is far longer moves at a steady pace. Of any other the steps are too long, unless it hardly moves its unknown.
func (r *integration) resolved(from, first, second *point) bool {
	for k := r.s.first(); k < len(second.x); k++ {
		if math.Abs(second.x[k]-first.x[k]) <= r.local(k, 0) {
			continue
		}
		jump, move := first.q[k]-from.q[k], second.q[k]-first.q[k]
		rests := math.Abs(move) <= steadyShare*math.Abs(jump)+settledShare*math.Abs(second.q[k])
		steady := math.Abs(move-jump) <= steadyShare*math.Abs(move)
		if !rests && !steady {
			return false
		}
	}
	return true
}

// nextCorner returns the next corner of a signal that a step can reach: those nearer than the shortest step are passed over.
func (r *integration) nextCorner(signal Signal) float64 {
	t := r.t
	for {
		c := signal.Corner(t)
		if !(c > t) {
			return math.Inf(1)
		}
		if c-r.t > r.shortest() {
			return c
		}
		t = c
	}
}

// settle takes two implicit Euler steps of h seconds from the charges of from, so short that no charge moves but in a jump: the first
// takes the jumps, the second finds the slopes after them (currents of capacitances across ideal sources, voltages of inductances in
// series with ideal sources of current). The charges at the end of the second step are exact there. With climb set, the continuations of a bias are
// tried too.
func (r *integration) settle(from *point, h float64, climb bool) (first, second *point, err error) {
	copy(r.w.eval.X, from.x)
	if first, err = r.euler(from, r.t+h, h, climb); err == nil {
		second, err = r.euler(first, r.t+2*h, h, climb)
	}
	return first, second, err
}

// euler takes one implicit Euler step of h seconds from the charges of from to time t, starting from the unknowns in the workspace.
func (r *integration) euler(from *point, t, h float64, climb bool) (*point, error) {
	w := r.w
	w.eval.Limit = false
	p := problem{time: t, drive: 1, alpha: 1 / h, charge: from.q}
	n, err := w.newton(r.ctx, &p, biasIterations)
	switch {
	case err == nil:
		w.carryCharges(w.update)
		w.carryCurrents(w.update)
	case climb:
		c := r.s.newClimb(r.ctx, w, p, r.log)
		c.iterations = n
		err = c.run()
		w.evaluate(&p)
	}
	if err != nil {
		return nil, r.fail(r.resisting(), err)
	}
	to := r.s.newPoint()
	to.t = t
	copy(to.x, w.eval.X)
	copy(to.q, w.eval.Q)
	to.setRate(w.eval.F)
	return &to, nil
}
