package syntax

import (
	"fmt"
	"reflect"
	"strings"
)

// Print writes a tree, one that was read or one that a program built, in the form that Format gives: a statement a line, parts with several
// entries over several lines. Comments of a tree that was read stand before or behind the statements that they stood before, in or
// behind. To keep an author's line breaks, use Format.
func Print(f *File) string {
	p := &printer{comments: f.Comments}
	p.statements(f.Statements)
	p.commentsUpTo(Position{Offset: len(f.Source) + 1, Line: -1})
	text, err := Format(f.Name, p.b.String())
	if err != nil { // a tree that no text gives, as one with a word of the language for a name
		return p.b.String()
	}
	return text
}

// ExprString writes an expression in the common form, with the parentheses that its tree needs.
func ExprString(x Expr) string {
	if isNil(x) {
		return ""
	}
	return Tidy(expression(x, 0))
}

func isNil(x Expr) bool {
	v := reflect.ValueOf(x)
	return !v.IsValid() || v.Kind() == reflect.Pointer && v.IsNil()
}

// printer writes statements with blanks between all words, for Format to put in order.
type printer struct {
	b        strings.Builder
	comments []Comment // still to be written
	line     int       // of the source, where the last thing written ended; 0 at the start
	last     reflect.Type
}

// statements writes the statements of a file or a block.
func (p *printer) statements(list []Statement) {
	p.last = nil
	for _, s := range list {
		at := s.Place()
		p.commentsUpTo(at.Start)
		if at.Start.Line == 0 && p.last != nil && p.last != reflect.TypeOf(s) {
			p.b.WriteByte('\n')
		}
		p.last = reflect.TypeOf(s)
		p.gap(at.Start.Line)
		switch s := s.(type) {
		case *Block:
			p.body(fmt.Sprintf("block %s (%s)", s.Name.Name, identList(s.Pins)), at, s.Body)
		case *Bench:
			p.body("bench "+s.Name.Name+titleText(s.Title), at, s.Body)
		default:
			p.commentsUpTo(at.End)
			p.b.WriteString(statementText(s))
		}
		p.line = at.End.Line
		p.trailing(at.End)
		p.b.WriteByte('\n')
		p.last = reflect.TypeOf(s)
	}
}

// body writes a block or a bench.
func (p *printer) body(head string, at Span, list []Statement) {
	p.b.WriteString(head + " {")
	p.line = at.Start.Line
	if len(list) > 0 {
		p.trailing(Position{Offset: list[0].Place().Start.Offset - 1, Line: at.Start.Line})
	}
	p.b.WriteByte('\n')
	p.statements(list)
	p.commentsUpTo(Position{Offset: at.End.Offset - 1, Line: -1})
	p.b.WriteByte('}')
}

// gap writes an empty line where the source had one.
func (p *printer) gap(line int) {
	if p.line > 0 && line > p.line+1 {
		p.b.WriteByte('\n')
	}
}

// commentsUpTo writes the comments that begin before a place, each in a line of its own.
func (p *printer) commentsUpTo(end Position) {
	for len(p.comments) > 0 && p.comments[0].Start.Offset < end.Offset {
		p.gap(p.comments[0].Start.Line)
		p.b.WriteString(p.comments[0].Text + "\n")
		p.line = p.comments[0].Start.Line
		p.comments = p.comments[1:]
	}
}

// trailing writes the comment behind a statement that ends at a place.
func (p *printer) trailing(end Position) {
	if len(p.comments) > 0 && end.Line > 0 && p.comments[0].Start.Line == end.Line {
		p.b.WriteString(" " + p.comments[0].Text)
		p.comments = p.comments[1:]
	}
}

func identList(list []Ident) string {
	names := make([]string, len(list))
	for i, n := range list {
		names[i] = n.Name
	}
	return strings.Join(names, ", ")
}

func refList(list []Ref, separator string) string {
	names := make([]string, len(list))
	for i, n := range list {
		names[i] = n.String()
	}
	return strings.Join(names, separator)
}

func quoted(s string) string {
	return `"` + strings.NewReplacer(`\`, `\\`, `"`, `\"`).Replace(s) + `"`
}

func titleText(t *Text) string {
	if t == nil {
		return ""
	}
	return " " + quoted(t.Value)
}

// clause writes a word and its expression, nothing without one.
func clause(word string, x Expr) string {
	if isNil(x) {
		return ""
	}
	return " " + word + " " + expression(x, 0)
}

// statementText writes a statement that holds no others.
func statementText(s Statement) string {
	switch s := s.(type) {
	case *Design:
		return "design " + s.Name.Name + titleText(s.Title)
	case *Use:
		return "use " + quoted(s.Path.Value)
	case *Caution:
		return "caution " + s.Kind.Name
	case *Let:
		return "let " + s.Name.Name + clause("=", s.Value)
	case *Set:
		return "set " + s.Target.String() + clause("=", s.Value)
	case *Rail:
		return "rail " + s.Name.Name + clause("=", s.Value) + modifierText(s.Modifiers)
	case *PartDecl:
		return partText(s)
	case *Path:
		return pathText(s)
	case *Instance:
		return instanceText(s)
	case *Couple:
		return "couple (" + refList(s.Members, ", ") + ")" + clause("=", s.Value)
	case *Match:
		return matchText(s)
	}
	return portOrBenchText(s)
}

func portOrBenchText(s Statement) string {
	switch s := s.(type) {
	case *Input:
		text := "input " + s.Name.Name + " = (" + refList(s.Nodes, ", ") + ")"
		if s.Current {
			text += " current"
		}
		return text
	case *Output:
		return "output " + s.Name.Name + " = (" + refList(s.Nodes, ", ") + ")" + clause("rest", s.Rest)
	case *Drive:
		return driveText(s)
	case *Run:
		text := "run" + clause("periodic", s.Periodic) + clause("settle", s.Settle) + clause("", s.Until) + clause("from", s.From) + clause("step", s.Step)
		if s.Cold {
			text += " cold"
		}
		return text
	case *Vary:
		if isNil(s.To) {
			return "vary " + s.Target.String() + " = " + exprList(s.List)
		}
		return "vary " + s.Target.String() + clause("=", s.From) + clause("..", s.To) + clause("by", s.By) + clause("count", s.Count)
	case *Spread:
		return "spread" + clause("", s.Samples) + clause("seed", s.Seed)
	case *Extremes:
		return "extremes"
	case *Expect:
		return "expect" + titleText(s.Label) + clause("", s.Quantity) + comparisonText(s.Comparison) + clause("for", s.Share)
	case *Plot:
		return "plot " + exprList(s.Quantities) + titleText(s.Title)
	}
	return ""
}

func driveText(s *Drive) string {
	text := "drive " + s.Target.String()
	if s.Mode != nil {
		text += " " + s.Mode.Name
	}
	if s.Open {
		return text + " open"
	}
	return text + clause("=", s.Value)
}

func modifierText(list []Modifier) string {
	text := ""
	for _, m := range list {
		text += clause(m.Name.Name, m.Value)
		if !isNil(m.Second) {
			text += ", " + expression(m.Second, 0)
		}
	}
	return text
}

// partText writes several entries over several lines.
func partText(s *PartDecl) string {
	text := "part " + s.Name.Name + " = " + s.Base.Name
	var entries []string
	for _, e := range s.Params {
		entries = append(entries, e.Name.Name+clause("=", e.Value)+modifierText(e.Modifiers))
	}
	if s.Braces || len(entries) > 0 {
		text += braced(entries)
	}
	return text
}

func braced(entries []string) string {
	if len(entries) < 2 {
		return " { " + strings.Join(entries, "") + " }"
	}
	return " {\n" + strings.Join(entries, "\n") + "\n}"
}

func pathText(s *Path) string {
	var parts []string
	for _, e := range s.Elements {
		switch {
		case e.Node != nil:
			parts = append(parts, e.Node.String())
		case e.Name != nil:
			parts = append(parts, e.Name.Name+" "+pathValue(e.Value)+modifierText(e.Modifiers))
		}
	}
	return strings.Join(parts, " -- ")
}

// pathValue puts an expression as the value of a part in parentheses.
func pathValue(x Expr) string {
	switch x.(type) {
	case *Unary, *Binary, *Measure:
		return "(" + expression(x, 0) + ")"
	}
	return expression(x, 0)
}

func instanceText(s *Instance) string {
	pins := make([]string, len(s.Pins))
	for i, p := range s.Pins {
		pins[i] = p.Pin.Name + ": " + p.Node.String()
	}
	text := s.Name.Name + " = " + s.Type.Name + "(" + strings.Join(pins, ", ") + ")"
	changes := make([]string, len(s.With))
	for i, a := range s.With {
		changes[i] = a.Name.Name + clause("=", a.Value)
	}
	if len(changes) > 0 {
		text += " with " + strings.Join(changes, ", ")
	}
	return text
}

func matchText(s *Match) string {
	text := "match " + refList(s.Members, " ")
	if !isNil(s.Within) {
		return text + clause("within", s.Within)
	}
	var entries []string
	for _, m := range s.Params {
		entries = append(entries, m.Name.Name+clause("within", m.Within))
	}
	return text + braced(entries)
}

func comparisonText(c Comparison) string {
	switch c.Operator {
	case Within:
		return clause("within", c.Value) + clause("..", c.High)
	case Near:
		return clause("=", c.Value) + clause("+-", c.Tolerance)
	}
	return clause([...]string{AtLeast: ">=", Above: ">", AtMost: "<=", Below: "<", Equal: "="}[c.Operator], c.Value)
}

func exprList(list []Expr) string {
	texts := make([]string, len(list))
	for i, x := range list {
		texts[i] = expression(x, 0)
	}
	return strings.Join(texts, ", ")
}

// expression writes x where an operator of a power binds it: looser ones come in parentheses.
func expression(x Expr, least int) string {
	if isNil(x) {
		return ""
	}
	switch x := x.(type) {
	case *Number:
		return x.Text
	case *Name:
		return x.String()
	case *String:
		return quoted(x.Value)
	case *Paren:
		return "(" + expression(x.X, 0) + ")"
	case *Unary:
		return enclosed(prefixed(x, unaryPower), least > unaryPower)
	case *Binary:
		return binaryText(x, least)
	case *Call:
		return callText(x)
	case *Range:
		return expression(x.Low, 0) + " .. " + expression(x.High, 0)
	case *Measure:
		text := expression(x.X, 0) + clause("at", x.At) + clause("over", x.Low) + clause("..", x.High) + clause("per decade", x.PerDecade)
		return enclosed(text, least > 0)
	}
	return ""
}

func enclosed(text string, in bool) string {
	if in {
		return "(" + text + ")"
	}
	return text
}

// binaryText writes an operator between its operands. A negative number is a sign and a number to the operators that bind more tightly.
func binaryText(x *Binary, least int) string {
	p := power(x.Op)
	left, right := p, p+1
	if x.Op == "^" {
		left, right = p+1, p
	}
	negative := false
	if n, ok := x.X.(*Number); ok {
		negative = strings.HasPrefix(n.Text, "-") && p > unaryPower
	}
	return enclosed(enclosed(expression(x.X, left), negative)+" "+x.Op+" "+prefixed(x.Y, right), p < least)
}

// prefixed writes x behind an operator or a sign, where a sign needs no parentheses: it binds as that does.
func prefixed(x Expr, least int) string {
	if u, ok := x.(*Unary); ok {
		return "- " + prefixed(u.X, max(least, unaryPower))
	}
	return expression(x, least)
}

func callText(x *Call) string {
	args := make([]string, len(x.Args))
	for i, a := range x.Args {
		if a.Name != nil {
			args[i] = a.Name.Name + ": "
		}
		args[i] += expression(a.Value, 0)
	}
	return x.Func.String() + "(" + strings.Join(args, ", ") + ")"
}
