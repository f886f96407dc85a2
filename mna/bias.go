package mna

import (
	"context"
	"errors"
	"log/slog"
	"math"
)

// BiasOptions say how to find a bias point. The zero value is ready.
type BiasOptions struct {
	Time   float64      // s; signals have their value at this time
	Guess  []float64    // all unknowns, as in [Bias.X]; nil: zero
	Logger *slog.Logger // nil: silent
}

// Bias is a solution of f(x) = 0.
type Bias struct {
	X          []float64 // all unknowns
	Rung       string    // which of the methods found it, one of the Rung constants
	Iterations int       // of Newton's method over all rungs
	Work       Work
}

// The methods that look for a bias point, in the order in which they are tried.
const (
	RungNewton  = "newton"
	RungDamped  = "damped newton"
	RungSources = "source stepping"
	RungPseudo  = "pseudo-transient"
	RungShunts  = "shunt stepping"
)

// Bias finds a point at which the currents of every node balance: Newton's method with junction limiting and, if
// that fails, a ladder of line search and continuations. Whatever helped on the way is gone from the equations of the answer:
// it is accepted only if the sum of the currents of every node is below 1e-12 of the sum of their magnitudes, as far as rounding allows, and
// if the equations determine every unknown.
//
// It returns *OptionError, *SingularError, *NoConvergenceError or the context's error.
func (s *System) Bias(ctx context.Context, o BiasOptions) (*Bias, error) {
	if o.Guess != nil && len(o.Guess) != len(s.names) {
		return nil, &OptionError{"Guess", "as many values as the system has unknowns"}
	}
	if math.IsNaN(o.Time) || math.IsInf(o.Time, 0) {
		return nil, &OptionError{"Time", "a finite time"}
	}
	c := s.newClimb(ctx, s.newWorkspace(), problem{time: o.Time, drive: 1}, o.Logger)
	if o.Guess != nil {
		copy(c.w.eval.X, o.Guess)
		c.settleJunctions()
	}
	if err := c.run(); err != nil {
		return nil, err
	}
	return &Bias{X: append([]float64(nil), c.w.eval.X...), Rung: c.rung, Iterations: c.iterations, Work: c.w.work}, nil
}

// OptionError says that an option makes no sense.
type OptionError struct {
	Option string // the field's name
	Want   string
}

func (e *OptionError) Error() string { return e.Option + ": want " + e.Want }

// climb is one search for a solution of a problem.
type climb struct {
	ctx        context.Context
	s          *System
	w          *workspace
	base       problem // the user's own equations
	log        *slog.Logger
	rung       string
	iterations int
	best       state
	distance   float64 // length of the Newton update at best
}

// state is a point with the junction voltages that go with it.
type state struct{ x, junctions []float64 }

func (s *System) newState() state {
	return state{make([]float64, len(s.names)), make([]float64, s.junctions)}
}

func (p *state) save(e *Eval) {
	copy(p.x, e.X)
	copy(p.junctions, e.Junctions)
}

func (p *state) load(e *Eval) {
	copy(e.X, p.x)
	copy(e.Junctions, p.junctions)
}

func (s *System) newClimb(ctx context.Context, w *workspace, base problem, log *slog.Logger) *climb {
	if log == nil {
		log = slog.New(slog.DiscardHandler)
	}
	return &climb{ctx: ctx, s: s, w: w, base: base, log: log, best: s.newState(), distance: math.Inf(1)}
}

// run tries one method after the other. The line search goes on from the best point so far; the continuations set out from the start
// again, for a point at which Newton's method got lost is a worse beginning than none. It leaves the solution in the workspace.
func (c *climb) run() error {
	c.s.hold(c.w.eval.X, c.base.time, c.base.drive)
	c.best.save(&c.w.eval)
	start := c.s.newState()
	start.save(&c.w.eval)
	rungs := []struct {
		name string
		from *state
		run  func() error
	}{
		{RungNewton, &start, c.plain}, {RungDamped, &c.best, c.damped},
		{RungSources, &start, c.sources}, {RungPseudo, &start, c.pseudo}, {RungShunts, &start, c.shunts},
	}
	var last error
	for _, r := range rungs {
		c.rung = r.name
		r.from.load(&c.w.eval)
		err := r.run()
		if err == nil {
			err = c.accept()
		}
		if err == nil {
			c.log.Debug("bias found", "rung", r.name, "iterations", c.iterations)
			return nil
		}
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		c.log.Debug("bias rung failed", "rung", r.name, "iterations", c.iterations, "reason", err)
		last = err
		c.compare()
	}
	return c.giveUp(&start, last)
}

// giveUp says why no method found a solution from start.
func (c *climb) giveUp(start *state, last error) error {
	start.load(&c.w.eval)
	if err := c.singularHere(); err != nil {
		return err
	}
	c.best.load(&c.w.eval)
	var singular *SingularError
	if errors.As(last, &singular) {
		if err := c.singularHere(); err != nil {
			return err
		}
	}
	c.settleJunctions()
	return c.resistance(last)
}

// singularHere returns a *SingularError if the equations leave an unknown free at the current point.
func (c *climb) singularHere() error {
	c.settleJunctions()
	c.w.assemble(&c.base)
	if c.w.factor() != nil {
		return c.w.undetermined()
	}
	return c.w.determined()
}

// compare keeps the better of the current point and the best so far.
func (c *climb) compare() {
	if math.IsInf(c.distance, 1) {
		failed := c.s.newState()
		failed.save(&c.w.eval)
		c.best.load(&c.w.eval)
		c.remember()
		failed.load(&c.w.eval)
	}
	c.remember()
}

// remember keeps the current point if it is the best so far: the one with the shortest Newton update.
func (c *climb) remember() {
	w, e := c.w, &c.w.eval
	e.Limit = false
	c.s.hold(e.X, c.base.time, c.base.drive)
	if w.step(&c.base) != nil {
		return
	}
	copy(w.trial, e.X)
	if d := w.length(w.update); d < c.distance {
		c.distance = d
		c.best.save(e)
	}
}

// settleJunctions sets the junction voltages to those of the current point.
func (c *climb) settleJunctions() {
	c.w.eval.Limit = false
	c.s.hold(c.w.eval.X, c.base.time, c.base.drive)
	c.w.evaluate(&c.base)
}

func (c *climb) newton(p *problem, most int) error {
	n, err := c.w.newton(c.ctx, p, most)
	c.iterations += n
	return err
}

// plainIterations is the number of iterations after which Newton's method by itself has lost its way: where it finds the point at all, it
// takes a third of them.
const plainIterations = 40

func (c *climb) plain() error {
	p := c.base
	return c.newton(&p, plainIterations)
}

func (c *climb) damped() error {
	p := c.base
	n, err := c.w.damped(c.ctx, &p, plainIterations)
	c.iterations += n
	return err
}
