package mna

import (
	"errors"
	"fmt"
	"math"
	"sort"
	"strings"

	"poise/mna/sparse"
)

// NoConvergenceError says that no method found a bias point.
type NoConvergenceError struct {
	Rung       string // the last method tried
	Iterations int    // of Newton's method over all of them
	// Worst are the unknowns whose equations balance worst at the best point found, worst first.
	Worst  []Imbalance
	Reason error // why the last method failed
}

// Imbalance is an unknown whose equation does not hold.
type Imbalance struct {
	Unknown  string
	Residual float64  // A for a node, V for a branch current
	Devices  []string // that touch the unknown
}

func (e *NoConvergenceError) Error() string {
	var b strings.Builder
	fmt.Fprintf(&b, "no bias point found after %d iterations, %s the last method tried", e.Iterations, e.Rung)
	for i, r := range e.Worst {
		separator := ", "
		if i == 0 {
			separator = "; what resists most: "
		}
		fmt.Fprintf(&b, "%s%s (off by %.3g, at %s)", separator, r.Unknown, r.Residual, list(r.Devices))
	}
	return b.String()
}

func (e *NoConvergenceError) Unwrap() error { return e.Reason }

// namesShown is the number of names that a message lists before it says how many more there are.
const namesShown = 6

// list joins names.
func list(names []string) string {
	if len(names) > namesShown {
		return fmt.Sprintf("%s and %d more", strings.Join(names[:namesShown], ", "), len(names)-namesShown)
	}
	return strings.Join(names, ", ")
}

// worstShown is the number of unknowns that an error names.
const worstShown = 3

// resistance names the unknowns that resist at the current point.
func (c *climb) resistance(reason error) error {
	w := c.w
	w.eval.Limit = false
	w.evaluate(&c.base)
	w.assemble(&c.base)
	e := &NoConvergenceError{Rung: c.rung, Iterations: c.iterations, Reason: reason}
	for _, i := range w.worstRows() {
		e.Worst = append(e.Worst, Imbalance{c.s.names[i], w.residual[i], c.s.touching(Unknown(i))})
	}
	return e
}

// worstRows returns the rows of the largest residuals beside their coefficients, worst first.
func (w *workspace) worstRows() []int {
	scale := w.rowScale()
	rank := func(i int) float64 {
		r := math.Abs(w.residual[i]) / scale[i]
		if math.IsNaN(r) {
			return math.Inf(1)
		}
		return r
	}
	var order []int
	for i := w.sys.first(); i < len(w.residual); i++ {
		order = append(order, i)
	}
	sort.SliceStable(order, func(a, b int) bool { return rank(order[a]) > rank(order[b]) })
	return order[:min(worstShown, len(order))]
}

// touching names the devices connected to any of the unknowns.
func (s *System) touching(unknowns ...Unknown) []string {
	wanted := make(map[Unknown]bool, len(unknowns))
	for _, u := range unknowns {
		wanted[u] = true
	}
	var names []string
	for i := range s.devices {
		for _, u := range s.rowsOf(i) {
			if wanted[u] {
				names = append(names, s.devices[i].name)
				break
			}
		}
	}
	return names
}

// SingularError says that the equations have no unique solution.
type SingularError struct {
	Unknowns []string // that are not determined: nodes by their names, branch currents by those of their devices
	Devices  []string // that touch them
	Floating []string // the nodes among the unknowns: nothing ties their voltage to gnd
	// Structural: no values of the parts could help. Otherwise it is these values that do not.
	Structural bool
}

func (e *SingularError) Error() string {
	why := "with these values"
	if e.Structural {
		why = "whatever the values"
	}
	if len(e.Floating) > 0 && len(e.Floating) == len(e.Unknowns) {
		return fmt.Sprintf("nothing ties %s to gnd (at %s), %s", list(e.Floating), list(e.Devices), why)
	}
	return fmt.Sprintf("nothing determines %s (at %s), %s", list(e.Unknowns), list(e.Devices), why)
}

// singular makes the error for unknowns that are not determined.
func (s *System) singular(structural bool, unknowns ...Unknown) *SingularError {
	e := &SingularError{Structural: structural, Devices: s.touching(unknowns...)}
	for _, u := range unknowns {
		e.Unknowns = append(e.Unknowns, s.names[u])
		if !s.branch[u] {
			e.Floating = append(e.Floating, s.names[u])
		}
	}
	return e
}

// explain turns an error of the factorisation into the user's names.
func (s *System) explain(err error) error {
	var structural *sparse.StructuralError
	var numerical *sparse.SingularError
	switch {
	case errors.As(err, &structural):
		var unknowns []Unknown
		for _, j := range structural.Columns {
			unknowns = append(unknowns, Unknown(j+s.first()))
		}
		return s.singular(true, unknowns...)
	case errors.As(err, &numerical) && numerical.NotFinite:
		return errDiverged
	case errors.As(err, &numerical):
		return s.singular(false, Unknown(numerical.Column+s.first()))
	}
	return err
}
