package syntax

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"unicode/utf8"

	"github.com/alecthomas/participle/v2/lexer"
)

// Limits protect the host from a text that is not meant well. Zero values stand for the defaults.
type Limits struct {
	Bytes  int // of a text; 0: 16 MiB
	Depth  int // of blocks within blocks; 0: 50
	Tokens int // words, numbers, signs and line ends of a text; 0: 8 million
}

const (
	defaultBytes  = 16 << 20
	defaultDepth  = 50
	defaultTokens = 8_000_000
)

func (l Limits) resolved() Limits {
	for _, x := range []struct {
		limit *int
		value int
	}{{&l.Bytes, defaultBytes}, {&l.Depth, defaultDepth}, {&l.Tokens, defaultTokens}} {
		if *x.limit == 0 {
			*x.limit = x.value
		}
	}
	return l
}

// Parse reads a file. Every error is reported, in source order: after one the parser goes on in the next line at the same depth of braces.
// The file holds what could be read even if there are errors. The parser takes every statement anywhere; which
// belong where, and what names and units mean, is for package netlist to say.
func Parse(name, src string, limits Limits) (*File, DiagnosticList) {
	p := newParser(name, src, limits)
	if p.usable() {
		p.file.Statements = p.statements(0)
	}
	return p.finish()
}

// ParseStatements reads statements as Parse does, with the default limits, and reports those that do not belong: in a bench only set, let,
// drive, run, vary, spread, extremes, expect and plot do, outside all but drive, run, vary, spread, extremes, expect and plot.
func ParseStatements(name, src string, inBench bool) ([]Statement, DiagnosticList) {
	p := newParser(name, src, Limits{})
	if p.usable() {
		p.file.Statements = p.statements(0)
		p.misplaced(inBench)
	}
	f, list := p.finish()
	return f.Statements, list
}

// ParseExpr reads one expression or quantity. Positions in it have no file name.
func ParseExpr(src string) (Expr, DiagnosticList) { return ParseQuantity("", src) }

// ParseQuantity reads one quantity: an expression, perhaps with at or over behind it. The expression is nil if there are errors.
func ParseQuantity(name, src string) (Expr, DiagnosticList) {
	p := newParser(name, src, Limits{})
	if !p.usable() {
		_, list := p.finish()
		return nil, list
	}
	p.lines()
	x, err := p.measure()
	if err == nil {
		p.lines()
		if t := *p.Peek(); t.Type != kindEOF {
			err = unexpected(t, "the end of the quantity")
		}
	}
	if err != nil {
		p.report(err)
		_, list := p.finish()
		return nil, list
	}
	return x, nil
}

// parser reads statements and collects errors.
type parser struct {
	cursor
	file    *File
	scanner *scanner
	limits  Limits
	list    DiagnosticList
	line    struct{ start, end int } // of the last error: offsets of its line
}

func newParser(name, src string, limits Limits) *parser {
	src = strings.TrimPrefix(src, "\uFEFF")
	p := &parser{file: &File{Name: name, Source: src}, limits: limits.resolved()}
	p.scanner = newScanner(name, src, p.limits.Tokens)
	return p
}

// usable cuts the text into tokens, unless it is too large or no text at all.
func (p *parser) usable() bool {
	src := p.file.Source
	if len(src) > p.limits.Bytes {
		p.fileError(CodeTooLarge, fmt.Sprintf("the file has %d bytes; at most %d are read", len(src), p.limits.Bytes))
		return false
	}
	if !utf8.ValidString(src) {
		p.fileError(CodeNotText, "the file is not a text in UTF-8")
		return false
	}
	lex, err := lexer.Upgrade(p.scanner)
	if err != nil {
		p.fileError(CodeNotText, err.Error())
		return false
	}
	if p.scanner.exhausted {
		p.fileError(CodeTooLarge, fmt.Sprintf("the file has more than %d words, numbers and signs", p.limits.Tokens))
		return false
	}
	p.cursor = cursor{PeekingLexer: lex}
	p.file.Comments = p.scanner.comments
	return true
}

func (p *parser) finish() (*File, DiagnosticList) { return p.file, p.list.Sort() }

func (p *parser) fileError(code Code, message string) {
	at := Position{Line: 1, Column: 1}
	p.list = append(p.list, &Diagnostic{Code: code, Message: message, Span: Span{File: p.file.Name, Start: at, End: at}})
}

// report notes an error of a statement.
func (p *parser) report(err error) {
	f := p.fault(err)
	start := place(f.token.Pos)
	p.list = append(p.list, &Diagnostic{
		Code: f.code, Message: f.text, Hint: f.hint, Line: p.lineOf(start.Offset),
		Span: Span{File: p.file.Name, Start: start, End: past(&f.token)},
	})
}

func (p *parser) fault(err error) *fault {
	var f *fault
	if !errors.As(err, &f) {
		f = &fault{code: CodeUnexpected, token: *p.Peek(), text: err.Error()}
	}
	return f
}

// lineOf is LineOf that remembers the last line: a million errors may stand in one.
func (p *parser) lineOf(offset int) string {
	if !(p.line.start <= offset && offset <= p.line.end) || p.line.end == 0 {
		line := LineOf(p.file.Source, offset)
		p.line.start = strings.LastIndexByte(p.file.Source[:min(offset, len(p.file.Source))], '\n') + 1
		p.line.end = p.line.start + len(line)
	}
	return p.file.Source[p.line.start:p.line.end]
}

// LineOf returns the line of a text that holds the byte at an offset.
func LineOf(src string, offset int) string {
	offset = min(offset, len(src))
	start := strings.LastIndexByte(src[:offset], '\n') + 1
	end := strings.IndexByte(src[offset:], '\n')
	if end < 0 {
		return src[start:]
	}
	return src[start : offset+end]
}

// lines skips line ends.
func (p *parser) lines() {
	for p.Peek().Type == kindLine {
		p.take()
	}
}

// statements reads until the closing brace of its block, or until the end of the file at depth 0.
func (p *parser) statements(depth int) []Statement {
	var list []Statement
	for {
		p.lines()
		t := *p.Peek()
		switch {
		case t.Type == kindEOF:
			return list
		case isSign(&t, "}"):
			if depth > 0 {
				return list
			}
			p.report(&fault{code: CodeStrayBrace, token: t, text: "this brace closes nothing"})
			p.take()
			continue
		}
		before := p.MakeCheckpoint()
		s, err := p.statement(depth)
		if err == nil {
			err = p.lineEnd()
		}
		if s != nil {
			list = append(list, s)
		}
		if err != nil {
			p.resume(before, p.fault(err))
		}
	}
}

// lineEnd wants a statement to end here.
func (p *parser) lineEnd() error {
	t := *p.Peek()
	if t.Type == kindLine || t.Type == kindEOF || isSign(&t, "}") {
		return nil
	}
	f := unexpected(t, "the end of the statement")
	if p.operator(&t) > 0 || t.Type == kindNumber || isSign(&t, "(") {
		f.hint = "between two parts of a path stands a node; `_` is one without a name"
		if !p.afterPath() {
			f.hint = ""
		}
	}
	return f
}

// afterPath reports whether the token before the last one is the sign of a path.
func (p *parser) afterPath() bool {
	at := p.MakeCheckpoint().RawCursor()
	return at >= 2 && isSign(&p.Range(at-2, at-1)[0], "--")
}

// resume reports the fault of a statement that began at a checkpoint and goes on behind it: at the end of the fault's line at the same depth of
// braces, or right there if a new statement begins the line, as behind a parenthesis that was never closed or a sign with nothing behind it.
func (p *parser) resume(before lexer.Checkpoint, f *fault) {
	if f.stay {
		p.report(f)
		return
	}
	p.LoadCheckpoint(before)
	var line, last *lexer.Token // before the line and before the fault
	atName := before
	for t := p.Peek(); t.Type != kindEOF && t.Pos.Offset < f.token.Pos.Offset; t = p.Peek() {
		if t.Type != kindLine {
			if last != nil && last.Pos.Line < t.Pos.Line {
				line, atName = last, p.MakeCheckpoint()
			}
			last = t
		}
		p.take()
	}
	t := p.Peek()
	switch {
	case last != nil && t.Pos.Line > last.Pos.Line:
		begins := p.beginsStatement()
		if f.code == CodeUnexpected && f.want != "" && (t.Type == kindLine || t.Type == kindEOF || begins && t.Type == kindKeyword) {
			f = f.atLineEnd(last)
		}
		p.report(f)
		if begins {
			return
		}
	case line != nil && p.MakeCheckpoint().RawCursor() == atName.RawCursor()+1 && (isSign(t, "=") || isSign(t, "--")):
		p.LoadCheckpoint(atName)
		p.report(&fault{code: CodeUnexpected, token: *line, text: fmt.Sprintf("the statement breaks off behind %s", describe(*line))})
		return
	default:
		p.report(f)
	}
	p.skip()
}

// beginsStatement guesses whether a statement begins here.
func (p *parser) beginsStatement() bool {
	at := p.MakeCheckpoint().RawCursor()
	t := p.Peek()
	switch t.Type {
	case kindKeyword:
		return slices.Contains(statementWords(), t.Value)
	case kindName:
		next := p.Range(at+1, at+2)[0] // at least the end of the file
		return isSign(&next, "--") || isSign(&next, "=")
	}
	return false
}

// skip goes to the end of the line at the same depth of braces.
func (p *parser) skip() {
	depth := 0
	for {
		t := p.Peek()
		switch {
		case t.Type == kindEOF:
			return
		case t.Type == kindLine && depth == 0:
			return
		case isSign(t, "{"):
			depth++
		case isSign(t, "}"):
			if depth == 0 {
				return
			}
			depth--
		}
		p.take()
	}
}

// statement reads one statement.
func (p *parser) statement(depth int) (Statement, error) {
	t := *p.Peek()
	if t.Type != kindKeyword {
		if t.Type != kindName {
			return nil, unexpected(t, "a statement")
		}
		return p.circuit(t.Pos)
	}
	p.take()
	switch t.Value {
	case "part":
		return p.part(t.Pos)
	case "block":
		return p.block(t.Pos, depth)
	case "bench":
		return p.bench(t.Pos, depth)
	case "match":
		return p.match(t.Pos)
	case "extremes":
		return &Extremes{Span: p.span(t.Pos)}, nil
	}
	if r, ok := rules()[t.Value]; ok {
		return r(&p.cursor, t.Pos)
	}
	return nil, unexpected(t, "a statement")
}

// misplaced reports the statements at the top that do not belong in a bench, or outside one.
func (p *parser) misplaced(inBench bool) {
	for _, s := range p.file.Statements {
		message := ""
		switch s.(type) {
		case *Let, *Set:
		case *Drive, *Run, *Vary, *Spread, *Extremes, *Expect, *Plot:
			if !inBench {
				message = "this statement belongs in a bench"
			}
		default:
			if inBench {
				message = "this statement does not belong in a bench"
			}
		}
		if message != "" {
			at := s.Place()
			p.list = append(p.list, &Diagnostic{Code: CodeMisplaced, Message: message, Line: p.lineOf(at.Start.Offset), Span: at})
		}
	}
}
