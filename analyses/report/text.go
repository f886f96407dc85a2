// Package report writes results: text for a terminal, JSON, CSV, pictures. It knows results, not solvers.
package report

import (
	"errors"
	"fmt"
	"io"
	"math"
	"strings"

	"poise/analyses"
	"poise/netlist"
	"poise/netlist/unit"
)

// Verbosity of a text report.
type Verbosity int

const (
	Quiet   Verbosity = -1 // failures and the last line
	Normal  Verbosity = 0  // failures in full, a line for each bench that holds
	Verbose Verbosity = 1  // every expectation
)

// TextOptions say how a text report looks. The zero value is ready.
type TextOptions struct {
	Verbosity Verbosity
	Color     bool // mark verdicts by colour, too; words carry the meaning
}

// Cautions by the words of the language.
var cautions = map[string]string{
	"patient": "This design touches a person. Simulation shows neither insulation, leakage nor behaviour under a fault; it replaces no test. The applicable standard (e.g. IEC 60601-1), local code and licensed practice decide.",
	"mains":   "This design touches the mains. Simulation shows neither insulation, leakage nor behaviour under a fault; it replaces no test. The applicable standard (e.g. IEC 61010-1), local code and licensed practice decide.",
}

// Caution returns the text of a caution of the language.
func Caution(word string) string { return cautions[word] }

// text writes with the first error remembered.
type text struct {
	w   io.Writer
	o   TextOptions
	err error
}

func (t *text) printf(format string, args ...any) {
	if t.err == nil {
		_, t.err = fmt.Fprintf(t.w, format, args...)
	}
}

// paint marks a word by colour on a terminal.
func (t *text) paint(status analyses.Status, word string) string {
	if !t.o.Color {
		return word
	}
	code := map[analyses.Status]string{analyses.Pass: "32", analyses.Fail: "1;31", analyses.Error: "1;35", analyses.Skipped: "33"}[status]
	return "\x1b[" + code + "m" + word + "\x1b[0m"
}

// Text writes the report of a check: what did not hold in full, what held a line for each bench, the totals in the last line.
func Text(w io.Writer, r *analyses.Report, o TextOptions) error {
	t := &text{w: w, o: o}
	for i := range r.Files {
		t.file(&r.Files[i])
	}
	if r.Incomplete {
		t.printf("not everything was computed: the report is incomplete\n")
	}
	broken := 0
	for _, f := range r.Files {
		if f.Err != nil {
			broken++
		}
	}
	if broken > 0 {
		t.printf("%s could not be read\n", count(broken, "file"))
	}
	if r.Totals.Error > 0 {
		t.printf("%s of the failed could not be computed\n", count(r.Totals.Error, "expectation"))
	}
	t.printf("%d passed, %d failed, %d skipped\n", r.Totals.Pass, r.Totals.Fail+r.Totals.Error, r.Totals.Skipped)
	return t.err
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

func (t *text) file(f *analyses.FileResult) {
	held := true
	for _, b := range f.Benches {
		held = held && b.Status == analyses.Pass
	}
	if t.o.Verbosity == Quiet && held && f.Err == nil {
		return
	}
	t.printf("%s", f.File)
	if f.Title != "" {
		t.printf("  %s", f.Title)
	}
	t.printf("\n")
	for _, c := range f.Cautions {
		t.printf("  caution (%s): %s\n", c, cautions[c])
	}
	if f.Err != nil {
		t.printf("  not read: see the messages\n\n")
		return
	}
	for i := range f.Benches {
		t.bench(f, &f.Benches[i])
	}
	t.printf("\n")
}

// benchColumn is the width of the column of bench names.
const benchColumn = 12

func (t *text) bench(f *analyses.FileResult, b *analyses.BenchResult) {
	if b.Status == analyses.Pass && t.o.Verbosity == Quiet {
		return
	}
	held := 0
	for _, x := range b.Expectations {
		if x.Status == analyses.Pass {
			held++
		}
	}
	word := map[analyses.Status]string{analyses.Pass: "holds", analyses.Fail: "FAILS", analyses.Error: "UNSOLVED", analyses.Skipped: "skipped"}[b.Status]
	t.printf("  %s  %-*s %d of %d", t.paint(b.Status, fmt.Sprintf("%-8s", word)), benchColumn, b.Name, held, len(b.Expectations))
	if b.Points > 1 {
		t.printf(" at %d points", b.Points)
	}
	if tight := tightest(b); tight != nil && b.Status == analyses.Pass {
		t.printf(", tightest: %s is %s", quantityOf(tight.Text), Shown(tight))
	}
	if b.Title != "" && b.Status != analyses.Pass {
		t.printf("  %s", b.Title)
	}
	t.printf("\n")
	if b.Err != nil {
		t.printf("    %s:%d: the bench could not be solved: %s\n", f.File, b.Line, indent(b.Err.Error()))
		return
	}
	for i := range b.Expectations {
		x := &b.Expectations[i]
		if x.Status != analyses.Pass || t.o.Verbosity == Verbose {
			t.expectation(f, x)
		}
	}
}

// tightest is the expectation whose margin is the smallest share of its limit.
func tightest(b *analyses.BenchResult) *analyses.ExpectationResult {
	var best *analyses.ExpectationResult
	least := math.Inf(1)
	for i := range b.Expectations {
		x := &b.Expectations[i]
		size := math.Inf(1)
		for _, l := range []float64{x.Low, x.High} {
			if !math.IsInf(l, 0) && !math.IsNaN(l) {
				size = math.Min(size, math.Abs(x.Value-l)/math.Max(math.Abs(l), math.Abs(x.Value)))
			}
		}
		if size < least {
			least, best = size, x
		}
	}
	return best
}

// quantityOf cuts the comparison off an expectation's text.
func quantityOf(text string) string {
	for _, sign := range []string{" >= ", " <= ", " > ", " < ", " within ", " = "} {
		if head, _, ok := strings.Cut(text, sign); ok {
			return head
		}
	}
	return text
}

func (t *text) expectation(f *analyses.FileResult, x *analyses.ExpectationResult) {
	t.printf("    %s:%d  %s  expect %s\n", f.File, x.Line, t.paint(x.Status, x.Status.String()), x.Text)
	if x.Label != "" {
		t.printf("      %s\n", x.Label)
	}
	switch {
	case x.Status == analyses.Skipped:
		return
	case x.Err != nil:
		t.printf("      not computed: %s\n", indent(x.Err.Error()))
		return
	case x.Want != "":
		t.printf("      it is %s%s\n", x.Word, where(x.At))
		return
	}
	verb := "inside by"
	if x.Status == analyses.Fail {
		verb = "outside by"
	}
	t.printf("      it is %s, wanted %s: %s %s%s\n", Shown(x), wanted(x), verb, distance(x), where(x.At))
}

// indent keeps the lines of a message under each other.
func indent(s string) string { return strings.ReplaceAll(s, "\n", "\n      ") }

// dimension reads a unit of a result.
func dimension(symbol string) unit.Dimension {
	v, err := unit.ParseUnit(symbol)
	if err != nil {
		return unit.Number
	}
	return v.Dimension
}

// show writes a value for people: ratios in dB.
func show(v float64, symbol string, ratio bool) string {
	if ratio {
		return unit.ShowRatio(v)
	}
	d := dimension(symbol)
	if d == unit.Number && symbol != "" {
		return unit.Trim(v, unit.ShownDigits) + " " + symbol
	}
	return unit.Show(v, d)
}

// Shown writes the value of an expectation for people.
func Shown(x *analyses.ExpectationResult) string {
	if x.Want != "" {
		return x.Word
	}
	return show(x.Value, x.Unit, x.Ratio)
}

func wanted(x *analyses.ExpectationResult) string {
	low, high := show(x.Low, x.Unit, x.Ratio), show(x.High, x.Unit, x.Ratio)
	switch {
	case math.IsInf(x.High, 1):
		return "at least " + low
	case math.IsInf(x.Low, -1):
		return "at most " + high
	}
	return low + " to " + high
}

// distance writes the margin without its sign.
func distance(x *analyses.ExpectationResult) string {
	m := math.Abs(x.Margin)
	if x.Ratio {
		return fmt.Sprintf("%.2f dB", m)
	}
	return show(m, x.Unit, false)
}

// where writes the place of the worst point.
func where(at []analyses.Coordinate) string {
	if len(at) == 0 {
		return ""
	}
	var parts []string
	for _, c := range at {
		parts = append(parts, c.Name+" "+Coordinate(c))
	}
	return ", at " + strings.Join(parts, ", ")
}

// Coordinate writes the value of a coordinate; temperatures in degC, as the language writes them.
func Coordinate(c analyses.Coordinate) string {
	if c.Unit == "K" {
		return unit.Trim(c.Value-unit.ZeroCelsius, unit.ShownDigits) + " degC"
	}
	return show(c.Value, c.Unit, false)
}

// Problem writes why a file could not be loaded.
func Problem(w io.Writer, file string, err error) error {
	var list netlist.DiagnosticList
	if errors.As(err, &list) {
		for _, d := range list {
			if e := Diagnostic(w, d); e != nil {
				return e
			}
		}
		return nil
	}
	_, e := fmt.Fprintf(w, "%s: error: %s\n", file, err)
	return e
}

// Diagnostic writes one problem: file:line:column: severity: message [code], then the excerpt.
func Diagnostic(w io.Writer, d *netlist.Diagnostic) error {
	severity := "error"
	if d.Severity != 0 {
		severity = "warning"
	}
	place := d.Span.File
	if d.Span.Start.Line > 0 {
		place = fmt.Sprintf("%s:%d:%d", d.Span.File, d.Span.Start.Line, d.Span.Start.Column)
	}
	_, err := fmt.Fprintf(w, "%s: %s: %s [%s]\n%s", place, severity, d.Message, d.Code, d.Excerpt())
	return err
}
