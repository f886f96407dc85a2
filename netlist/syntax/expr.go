package syntax

import (
	"errors"
	"fmt"
	"strings"

	"github.com/alecthomas/participle/v2/lexer"
)

// cursor is the token stream with the depth of the expression being read.
type cursor struct {
	*lexer.PeekingLexer
	depth     int
	parens    int      // parentheses that are open: line ends in them count for nothing
	operators int      // of the expression being read
	end       Position // just past the last token taken
}

func isSign(t *lexer.Token, value string) bool { return t.Type == kindSign && t.Value == value }

// Peek returns the next token without consuming it. In parentheses it skips line ends: the lexer leaves them in, so that one
// parenthesis that is never closed does not hide all later errors.
func (c *cursor) Peek() *lexer.Token {
	t := c.PeekingLexer.Peek()
	for c.parens > 0 && t.Type == kindLine {
		c.Next()
		t = c.PeekingLexer.Peek()
	}
	return t
}

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
	if t.Value[0] == '_' {
		f := unexpected(*t, what)
		f.hint = "a name begins with a letter"
		return Ident{}, f
	}
	c.take()
	return Ident{Span: c.span(t.Pos), Name: t.Value}, nil
}

// node reads a node: a dotted name, or a low line for one without a name.
func (c *cursor) node() (Ref, error) {
	if t := *c.Peek(); t.Type == kindName && t.Value == "_" {
		c.take()
		at := c.span(t.Pos)
		return Ref{Span: at, Names: []Ident{{Span: at, Name: "_"}}}, nil
	}
	return c.ref("a node")
}

// ref reads a name or a dotted path of names; what says what it names, for the message.
func (c *cursor) ref(what string) (Ref, error) {
	start := c.Peek().Pos
	var r Ref
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

// power returns how tightly an operator binds; `^` binds to its right, the others to their left.
func power(operator string) int {
	switch operator {
	case "+", "-":
		return 1
	case "*", "/":
		return 2
	case "||":
		return 4
	case "^":
		return 5
	}
	return 0
}

// unaryPower is how tightly a sign before an operand binds.
const unaryPower = 3

// Bounds of one expression: who walks the tree is recursive, and Go cannot recover from an exhausted stack.
const (
	maxNesting   = 500    // of parentheses, calls, signs and powers
	maxOperators = 10_000 // which nest to the left
)

// expr reads an expression whose operators bind at least as tightly as least (V. R. Pratt, Top down operator precedence, Proc. 1st ACM
// Symposium on Principles of Programming Languages, 1973, pages 41-51).
func (c *cursor) expr(least int) (Expr, error) {
	if c.depth == 0 {
		c.operators = 0
	}
	c.depth++
	defer func() { c.depth-- }()
	if c.depth > maxNesting {
		return nil, &fault{code: CodeTooDeep, token: *c.Peek(), text: fmt.Sprintf("the expression nests more than %d deep", maxNesting)}
	}
	start := c.Peek().Pos
	left, err := c.operand(least)
	if err != nil {
		return nil, err
	}
	for {
		t := *c.Peek()
		p := c.operator(&t)
		if p == 0 || p < least {
			return left, nil
		}
		if c.operators++; c.operators > maxOperators {
			return nil, &fault{code: CodeTooDeep, token: t, text: fmt.Sprintf("the expression has more than %d operators", maxOperators)}
		}
		c.take()
		opAt := c.span(t.Pos)
		if t.Value != "^" {
			p++
		}
		right, err := c.expr(p)
		if err != nil {
			return nil, err
		}
		left = &Binary{Span: c.span(start), Op: t.Value, OpAt: opAt, X: left, Y: right}
	}
}

// operator returns how tightly a token binds as an operator, 0 if it is none.
func (c *cursor) operator(t *lexer.Token) int {
	if t.Type != kindSign {
		return 0
	}
	return power(t.Value)
}

// operand reads a number, a name, a call, something in parentheses, or one of them with a sign that binds at least as tightly as least.
func (c *cursor) operand(least int) (Expr, error) {
	t := *c.Peek()
	switch {
	case t.Type == kindNumber:
		c.take()
		return &Number{Span: c.span(t.Pos), Text: t.Value}, nil
	case t.Type == kindString:
		text, err := c.text()
		return &String{text}, err
	case isSign(&t, "-") || isSign(&t, "+"):
		return c.signed(t, max(least, unaryPower))
	case isSign(&t, "("):
		return c.paren(t)
	case t.Type == kindName:
		r, err := c.ref("a name")
		if err != nil {
			return nil, err
		}
		if isSign(c.Peek(), "(") {
			return c.call(r)
		}
		return &Name{r}, nil
	case isSign(&t, "."):
		f := unexpected(t, "an expression")
		f.hint = "a number begins with a digit: 0.5"
		return nil, f
	}
	return nil, unexpected(t, "an expression")
}

// paren reads a quantity in parentheses.
func (c *cursor) paren(open lexer.Token) (Expr, error) {
	c.take()
	c.parens++
	defer func() { c.parens-- }()
	x, err := c.measure()
	if err != nil {
		return nil, err
	}
	if err := c.closing(open); err != nil {
		return nil, err
	}
	return &Paren{Span: c.span(open.Pos), X: x}, nil
}

// closing consumes the closing parenthesis of one that was opened.
func (c *cursor) closing(open lexer.Token) error {
	err := c.sign(")")
	var f *fault
	if errors.As(err, &f) {
		f.hint = fmt.Sprintf("the parenthesis opened in line %d, column %d is not closed", open.Pos.Line, open.Pos.Column)
	}
	return err
}

// signed reads what follows a sign. A literal that it touches takes the sign in, so that -40degC is a temperature, unless
// an operator behind it binds more tightly than the sign: -2^2 is -(2^2).
func (c *cursor) signed(t lexer.Token, least int) (Expr, error) {
	c.take()
	if n := c.Peek(); n.Type == kindNumber && n.Pos.Offset == t.Pos.Offset+1 {
		before, end := c.MakeCheckpoint(), c.end
		number := *c.take()
		if p := c.operator(c.Peek()); t.Value == "+" || p <= unaryPower || p < least {
			return &Number{Span: c.span(t.Pos), Text: strings.TrimPrefix(t.Value, "+") + number.Value}, nil
		}
		c.LoadCheckpoint(before)
		c.end = end
	}
	if t.Value == "+" {
		f := unexpected(t, "an expression")
		f.hint = "only a number takes the sign +"
		return nil, f
	}
	x, err := c.expr(least)
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

// listed reads ( item, item ... ), which may go over several lines.
func (c *cursor) listed(item func() error) error {
	open := *c.Peek()
	if err := c.sign("("); err != nil {
		return err
	}
	c.parens++
	defer func() { c.parens-- }()
	for first := true; !isSign(c.Peek(), ")"); first = false {
		if !first {
			if !isSign(c.Peek(), ",") {
				return c.closing(open)
			}
			c.take()
		}
		if err := item(); err != nil {
			return err
		}
	}
	c.take()
	return nil
}

// call reads the arguments of f.
func (c *cursor) call(f Ref) (Expr, error) {
	call := &Call{Func: f}
	err := c.listed(func() error {
		a, err := c.argument()
		call.Args = append(call.Args, a)
		return err
	})
	if err != nil {
		return nil, err
	}
	call.Span = Span{File: f.File, Start: f.Start, End: c.end}
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
		if t.Value == "tc" && c.second() {
			c.take()
			if m.Second, err = c.expr(0); err != nil {
				return list, err
			}
		}
		m.Span = c.span(t.Pos)
		list = append(list, m)
	}
}

// second reports whether the comma that stands here comes before the quadratic value of tc, and not before the next entry of a part.
func (c *cursor) second() bool {
	if !isSign(c.Peek(), ",") {
		return false
	}
	before, end := c.MakeCheckpoint(), c.end
	defer func() {
		c.LoadCheckpoint(before)
		c.end = end
	}()
	c.take()
	switch t := c.take(); {
	case t.Type == kindName:
		return !isSign(c.Peek(), "=")
	default:
		return t.Type == kindNumber || isSign(t, "(") || isSign(t, "-") || isSign(t, "+")
	}
}
