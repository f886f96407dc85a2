package mna

import (
	"context"
	"math"

	"poise/mna/sparse"
)

// Newton's method stops when the last update of every unknown is below this share of the unknown, or below the
// floor of its kind: far below what any measurement resolves.
const (
	updateShare  = 1e-9
	voltageFloor = 1e-15 // V
	currentFloor = 1e-18 // A
	// balanceShare bounds the sum of the currents of a node against the sum of their magnitudes in an accepted answer.
	balanceShare = 1e-12
)

// problem is a system of equations to be solved by Newton's method:
//
//	f(x, t) + alpha q(x, t) + constant + shunt x = 0
//
// A bias has alpha = 0 and no constant; an implicit integration step has both.
type problem struct {
	time     float64
	drive    float64
	alpha    float64   // 1/s
	constant []float64 // by unknown, nil if none
	cold     bool
	// shunt is a conductance in S from every free node to its anchor (nil: ground), 0 in an accepted answer.
	shunt  float64
	anchor []float64
}

// workspace holds what one goroutine needs to solve a system. Nothing in it is allocated during an iteration.
type workspace struct {
	sys      *System
	eval     Eval
	jacobian []float64
	lu       *sparse.LU[float64]
	update   []float64 // of the free unknowns
	residual []float64
	trial    []float64
	work     Work
}

// Work counts what was done.
type Work struct {
	Evaluations    int // of the whole circuit
	Factorisations int
	Solves         int
}

func (s *System) newWorkspace() *workspace {
	n := len(s.names)
	w := &workspace{
		sys: s,
		eval: Eval{
			X: make([]float64, n), F: make([]float64, n), Q: make([]float64, n),
			G: make([]float64, s.slots), C: make([]float64, s.slots),
			Drive: 1, Junctions: make([]float64, s.junctions),
		},
		jacobian: make([]float64, s.slots),
		lu:       sparse.NewLU[float64](s.analysis),
		update:   make([]float64, n-s.first()),
		residual: make([]float64, n),
		trial:    make([]float64, n),
	}
	return w
}

// first is the index of the first free unknown.
func (s *System) first() int { return len(s.held) + 1 }

// hold writes the voltages of the held nodes at time t.
func (s *System) hold(x []float64, t, drive float64) {
	x[0] = 0
	for i, signal := range s.held {
		x[i+1] = drive * signal.At(t)
	}
}

// evaluate computes f, q, G and C at eval.X.
func (w *workspace) evaluate(p *problem) {
	e := &w.eval
	e.Time, e.Drive, e.Cold = p.time, p.drive, p.cold
	e.Dynamic = p.alpha != 0
	e.Limited = false
	clear(e.F)
	clear(e.G)
	if e.Dynamic {
		clear(e.Q)
		clear(e.C)
	}
	for _, s := range w.sys.stamps {
		s.Eval(e)
	}
	w.work.Evaluations++
}

// assemble forms the residual and the Jacobian of the problem.
func (w *workspace) assemble(p *problem) {
	e := &w.eval
	copy(w.residual, e.F)
	copy(w.jacobian, e.G)
	if p.alpha != 0 {
		for i, q := range e.Q {
			w.residual[i] += p.alpha * q
		}
		for k, c := range e.C {
			w.jacobian[k] += p.alpha * c
		}
	}
	for i, c := range p.constant {
		w.residual[i] += c
	}
	if p.shunt != 0 {
		w.addShunt(p)
	}
}

// addShunt adds the conductances that help on the way and are gone in the answer.
func (w *workspace) addShunt(p *problem) {
	for i := w.sys.first(); i < len(w.residual); i++ {
		slot := w.sys.diagonal[i]
		if slot == 0 {
			continue
		}
		v := w.eval.X[i]
		if p.anchor != nil {
			v -= p.anchor[i]
		}
		w.residual[i] += p.shunt * v
		w.jacobian[slot] += p.shunt
	}
}

// step computes the Newton update of the free unknowns.
func (w *workspace) step() error {
	if err := w.lu.Refactor(w.jacobian); err != nil {
		return w.sys.explain(err)
	}
	w.work.Factorisations++
	for i := range w.update {
		w.update[i] = -w.residual[w.sys.first()+i]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
	return nil
}

// limits of a solution by Newton's method.
const (
	biasIterations = 100
	// runaway is a voltage or current that no front end reaches: an iterate beyond it has diverged.
	runaway = 1e12
)

// newton solves p from eval.X. It returns the number of iterations.
func (w *workspace) newton(ctx context.Context, p *problem, most int) (int, error) {
	e := &w.eval
	w.sys.hold(e.X, p.time, p.drive)
	e.Limit = true
	for i := 1; i <= most; i++ {
		if err := ctx.Err(); err != nil {
			return i, err
		}
		w.evaluate(p)
		w.assemble(p)
		limited := e.Limited
		if err := w.step(); err != nil {
			return i, err
		}
		small, finite := w.apply(1)
		if !finite {
			return i, errDiverged
		}
		if small && !limited {
			return i, nil
		}
	}
	return most, errSlow
}

// apply adds a share of the update to the free unknowns and reports whether all of it was below the tolerance.
func (w *workspace) apply(share float64) (small, finite bool) {
	x := w.eval.X[w.sys.first():]
	small, finite = true, true
	for i, d := range w.update {
		d *= share
		x[i] += d
		floor := voltageFloor
		if w.sys.branch[w.sys.first()+i] {
			floor = currentFloor
		}
		if !(math.Abs(d) <= updateShare*math.Abs(x[i])+floor) {
			small = false
		}
		if !(math.Abs(x[i]) <= runaway) {
			finite = false
		}
	}
	return small, finite
}
