package mna

import (
	"fmt"
	"math"
)

const (
	// balanceShare bounds the sum of the currents of a node against the sum of their magnitudes in an accepted answer.
	balanceShare = 1e-12
	// rounding is how far rounding may move a current: each is the product of a derivative and an unknown that is known to half of
	// its last bit, the sum rounds once more for every term, and so does the elimination that the last update comes from.
	rounding = 16 * 0x1p-52
	// What is left may always be as small as this: the inner differences of a device round too.
	balanceCurrent = 1e-19 // A
	balanceVoltage = 1e-15 // V
	// polishIterations may follow where Newton's method has settled but the currents do not balance yet.
	polishIterations = 4
)

// balanceError says that Newton's method settled where the equations do not hold.
type balanceError struct {
	unknown      string
	left, around float64
}

func (e *balanceError) Error() string {
	return fmt.Sprintf("%s does not balance: %g of %g is left", e.unknown, e.left, e.around)
}

// accept checks the untouched equations at the solution in the workspace: at every node the sum of the currents against the sum of
// their magnitudes, and that the equations determine every unknown.
func (c *climb) accept() error {
	w := c.w
	var err error
	for range polishIterations {
		w.eval.Limit = false
		w.evaluate(&c.base)
		w.assemble(&c.base)
		if err := w.factor(); err != nil {
			return err
		}
		if err = c.balance(); err == nil {
			return w.determined()
		}
		w.solve()
		if !w.apply(1).finite {
			return errDiverged
		}
		c.iterations++
	}
	return err
}

// balance compares the residual of every row with the magnitudes of its terms.
func (c *climb) balance() error {
	w := c.w
	size := c.magnitudes()
	for i := c.s.first(); i < len(size); i++ {
		floor := balanceCurrent
		if c.s.branch[i] {
			floor = balanceVoltage
		}
		if !(math.Abs(w.residual[i]) <= size[i]+floor) {
			return &balanceError{c.s.names[i], w.residual[i], size[i]}
		}
	}
	return nil
}

// magnitudes evaluates each device alone and returns, for every row, how much of its terms may be left over. It leaves eval with
// one device's terms.
func (c *climb) magnitudes() []float64 {
	e := &c.w.eval
	size := make([]float64, len(e.F))
	c.roundings(size)
	clear(e.F)
	clear(e.Q)
	for i, s := range c.s.stamps {
		s.Eval(e)
		for _, u := range c.s.rowsOf(i) {
			term := math.Abs(e.F[u])
			if c.base.alpha != 0 {
				term += math.Abs(c.base.alpha * e.Q[u])
			}
			size[u] += balanceShare * term
			e.F[u], e.Q[u] = 0, 0
		}
	}
	for i, q := range c.base.charge {
		size[i] += balanceShare * math.Abs(c.base.alpha*q)
	}
	for i, v := range c.base.constant {
		size[i] += balanceShare * math.Abs(v)
	}
	return size
}

// roundings adds to size what rounding may leave of every row. Within a device terms cancel, of which each carries the rounding of the largest
// voltage that it depends on.
func (c *climb) roundings(size []float64) {
	w, x := c.w, c.w.eval.X
	volts, siemens := make([]float64, len(size)), make([]float64, len(size)) // of each row: the largest voltage, the sum of the derivatives by voltages
	for k, j := range w.jacobian {
		row, col := c.s.rows[k], c.s.cols[k]
		switch {
		case row <= 0 || col <= 0 || j == 0:
		case c.s.branch[col]:
			size[row] += rounding * math.Abs(j*x[col])
		default:
			siemens[row] += math.Abs(j)
			volts[row] = max(volts[row], math.Abs(x[col]))
		}
	}
	for row := range size {
		size[row] += rounding * siemens[row] * volts[row]
	}
}

// undetermined is the factor by which a disturbance of the equations in their last bits may grow to no more than the size of the
// unknowns: beyond it they are singular as far as numbers can tell.
const undetermined = 1e14

// determined checks on the last factors that no combination of the unknowns is free: that a disturbance of every equation, of the size of its
// largest coefficient and of mixed signs, does not move any unknown beyond bounds.
func (w *workspace) determined() error {
	s := w.sys
	first := s.first()
	scale := w.rowScale()
	for i := range w.update {
		w.update[i] = mixedSign(i) * scale[first+i]
	}
	w.lu.Solve(w.update)
	w.work.Solves++
	for _, v := range w.update {
		if !(math.Abs(v) <= undetermined) {
			return w.undetermined()
		}
	}
	return nil
}

// rowScale returns the largest coefficient of every row, 1 for an empty one.
func (w *workspace) rowScale() []float64 {
	scale := make([]float64, len(w.residual))
	first := int32(w.sys.first())
	for k, j := range w.jacobian {
		if w.sys.cols[k] >= first {
			row := w.sys.rows[k]
			scale[row] = max(scale[row], math.Abs(j))
		}
	}
	for i, v := range scale {
		if v == 0 {
			scale[i] = 1
		}
	}
	return scale
}

// mixedSign returns numbers between 1/2 and 1 of irregular sign, the same in every run.
func mixedSign(i int) float64 {
	const golden = 0.6180339887498949
	_, v := math.Modf(float64(i+1) * golden)
	if v < 0.5 {
		return v - 1
	}
	return v
}
