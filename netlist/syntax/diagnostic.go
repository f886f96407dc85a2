package syntax

// Severity of a diagnostic.
type Severity uint8

const (
	Error Severity = iota
	Warning
)

// Code identifies a kind of problem, stable over versions: "P101". The table of codes with an example each is
// in codes.go here and in package netlist.
type Code string

// Diagnostic is one problem of a file, at its place.
type Diagnostic struct {
	Code     Code
	Severity Severity
	Span     Span
	Message  string // one line: what is wrong, with the user's own names
	Note     string // shown under the span, may be empty
	Hint     string // "did you mean ...", may be empty
	Line     string // the source line of Span.Start, for the excerpt
}
