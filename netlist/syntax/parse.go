package syntax

import (
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/alecthomas/participle/v2/lexer"
)

// Limits protect the host from a text that is not meant well. Zero values stand for the defaults.
type Limits struct {
	Bytes int // of a file; 0: 16 MiB
	Depth int // of blocks within blocks of statements; 0: 50
}

const (
	defaultBytes = 16 << 20
	defaultDepth = 50
)

// Parse reads a file. Every error is reported, in source order: after one the parser goes on in the next line at the same depth of braces.
// The file holds what could be read even if there are errors.
func Parse(name, src string, limits Limits) (*File, DiagnosticList) {
	if limits.Bytes == 0 {
		limits.Bytes = defaultBytes
	}
	if limits.Depth == 0 {
		limits.Depth = defaultDepth
	}
	src = strings.TrimPrefix(src, "\uFEFF")
	p := &parser{file: &File{Name: name, Source: src}, limits: limits}
	if len(src) > limits.Bytes {
		p.fileError(CodeTooLarge, fmt.Sprintf("the file has %d bytes; at most %d are read", len(src), limits.Bytes))
		return p.file, p.list
	}
	if !utf8.ValidString(src) {
		p.fileError(CodeNotText, "the file is not a text in UTF-8")
		return p.file, p.list
	}
	s := &scanner{name: name, src: src, line: 1, column: 1}
	lex, err := lexer.Upgrade(s)
	if err != nil {
		p.fileError(CodeNotText, err.Error())
		return p.file, p.list
	}
	p.cursor = cursor{PeekingLexer: lex}
	p.file.Statements = p.statements(0)
	p.file.Comments = s.comments
	return p.file, p.list.Sort()
}

// ParseQuantity reads one quantity: an expression with at or over behind it.
func ParseQuantity(name, src string) (Expr, DiagnosticList) {
	p := &parser{file: &File{Name: name, Source: src}}
	s := &scanner{name: name, src: src, line: 1, column: 1}
	lex, err := lexer.Upgrade(s)
	if err != nil {
		p.fileError(CodeNotText, err.Error())
		return nil, p.list
	}
	p.cursor = cursor{PeekingLexer: lex}
	x, err := p.measure()
	if err == nil {
		p.lines()
		if t := *p.Peek(); t.Type != kindEOF {
			err = unexpected(t, "the end of the quantity")
		}
	}
	if err != nil {
		p.report(err)
		return nil, p.list
	}
	return x, nil
}

// parser reads statements and collects errors.
type parser struct {
	cursor
	file   *File
	limits Limits
	list   DiagnosticList
}

func (p *parser) fileError(code Code, message string) {
	p.list = append(p.list, &Diagnostic{Code: code, Message: message, Span: Span{File: p.file.Name, Start: Position{Line: 1, Column: 1}, End: Position{Line: 1, Column: 1}}})
}

// report notes an error of a statement.
func (p *parser) report(err error) {
	var f *fault
	if !errors.As(err, &f) {
		f = &fault{code: CodeUnexpected, token: *p.Peek(), text: err.Error()}
	}
	start := place(f.token.Pos)
	end := past(&f.token)
	p.list = append(p.list, &Diagnostic{
		Code: f.code, Message: f.text, Hint: f.hint, Line: LineOf(p.file.Source, start.Offset),
		Span: Span{File: p.file.Name, Start: start, End: end},
	})
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
		s, err := p.statement(depth)
		if err == nil {
			err = p.lineEnd()
		}
		if s != nil {
			list = append(list, s)
		}
		if err != nil {
			p.report(err)
			p.skip()
		}
	}
}

// lineEnd wants a statement to end here.
func (p *parser) lineEnd() error {
	t := *p.Peek()
	if t.Type == kindLine || t.Type == kindEOF || isSign(&t, "}") {
		return nil
	}
	return unexpected(t, "the end of the statement")
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
	if t.Type == kindKeyword {
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
		}
		if r, ok := rules()[t.Value]; ok {
			return r(&p.cursor, t.Pos)
		}
		return nil, unexpected(t, "a statement")
	}
	if t.Type != kindName {
		return nil, unexpected(t, "a statement")
	}
	return p.circuit(t.Pos)
}

// circuit reads a path or an instance, which both begin with a name.
func (p *parser) circuit(start lexer.Position) (Statement, error) {
	first, err := p.ref("a node or a name")
	if err != nil {
		return nil, err
	}
	switch t := *p.Peek(); {
	case isSign(&t, "--"):
		return p.path(start, first)
	case isSign(&t, "="):
		if len(first.Names) == 1 && first.Names[0].Name != "_" {
			return p.instance(start, first.Names[0])
		}
		return nil, unexpected(t, "`--`")
	default:
		f := unexpected(t, "`--` (a path) or `=` (an instance)")
		if len(first.Names) == 1 {
			if word, ok := Nearest(first.Names[0].Name, statementWords); ok {
				f.token, f.text = lexer.Token{Type: kindName, Value: first.Names[0].Name, Pos: start}, fmt.Sprintf("`%s` begins no statement", first.Names[0].Name)
				f.hint = fmt.Sprintf("did you mean `%s`?", word)
			}
		}
		return nil, f
	}
}

// statementWords are the first words of statements.
var statementWords = []string{
	"design", "use", "let", "set", "rail", "part", "block", "input", "output", "match", "couple", "caution", "bench", "drive", "run", "expect",
	"plot", "vary", "spread", "extremes",
}

// path reads -- part -- node -- part -- node behind the first node.
func (p *parser) path(start lexer.Position, first Ref) (Statement, error) {
	path := &Path{Elements: []Element{{Span: first.Span, Node: &first}}}
	for isSign(p.Peek(), "--") {
		p.take()
		e, err := p.pathPart()
		if err != nil {
			return nil, err
		}
		path.Elements = append(path.Elements, e)
		if err := p.sign("--"); err != nil {
			return nil, err
		}
		node, err := p.ref("a node")
		if err != nil {
			return nil, err
		}
		path.Elements = append(path.Elements, Element{Span: node.Span, Node: &node})
	}
	path.Span = p.span(start)
	return path, nil
}

// pathPart reads NAME value modifiers. A value is a literal, a name, a call, or an expression in parentheses.
func (p *parser) pathPart() (Element, error) {
	t := *p.Peek()
	name, err := p.name("the name of a part")
	if err != nil {
		return Element{}, err
	}
	e := Element{Name: &name}
	if v := *p.Peek(); isSign(&v, "--") || v.Type == kindLine {
		return e, unexpected(v, "the value of "+name.Name)
	}
	if e.Value, err = p.operand(); err != nil {
		return e, err
	}
	if v := *p.Peek(); v.Type == kindSign && power[v.Value] > 0 {
		f := unexpected(v, "`--` or a modifier")
		f.hint = "an expression as the value of a part stands in parentheses"
		return e, f
	}
	if e.Modifiers, err = p.modifiers(); err != nil {
		return e, err
	}
	e.Span = p.span(t.Pos)
	return e, nil
}

// instance reads TYPE(pin: node, ...) with k = v, ... behind the equals sign.
func (p *parser) instance(start lexer.Position, name Ident) (Statement, error) {
	p.take()
	s := &Instance{Name: name}
	var err error
	if s.Type, err = p.name("the name of a part or a block"); err != nil {
		return nil, err
	}
	if err = p.sign("("); err != nil {
		return nil, err
	}
	for p.lines(); !isSign(p.Peek(), ")"); p.lines() {
		if len(s.Pins) > 0 {
			if err = p.sign(","); err != nil {
				return nil, err
			}
			p.lines()
		}
		pin, err := p.pin()
		if err != nil {
			return nil, err
		}
		s.Pins = append(s.Pins, pin)
	}
	p.take()
	if t := p.Peek(); t.Type == kindKeyword && t.Value == "with" {
		p.take()
		if s.With, err = p.with(); err != nil {
			return nil, err
		}
	}
	s.Span = p.span(start)
	return s, nil
}

func (p *parser) pin() (b PinBinding, err error) {
	t := *p.Peek()
	if b.Pin, err = p.name("the name of a pin"); err != nil {
		return b, err
	}
	if err = p.sign(":"); err != nil {
		return b, err
	}
	p.lines()
	if b.Node, err = p.ref("a node"); err != nil {
		return b, err
	}
	b.Span = p.span(t.Pos)
	return b, nil
}

func (p *parser) with() ([]Assign, error) {
	var list []Assign
	for {
		t := *p.Peek()
		a := Assign{}
		var err error
		if a.Name, err = p.name("the name of a value"); err != nil {
			return list, err
		}
		if err = p.sign("="); err != nil {
			return list, err
		}
		if a.Value, err = p.expr(0); err != nil {
			return list, err
		}
		a.Span = p.span(t.Pos)
		list = append(list, a)
		if !isSign(p.Peek(), ",") {
			return list, nil
		}
		p.take()
	}
}

// part reads NAME = FAMILY { parameter = value, ... }.
func (p *parser) part(start lexer.Position) (Statement, error) {
	s := &PartDecl{}
	var err error
	if s.Name, err = p.name("the name of a part"); err != nil {
		return nil, err
	}
	if err = p.sign("="); err != nil {
		return nil, err
	}
	if s.Base, err = p.name("a family or a part"); err != nil {
		return nil, err
	}
	if isSign(p.Peek(), "{") {
		s.Braces = true
		err = p.entries(func() error {
			t := *p.Peek()
			e := Param{}
			var err error
			if e.Name, err = p.name("the name of a parameter"); err != nil {
				return err
			}
			if err = p.sign("="); err != nil {
				return err
			}
			if e.Value, err = p.expr(0); err != nil {
				return err
			}
			if e.Modifiers, err = p.modifiers(); err != nil {
				return err
			}
			e.Span = p.span(t.Pos)
			s.Params = append(s.Params, e)
			return nil
		})
	}
	s.Span = p.span(start)
	return s, err
}

// entries reads { entry, entry ... }, each ended by a comma or the end of its line. After a bad one it goes on with the next.
func (p *parser) entries(entry func() error) error {
	open := *p.take()
	for {
		for p.Peek().Type == kindLine || isSign(p.Peek(), ",") {
			p.take()
		}
		t := *p.Peek()
		switch {
		case t.Type == kindEOF:
			return &fault{code: CodeOpenBrace, token: open, text: "this brace is not closed"}
		case isSign(&t, "}"):
			p.take()
			return nil
		}
		err := entry()
		if t := *p.Peek(); err == nil && !(t.Type == kindLine || isSign(&t, ",") || isSign(&t, "}")) {
			err = unexpected(t, "`,` or the end of the line")
		}
		if err != nil {
			p.report(err)
			for t := p.Peek(); !(t.Type == kindLine || t.Type == kindEOF || isSign(t, "}")); t = p.Peek() {
				p.take()
			}
		}
	}
}

// match reads A B ... within x, or A B { parameter within x, ... }.
func (p *parser) match(start lexer.Position) (Statement, error) {
	s := &Match{}
	for p.Peek().Type == kindName {
		r, err := p.ref("a part")
		if err != nil {
			return nil, err
		}
		s.Members = append(s.Members, r)
	}
	var err error
	switch t := *p.Peek(); {
	case len(s.Members) == 0:
		return nil, unexpected(t, "the parts that match")
	case isSign(&t, "{"):
		err = p.entries(func() error {
			t := *p.Peek()
			m := MatchParam{}
			var err error
			if m.Name, err = p.name("the name of a parameter"); err != nil {
				return err
			}
			if m.Within, err = p.withinValue(); err != nil {
				return err
			}
			m.Span = p.span(t.Pos)
			s.Params = append(s.Params, m)
			return nil
		})
	default:
		s.Within, err = p.withinValue()
	}
	s.Span = p.span(start)
	return s, err
}

func (p *parser) withinValue() (Expr, error) {
	if t := *p.Peek(); t.Type != kindKeyword || t.Value != "within" {
		return nil, unexpected(t, "`within`")
	}
	p.take()
	return p.expr(0)
}

// block reads NAME(pin, ...) { ... }.
func (p *parser) block(start lexer.Position, depth int) (Statement, error) {
	s := &Block{}
	var err error
	if s.Name, err = p.name("the name of a block"); err != nil {
		return nil, err
	}
	if err = p.sign("("); err != nil {
		return nil, err
	}
	for p.lines(); !isSign(p.Peek(), ")"); p.lines() {
		if len(s.Pins) > 0 {
			if err = p.sign(","); err != nil {
				return nil, err
			}
			p.lines()
		}
		pin, err := p.name("the name of a pin")
		if err != nil {
			return nil, err
		}
		s.Pins = append(s.Pins, pin)
	}
	p.take()
	s.Body, err = p.body(depth)
	s.Span = p.span(start)
	return s, err
}

// bench reads NAME "title" { ... }. A bench may have any name, words of the language too.
func (p *parser) bench(start lexer.Position, depth int) (Statement, error) {
	s := &Bench{}
	t := *p.Peek()
	if t.Type != kindName && t.Type != kindKeyword {
		return nil, unexpected(t, "the name of a bench")
	}
	p.take()
	s.Name = Ident{Span: p.span(t.Pos), Name: t.Value}
	if p.Peek().Type == kindString {
		text, err := p.text()
		if err != nil {
			return nil, err
		}
		s.Title = &text
	}
	var err error
	s.Body, err = p.body(depth)
	s.Span = p.span(start)
	return s, err
}

// body reads { statements }.
func (p *parser) body(depth int) ([]Statement, error) {
	open := *p.Peek()
	if err := p.sign("{"); err != nil {
		return nil, err
	}
	if depth+1 > p.limits.Depth {
		return nil, &fault{code: CodeTooDeep, token: open, text: fmt.Sprintf("blocks nest more than %d deep", p.limits.Depth)}
	}
	list := p.statements(depth + 1)
	if t := *p.Peek(); t.Type == kindEOF {
		return list, &fault{code: CodeOpenBrace, token: open, text: "this brace is not closed"}
	}
	p.take()
	return list, nil
}
