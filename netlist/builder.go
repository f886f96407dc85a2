package netlist

import (
	"fmt"
	"io/fs"
	"strconv"
	"strings"

	"poise/netlist/unit"
)

// Builder makes a design in a Go program. Its methods add one statement each and return the builder; what is wrong is reported by
// [Builder.Design], like the problems of a file. [Builder.Source] is the design as a .poise file.
//
// Values are float64 in SI units; an argument that is a string is an expression of the language, so that Rd, 4k7ohm or 2.2nF tol 5% may be
// written, too.
type Builder struct {
	lines []string
}

// NewBuilder begins a design.
func NewBuilder(name, title string) *Builder {
	return (&Builder{}).add("design %s %s", name, strconv.Quote(title))
}

func (b *Builder) add(format string, args ...any) *Builder {
	b.lines = append(b.lines, fmt.Sprintf(format, args...))
	return b
}

// Statement adds statements of the language as written.
func (b *Builder) Statement(text string) *Builder { return b.add("%s", text) }

// Let adds a named value: an expression of the language.
func (b *Builder) Let(name, expression string) *Builder {
	return b.add("let %s = %s", name, expression)
}

// Rail adds a node held at volts against gnd.
func (b *Builder) Rail(name string, volts any) *Builder {
	return b.add("rail %s = %s", name, literal(volts, unit.Voltage))
}

// Resistor adds a resistor of ohms between two nodes.
func (b *Builder) Resistor(name, left, right string, ohms any) *Builder {
	return b.path(name, left, right, ohms, unit.Resistance)
}

// Capacitor adds a capacitor of farads between two nodes.
func (b *Builder) Capacitor(name, left, right string, farads any) *Builder {
	return b.path(name, left, right, farads, unit.Capacitance)
}

// Inductor adds an inductor of henries between two nodes.
func (b *Builder) Inductor(name, left, right string, henries any) *Builder {
	return b.path(name, left, right, henries, unit.Inductance)
}

// VoltageSource adds a source whose left end is the positive one.
func (b *Builder) VoltageSource(name, left, right string, volts any) *Builder {
	return b.path(name, left, right, volts, unit.Voltage)
}

// CurrentSource adds a source that drives amperes through itself from left to right.
func (b *Builder) CurrentSource(name, left, right string, amperes any) *Builder {
	return b.path(name, left, right, amperes, unit.Current)
}

// Device adds a part with two pins between two nodes.
func (b *Builder) Device(name, left, right, part string) *Builder {
	return b.add("%s -- %s %s -- %s", left, name, part, right)
}

func (b *Builder) path(name, left, right string, v any, d unit.Dimension) *Builder {
	return b.add("%s -- %s %s -- %s", left, name, literal(v, d), right)
}

// literal writes a number in SI units exactly, or passes an expression on.
func literal(v any, d unit.Dimension) string {
	switch v := v.(type) {
	case float64:
		return strconv.FormatFloat(v, 'g', -1, 64) + d.Symbol()
	case int:
		return strconv.Itoa(v) + d.Symbol()
	case string:
		return v
	}
	return fmt.Sprintf("%v", v)
}

// Setting is one parameter of a part or one value of an instance: an expression of the language.
type Setting struct {
	Name, Value string
}

// Part adds a part of a family or of another part.
func (b *Builder) Part(name, base string, settings ...Setting) *Builder {
	var s []string
	for _, x := range settings {
		s = append(s, x.Name+" = "+x.Value)
	}
	return b.add("part %s = %s { %s }", name, base, strings.Join(s, ", "))
}

// Connection joins a pin of an instance to a node.
type Connection struct {
	Pin, Node string
}

// Instance adds an instance of a part or a block.
func (b *Builder) Instance(name, of string, connections ...Connection) *Builder {
	var s []string
	for _, c := range connections {
		s = append(s, c.Pin+": "+c.Node)
	}
	return b.add("%s = %s(%s)", name, of, strings.Join(s, ", "))
}

// Input adds an input of one or two nodes, driven by voltages.
func (b *Builder) Input(name string, nodes ...string) *Builder {
	return b.add("input %s = (%s)", name, strings.Join(nodes, ", "))
}

// CurrentInput adds an input of one or two nodes, driven by currents.
func (b *Builder) CurrentInput(name string, nodes ...string) *Builder {
	return b.add("input %s = (%s) current", name, strings.Join(nodes, ", "))
}

// Output adds an output of one or two nodes.
func (b *Builder) Output(name string, nodes ...string) *Builder {
	return b.add("output %s = (%s)", name, strings.Join(nodes, ", "))
}

// Bench adds a bench with its statements as the language writes them: drive ..., run ..., expect ...
func (b *Builder) Bench(name string, statements ...string) *Builder {
	return b.add("bench %s {\n  %s\n}", name, strings.Join(statements, "\n  "))
}

// Source returns the design as a .poise file.
func (b *Builder) Source() string { return strings.Join(b.lines, "\n") + "\n" }

// builtName is the file's name in messages about a built design.
const builtName = "built.poise"

// Design checks the design as Load checks a file. The error is a DiagnosticList whose places are those of [Builder.Source].
func (b *Builder) Design(opts ...Option) (*Design, error) {
	return newProgram(nothing{}, opts).load(builtName, b.Source())
}

// nothing is a file system without files: a built design uses the library that ships with Poise only.
type nothing struct{}

func (nothing) Open(name string) (fs.File, error) {
	return nil, &fs.PathError{Op: "open", Path: name, Err: fs.ErrNotExist}
}
