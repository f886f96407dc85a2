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
	// roundingShare is an update beside the unknown that is rounding.
	roundingShare = 16 * 0x1p-52
)

// stageNewton is Newton's method on one stage of an integration, to the precision that the step needs.
//
// An update d leaves an error of about J^-1 (dJ/dx d) d / 2. How the Jacobian J changes is read off its change since the last evaluation, so that one
// evaluation is enough for most stages (a secant form of the bounds in Deuflhard, Newton Methods for Nonlinear Problems, 2004, section 2.1).
type stageNewton struct {
	r      *integration
	last   []float64 // where the evaluation before was made, by unknown
	g, c   []float64 // its derivatives, by slot
	update []float64 // of the free unknowns
	known  bool      // there was one that tells something

	curvature float64 // largest error after one update beside half of its square, in allowed errors, seen lately
	unseen    int     // updates since it was looked at
}

const (
	// curvatureMargin is by how much the curvature may have grown since it was looked at: that of a junction grows by e for each thermal voltage, and by this
	// much in nearly six of them.
	curvatureMargin = 300
	// curvatureLooks is the number of updates after which it is looked at again whatever it was.
	curvatureLooks = 8
)

func newStageNewton(r *integration) stageNewton {
	n := len(r.s.names)
	return stageNewton{
		r: r, last: make([]float64, n), update: make([]float64, n-r.s.first()),
		g: make([]float64, r.s.slots), c: make([]float64, r.s.slots),
	}
}

// solve solves p from eval.X. It leaves the charges of the solution in eval, and the currents before the last update.
func (n *stageNewton) solve(p *problem) error {
	w := n.r.w
	e := &w.eval
	w.sys.hold(e.X, p.time, p.drive)
	e.Limit = true
	last := 0.0
	for i := range stageIterations {
		n.remember()
		if err := w.step(p); err != nil {
			return err
		}
		copy(n.update, w.update)
		size, finite := n.apply()
		switch {
		case !finite:
			return errDiverged
		case e.Limited:
			n.note()
			n.known, last = false, 0
			continue
		case size <= stageShare, n.leaves(p.alpha, size) <= stageShare, last > 0 && size > stallRatio*last && n.movement() <= stall(i):
			n.note()
			w.carryCharges(n.update)
			return nil
		}
		n.note()
		w.repivot = last > 0 && size > stallRatio*last
		last = size
	}
	return errSlow
}

// remember sets the derivatives of the last evaluation aside.
func (n *stageNewton) remember() {
	e := &n.r.w.eval
	n.g, e.G = e.G, n.g
	n.c, e.C = e.C, n.c
}

// note takes the present evaluation, whose update has been applied, as the last one.
func (n *stageNewton) note() {
	n.known = true
	for i, x := range n.r.w.eval.X[n.r.s.first():] {
		n.last[n.r.s.first()+i] = x - n.update[i]
	}
}

// leaves estimates the error after an update of the given size, which has been applied, both in allowed errors.
func (n *stageNewton) leaves(alpha, size float64) float64 {
	if !n.known {
		return math.Inf(1)
	}
	if n.unseen++; n.unseen < curvatureLooks && curvatureMargin*n.curvature*size*size/2 <= stageShare {
		return 0
	}
	change := n.changes(alpha)
	moved := 0.0
	for i, x := range n.r.w.eval.X[n.r.s.first():] {
		k := n.r.s.first() + i
		moved = max(moved, math.Abs(x-n.update[i]-n.last[k])*n.r.perError[k])
	}
	if moved == 0 {
		return math.Inf(1)
	}
	n.unseen, n.curvature = 0, max(change/(size*moved), n.curvature/2)
	return change * size / moved / 2
}

// changes returns the size, in allowed errors, of what the change of the Jacobian since the last evaluation makes of the update.
func (n *stageNewton) changes(alpha float64) float64 {
	w, first := n.r.w, n.r.s.first()
	e := &w.eval
	clear(w.update)
	for _, p := range w.sys.free {
		k := p.slot
		w.update[int(p.row)-first] += (e.G[k] - n.g[k] + alpha*(e.C[k]-n.c[k])) * n.update[int(p.col)-first]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
	size := 0.0
	for i, d := range w.update {
		size = max(size, math.Abs(d)*n.r.perError[first+i])
	}
	return size
}

// movement is the largest update beside the largest unknown of its kind.
func (n *stageNewton) movement() float64 {
	copy(n.r.w.update, n.update)
	return n.r.w.movement()
}

// stall is the movement beside the largest unknowns up to which iteration i may have stopped getting nearer. In a step so short that charges dwarf
// currents, rounding moves the unknowns by far more than their last bits.
func stall(i int) float64 {
	if i >= patientIterations {
		return stageStall
	}
	return stallShare
}

// forget makes the next stage learn anew how the derivatives change: something has happened in between.
func (n *stageNewton) forget() {
	n.known, n.unseen = false, curvatureLooks
}

// apply adds the update to the free unknowns and returns its size in allowed errors.
func (n *stageNewton) apply() (size float64, finite bool) {
	w, first := n.r.w, n.r.s.first()
	x, perError := w.eval.X[first:], n.r.perError[first:]
	for i, d := range w.update {
		v := x[i] + d
		x[i] = v
		if d = math.Abs(d); d <= roundingShare*math.Abs(v) && d <= math.MaxFloat64 {
			d = 0
		}
		size = max(size, d*perError[i])
	}
	return size, size <= math.MaxFloat64
}

// carryCharges moves the charges in eval along an update: exact but for the square of a tiny step.
func (w *workspace) carryCharges(update []float64) {
	w.carry(w.eval.Q, w.eval.C, update)
}

// carryCurrents does the same for the currents.
func (w *workspace) carryCurrents(update []float64) {
	w.carry(w.eval.F, w.eval.G, update)
}

func (w *workspace) carry(values, slopes, update []float64) {
	first := int32(w.sys.first())
	for _, p := range w.sys.free {
		values[p.row] += slopes[p.slot] * update[p.col-first]
	}
}
