package syntax

import (
	"errors"
	"strings"
	"sync"

	"github.com/alecthomas/participle/v2"
	"github.com/alecthomas/participle/v2/lexer"
)

// The grammars of the simple statements, each behind its first word. Paths, instances and what has braces are read by hand: they
// are the bulk of a large file.
type (
	designGrammar struct {
		Name  namePart  `parser:"@@"`
		Title *textPart `parser:"@@?"`
	}
	useGrammar struct {
		Path pathPart `parser:"@@"`
	}
	cautionGrammar struct {
		Kind namePart `parser:"@@"`
	}
	letGrammar struct {
		Name  namePart `parser:"@@ '='"`
		Value exprPart `parser:"@@"`
	}
	setGrammar struct {
		Target refPart  `parser:"@@ '='"`
		Value  exprPart `parser:"@@"`
	}
	railGrammar struct {
		Name      namePart `parser:"@@ '='"`
		Value     exprPart `parser:"@@"`
		Modifiers modsPart `parser:"@@"`
	}
	coupleGrammar struct {
		Members refsPart `parser:"@@ '='"`
		Value   exprPart `parser:"@@"`
	}
	inputGrammar struct {
		Name    namePart `parser:"@@ '='"`
		Nodes   refsPart `parser:"@@"`
		Current bool     `parser:"@'current'?"`
	}
	outputGrammar struct {
		Name  namePart  `parser:"@@ '='"`
		Nodes refsPart  `parser:"@@"`
		Rest  *exprPart `parser:"('rest' @@)?"`
	}
	driveGrammar struct {
		Target refPart   `parser:"@@"`
		Mode   *modePart `parser:"@@?"`
		Open   bool      `parser:"( @'open'"`
		Value  *exprPart `parser:"| '=' @@ )"`
	}
	runGrammar struct {
		Periodic *exprPart `parser:"( 'periodic' @@"`
		Settle   *exprPart `parser:"  ('settle' @@)?"`
		Until    *exprPart `parser:"| @@"`
		From     *exprPart `parser:"  ('from' @@)?"`
		Step     *exprPart `parser:"  ('step' @@)?"`
		Cold     bool      `parser:"  @'cold'? )"`
	}
	varyGrammar struct {
		Target refPart    `parser:"@@ '='"`
		First  exprPart   `parser:"@@"`
		To     *exprPart  `parser:"( '..' @@"`
		By     *exprPart  `parser:"  ( 'by' @@"`
		Count  *exprPart  `parser:"  | 'count' @@ )"`
		More   []exprPart `parser:"| (',' @@)+ )?"`
	}
	spreadGrammar struct {
		Samples exprPart  `parser:"@@"`
		Seed    *exprPart `parser:"('seed' @@)?"`
	}
	plotGrammar struct {
		Quantities []quantPart `parser:"@@ (',' @@)*"`
		Title      *textPart   `parser:"@@?"`
	}
	expectGrammar struct {
		Label    *textPart      `parser:"@@?"`
		Quantity quantPart      `parser:"@@"`
		Limit    comparisonPart `parser:"@@"`
		Share    *exprPart      `parser:"('for' @@)?"`
	}
	comparisonPart struct{ Comparison }
)

// rule reads one simple statement behind its first word.
type rule func(c *cursor, start lexer.Position) (Statement, error)

// ruleOf joins a grammar and what makes a statement of it. No lookahead: once a clause has begun, an error in it is its own.
func ruleOf[G any](make func(g *G, s Span) Statement) rule {
	parser := participle.MustBuild[G](participle.Lexer(tokens{}), participle.UseLookahead(0))
	return func(c *cursor, start lexer.Position) (Statement, error) {
		g, err := parser.ParseFromLexer(c.PeekingLexer, participle.AllowTrailing(true))
		if err != nil {
			return nil, translate(c, err)
		}
		c.end = lastEnd(c.PeekingLexer)
		return make(g, c.span(start)), nil
	}
}

// lastEnd is the place just past the last token taken.
func lastEnd(lex *lexer.PeekingLexer) Position {
	for at := lex.RawCursor(); at > 0; at-- {
		if t := lex.Range(at-1, at)[0]; t.Type != kindLine {
			return past(&t)
		}
	}
	return Position{}
}

// translate turns an error of the parser library into a fault in the language's own words.
func translate(c *cursor, err error) error {
	var own *fault
	if errors.As(err, &own) {
		return own
	}
	var u *participle.UnexpectedTokenError
	if errors.As(err, &u) {
		return unexpected(u.Unexpected, wanted(u.Error()))
	}
	return &fault{code: CodeUnexpected, token: *c.Peek(), text: err.Error()}
}

// wanted reads what the library expected off its message and names the first of it.
func wanted(message string) string {
	_, want, ok := strings.Cut(message, "(expected ")
	if !ok {
		return "something else"
	}
	want = strings.TrimSuffix(want, ")")
	var names []string
	for _, alternative := range strings.Split(want, " | ") {
		first := strings.TrimLeft(alternative, "( ")
		switch {
		case strings.HasPrefix(first, "ExprPart"), strings.HasPrefix(first, "QuantPart"):
			first = "an expression"
		case strings.HasPrefix(first, "ModePart"):
			first = "a mode"
		case strings.HasPrefix(first, `"`):
			word, _, _ := strings.Cut(first[1:], `"`)
			first = "`" + word + "`"
		default:
			continue
		}
		names = append(names, first)
	}
	if len(names) == 0 {
		return "something else"
	}
	return strings.Join(names, " or ")
}

func title(t *textPart) *Text {
	if t == nil {
		return nil
	}
	return &t.Text
}

func optional(e *exprPart) Expr {
	if e == nil {
		return nil
	}
	return e.Expr
}

// rules are the simple statements by their first word, built once.
var rules = sync.OnceValue(func() map[string]rule {
	return map[string]rule{
		"design": ruleOf(func(g *designGrammar, s Span) Statement {
			return &Design{Span: s, Name: g.Name.Ident, Title: title(g.Title)}
		}),
		"use": ruleOf(func(g *useGrammar, s Span) Statement { return &Use{Span: s, Path: g.Path.Text} }),
		"caution": ruleOf(func(g *cautionGrammar, s Span) Statement {
			return &Caution{Span: s, Kind: g.Kind.Ident}
		}),
		"let": ruleOf(func(g *letGrammar, s Span) Statement { return &Let{Span: s, Name: g.Name.Ident, Value: g.Value.Expr} }),
		"set": ruleOf(func(g *setGrammar, s Span) Statement { return &Set{Span: s, Target: g.Target.Ref, Value: g.Value.Expr} }),
		"rail": ruleOf(func(g *railGrammar, s Span) Statement {
			return &Rail{Span: s, Name: g.Name.Ident, Value: g.Value.Expr, Modifiers: g.Modifiers.List}
		}),
		"couple": ruleOf(func(g *coupleGrammar, s Span) Statement {
			return &Couple{Span: s, Members: g.Members.List, Value: g.Value.Expr}
		}),
		"input": ruleOf(func(g *inputGrammar, s Span) Statement {
			return &Input{Span: s, Name: g.Name.Ident, Nodes: g.Nodes.List, Current: g.Current}
		}),
		"output": ruleOf(func(g *outputGrammar, s Span) Statement {
			return &Output{Span: s, Name: g.Name.Ident, Nodes: g.Nodes.List, Rest: optional(g.Rest)}
		}),
		"drive": ruleOf(makeDrive),
		"run": ruleOf(func(g *runGrammar, s Span) Statement {
			return &Run{Span: s, Until: optional(g.Until), From: optional(g.From), Step: optional(g.Step), Cold: g.Cold, Periodic: optional(g.Periodic), Settle: optional(g.Settle)}
		}),
		"vary": ruleOf(makeVary),
		"spread": ruleOf(func(g *spreadGrammar, s Span) Statement {
			return &Spread{Span: s, Samples: g.Samples.Expr, Seed: optional(g.Seed)}
		}),
		"plot": ruleOf(makePlot),
		"expect": ruleOf(func(g *expectGrammar, s Span) Statement {
			return &Expect{Span: s, Label: title(g.Label), Quantity: g.Quantity.Expr, Comparison: g.Limit.Comparison, Share: optional(g.Share)}
		}),
	}
})

func makeDrive(g *driveGrammar, s Span) Statement {
	d := &Drive{Span: s, Target: g.Target.Ref, Value: optional(g.Value), Open: g.Open}
	if g.Mode != nil {
		d.Mode = &g.Mode.Ident
	}
	return d
}

func makeVary(g *varyGrammar, s Span) Statement {
	v := &Vary{Span: s, Target: g.Target.Ref}
	if g.To != nil {
		v.From, v.To, v.By, v.Count = g.First.Expr, g.To.Expr, optional(g.By), optional(g.Count)
		return v
	}
	v.List = []Expr{g.First.Expr}
	for _, e := range g.More {
		v.List = append(v.List, e.Expr)
	}
	return v
}

func makePlot(g *plotGrammar, s Span) Statement {
	p := &Plot{Span: s, Title: title(g.Title)}
	for _, q := range g.Quantities {
		p.Quantities = append(p.Quantities, q.Expr)
	}
	return p
}

// Parse reads a comparison: >= x, within a..b, = v +- t, = word.
func (p *comparisonPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { p.Comparison, err = c.comparison(); return err })
}

func (c *cursor) comparison() (m Comparison, err error) {
	t := *c.Peek()
	operator, ok := operatorOf(t.Value)
	switch {
	case t.Type == kindKeyword && t.Value == "within":
		c.take()
		m.Operator = Within
		if m.Value, err = c.expr(0); err != nil {
			return m, err
		}
		if err = c.sign(".."); err != nil {
			return m, err
		}
		m.High, err = c.expr(0)
	case t.Type == kindSign && ok:
		c.take()
		m.Operator = operator
		if m.Value, err = c.expr(0); err != nil {
			return m, err
		}
		if sign := c.Peek(); operator == Equal && (isSign(sign, "+-") || isSign(sign, "±")) {
			c.take()
			m.Operator = Near
			if m.Tolerance, err = c.expr(0); err != nil {
				return m, err
			}
			n, isNumber := m.Tolerance.(*Number)
			m.Relative = isNumber && (strings.HasSuffix(n.Text, "%") || strings.HasSuffix(n.Text, "ppm"))
		}
	default:
		return m, unexpected(t, "a comparison: `>=`, `>`, `<=`, `<`, `within a..b` or `= value +- tolerance`")
	}
	m.Span = c.span(t.Pos)
	return m, err
}

func operatorOf(sign string) (Operator, bool) {
	switch sign {
	case ">=":
		return AtLeast, true
	case ">":
		return Above, true
	case "<=":
		return AtMost, true
	case "<":
		return Below, true
	case "=":
		return Equal, true
	}
	return 0, false
}
