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
	Guess  []float64    // all unknowns, nil: zero
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
	RungPseudo  = "pseudo-transient"
	RungSources = "source stepping"
	RungShunts  = "shunt stepping"
)

var (
	errDiverged = errors.New("the iteration diverged")
	errSlow     = errors.New("the iteration did not settle")
)

// Bias finds a point at which the currents of every node balance: Newton's method with junction limiting and, if
// that fails, a ladder of continuations. Whatever helped on the way is gone from the equations of the answer.
//
// It returns *SingularError, *NoConvergenceError or the context's error.
func (s *System) Bias(ctx context.Context, o BiasOptions) (*Bias, error) {
	if s.analysis == nil {
		return nil, s.singular
	}
	log := o.Logger
	if log == nil {
		log = slog.New(slog.DiscardHandler)
	}
	c := &climb{ctx: ctx, s: s, w: s.newWorkspace(), o: o}
	rungs := []struct {
		name string
		run  func() error
	}{{RungNewton, c.plain}, {RungPseudo, c.pseudo}, {RungSources, c.sources}, {RungShunts, c.shunts}}
	var last error
	for _, r := range rungs {
		err := r.run()
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		if err == nil {
			if err = c.accept(); err == nil {
				log.Debug("bias found", "rung", r.name, "iterations", c.iterations)
				return &Bias{X: append([]float64(nil), c.w.eval.X...), Rung: r.name, Iterations: c.iterations, Work: c.w.work}, nil
			}
		}
		log.Debug("bias rung failed", "rung", r.name, "reason", err)
		last = err
	}
	var singular *SingularError
	if errors.As(last, &singular) {
		return nil, singular
	}
	return nil, c.explain(last)
}

// climb is one search for a bias point.
type climb struct {
	ctx        context.Context
	s          *System
	w          *workspace
	o          BiasOptions
	iterations int
	best       []float64
	bestNorm   float64
}

// problem is the user's own equations.
func (c *climb) problem() *problem { return &problem{time: c.o.Time, drive: 1} }

func (c *climb) newton(p *problem, most int) error {
	n, err := c.w.newton(c.ctx, p, most)
	c.iterations += n
	return err
}

// restart goes back to the guess.
func (c *climb) restart() {
	clear(c.w.eval.X)
	if c.o.Guess != nil {
		copy(c.w.eval.X, c.o.Guess)
	}
	clear(c.w.eval.Junctions)
	if c.o.Guess != nil {
		c.settleJunctions()
	}
}

// settleJunctions sets the junction voltages to those of the current point.
func (c *climb) settleJunctions() {
	c.w.eval.Limit = false
	c.s.hold(c.w.eval.X, c.o.Time, 1)
	c.w.evaluate(c.problem())
}

func (c *climb) plain() error {
	c.restart()
	return c.newton(c.problem(), biasIterations)
}

const (
	continuationIterations = 30   // of Newton's method at one point of a continuation
	continuationSteps      = 2000 // before a continuation is given up
	easySteps              = 8    // iterations below which a continuation takes longer steps
	smallestShare          = 1e-9 // of the whole way: a shorter step is no progress
)

// sources raises all independent sources from zero, with steps that adapt to how hard each was.
func (c *climb) sources() error {
	clear(c.w.eval.X)
	clear(c.w.eval.Junctions)
	good := append([]float64(nil), c.w.eval.X...)
	goodJunctions := append([]float64(nil), c.w.eval.Junctions...)
	at, step := 0.0, 0.1
	for range continuationSteps {
		next := math.Min(1, at+step)
		before := c.iterations
		p := c.problem()
		p.drive = next
		err := c.newton(p, continuationIterations)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		if err != nil {
			copy(c.w.eval.X, good)
			copy(c.w.eval.Junctions, goodJunctions)
			if step /= 4; step < smallestShare {
				return err
			}
			continue
		}
		copy(good, c.w.eval.X)
		copy(goodJunctions, c.w.eval.Junctions)
		if at = next; at == 1 {
			return nil
		}
		if c.iterations-before <= easySteps {
			step *= 2
		}
	}
	return errSlow
}

const (
	firstShunt    = 1.0   // S
	smallestShunt = 1e-15 // S; below it the shunts are left out altogether
)

// shunts puts a conductance from every free node to ground and withdraws it step by step, at last to exactly zero.
func (c *climb) shunts() error {
	clear(c.w.eval.X)
	clear(c.w.eval.Junctions)
	good := append([]float64(nil), c.w.eval.X...)
	goodJunctions := append([]float64(nil), c.w.eval.Junctions...)
	shunt, ratio := firstShunt, 0.1
	for range continuationSteps {
		before := c.iterations
		p := c.problem()
		p.shunt = shunt
		err := c.newton(p, continuationIterations)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		if err != nil {
			copy(c.w.eval.X, good)
			copy(c.w.eval.Junctions, goodJunctions)
			if ratio > 0.99 || shunt == firstShunt {
				return err
			}
			shunt /= ratio
			ratio = math.Sqrt(ratio)
			shunt *= ratio
			continue
		}
		copy(good, c.w.eval.X)
		copy(goodJunctions, c.w.eval.Junctions)
		if shunt == 0 {
			return nil
		}
		if c.iterations-before <= easySteps {
			ratio = math.Max(1e-3, ratio*ratio)
		}
		if shunt *= ratio; shunt < smallestShunt {
			shunt = 0
		}
	}
	return errSlow
}

const (
	firstPseudo = 1e-3 // S: the conductance of the first implicit step of the pseudo-time
	pseudoGrow  = 4
)

// pseudo follows the circuit, with a conductance from every node to its last voltage instead of its own
// capacitances, towards rest: pseudo-transient continuation (Kelley & Keyes, Convergence analysis of
// pseudo-transient continuation, SIAM J. Numer. Anal. 35, 1998, 508-523).
func (c *climb) pseudo() error {
	c.restart()
	anchor := append([]float64(nil), c.w.eval.X...)
	junctions := append([]float64(nil), c.w.eval.Junctions...)
	shunt := firstPseudo
	for range continuationSteps {
		p := c.problem()
		p.shunt, p.anchor = shunt, anchor
		err := c.newton(p, continuationIterations)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		if err != nil {
			copy(c.w.eval.X, anchor)
			copy(c.w.eval.Junctions, junctions)
			if shunt *= 10; shunt > 1e6 {
				return err
			}
			continue
		}
		copy(anchor, c.w.eval.X)
		copy(junctions, c.w.eval.Junctions)
		if shunt /= pseudoGrow; shunt < smallestShunt {
			return c.newton(c.problem(), biasIterations)
		}
	}
	return errSlow
}
