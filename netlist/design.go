// Package netlist is the language of Poise: it loads a .poise file (or takes a
// design built by a program), checks all of it and elaborates it, for one set-up at a time, to a flat [Circuit].
package netlist

import (
	"fmt"
	"slices"

	"poise/devices"
	"poise/netlist/syntax"
)

// Diagnostic is one problem of a file at its place.
type Diagnostic = syntax.Diagnostic

// DiagnosticList is what is wrong with a file, in source order.
type DiagnosticList = syntax.DiagnosticList

// Design is a loaded and fully checked file. It is immutable and safe for several goroutines.
type Design struct {
	Name     string
	Title    string
	File     string   // path as given to Load
	Cautions []string // patient, mains
	Benches  []*Bench
	Warnings []*Diagnostic

	program *program
}

// Bench returns the bench of a name, nil if there is none.
func (d *Design) Bench(name string) *Bench {
	i := slices.IndexFunc(d.Benches, func(b *Bench) bool { return b.Name == name })
	if i < 0 {
		return nil
	}
	return d.Benches[i]
}

// Families returns the families of devices that the design was loaded with.
func (d *Design) Families() []devices.Family { return slices.Clone(d.program.families) }

// Setup returns the circuit as written, as a set-up without run and expectations: inputs are driven by 0.
// The error is a DiagnosticList.
func (d *Design) Setup() (*Setup, error) {
	r := &reporter{sources: d.program.sources}
	e := d.program.begin(r, nil, nil)
	e.elaborate()
	if err := r.list.Sort().Err(); err != nil {
		return nil, err
	}
	return &Setup{Circuit: e.circuit, measurer: &measurer{elaborator: e, scope: e.file.scope}}, nil
}

// Circuit returns the flat circuit as written. The error is a DiagnosticList.
func (d *Design) Circuit() (*Circuit, error) {
	s, err := d.Setup()
	if err != nil {
		return nil, err
	}
	return s.Circuit, nil
}

// Setup evaluates the bench at one point of its grid: a value in SI units for each axis of Vary, in order. The error is a
// DiagnosticList, for instance if a value leaves its physical range there.
func (b *Bench) Setup(point []float64) (*Setup, error) {
	if len(point) != len(b.Vary) {
		return nil, fmt.Errorf("the grid of the bench %s has %d axes, not %d", b.Name, len(b.Vary), len(point))
	}
	p := b.design.program
	r := &reporter{sources: p.sources}
	f := p.setupIn(r, b, point, false)
	if err := r.list.Sort().Err(); err != nil {
		return nil, err
	}
	return f.setup, nil
}

// Quantity resolves a quantity written in the language for this set-up. The error is a DiagnosticList.
func (s *Setup) Quantity(text string) (Quantity, error) {
	const name = "(quantity)"
	x, list := syntax.ParseQuantity(name, text)
	if err := list.Err(); err != nil {
		return nil, err
	}
	r := &reporter{sources: map[string]string{name: text}}
	e := *s.measurer.elaborator
	e.reporter, e.learning = r, false
	m := *s.measurer
	m.elaborator = &e
	q, ok := m.quantity(x)
	if !ok {
		return nil, r.list.Sort().Err()
	}
	return q, nil
}

// Format writes a file in the one form that all files share. A text with syntax errors comes back unchanged, with a DiagnosticList.
func Format(name, src string) (string, error) { return syntax.Format(name, src) }
