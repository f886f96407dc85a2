package mna

import "math"

const (
	// stageIterations bounds Newton's method within a stage; a step that needs more is too long. A junction that turns off may take one iteration for
	// every thermal voltage.
	stageIterations = 50
	// patientIterations may pass before an iteration that gets no nearer has arrived within stageStall of the largest unknown.
	patientIterations = 8
	stageStall        = 1e-7
	// stageShare is the share of the allowed error that the iteration may leave.
	stageShare = 0.02
	// curvatureFrom is the size of an update beside the allowed error from which on its successor tells the curvature rather than
	// rounding.
	curvatureFrom = 0.1
	// curvatureMemory is what an old, larger estimate keeps of its weight against a new one.
	curvatureMemory = 0.8
	// curvatureLife is the number of stages for which an estimate is trusted.
	curvatureLife = 40
	// curvatureReach is how much larger an update may be than the one that told the curvature.
	curvatureReach = 4
	// roundingShare is an update beside the unknown that is rounding.
	roundingShare = 16 * 0x1p-52
)

// stageNewton is Newton's method on one stage of an integration, to the precision that the step needs.
//
// Measured in allowed errors, an update d leaves an error of about curvature d^2 (Newton-Mysovskikh; Deuflhard, Newton Methods for Nonlinear Problems,
// 2004, theorem 2.2). The curvature is learnt whenever two updates follow each other; with it, one evaluation is enough for most
// stages.
type stageNewton struct {
	r         *integration
	curvature float64 // infinite: not known
	reach     float64 // the size of the update it was learnt from
	age       int     // stages since then
}

// solve solves p from eval.X. It leaves in eval the currents and charges of the solution.
func (n *stageNewton) solve(p *problem) error {
	w := n.r.w
	w.sys.hold(w.eval.X, p.time, p.drive)
	w.eval.Limit = true
	last := 0.0
	n.age++
	for i := range stageIterations {
		if err := w.step(p); err != nil {
			return err
		}
		size, finite := n.apply()
		switch {
		case !finite:
			return errDiverged
		case w.eval.Limited:
			last = 0
			continue
		case last >= curvatureFrom:
			n.learn(size/(last*last), last)
		case last > 0:
			n.age = 0 // rounding tells nothing, but nor is anything wrong
		}
		if size <= stageShare || n.leaves(size) <= stageShare && (last > 0 || n.trusts(size)) {
			w.carry()
			return nil
		}
		if last > 0 && size > stallRatio*last && w.movement() <= stall(i) {
			w.carry()
			return nil
		}
		w.repivot = last > 0 && size > stallRatio*last
		last = size
	}
	return errSlow
}

// stall is the movement beside the largest unknowns up to which iteration i may have stopped getting nearer. In a step so short that charges dwarf
// currents, rounding moves the unknowns by far more than their last bits.
func stall(i int) float64 {
	if i >= patientIterations {
		return stageStall
	}
	return stallShare
}

// leaves is the error after an update, in allowed errors.
func (n *stageNewton) leaves(size float64) float64 { return n.curvature * size * size }

// trusts reports whether the curvature is known well enough for an update that no other follows.
func (n *stageNewton) trusts(size float64) bool {
	return n.age < curvatureLife && size <= curvatureReach*n.reach
}

// forget makes the next stage learn the curvature anew: something has happened that it does not know.
func (n *stageNewton) forget() {
	n.curvature, n.reach, n.age = math.Inf(1), 0, 0
	n.r.w.repivot = true
}

func (n *stageNewton) learn(curvature, size float64) {
	if n.curvature > curvature && !math.IsInf(n.curvature, 1) {
		curvature = math.Max(curvature, curvatureMemory*n.curvature)
	}
	n.curvature, n.reach, n.age = curvature, size, 0
}

// apply adds the update to the free unknowns and returns its size in allowed errors.
func (n *stageNewton) apply() (size float64, finite bool) {
	w, first := n.r.w, n.r.s.first()
	x, perError := w.eval.X[first:], n.r.perError[first:]
	finite = true
	for i, d := range w.update {
		x[i] += d
		d = math.Abs(d)
		if !(d <= math.MaxFloat64) {
			finite = false
		}
		if d *= perError[i]; d > size && d > roundingShare*math.Abs(x[i])*perError[i] {
			size = d
		}
	}
	return size, finite
}

// carry moves the currents and charges in eval along the last update: exact but for the square of a tiny step.
func (w *workspace) carry() {
	e, first := &w.eval, int32(w.sys.first())
	for k, col := range w.sys.cols {
		if col < first {
			continue
		}
		row, d := w.sys.rows[k], w.update[col-first]
		e.F[row] += e.G[k] * d
		e.Q[row] += e.C[k] * d
	}
}
