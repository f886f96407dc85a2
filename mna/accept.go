package mna

import (
	"fmt"
	"math"
	"sort"
	"strings"

	"errors"

	"poise/mna/sparse"
)

// rounding is how far the sum of a node's currents may miss zero beyond balanceShare when the voltages themselves are
// rounded: a conductance g sees g times the last bit of its voltage.
const rounding = 8 * 0x1p-52

// accept checks the untouched equations at the solution: at every node the sum of the currents against the
// sum of their magnitudes, as rounding of the unknowns allows.
func (c *climb) accept() error {
	w, e := c.w, &c.w.eval
	e.Limit = false
	w.evaluate(c.problem())
	sum := append([]float64(nil), e.F...)
	size := make([]float64, len(sum))
	for _, s := range c.s.stamps {
		clear(e.F)
		s.Eval(e)
		for i, f := range e.F {
			size[i] += math.Abs(f)
		}
	}
	for k := range c.s.rows {
		if row, col := c.s.rows[k], c.s.cols[k]; row > 0 && col > 0 {
			size[row] += rounding / balanceShare * math.Abs(e.G[k]*e.X[col]) / 8
		}
	}
	for i := c.s.first(); i < len(sum); i++ {
		if !(math.Abs(sum[i]) <= balanceShare*size[i]+math.SmallestNonzeroFloat64) {
			return fmt.Errorf("%s does not balance: %g of %g is left", c.s.names[i], sum[i], size[i])
		}
	}
	return nil
}

// NoConvergenceError says that no method found a bias point.
type NoConvergenceError struct {
	Iterations int
	Worst      []Resistance // the unknowns that resist most, worst first
	Reason     error
}

// Resistance is an unknown whose equation does not balance.
type Resistance struct {
	Unknown  string
	Residual float64 // A or V
	Devices  []string
}

func (e *NoConvergenceError) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "no bias point found after %d iterations", e.Iterations)
	for i, r := range e.Worst {
		if i == 0 {
			b.WriteString("; what resists most: ")
		} else {
			b.WriteString(", ")
		}
		fmt.Fprintf(&b, "%s (off by %.3g, at %s)", r.Unknown, r.Residual, strings.Join(r.Devices, " "))
	}
	return b.String()
}

func (e *NoConvergenceError) Unwrap() error { return e.Reason }

// worstShown is the number of unknowns that an error names.
const worstShown = 3

// explain names the unknowns that resist at the last point.
func (c *climb) explain(reason error) error {
	w := c.w
	w.eval.Limit = false
	w.evaluate(c.problem())
	e := &NoConvergenceError{Iterations: c.iterations, Reason: reason}
	order := make([]int, 0, len(w.eval.F))
	for i := c.s.first(); i < len(w.eval.F); i++ {
		order = append(order, i)
	}
	sort.SliceStable(order, func(a, b int) bool {
		return math.Abs(w.eval.F[order[a]]) > math.Abs(w.eval.F[order[b]])
	})
	for _, i := range order[:min(worstShown, len(order))] {
		e.Worst = append(e.Worst, Resistance{c.s.names[i], w.eval.F[i], c.s.touching(Unknown(i))})
	}
	return e
}

// touching names the devices connected to an unknown.
func (s *System) touching(u Unknown) []string {
	var names []string
	for i := range s.devices {
		pins, internals := s.Unknowns(i)
		for _, p := range append(pins, internals...) {
			if p == u {
				names = append(names, s.devices[i].name)
				break
			}
		}
	}
	return names
}

// SingularError says that the equations have no unique solution.
type SingularError struct {
	Unknowns []string // that are not determined
	Devices  []string // that touch them
	// Structural: no values of the parts could help. Otherwise it is these values that do not.
	Structural bool
}

func (e *SingularError) Error() string {
	why := "with these values"
	if e.Structural {
		why = "whatever the values"
	}
	return fmt.Sprintf("nothing determines %s (at %s), %s", strings.Join(e.Unknowns, ", "), strings.Join(e.Devices, " "), why)
}

// explain turns an error of the factorisation into the user's names.
func (s *System) explain(err error) error {
	var structural *sparse.StructuralError
	var numerical *sparse.SingularError
	switch {
	case errors.As(err, &structural):
		e := &SingularError{Structural: true}
		for _, j := range structural.Columns {
			e.Unknowns = append(e.Unknowns, s.names[j+s.first()])
			e.Devices = append(e.Devices, s.touching(Unknown(j+s.first()))...)
		}
		return e
	case errors.As(err, &numerical):
		u := numerical.Column + s.first()
		return &SingularError{Unknowns: []string{s.names[u]}, Devices: s.touching(Unknown(u))}
	}
	return err
}
