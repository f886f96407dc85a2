package mna

import (
	"iter"
	"math"
)

const (
	continuationIterations = 100  // of Newton's method at one point of a continuation
	briefIterations        = 50   // after which a shorter step is cheaper than a longer search
	continuationSteps      = 500  // before a continuation is given up
	continuationMost       = 5000 // iterations of a continuation, likewise
	easyIterations         = 8    // up to which the next step of a continuation is longer by all that is allowed
)

// steps counts the steps of a continuation until it has gone on for too long.
func (c *climb) steps() iter.Seq[int] {
	until := c.iterations + continuationMost
	return func(yield func(int) bool) {
		for i := 0; i < continuationSteps && c.iterations < until && yield(i); i++ {
		}
	}
}

// pace is by how much the next step of a continuation is longer after one that took n iterations; most after an easy one.
func pace(n int, most float64) float64 {
	if n <= easyIterations {
		return most
	}
	return math.Sqrt(most)
}

// attempt solves p, with junction limits or else with a line search, and returns the number of iterations. It goes back to the point good if that fails.
func (c *climb) attempt(p *problem, good *state) (int, error) {
	n, err := c.limited(p, good, continuationIterations)
	if err == nil || c.ctx.Err() != nil {
		return n, err
	}
	more, err := c.w.damped(c.ctx, p, continuationIterations)
	c.iterations += more
	if err != nil {
		good.load(&c.w.eval)
	}
	return n + more, err
}

// briefly does the same with junction limits alone, and gives up early.
func (c *climb) briefly(p *problem, good *state) (int, error) {
	return c.limited(p, good, briefIterations)
}

// limited solves p with junction limits in so many iterations at most.
func (c *climb) limited(p *problem, good *state, most int) (int, error) {
	n, err := c.w.newton(c.ctx, p, most)
	c.iterations += n
	if err != nil {
		good.load(&c.w.eval)
	}
	return n, err
}

const (
	firstPseudo   = 1e-3  // S: conductance of the first implicit step of the pseudo-time
	largestPseudo = 1e9   // S: a stiffer hold on the last point is no help
	leastPseudo   = 1e-15 // S: a step so long is Newton's method itself
	pseudoGrow    = 10.0
	pseudoShrink  = 8.0
	// restShare is a movement beside the largest voltage below which the circuit is nearly at rest.
	restShare = 1e-3
)

// pseudo follows the circuit, with equal capacitances from every node to ground in place of its own charges, towards rest, in implicit steps that
// grow as the circuit calms down: pseudo-transient continuation (Kelley & Keyes, Convergence analysis of pseudo-transient
// continuation, SIAM J. Numer. Anal. 35, 1998, 508-523). An implicit step of length h is a conductance C/h from every node to
// its last voltage.
func (c *climb) pseudo() error {
	good := c.s.newState()
	good.save(&c.w.eval)
	p := c.base
	p.anchor, p.shunt = good.x, firstPseudo
	solve := c.attempt // at the start: no step is so short that it spares the held nodes their jump
	for range c.steps() {
		n, err := solve(&p, &good)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		if err != nil {
			if p.shunt *= pseudoShrink; p.shunt > largestPseudo {
				return err
			}
			continue
		}
		calm := c.movement(good.x) <= restShare
		good.save(&c.w.eval)
		solve = c.briefly
		p.shunt /= pace(n, pseudoGrow)
		if calm || p.shunt < leastPseudo {
			bare := c.base
			if _, err = c.attempt(&bare, &good); err == nil || p.shunt < leastPseudo {
				return err
			}
		}
	}
	return errSlow
}

// movement is the largest change of a node from x, beside the largest voltage.
func (c *climb) movement(x []float64) float64 {
	moved, largest := 0.0, dampingVoltage
	for i, v := range c.w.eval.X {
		if !c.s.branch[i] {
			moved, largest = max(moved, math.Abs(v-x[i])), max(largest, math.Abs(v))
		}
	}
	return moved / largest
}

const (
	firstSources = 0.1 // the first share of the sources
	sourcesGrow  = 2.0
	leastSources = 1e-9 // the least change of the share that is progress
)

// sources raises all independent sources from zero, where an undriven circuit is at rest, in steps that adapt to how hard each was.
func (c *climb) sources() error {
	clear(c.w.eval.X)
	clear(c.w.eval.Junctions)
	good := c.s.newState()
	at, step := 0.0, firstSources
	p := c.base
	for range c.steps() {
		p.drive = math.Min(1, at+step) * c.base.drive
		n, err := c.attempt(&p, &good)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		if err != nil {
			if step /= 4; step < leastSources {
				return err
			}
			continue
		}
		good.save(&c.w.eval)
		if at = math.Min(1, at+step); at == 1 {
			return nil
		}
		step *= pace(n, sourcesGrow)
	}
	return errSlow
}

const (
	firstShunt    = 1.0   // S
	largestShunt  = 1e6   // S: if that does not make it easy, nothing does
	leastShunt    = 1e-15 // S: below it the shunts are left out altogether
	shuntRatio    = 0.1
	leastRatio    = 1e-3
	greatestRatio = 0.99 // a withdrawal slower than that is no progress
)

// shunts puts a conductance from every free node to ground and withdraws it, at last to exactly zero.
func (c *climb) shunts() error {
	clear(c.w.eval.X)
	clear(c.w.eval.Junctions)
	good, at := c.s.newState(), math.Inf(1) // the point, and the conductance it was found with
	p := c.base
	p.shunt = firstShunt
	ratio := shuntRatio
	for range c.steps() {
		n, err := c.attempt(&p, &good)
		if c.ctx.Err() != nil {
			return c.ctx.Err()
		}
		switch {
		case err == nil && p.shunt == 0:
			return nil
		case err == nil:
			good.save(&c.w.eval)
			at = p.shunt
			if n <= easyIterations {
				ratio = math.Max(leastRatio, ratio*ratio)
			}
		case math.IsInf(at, 1):
			if p.shunt *= 10; p.shunt > largestShunt {
				return err
			}
			continue
		case p.shunt == 0 || ratio > greatestRatio:
			return err
		default:
			ratio = math.Sqrt(ratio)
		}
		if p.shunt = at * ratio; p.shunt < leastShunt {
			p.shunt = 0
		}
	}
	return errSlow
}
