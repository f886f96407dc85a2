package syntax

import (
	"github.com/alecthomas/participle/v2"
	"github.com/alecthomas/participle/v2/lexer"
)

// The captures of the parser library's grammars.
type (
	exprPart  struct{ Expr }  // an expression
	quantPart struct{ Expr }  // a quantity with at or over
	namePart  struct{ Ident } // a name
	refPart   struct{ Ref }   // a dotted name
	pathPart  struct{ Text }  // a quoted text
	textPart  struct{ Text }  // a quoted text, optional
	modePart  struct{ Ident } // a word that is no keyword, optional
	modsPart  struct{ List []Modifier }
	refsPart  struct{ List []Ref } // nodes or parts in parentheses
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
	return within(lex, func(c *cursor) (err error) { r.Ref, err = c.ref("a name"); return err })
}

func (t *pathPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) (err error) { t.Text, err = c.text(); return err })
}

func (r *refsPart) Parse(lex *lexer.PeekingLexer) error {
	return within(lex, func(c *cursor) error {
		return c.listed(func() error {
			x, err := c.node()
			r.List = append(r.List, x)
			return err
		})
	})
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
