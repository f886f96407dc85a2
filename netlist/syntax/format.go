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
	return layOut(f.Source), nil
}

// Tidy writes a piece of a text in one line with the blanks of the common form.
func Tidy(src string) string {
	var b strings.Builder
	s := &scanner{src: src, line: 1, column: 1}
	var before, last lexer.Token
	for {
		t := s.scan()
		if t.Type == kindEOF {
			return b.String()
		}
		if t.Type == kindLine {
			continue
		}
		if last.Type != 0 && spaced(before, last, t) {
			b.WriteByte(' ')
		}
		b.WriteString(t.Value)
		before, last = last, t
		s.last = t
	}
}

// layout is a text being formatted, line by line.
type layout struct {
	lines   []formatted
	depth   int
	parens  int
	open    bool // the statement of the last line goes on
	current formatted
	before  lexer.Token
	last    lexer.Token
}

// formatted is one line: code, then a comment.
type formatted struct {
	indent  int
	code    string
	comment string
	blank   bool // an empty line stands before it
}

// layOut formats a text without syntax errors. It looks at the raw line ends, which the parser does not see all.
func layOut(src string) string {
	l := &layout{}
	for i, line := range strings.Split(src, "\n") {
		l.line(line, i)
	}
	return l.String()
}

// line formats one line of the source. Tokens never span lines.
func (l *layout) line(text string, _ int) {
	s := &scanner{src: text, line: 1, column: 1}
	l.current = formatted{}
	closing := 0
	started := false
	for {
		t := s.scan()
		if t.Type == kindEOF {
			break
		}
		if !started {
			started = true
			if isSign(&t, "}") || isSign(&t, ")") {
				closing = 1
			}
			l.current.indent = max(0, l.depth+l.parens-closing)
			if l.open && l.parens == 0 && closing == 0 {
				l.current.indent++
			}
			l.before, l.last = lexer.Token{}, lexer.Token{}
		} else if spaced(l.before, l.last, t) {
			l.current.code += " "
		}
		l.current.code += t.Value
		l.count(t)
		l.before, l.last = l.last, t
		s.last = t
	}
	if len(s.comments) > 0 {
		l.current.comment = s.comments[0].Text
	}
	if started {
		l.open = l.last.Type == kindSign && continues[l.last.Value] && l.last.Value != "{"
	} else if l.current.comment != "" {
		l.current.indent = l.depth + l.parens
		if l.open {
			l.current.indent++
		}
	}
	l.keep(started)
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

// keep adds the line, or remembers that it was empty.
func (l *layout) keep(started bool) {
	if !started && l.current.comment == "" {
		if n := len(l.lines); n > 0 && !l.lines[n-1].blank {
			l.lines = append(l.lines, formatted{blank: true})
		}
		return
	}
	// No empty line behind an opening brace or before a closing one.
	if n := len(l.lines); n > 1 && l.lines[n-1].blank {
		opened := strings.HasSuffix(l.lines[n-2].code, "{")
		if opened || strings.HasPrefix(l.current.code, "}") {
			l.lines = l.lines[:n-1]
		}
	} else if n == 1 && l.lines[0].blank {
		l.lines = nil
	}
	l.lines = append(l.lines, l.current)
}

// String joins the lines; comments behind code in neighbouring lines stand in one column.
func (l *layout) String() string {
	var b strings.Builder
	for i := 0; i < len(l.lines); {
		end, width := i, 0
		for end < len(l.lines) && l.lines[end].code != "" && l.lines[end].comment != "" {
			width = max(width, 2*l.lines[end].indent+utf8.RuneCountInString(l.lines[end].code))
			end++
		}
		for end = max(end, i+1); i < end; i++ {
			x := l.lines[i]
			if x.blank {
				if i+1 < len(l.lines) {
					b.WriteByte('\n')
				}
				continue
			}
			text := strings.Repeat("  ", x.indent) + x.code
			if x.code != "" && x.comment != "" {
				text += strings.Repeat(" ", width-utf8.RuneCountInString(text)+2)
			}
			b.WriteString(text + x.comment + "\n")
		}
	}
	return b.String()
}

// spaced reports whether a blank stands between two neighbouring tokens; before is the one before them.
func spaced(before, left, right lexer.Token) bool {
	l, r := left.Value, right.Value
	if left.Type != kindSign {
		l = ""
	}
	if right.Type != kindSign {
		r = ""
	}
	switch {
	case r == "," || r == ")" || r == ":" || r == "." || l == "." || l == "(" || r == ".." || l == "..":
		return false
	case r == "(":
		return !(left.Type == kindName && left.Pos.Offset+len(left.Value) == right.Pos.Offset)
	case r == "^" || l == "^":
		return false
	case l == "-" || l == "+":
		touches := left.Pos.Offset+len(left.Value) == right.Pos.Offset
		apart := before.Pos.Offset+len(before.Value) < left.Pos.Offset
		return isOperand(before) && !(touches && apart)
	}
	return true
}

// isOperand reports whether a sign behind the token is an operator between two values, not the sign of one.
func isOperand(t lexer.Token) bool {
	return t.Type == kindName || t.Type == kindNumber || t.Type == kindString || isSign(&t, ")")
}
