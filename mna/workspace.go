package mna

import (
	"math"

	"poise/mna/sparse"
)

// problem is a system of equations to be solved by Newton's method:
//
//	f(x, t) + constant + alpha (q(x, t) - charge) + shunt (x - anchor) = 0
//
// A bias has alpha = 0; a stage of an implicit integration method has the rest. The difference of the charges is taken before anything is added to it:
// over a short step it is a small difference of large numbers, beside which currents would lose their last digits.
type problem struct {
	time     float64   // s
	drive    float64   // of all independent sources, 0..1
	alpha    float64   // 1/s
	constant []float64 // A, by unknown, nil if none
	charge   []float64 // C, by unknown, nil if none
	cold     bool
	// shunt is a conductance in S from every free node to its anchor (nil: ground). It is 0 in an accepted answer.
	shunt  float64
	anchor []float64
}

// workspace holds what one goroutine needs to solve a system. Nothing in it is allocated during an iteration.
type workspace struct {
	sys      *System
	eval     Eval
	jacobian []float64 // by slot
	residual []float64 // by unknown
	lu       *sparse.LU[float64]
	update   []float64 // of the free unknowns
	trial    []float64 // by unknown
	repivot  bool      // look for new pivots at the next factorisation
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
	return &workspace{
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

// assemble forms the residual and the Jacobian of the problem from the evaluation.
func (w *workspace) assemble(p *problem) {
	e := &w.eval
	if p.constant == nil {
		copy(w.residual, e.F)
	} else {
		f := e.F[:len(w.residual)]
		for i, c := range p.constant[:len(w.residual)] {
			w.residual[i] = f[i] + c
		}
	}
	if p.alpha != 0 {
		w.addRates(p)
		g, c := e.G[:len(w.jacobian)], e.C[:len(w.jacobian)]
		for k := range w.jacobian {
			w.jacobian[k] = g[k] + p.alpha*c[k]
		}
	} else {
		copy(w.jacobian, e.G)
	}
	if p.shunt != 0 {
		w.addShunt(p)
	}
}

// addRates adds the rates of the charges to the residual.
func (w *workspace) addRates(p *problem) {
	q := w.eval.Q
	if p.charge == nil {
		for i, v := range q {
			w.residual[i] += p.alpha * v
		}
		return
	}
	for i, from := range p.charge {
		w.residual[i] += p.alpha * (q[i] - from)
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

// factor factors the Jacobian. It returns *SingularError.
func (w *workspace) factor() error {
	w.work.Factorisations++
	refactor := w.lu.Refactor
	if w.repivot {
		// Pivots that were chosen for other numbers may still be large enough to go on with, but cost digits.
		refactor, w.repivot = w.lu.Factor, false
	}
	if err := refactor(w.jacobian); err != nil {
		return w.sys.explain(err)
	}
	return nil
}

// solve computes the Newton update of the free unknowns for the residual, on the last factors.
func (w *workspace) solve() {
	for i := range w.update {
		w.update[i] = -w.residual[w.sys.first()+i]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
}

// step evaluates the problem at eval.X and computes the Newton update.
func (w *workspace) step(p *problem) error {
	w.evaluate(p)
	w.assemble(p)
	if err := w.factor(); err != nil {
		return err
	}
	w.solve()
	return nil
}

// chargeRates fills rates with alpha C x, both of the free unknowns.
func (w *workspace) chargeRates(rates, x []float64, alpha float64) {
	clear(rates)
	first := int32(w.sys.first())
	for _, p := range w.sys.free {
		rates[p.row-first] += alpha * w.eval.C[p.slot] * x[p.col-first]
	}
}

// rounding fills noise with what the rounding of alpha q makes of every free unknown: the larger of what it makes if it has the same sign everywhere, as in a group of
// nodes that charges alone tie together, and if it has not. It spoils the update.
func (w *workspace) rounding(noise []float64, alpha float64) {
	w.chargeRounding(noise, alpha)
	copy(w.update, noise)
	w.lu.Solve(w.update)
	for i, v := range w.update {
		noise[i], w.update[i] = math.Abs(v), noise[i]*mixedSign(i)
	}
	w.lu.Solve(w.update)
	for i, v := range w.update {
		noise[i] = max(noise[i], math.Abs(v))
	}
	w.work.Solves += 2
}

// chargeRounding fills rates with the size of the rounding of alpha q.
func (w *workspace) chargeRounding(rates []float64, alpha float64) {
	const bit = 0x1p-52
	clear(rates)
	first := int32(w.sys.first())
	for k, c := range w.eval.C {
		if row, col := w.sys.rows[k], w.sys.cols[k]; row >= first && col > 0 {
			rates[row-first] += bit * alpha * math.Abs(c*w.eval.X[col])
		}
	}
}

// movement is the largest update beside the largest unknown of its kind.
func (w *workspace) movement() float64 {
	first := w.sys.first()
	moved, largest := [2]float64{}, [2]float64{voltageFloor, currentFloor}
	for k, v := range w.eval.X {
		kind := 0
		if w.sys.branch[k] {
			kind = 1
		}
		largest[kind] = max(largest[kind], math.Abs(v))
		if k >= first {
			moved[kind] = max(moved[kind], math.Abs(w.update[k-first]))
		}
	}
	return max(moved[0]/largest[0], moved[1]/largest[1])
}
