// Package netlist is the language of Poise: it loads a .poise file (or takes a
// design built by a program), checks all of it and elaborates it, for one set-up at a time, to a flat [Circuit].
package netlist

import (
	"io/fs"

	"poise/netlist/syntax"
)

// Diagnostic is one problem of a file at its place.
type Diagnostic = syntax.Diagnostic

// Design is a loaded and fully checked file. It is immutable and safe for several goroutines.
type Design struct {
	Name     string
	Title    string
	File     string   // path as given to Load
	Cautions []string // patient, mains
	Benches  []*Bench
	Warnings []*Diagnostic

	// resolver's own fields follow
}

// Contract between this package and the ones above it:
//
//	Load(fsys fs.FS, path string, opts ...Option) (*Design, error)   error is a DiagnosticList
//	WithFamilies(families ...devices.Family) Option; WithLimits(Limits) Option
//	(*Design).Circuit() (*Circuit, error)                            the file as written, no bench
//	(*Design).Bench(name string) *Bench                              nil if there is none
//	(*Bench).Setup(point []float64) (*Setup, error)                  point: one value for each Vary, SI
//	(*Design).Setup() (*Setup, error)                                the circuit as written as a set-up without expectations
//	(*Setup).Quantity(text string) (Quantity, error)                 resolves one quantity written in the language for this set-up (the command's --quantity)
//	(*Design).Families() []devices.Family
//	Format(name, src string) (string, error)
//	Metrics(), Reducers()                                            catalogue of names, meanings, dimensions
var _ fs.FS
