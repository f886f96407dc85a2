package analyses

import (
	"time"

	"poise/netlist"
)

// Status of an expectation, a bench or a file.
type Status uint8

const (
	Pass    Status = iota
	Fail           // computed, and it did not hold
	Error          // could not be computed
	Skipped        // not run: cancelled, or stopped after the first failure
)

// String returns pass, fail, error or skipped.
func (s Status) String() string { return [...]string{"pass", "fail", "error", "skipped"}[s] }

// Report is the outcome of checking one or more files: plain data, which the writers in
// analyses/report turn into text, JSON and so on.
type Report struct {
	Files      []FileResult
	Totals     Totals
	Incomplete bool // cancelled or stopped early: some expectations were not run
}

// Totals counts expectations.
type Totals struct {
	Pass, Fail, Error, Skipped int
}

// FileResult is the outcome of one file. If it could not be loaded, Err says why (a
// netlist.DiagnosticList, or an error from the file system) and Benches is empty.
type FileResult struct {
	File     string // path as given, slashes
	Design   string
	Title    string
	Cautions []string // patient, mains
	Warnings []*netlist.Diagnostic
	Benches  []BenchResult
	Err      error
}

// BenchResult is the outcome of one bench.
type BenchResult struct {
	Name, Title  string
	Line         int
	Status       Status
	Elapsed      time.Duration
	Expectations []ExpectationResult
	Err          error        // why the bench could not be solved, if Status is Error
	Points       int          // of the grid
	Plots        []PlotResult // empty unless asked for
}

// ExpectationResult is the outcome of one expectation: its worst point.
type ExpectationResult struct {
	Line   int
	Column int
	Label  string
	Text   string // as written: "volts(out) within 3.8V..5.2V"
	Status Status
	Err    error // why it could not be computed, if Status is Error

	// The worst value met and the limits there, SI. NaN if not computed; Low and High are
	// infinite where that side is open.
	Value     float64
	Low, High float64
	// Margin is the distance to the nearest limit in the unit of the value, positive inside; for ratios written in dB it is in dB.
	Margin float64
	Word   string // the value, of an expectation in words
	Want   string // the wanted word
	Unit   string // SI unit of Value, "" for a number, "dB" never: see Ratio
	Ratio  bool   // people see Value, Low, High in dB (20 log10)
	At     []Coordinate
}

// Coordinate says where the worst value was met: frequency (Hz), time (s), or a vary target (SI).
type Coordinate struct {
	Name  string // "frequency", "time", or the target's name
	Value float64
	Unit  string
}

// PlotResult is one plot of a bench at one point of its grid: curves over time or frequency.
type PlotResult struct {
	Title  string
	Point  []Coordinate // of the grid
	X      Axis
	Traces []Trace
}

// Axis is the common axis of a plot.
type Axis struct {
	Name   string // "time" or "frequency"
	Unit   string // s or Hz
	Log    bool
	Values []float64
}

// Trace is one curve on a plot's axis.
type Trace struct {
	Name   string // the quantity as written
	Unit   string
	Values []float64 // real values, or magnitudes of a complex quantity
	Phase  []float64 // rad, of a complex quantity; else nil
	Low    []float64 // limits of the expectations on the same quantity, nil if none
	High   []float64
}
