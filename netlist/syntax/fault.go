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
	want  string // what could stand there, "" if that is not what is wrong
	hint  string
	stay  bool // the parser stands where the next statement begins
}

func (f *fault) Error() string            { return f.text }
func (f *fault) Message() string          { return f.text }
func (f *fault) Position() lexer.Position { return f.token.Pos }

var _ participle.Error = (*fault)(nil)

// unexpected makes a fault that says what stands there and what could.
func unexpected(t lexer.Token, want string) *fault {
	f := &fault{code: CodeUnexpected, token: t, text: fmt.Sprintf("found %s, want %s", describe(t), want), want: want}
	switch {
	case t.Type == kindBad && strings.HasPrefix(t.Value, `"`):
		f.code, f.text = CodeOpenString, "a text that begins here is not closed in its line"
	case t.Type == kindBad:
		f.code, f.text, f.hint = CodeBadCharacter, fmt.Sprintf("%q is no part of the language", t.Value), lookAlike(t.Value)
	}
	return f
}

// atLineEnd moves a fault from the first token of a line to the end of the token before it, where the statement breaks off.
func (f *fault) atLineEnd(before *lexer.Token) *fault {
	p := before.Pos
	end := past(before)
	p.Offset, p.Line, p.Column = end.Offset, end.Line, end.Column
	moved := unexpected(lexer.Token{Type: kindLine, Pos: p}, f.want)
	moved.hint = f.hint
	return moved
}

// lookAlike suggests a character of the language for one that is taken for it, or for one of other habits.
func lookAlike(bad string) string {
	meant := ""
	switch bad {
	case "\u2212", "\u2013", "\u2014", "\u2010", "\u2011":
		meant = "-"
	case "\u00D7", "\u00B7", "\u22C5":
		meant = "*"
	case "\u00F7":
		meant = "/"
	case "\u2264":
		meant = "<="
	case "\u2265":
		meant = ">="
	case "\u2026":
		meant = ".."
	case "\u201C", "\u201D", "\u201E", "'", "\u2018", "\u2019":
		meant = `"`
	case "\u00A0", "\u202F", "\u2009":
		return "this is not the common blank; type a blank in its place"
	case ";":
		return "a statement ends with its line"
	case "\u00B0":
		return "degrees are written deg, degrees Celsius degC"
	default:
		return ""
	}
	return "did you mean `" + meant + "`?"
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
