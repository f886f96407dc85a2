package netlist

import (
	"fmt"
	"iter"
	"regexp"
	"slices"
	"strings"

	"poise/netlist/syntax"
)

// reporter collects what is wrong with a program. A kind of problem is reported once at a place: a part of a block is met again in
// every instance, and the file in every bench.
type reporter struct {
	sources  map[string]string // text of each file, for excerpts
	warnings bool              // wanted, too
	doubtful map[string]bool   // names in lines that could not be read: that they are unknown says nothing
	list     syntax.DiagnosticList
	seen     map[problem]bool
	where    string      // in which set-up a problem outside its bench shows; "" for the file itself
	bench    syntax.Span // the bench of where
	compared int         // names that suggestions have been sought among
	line     sourceLine
}

// sourceLine is the line of the last problem: a million problems may stand in one.
type sourceLine struct {
	file       string
	start, end int
}

// lineAt returns the line of a place.
func (r *reporter) lineAt(at syntax.Span) string {
	src, offset := r.sources[at.File], at.Start.Offset
	if l := r.line; l.file == at.File && l.start <= offset && offset <= l.end && l.end <= len(src) && l.end > 0 {
		return src[l.start:l.end]
	}
	line := syntax.LineOf(src, offset)
	start := strings.LastIndexByte(src[:min(offset, len(src))], '\n') + 1
	r.line = sourceLine{at.File, start, start + len(line)}
	return line
}

// problem is a kind of problem at a place.
type problem struct {
	code       syntax.Code
	file       string
	start, end int
}

// add reports a problem. It returns false, for callers that have just failed.
func (r *reporter) add(d *Diagnostic) bool {
	key := problem{d.Code, d.Span.File, d.Span.Start.Offset, d.Span.End.Offset}
	if r.seen[key] {
		return false
	}
	if r.seen == nil {
		r.seen = map[problem]bool{}
	}
	r.seen[key] = true
	d.Line = r.lineAt(d.Span)
	if at := d.Span; r.where != "" && (at.File != r.bench.File || at.Start.Offset < r.bench.Start.Offset || at.Start.Offset >= r.bench.End.Offset) {
		d.Message += r.where
	}
	r.list = append(r.list, d)
	return false
}

// fail reports an error and returns false.
func (r *reporter) fail(code syntax.Code, at syntax.Span, format string, args ...any) bool {
	return r.add(&Diagnostic{Code: code, Span: at, Message: fmt.Sprintf(format, args...)})
}

// failHint reports an error with a hint, which may be empty, and returns false.
func (r *reporter) failHint(hint string, code syntax.Code, at syntax.Span, format string, args ...any) bool {
	return r.add(&Diagnostic{Code: code, Span: at, Message: fmt.Sprintf(format, args...), Hint: hint})
}

// warn reports a warning.
func (r *reporter) warn(code syntax.Code, at syntax.Span, format string, args ...any) {
	if r.warnings {
		r.add(&Diagnostic{Code: code, Severity: syntax.Warning, Span: at, Message: fmt.Sprintf(format, args...)})
	}
}

// later reports what is part of the language and not of this version, and returns false.
func (r *reporter) later(at syntax.Span, what string) bool {
	return r.fail(CodeLater, at, "%s is not available in this version", what)
}

// comparedMost bounds the names that are compared for suggestions, so that a file full of errors is answered in time.
const comparedMost = 300_000

// guess suggests the name that was meant, or returns "".
func (r *reporter) guess(name string, candidates iter.Seq[string]) string {
	if r.compared > comparedMost {
		return ""
	}
	names := slices.Sorted(candidates) // for the same suggestion every time
	r.compared += len(names)
	if near, ok := syntax.Nearest(name, names); ok {
		return "did you mean " + near + "?"
	}
	return ""
}

// unsure reports whether the error that a name is unknown may only follow from a line that could not be read.
func (r *reporter) unsure(ref syntax.Ref) bool {
	return slices.ContainsFunc(ref.Names, func(n syntax.Ident) bool { return r.doubtful[n.Name] })
}

// doubt notes the names in the lines of syntax errors.
func (r *reporter) doubt(list syntax.DiagnosticList) {
	names := regexp.MustCompile(`[A-Za-z][A-Za-z0-9_]*`)
	for i, d := range list {
		if i > 0 && d.Line == list[i-1].Line {
			continue
		}
		for _, n := range names.FindAllString(d.Line, -1) {
			if r.doubtful == nil {
				r.doubtful = map[string]bool{}
			}
			r.doubtful[n] = true
		}
	}
}

// failed reports whether there are errors.
func (r *reporter) failed() bool {
	return slices.ContainsFunc(r.list, func(d *Diagnostic) bool { return d.Severity == syntax.Error })
}

// each yields the elements of a slice by a name.
func each[T any](list []T, name func(*T) string) iter.Seq[string] {
	return func(yield func(string) bool) {
		for i := range list {
			if !yield(name(&list[i])) {
				return
			}
		}
	}
}

// both yields what several sequences yield.
func both(all ...iter.Seq[string]) iter.Seq[string] {
	return func(yield func(string) bool) {
		for _, s := range all {
			for n := range s {
				if !yield(n) {
					return
				}
			}
		}
	}
}
