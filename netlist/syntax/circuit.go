package syntax

import (
	"fmt"
	"slices"

	"github.com/alecthomas/participle/v2/lexer"
)

// circuit reads a path or an instance, which both begin with a name.
func (p *parser) circuit(start lexer.Position) (Statement, error) {
	first, err := p.node()
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
		return nil, noStatement(t, first)
	}
}

// noStatement is the fault of a line that begins with a name and goes on as no statement does.
func noStatement(t lexer.Token, first Ref) error {
	f := unexpected(t, "`--` (a path) or `=` (an instance)")
	if len(first.Names) != 1 || t.Type == kindBad {
		return f
	}
	name := first.Names[0]
	if word, ok := Nearest(name.Name, statementWords()); ok {
		at := lexer.Position{Filename: name.File, Offset: name.Start.Offset, Line: name.Start.Line, Column: name.Start.Column}
		f.token, f.text = lexer.Token{Type: kindName, Value: name.Name, Pos: at}, fmt.Sprintf("`%s` begins no statement", name.Name)
		f.hint = fmt.Sprintf("did you mean `%s`?", word)
	}
	return f
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
		node, err := p.node()
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
	v := *p.Peek()
	if isSign(&v, "--") || v.Type == kindLine {
		return e, unexpected(v, "the value of "+name.Name)
	}
	if e.Value, err = p.operand(0); err != nil {
		return e, err
	}
	if err := p.alone(v, e.Value); err != nil {
		return e, err
	}
	if e.Modifiers, err = p.modifiers(); err != nil {
		return e, err
	}
	e.Span = p.span(t.Pos)
	return e, nil
}

// alone wants the value of a part of a path, which begins at a token, to be no expression outside parentheses.
func (p *parser) alone(first lexer.Token, value Expr) error {
	t := *p.Peek()
	if _, negated := value.(*Unary); negated {
		t = first
	} else if p.operator(&t) == 0 {
		return nil
	}
	f := unexpected(t, "`--` or a modifier")
	f.hint = "an expression as the value of a part stands in parentheses"
	return f
}

// instance reads TYPE(pin: node, ...) with k = v, ... behind the equals sign.
func (p *parser) instance(start lexer.Position, name Ident) (Statement, error) {
	p.take()
	s := &Instance{Name: name}
	var err error
	if s.Type, err = p.name("the name of a part or a block"); err != nil {
		return nil, err
	}
	err = p.listed(func() error {
		pin, err := p.pin()
		s.Pins = append(s.Pins, pin)
		return err
	})
	if err != nil {
		return nil, err
	}
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
	if b.Node, err = p.node(); err != nil {
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
			e, err := p.param()
			if err == nil {
				s.Params = append(s.Params, e)
			}
			return err
		})
	}
	s.Span = p.span(start)
	return s, err
}

// param reads parameter = value modifiers.
func (p *parser) param() (e Param, err error) {
	t := *p.Peek()
	if e.Name, err = p.name("the name of a parameter"); err != nil {
		return e, err
	}
	if err = p.sign("="); err != nil {
		return e, err
	}
	if e.Value, err = p.expr(0); err != nil {
		return e, err
	}
	e.Modifiers, err = p.modifiers()
	e.Span = p.span(t.Pos)
	return e, err
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
			return unclosed(open)
		case isSign(&t, "}"):
			p.take()
			return nil
		case p.beginsOther():
			f := unclosed(open)
			f.stay = true
			return f
		}
		before := p.MakeCheckpoint()
		err := entry()
		if t := *p.Peek(); err == nil && !p.entryEnd(&t) {
			err = unexpected(t, "`,` or the end of the line")
		}
		if err != nil {
			p.report(err)
			p.skipEntry(before, p.fault(err).token.Pos.Offset)
		}
	}
}

// skipEntry goes on behind an entry that began at a checkpoint and had an error at an offset: at the next comma outside parentheses, or
// at the end of the line.
func (p *parser) skipEntry(before lexer.Checkpoint, offset int) {
	p.LoadCheckpoint(before)
	parens := 0
	for t := p.Peek(); t.Type != kindEOF; t = p.Peek() {
		if t.Pos.Offset >= offset && p.entryEnd(t) && (parens == 0 || !isSign(t, ",")) {
			return
		}
		switch {
		case isSign(t, "("):
			parens++
		case isSign(t, ")"):
			parens = max(0, parens-1)
		}
		p.take()
	}
}

// beginsOther reports whether what begins here is a statement and no entry of a part.
func (p *parser) beginsOther() bool {
	if t := p.Peek(); t.Type == kindKeyword {
		return slices.Contains(statementWords(), t.Value)
	}
	at := p.MakeCheckpoint().RawCursor()
	next := p.Range(at+1, at+2)[0] // at least the end of the file
	return isSign(&next, "--")
}

func unclosed(open lexer.Token) *fault {
	return &fault{code: CodeOpenBrace, token: open, text: "this brace is not closed"}
}

// entryEnd reports whether an entry of a part ends at a token.
func (p *parser) entryEnd(t *lexer.Token) bool {
	return t.Type == kindLine || t.Type == kindEOF || isSign(t, ",") || isSign(t, "}")
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
			m, err := p.matchParam()
			if err == nil {
				s.Params = append(s.Params, m)
			}
			return err
		})
	default:
		s.Within, err = p.withinValue()
	}
	s.Span = p.span(start)
	return s, err
}

// matchParam reads parameter within x.
func (p *parser) matchParam() (m MatchParam, err error) {
	t := *p.Peek()
	if m.Name, err = p.name("the name of a parameter"); err != nil {
		return m, err
	}
	m.Within, err = p.withinValue()
	m.Span = p.span(t.Pos)
	return m, err
}

func (p *parser) withinValue() (Expr, error) {
	if t := *p.Peek(); t.Type != kindKeyword || t.Value != "within" {
		return nil, unexpected(t, "`within`")
	}
	p.take()
	return p.expr(0)
}

// block reads NAME(pin, ...) { ... }. A bad head does not keep its body from being read.
func (p *parser) block(start lexer.Position, depth int) (Statement, error) {
	s := &Block{}
	err := p.blockHead(s)
	if err = p.head(err); err != nil {
		return nil, err
	}
	s.Body, err = p.body(depth)
	s.Span = p.span(start)
	if s.Name.Name == "" {
		return nil, err
	}
	return s, err
}

func (p *parser) blockHead(s *Block) (err error) {
	if s.Name, err = p.name("the name of a block"); err != nil {
		return err
	}
	return p.listed(func() error {
		pin, err := p.name("the name of a pin")
		s.Pins = append(s.Pins, pin)
		return err
	})
}

// bench reads NAME "title" { ... }. A bench may have any name, words of the language too.
func (p *parser) bench(start lexer.Position, depth int) (Statement, error) {
	s := &Bench{}
	err := p.benchHead(s)
	if err = p.head(err); err != nil {
		return nil, err
	}
	s.Body, err = p.body(depth)
	s.Span = p.span(start)
	if s.Name.Name == "" {
		return nil, err
	}
	return s, err
}

func (p *parser) benchHead(s *Bench) error {
	t := *p.Peek()
	if t.Type != kindKeyword {
		var err error
		if s.Name, err = p.name("the name of a bench"); err != nil {
			return err
		}
	} else {
		p.take()
		s.Name = Ident{Span: p.span(t.Pos), Name: t.Value}
	}
	if p.Peek().Type == kindString {
		text, err := p.text()
		if err != nil {
			return err
		}
		s.Title = &text
	}
	if !isSign(p.Peek(), "{") {
		return unexpected(*p.Peek(), "`{`")
	}
	return nil
}

// head reports the error of the head of a block if its body follows in the same line, and goes to the body; else it returns the error.
func (p *parser) head(err error) error {
	if err == nil || p.Peek().Type == kindKeyword && p.beginsStatement() {
		return err
	}
	before, end := p.MakeCheckpoint(), p.end
	for t := p.Peek(); t.Type != kindLine && t.Type != kindEOF; t = p.Peek() {
		if isSign(t, "{") {
			p.report(err)
			return nil
		}
		p.take()
	}
	p.LoadCheckpoint(before)
	p.end = end
	return err
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
		return list, unclosed(open)
	}
	p.take()
	return list, nil
}
