package mna

import "math"

const (
	// settleShare is the length of the implicit step that makes a point consistent, as a share of the first step.
	settleShare = 1e-5
	// settleBits is the same in last bits of the time: below it differences of signals are rounding.
	settleBits = 1024
	// settleMost bounds it, as a share of the first step.
	settleMost = 0.05
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
	return r.enter(&from)
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
	r.lookAhead(r.s.signals, r.t, r.o.Until)
	start, err := r.settle(from)
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

// settle returns a point consistent with the charges of from and the signals just after the corner. Two implicit Euler steps, so
// short that no charge moves but in a jump: the first takes the jumps, the second finds the slopes after them (currents of
// capacitances across ideal sources, voltages of inductances in series with them). The point lies at the end of the
// second step; its charges are exact there.
func (r *integration) settle(from *point) (*point, error) {
	h := math.Max(settleShare*r.h, settleBits*bit(r.t))
	h = math.Max(math.Min(h, settleMost*r.h), 2*bit(r.t))
	to := r.s.newPoint()
	copy(to.q, from.q)
	copy(r.w.eval.X, from.x)
	p := problem{drive: 1, alpha: 1 / h, constant: make([]float64, len(to.q))}
	for k := 1.0; k <= 2; k++ {
		p.time = r.t + k*h
		for i, q := range to.q {
			p.constant[i] = -p.alpha * q
		}
		if err := r.solveExactly(p); err != nil {
			if r.ctx.Err() != nil {
				return nil, r.ctx.Err()
			}
			return nil, r.fail(r.resisting(), err)
		}
		to.t = p.time
		copy(to.x, r.w.eval.X)
		copy(to.q, r.w.eval.Q)
		to.setRate(r.w.eval.F)
	}
	return &to, nil
}

// solveExactly solves p from the point in the workspace as a bias is solved, continuations included, and leaves its charges in eval.
func (r *integration) solveExactly(p problem) error {
	w := r.w
	w.eval.Limit = false
	n, err := w.newton(r.ctx, &p, biasIterations)
	if err != nil {
		c := r.s.newClimb(r.ctx, w, p, r.log)
		c.iterations = n
		if err := c.run(); err != nil {
			return err
		}
	}
	w.evaluate(&p)
	return nil
}
