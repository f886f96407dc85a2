package syntax

import (
	"fmt"
	"slices"
	"sort"
	"strconv"
	"strings"
	"unicode"
)

// Error returns the diagnostic in one line: file:line:column: message. A warning says so before its message.
func (d *Diagnostic) Error() string {
	var parts []string
	if d.Span.File != "" {
		parts = append(parts, d.Span.File)
	}
	at := d.Span.Start
	if at.Line > 0 {
		parts = append(parts, strconv.Itoa(at.Line), strconv.Itoa(at.Column))
	}
	message := d.Message
	if d.Severity == Warning {
		message = "warning: " + message
	}
	if len(parts) == 0 {
		return message
	}
	return strings.Join(parts, ":") + ": " + message
}

// Excerpt returns the source line with the span marked under it, the note and the hint. Without a place, or for an empty file,
// there is no line to show. Of a long line the part around the span is shown.
func (d *Diagnostic) Excerpt() string {
	var b strings.Builder
	if d.Span.Start.Line > 0 && (d.Line != "" || d.Note != "") {
		line, column := window([]rune(strings.TrimRight(d.Line, "\r")), d.Span.Start.Column)
		number := fmt.Sprintf("%5d | ", d.Span.Start.Line)
		width := d.Span.End.Column - d.Span.Start.Column
		if d.Span.End.Line > d.Span.Start.Line {
			width = len(line)
		}
		width = max(1, min(width, len(line)+1-column))
		mark := strings.Repeat(" ", len(number)-2) + "| " + strings.Repeat(" ", column-1) + strings.Repeat("^", width)
		if d.Note != "" {
			mark += " " + d.Note
		}
		b.WriteString(number + string(line) + "\n" + mark + "\n")
	}
	if d.Hint != "" {
		b.WriteString("      = " + d.Hint + "\n")
	}
	return b.String()
}

// widest is the number of columns of a source line that are shown.
const widest = 160

// window returns the part of a line around a column, in which it has the column returned. Control characters and tabs become blanks.
func window(line []rune, column int) ([]rune, int) {
	column = max(1, min(column, len(line)+1))
	first := 0
	if len(line) > widest && column > widest/2 {
		first = min(column-widest/2, len(line)-widest/2)
	}
	shown := slices.Clone(line[first:min(len(line), first+widest)])
	for i, r := range shown {
		if unicode.IsControl(r) {
			shown[i] = ' '
		}
	}
	return shown, column - first
}

// DiagnosticList is what is wrong with a file, in source order.
type DiagnosticList []*Diagnostic

// listedMost is the number of diagnostics that Error spells out.
const listedMost = 30

// Error returns every diagnostic with its excerpt, and how many more there are.
func (l DiagnosticList) Error() string {
	var b strings.Builder
	for i, d := range l {
		if i == listedMost {
			fmt.Fprintf(&b, "(and %d more)\n", len(l)-i)
			break
		}
		b.WriteString(d.Error() + "\n" + d.Excerpt())
	}
	return strings.TrimRight(b.String(), "\n")
}

// Unwrap lets errors.As find a single *Diagnostic.
func (l DiagnosticList) Unwrap() []error {
	errs := make([]error, len(l))
	for i, d := range l {
		errs[i] = d
	}
	return errs
}

// Sort orders the list by file and place and drops what is said twice.
func (l DiagnosticList) Sort() DiagnosticList {
	sort.SliceStable(l, func(i, j int) bool {
		a, b := l[i].Span, l[j].Span
		if a.File != b.File {
			return a.File < b.File
		}
		if a.Start.Offset != b.Start.Offset {
			return a.Start.Offset < b.Start.Offset
		}
		return l[i].Message < l[j].Message
	})
	out := l[:0]
	for i, d := range l {
		if i == 0 || d.Error() != l[i-1].Error() {
			out = append(out, d)
		}
	}
	return out
}

// Errors returns those that are no warnings.
func (l DiagnosticList) Errors() DiagnosticList { return l.only(Error) }

// Warnings returns the warnings.
func (l DiagnosticList) Warnings() DiagnosticList { return l.only(Warning) }

func (l DiagnosticList) only(s Severity) DiagnosticList {
	var out DiagnosticList
	for _, d := range l {
		if d.Severity == s {
			out = append(out, d)
		}
	}
	return out
}

// Err returns the errors of the list as an error, nil if there are none.
func (l DiagnosticList) Err() error {
	if e := l.Errors(); len(e) > 0 {
		return e
	}
	return nil
}

// Nearest returns the candidate nearest to name in edits, if it is near enough to be meant.
func Nearest(name string, candidates []string) (string, bool) {
	best, distance := "", 1+len(name)/3
	for _, c := range candidates {
		if d := edits(strings.ToLower(name), strings.ToLower(c), distance); d <= distance && c != name && (best == "" || d < distance) {
			best, distance = c, d
		}
	}
	return best, best != ""
}

// edits is the optimal string alignment distance of two words (insertions, deletions, substitutions, swaps of
// neighbours), or more than most.
func edits(a, b string, most int) int {
	if len(a)-len(b) > most || len(b)-len(a) > most {
		return most + 1
	}
	before, last, row := make([]int, len(b)+1), make([]int, len(b)+1), make([]int, len(b)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(a); i++ {
		row[0] = i
		for j := 1; j <= len(b); j++ {
			cost := 1
			if a[i-1] == b[j-1] {
				cost = 0
			}
			row[j] = min(last[j]+1, row[j-1]+1, last[j-1]+cost)
			if i > 1 && j > 1 && a[i-1] == b[j-2] && a[i-2] == b[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last, row = last, row, before
	}
	return last[len(b)]
}
