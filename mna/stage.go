package mna

import "math"

const (
	// stageIterations bounds Newton's method within a stage; a step that needs more is too long.
	stageIterations = 12
	// stageShare is the share of the allowed error that the iteration may leave.
	stageShare = 0.02
	// curvatureFrom is the size of an update beside the allowed error from which on its successor tells the curvature rather than
	// rounding.
	curvatureFrom = 0.1
	// curvatureMemory is what an old, larger estimate keeps of its weight against a new one.
	curvatureMemory = 0.5
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
}

// solve solves p from eval.X. It leaves in eval the charges of the solution.
func (n *stageNewton) solve(p *problem) error {
	w := n.r.w
	w.sys.hold(w.eval.X, p.time, p.drive)
	w.eval.Limit = true
	last := 0.0
	for range stageIterations {
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
			n.learn(size / (last * last))
		}
		if size <= stageShare || n.curvature*size*size <= stageShare {
			w.carryCharges()
			return nil
		}
		if last > 0 && size > 2*last {
			return errDiverged
		}
		last = size
	}
	return errSlow
}

func (n *stageNewton) learn(curvature float64) {
	if n.curvature > curvature && !math.IsInf(n.curvature, 1) {
		curvature = math.Max(curvature, curvatureMemory*n.curvature)
	}
	n.curvature = curvature
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

// carryCharges moves the charges in eval along the last update: exact but for the square of a tiny step, and consistent with
// the currents, which Newton's method carries the same way.
func (w *workspace) carryCharges() {
	first := int32(w.sys.first())
	for k, c := range w.eval.C {
		if col := w.sys.cols[k]; c != 0 && col >= first {
			w.eval.Q[w.sys.rows[k]] += c * w.update[col-first]
		}
	}
}
