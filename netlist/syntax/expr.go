package syntax

import (
	"fmt"
	"strings"

	"github.com/alecthomas/participle/v2"
	"github.com/alecthomas/participle/v2/lexer"
)

// fault is a syntax error at a token. It is a participle.Error, so that it passes through the parser library unchanged.
type fault struct {
	code  Code
	token lexer.Token
	text  string
	hint  string
}

func (f *fault) Error() string            { return f.text }
func (f *fault) Message() string          { return f.text }
func (f *fault) Position() lexer.Position { return f.token.Pos }

var _ participle.Error = (*fault)(nil)

// unexpected makes a fault that says what stands there and what could.
func unexpected(t lexer.Token, want string) *fault {
	f := &fault{code: CodeUnexpected, token: t, text: fmt.Sprintf("found %s, want %s", describe(t), want)}
	switch {
	case t.Type == kindBad && strings.HasPrefix(t.Value, `"`):
		f.code, f.text = CodeOpenString, "a text that begins here is not closed in its line"
	case t.Type == kindBad:
		f.code, f.text = CodeBadCharacter, fmt.Sprintf("%q is no part of the language", t.Value)
	}
	return f
}

// describe names a token for a message.
func describe(t lexer.Token) string {
	switch t.Type {
	case kindEOF:
		return "the end of the file"
	case kindLine:
		return "the end of the line"
	case kindKeyword:
		return fmt.Sprintf("the word `%s`", t.Value)
	}
	const longest = 40
	v := t.Value
	if len(v) > longest {
		v = v[:longest] + "..."
	}
	return "`" + v + "`"
}

// cursor is the token stream with the depth of the expression being read.
type cursor struct {
	*lexer.PeekingLexer
	depth int
	end   Position // just past the last token taken
}

func isSign(t *lexer.Token, value string) bool { return t.Type == kindSign && t.Value == value }

// take consumes a token.
func (c *cursor) take() *lexer.Token {
	t := c.Next()
	c.end = past(t)
	return t
}

// past is the place just past a token, which holds no line end unless it is one.
func past(t *lexer.Token) Position {
	p := place(t.Pos)
	p.Offset += len(t.Value)
	p.Column += len([]rune(t.Value))
	return p
}

// sign consumes a sign or faults.
func (c *cursor) sign(value string) error {
	if !isSign(c.Peek(), value) {
		return unexpected(*c.Peek(), "`"+value+"`")
	}
	c.take()
	return nil
}

// lines skips line ends, inside parentheses.
func (c *cursor) lines() {
	for c.Peek().Type == kindLine {
		c.take()
	}
}

// span closes a span that began at a place.
func (c *cursor) span(start lexer.Position) Span {
	return Span{File: start.Filename, Start: place(start), End: c.end}
}

// name reads a name; what says what it names, for the message.
func (c *cursor) name(what string) (Ident, error) {
	t := c.Peek()
	if t.Type != kindName || t.Value == "_" {
		f := unexpected(*t, what)
		if t.Type == kindKeyword {
			f.code = CodeReserved
			f.hint = fmt.Sprintf("`%s` is a word of the language and cannot be a name", t.Value)
		}
		return Ident{}, f
	}
	c.take()
	return Ident{Span: c.span(t.Pos), Name: t.Value}, nil
}

// ref reads a name or a dotted path of names; a lone low line is a node without a name.
func (c *cursor) ref(what string) (Ref, error) {
	start := c.Peek().Pos
	var r Ref
	if t := c.Peek(); t.Type == kindName && t.Value == "_" {
		c.take()
		r.Names = []Ident{{Span: c.span(start), Name: "_"}}
		r.Span = c.span(start)
		return r, nil
	}
	for {
		n, err := c.name(what)
		if err != nil {
			return r, err
		}
		r.Names = append(r.Names, n)
		if !isSign(c.Peek(), ".") {
			r.Span = c.span(start)
			return r, nil
		}
		c.take()
	}
}

// binding powers, tightest last. A power binds to its right, the others to their left.
var power = map[string]int{"+": 1, "-": 1, "*": 2, "/": 2, "||": 4, "^": 5}

const unaryPower = 3

// maxDepth bounds the nesting of an expression: the parser is recursive, and Go cannot recover from an exhausted stack.
const maxDepth = 500

// expr reads an expression whose operators bind at least as tightly as least (Pratt, Top down operator precedence, 1973).
func (c *cursor) expr(least int) (Expr, error) {
	c.depth++
	defer func() { c.depth-- }()
	if c.depth > maxDepth {
		return nil, &fault{code: CodeTooDeep, token: *c.Peek(), text: fmt.Sprintf("the expression nests more than %d deep", maxDepth)}
	}
	start := c.Peek().Pos
	left, err := c.operand()
	if err != nil {
		return nil, err
	}
	for {
		t := *c.Peek()
		p, ok := power[t.Value]
		if t.Type != kindSign || !ok || p < least {
			return left, nil
		}
		c.take()
		opAt := c.span(t.Pos)
		next := p + 1
		if t.Value == "^" {
			next = p
			if isSign(c.Peek(), "-") {
				next = unaryPower
			}
		}
		right, err := c.expr(next)
		if err != nil {
			return nil, err
		}
		left = &Binary{Span: c.span(start), Op: t.Value, OpAt: opAt, X: left, Y: right}
	}
}

// operand reads a number, a name, a call, something in parentheses, or a negation of one.
func (c *cursor) operand() (Expr, error) {
	t := *c.Peek()
	switch {
	case t.Type == kindNumber:
		c.take()
		return &Number{Span: c.span(t.Pos), Text: t.Value}, nil
	case t.Type == kindString:
		text, err := c.text()
		return &String{text}, err
	case isSign(&t, "-") || isSign(&t, "+"):
		return c.signed(t)
	case isSign(&t, "("):
		c.take()
		c.lines()
		x, err := c.expr(0)
		if err != nil {
			return nil, err
		}
		c.lines()
		if err := c.sign(")"); err != nil {
			return nil, err
		}
		return &Paren{Span: c.span(t.Pos), X: x}, nil
	case t.Type == kindName:
		r, err := c.ref("a name")
		if err != nil {
			return nil, err
		}
		if isSign(c.Peek(), "(") {
			return c.call(r)
		}
		return &Name{r}, nil
	}
	return nil, unexpected(t, "an expression")
}

// signed reads what follows a sign: a literal that it touches takes it in, so that -40degC is a temperature.
func (c *cursor) signed(t lexer.Token) (Expr, error) {
	c.take()
	if n := c.Peek(); n.Type == kindNumber && n.Pos.Offset == t.Pos.Offset+1 {
		number := *c.take()
		return &Number{Span: c.span(t.Pos), Text: strings.TrimPrefix(t.Value, "+") + number.Value}, nil
	}
	if t.Value == "+" {
		return nil, unexpected(t, "an expression")
	}
	x, err := c.expr(unaryPower)
	if err != nil {
		return nil, err
	}
	return &Unary{Span: c.span(t.Pos), X: x}, nil
}

// text reads a quoted text.
func (c *cursor) text() (Text, error) {
	t := c.Peek()
	if t.Type != kindString {
		return Text{}, unexpected(*t, "a text in quotes")
	}
	c.take()
	value := strings.NewReplacer(`\\`, `\`, `\"`, `"`).Replace(t.Value[1 : len(t.Value)-1])
	return Text{Span: c.span(t.Pos), Value: value}, nil
}

// call reads the arguments of f.
func (c *cursor) call(f Ref) (Expr, error) {
	start := c.Peek().Pos
	start.Offset, start.Line, start.Column = f.Start.Offset, f.Start.Line, f.Start.Column
	c.take()
	call := &Call{Func: f}
	for c.lines(); !isSign(c.Peek(), ")"); c.lines() {
		if len(call.Args) > 0 {
			if err := c.sign(","); err != nil {
				return nil, err
			}
			c.lines()
		}
		a, err := c.argument()
		if err != nil {
			return nil, err
		}
		call.Args = append(call.Args, a)
	}
	c.take()
	call.Span = c.span(start)
	return call, nil
}

// argument reads x, name: x, or a..b.
func (c *cursor) argument() (Arg, error) {
	t := *c.Peek()
	var a Arg
	if t.Type == kindName || t.Type == kindKeyword {
		checkpoint := c.MakeCheckpoint()
		end := c.end
		c.take()
		id := Ident{Span: c.span(t.Pos), Name: t.Value}
		if isSign(c.Peek(), ":") {
			c.take()
			c.lines()
			a.Name = &id
		} else {
			c.LoadCheckpoint(checkpoint)
			c.end = end
		}
	}
	x, err := c.rangeOr()
	if err != nil {
		return a, err
	}
	a.Value, a.Span = x, c.span(t.Pos)
	return a, nil
}

// rangeOr reads x or a..b.
func (c *cursor) rangeOr() (Expr, error) {
	start := c.Peek().Pos
	x, err := c.measure()
	if err != nil || !isSign(c.Peek(), "..") {
		return x, err
	}
	c.take()
	y, err := c.expr(0)
	if err != nil {
		return nil, err
	}
	return &Range{Span: c.span(start), Low: x, High: y}, nil
}

// measure reads an expression with `at F` or `over F1..F2 per decade n` behind it.
func (c *cursor) measure() (Expr, error) {
	start := c.Peek().Pos
	x, err := c.expr(0)
	if err != nil {
		return nil, err
	}
	t := c.Peek()
	switch {
	case t.Type == kindKeyword && t.Value == "at":
		c.take()
		f, err := c.expr(0)
		if err != nil {
			return nil, err
		}
		return &Measure{Span: c.span(start), X: x, At: f}, nil
	case t.Type == kindKeyword && t.Value == "over":
		c.take()
		return c.overRange(start, x)
	}
	return x, nil
}

func (c *cursor) overRange(start lexer.Position, x Expr) (Expr, error) {
	m := &Measure{X: x}
	var err error
	if m.Low, err = c.expr(0); err != nil {
		return nil, err
	}
	if err = c.sign(".."); err != nil {
		return nil, err
	}
	if m.High, err = c.expr(0); err != nil {
		return nil, err
	}
	if t := c.Peek(); t.Type == kindName && t.Value == "per" {
		c.take()
		if t := c.Peek(); t.Type != kindName || t.Value != "decade" {
			return nil, unexpected(*t, "`decade`")
		}
		c.take()
		if m.PerDecade, err = c.expr(0); err != nil {
			return nil, err
		}
	}
	m.Span = c.span(start)
	return m, nil
}

// The captures of the parser library's grammars.
type (
	exprPart  struct{ Expr }  // an expression
	quantPart struct{ Expr }  // a quantity with at or over
	namePart  struct{ Ident } // a name
	refPart   struct{ Ref }   // a dotted name
	textPart  struct{ Text }  // a quoted text, optional
	modePart  struct{ Ident } // a word that is no keyword, optional
	modsPart  struct{ List []Modifier }
)

// within runs f on the library's token stream.
func within(lex *lexer.PeekingLexer, f func(c *cursor) error) error {
	return f(&cursor{PeekingLexer: lex})
}

func (e *exprPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { e.Expr, err = c.expr(0); return err })
}

func (e *quantPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { e.Expr, err = c.measure(); return err })
}

func (n *namePart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { n.Ident, err = c.name("a name"); return err })
}

func (r *refPart) Parse(lex *lexer.PeekingLexer) error {
	if t := lex.Peek(); t.Type != kindName {
		return participle.NextMatch
	}
	return within(lex, func(c *cursor) (err error) { r.Ref, err = c.ref("a name"); return err })
}

func (t *textPart) Parse(lex *lexer.PeekingLexer) error {
	if lex.Peek().Type != kindString {
		return participle.NextMatch
	}
	return within(lex, func(c *cursor) (err error) { t.Text, err = c.text(); return err })
}

func (m *modePart) Parse(lex *lexer.PeekingLexer) error {
	if t := lex.Peek(); t.Type != kindName || t.Value == "open" {
		return participle.NextMatch
	}
	return within(lex, func(c *cursor) (err error) { m.Ident, err = c.name("a mode"); return err })
}

func (m *modsPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { m.List, err = c.modifiers(); return err })
}

// modifiers reads tol, sigma, tc and start with their values.
func (c *cursor) modifiers() ([]Modifier, error) {
	var list []Modifier
	for {
		t := *c.Peek()
		if t.Type != kindKeyword || !(t.Value == "tol" || t.Value == "sigma" || t.Value == "tc" || t.Value == "start") {
			return list, nil
		}
		c.take()
		m := Modifier{Name: Ident{Span: c.span(t.Pos), Name: t.Value}}
		var err error
		if m.Value, err = c.expr(0); err != nil {
			return list, err
		}
		if t.Value == "tc" && isSign(c.Peek(), ",") {
			c.take()
			if m.Second, err = c.expr(0); err != nil {
				return list, err
			}
		}
		m.Span = c.span(t.Pos)
		list = append(list, m)
	}
}
