package syntax

import (
	"strings"
	"unicode/utf8"

	"github.com/alecthomas/participle/v2/lexer"
)

// Format writes a text in the one form that all files share: two blanks a level, one blank between words, none inside parentheses, at most
// one empty line, comments behind statements aligned within their group. It keeps every comment, every token and the line breaks of
// the author, so it cannot change a meaning; formatting twice changes nothing. A text with syntax errors is returned with them.
func Format(name, src string) (string, error) {
	f, list := Parse(name, src, Limits{})
	if err := list.Err(); err != nil {
		return src, err
	}
	return layOut(f), nil
}

// Tidy writes a piece of a text in one line with the blanks of the common form: a quantity, or one with its comparison.
func Tidy(src string) string {
	const word = "expect "
	f, list := Parse("", word+src, Limits{})
	if list.Err() != nil {
		f, list = Parse("", word+src+" >= 0", Limits{})
	}
	l := &layout{}
	if list.Err() == nil {
		l.tree = rolesOf(f.Statements)
	}
	for _, line := range strings.Split(word+src, "\n") {
		s := newScanner("", line, defaultTokens)
		for t := s.scan(); t.Type != kindEOF; t = s.scan() {
			t.Pos.Offset += l.base
			l.word(t)
			s.last = t
		}
		l.base += len(line) + 1
	}
	return strings.TrimPrefix(l.code.String(), word)
}

// role is what a sign does, by its offset, where the tokens around it do not tell.
type role uint8

const (
	binarySign  role = iota // between two operands
	literalSign             // of the number that it touches
	unarySign               // before an operand
	innerParen              // opens an expression in parentheses, not a list
)

// rolesOf returns the signs and parentheses of a tree that are not binary operators or lists.
func rolesOf(statements []Statement) map[int]role {
	roles := map[int]role{}
	for _, s := range statements {
		Walk(s, func(n Node) bool {
			start := n.Place().Start.Offset
			switch n := n.(type) {
			case *Number:
				if n.End.Offset-start > len(n.Text) || n.Text[0] == '-' {
					roles[start] = literalSign
				}
			case *Unary:
				roles[start] = unarySign
			case *Paren:
				roles[start] = innerParen
			}
			return true
		})
	}
	return roles
}

// layout is a text being formatted, line by line.
type layout struct {
	tree   map[int]role
	base   int // offset of the line
	lines  []formatted
	depth  int
	parens int
	open   bool // the statement of the last line goes on

	code strings.Builder // of the line
	last lexer.Token     // of the line
}

// formatted is one line: code, then a comment.
type formatted struct {
	indent  int
	code    string
	comment string
	blank   bool // an empty line
}

// layOut formats a text without syntax errors. It looks at the raw line ends, which the parser does not see all.
func layOut(f *File) string {
	l := &layout{tree: rolesOf(f.Statements)}
	for _, line := range strings.Split(f.Source, "\n") {
		l.keep(l.line(line))
		l.base += len(line) + 1
	}
	return l.String()
}

// line formats one line of the source. Tokens never span lines.
func (l *layout) line(text string) formatted {
	s := newScanner("", text, defaultTokens)
	l.code.Reset()
	l.last = lexer.Token{}
	x := formatted{indent: l.depth + l.parens}
	continued := l.open && l.parens == 0
	for t := s.scan(); t.Type != kindEOF; t = s.scan() {
		if closes := isSign(&t, "}") || isSign(&t, ")"); closes && l.last.Type == 0 {
			x.indent = max(0, x.indent-1)
			continued = false
		}
		t.Pos.Offset += l.base
		l.word(t)
		l.count(t)
		s.last = t
	}
	if continued {
		x.indent++
	}
	if l.last.Type != 0 {
		l.open = l.last.Type == kindSign && goesOn(l.last.Value) && l.last.Value != "{"
	}
	if len(s.comments) > 0 {
		x.comment = s.comments[0].Text
	}
	x.code = l.code.String()
	return x
}

// word writes a token of the line.
func (l *layout) word(t lexer.Token) {
	if l.last.Type != 0 && l.spaced(t) {
		l.code.WriteByte(' ')
	}
	l.code.WriteString(t.Value)
	l.last = t
}

func (l *layout) count(t lexer.Token) {
	switch {
	case isSign(&t, "{"):
		l.depth++
	case isSign(&t, "}"):
		l.depth = max(0, l.depth-1)
	case isSign(&t, "("):
		l.parens++
	case isSign(&t, ")"):
		l.parens = max(0, l.parens-1)
	}
}

// keep adds a line. Of several empty lines one stays, and none at the start, behind an opening brace or before a closing one.
func (l *layout) keep(x formatted) {
	n := len(l.lines)
	if x.code == "" && x.comment == "" {
		if n > 0 && !l.lines[n-1].blank && !strings.HasSuffix(l.lines[n-1].code, "{") {
			l.lines = append(l.lines, formatted{blank: true})
		}
		return
	}
	if n > 0 && l.lines[n-1].blank && strings.HasPrefix(x.code, "}") {
		l.lines = l.lines[:n-1]
	}
	l.lines = append(l.lines, x)
}

// String joins the lines; comments behind code in neighbouring lines stand in one column.
func (l *layout) String() string {
	if n := len(l.lines); n > 0 && l.lines[n-1].blank {
		l.lines = l.lines[:n-1]
	}
	var b strings.Builder
	for i := 0; i < len(l.lines); {
		end, width := i, 0
		for end < len(l.lines) && l.lines[end].code != "" && l.lines[end].comment != "" {
			width = max(width, l.lines[end].width())
			end++
		}
		for end = max(end, i+1); i < end; i++ {
			l.lines[i].write(&b, width)
		}
	}
	return b.String()
}

// width is the number of columns before the comment.
func (x formatted) width() int { return 2*x.indent + utf8.RuneCountInString(x.code) }

func (x formatted) write(b *strings.Builder, width int) {
	if !x.blank {
		b.WriteString(strings.Repeat("  ", x.indent))
		b.WriteString(x.code)
		if x.code != "" && x.comment != "" {
			b.WriteString(strings.Repeat(" ", width-x.width()+2))
		}
		b.WriteString(x.comment)
	}
	b.WriteByte('\n')
}

// spaced reports whether a blank stands before a token that is not the first of its line.
func (l *layout) spaced(right lexer.Token) bool {
	left, r := "", ""
	if l.last.Type == kindSign {
		left = l.last.Value
	}
	if right.Type == kindSign {
		r = right.Value
	}
	touches := l.last.Pos.Offset+len(l.last.Value) == right.Pos.Offset
	switch {
	case left == "(" || left == "." || left == "..":
		return false
	case left == "^":
		return strings.HasSuffix(l.code.String(), " ^")
	case r == "^": // 25ppm/K ^ 2 is the square of what 25ppm/K^2 is a literal of
		return l.last.Type == kindNumber && numberLength(l.last.Value+"^2") > len(l.last.Value)
	case (left == "-" || left == "+") && l.tree[l.last.Pos.Offset] == literalSign:
		return false
	case left == "-" && l.tree[l.last.Pos.Offset] == unarySign:
		// Together they would be a negative number, or the sign of a path.
		return right.Type == kindNumber && !touches || r == "-" || r == "+"
	}
	switch r {
	case ",", ")", ":", ".", "..":
		return false
	case "(":
		return l.last.Type != kindName || l.tree[right.Pos.Offset] == innerParen
	}
	return true
}
