package syntax

import (
	"io"
	"slices"
	"strings"
	"unicode"
	"unicode/utf8"

	"github.com/alecthomas/participle/v2/lexer"

	"poise/netlist/unit"
)

// Kinds of tokens.
const (
	kindEOF lexer.TokenType = lexer.EOF
	// The others count down from it, as the parser library wants.
	kindName    lexer.TokenType = iota - 10
	kindKeyword                 // a word that is no name of a circuit thing
	kindNumber
	kindString
	kindSign // punctuation and operators
	kindLine // end of a statement
	kindBad  // what no token begins with, or a string that is not closed
)

// isKeyword reports whether a word is not a name of a circuit thing.
func isKeyword(word string) bool {
	switch word {
	case "at", "over", "within", "from", "with", "tol", "sigma", "tc", "start":
		return true
	}
	return slices.Contains(statementWords(), word)
}

// statementWords returns the first words of statements.
func statementWords() []string { return words[:] }

var words = [...]string{
	"design", "use", "let", "set", "rail", "part", "block", "input", "output", "match", "couple", "caution", "bench", "drive", "run", "expect",
	"plot", "vary", "spread", "extremes",
}

// signLength is the length of the punctuation mark or operator that a text begins with, the longest that fits; 0 for none.
func signLength(text string) int {
	for _, sign := range [...]string{"--", "||", "..", ">=", "<=", "+-", "±"} {
		if strings.HasPrefix(text, sign) {
			return len(sign)
		}
	}
	if strings.IndexByte("+-*/^=><(){},:.", text[0]) >= 0 {
		return 1
	}
	return 0
}

// goesOn reports whether a statement goes on in the next line behind a sign.
func goesOn(sign string) bool {
	switch sign {
	case "--", ",", "=", "+", "-", "*", "/", "^", "||", ">=", "<=", ">", "<", "+-", "±", "(", "{", "..", ":":
		return true
	}
	return false
}

// tokens is the lexer's definition for the parser library.
type tokens struct{}

func (tokens) Symbols() map[string]lexer.TokenType {
	return map[string]lexer.TokenType{
		"EOF": kindEOF, "Name": kindName, "Keyword": kindKeyword, "Number": kindNumber, "String": kindString, "Sign": kindSign, "Line": kindLine, "Bad": kindBad,
	}
}

func (t tokens) Lex(name string, r io.Reader) (lexer.Lexer, error) {
	text, err := io.ReadAll(r)
	if err != nil {
		return nil, err
	}
	return t.LexString(name, string(text))
}

// LexString never fails: what is no token becomes one of kind Bad.
func (tokens) LexString(name, src string) (lexer.Lexer, error) {
	return newScanner(name, src, defaultTokens), nil
}

// scanner cuts a text into tokens.
type scanner struct {
	name         string
	src          string
	at           int
	line, column int
	last         lexer.Token // the last token given out
	comments     []Comment
	left         int // tokens that may still be given out
	exhausted    bool
}

func newScanner(name, src string, tokens int) *scanner {
	return &scanner{name: name, src: src, line: 1, column: 1, left: tokens}
}

func (s *scanner) position() lexer.Position {
	return lexer.Position{Filename: s.name, Offset: s.at, Line: s.line, Column: s.column}
}

// advance moves over n bytes, which hold no line end unless they are one.
func (s *scanner) advance(n int) {
	text := s.src[s.at : s.at+n]
	s.at += n
	if text == "\n" {
		s.line++
		s.column = 1
		return
	}
	s.column += utf8.RuneCountInString(text)
}

// Next returns the next token. It collapses line ends, leaves them out where a statement goes on, and puts one before a closing brace
// and at the end of the text.
//
// Behind the last token that its limit allows it reports the end of the text.
func (s *scanner) Next() (lexer.Token, error) {
	t := s.scan()
	if s.left--; s.left < 0 && t.Type != kindEOF {
		s.exhausted = true
		s.at = len(s.src)
		t = lexer.Token{Type: kindEOF, Pos: t.Pos}
	}
	closing := t.Type == kindEOF || t.Type == kindSign && t.Value == "}"
	if closing && !s.afterLine() {
		// The end of the line is where the last token ended; the closing token is scanned again.
		s.rewind(t)
		t = lexer.Token{Type: kindLine, Pos: t.Pos} // no text: it is not in the source
	}
	s.last = t
	return t, nil
}

func (s *scanner) rewind(t lexer.Token) {
	s.at, s.line, s.column = t.Pos.Offset, t.Pos.Line, t.Pos.Column
}

// afterLine reports whether nothing stands before the current place in its statement.
func (s *scanner) afterLine() bool {
	return s.last.Type == kindLine || s.last.Type == 0 || s.last.Type == kindSign && s.last.Value == "{"
}

func (s *scanner) scan() lexer.Token {
	for s.at < len(s.src) {
		switch c := s.src[s.at]; {
		case c == ' ' || c == '\t' || c == '\r':
			s.advance(1)
		case c == '#':
			s.comment()
		case c == '\n':
			pos := s.position()
			s.advance(1)
			if !s.afterLine() && !(s.last.Type == kindSign && goesOn(s.last.Value)) {
				return lexer.Token{Type: kindLine, Value: "\n", Pos: pos}
			}
		default:
			return s.token()
		}
	}
	return lexer.Token{Type: kindEOF, Pos: s.position()}
}

func (s *scanner) comment() {
	end := strings.IndexByte(s.src[s.at:], '\n')
	if end < 0 {
		end = len(s.src) - s.at
	}
	text := strings.TrimRight(s.src[s.at:s.at+end], " \t\r")
	start := place(s.position())
	s.advance(end)
	if n := len(s.comments); n > 0 && s.comments[n-1].Start.Offset >= start.Offset {
		return // scanned before, ahead of a closing token
	}
	s.comments = append(s.comments, Comment{Span: Span{File: s.name, Start: start, End: place(s.position())}, Text: text})
}

func place(p lexer.Position) Position {
	return Position{Offset: p.Offset, Line: p.Line, Column: p.Column}
}

// token scans one token at a place that is no blank.
func (s *scanner) token() lexer.Token {
	pos := s.position()
	kind, n := s.measure()
	value := s.src[s.at : s.at+n]
	s.advance(n)
	return lexer.Token{Type: kind, Value: value, Pos: pos}
}

// measure returns the kind and the length in bytes of the token at the current place.
func (s *scanner) measure() (lexer.TokenType, int) {
	rest := s.src[s.at:]
	r, size := utf8.DecodeRuneInString(rest)
	switch {
	case r >= '0' && r <= '9':
		return kindNumber, numberLength(rest)
	case r == '"':
		return stringLength(rest)
	case r == '_' || unicode.IsLetter(r):
		n := nameLength(rest)
		if isKeyword(rest[:n]) {
			return kindKeyword, n
		}
		return kindName, n
	}
	if n := signLength(rest); n > 0 {
		return kindSign, n
	}
	return kindBad, max(1, size)
}

// nameLength is the length of a run of letters, digits and low lines.
func nameLength(text string) int {
	for i, r := range text {
		if r != '_' && !unicode.IsLetter(r) && !unicode.IsDigit(r) {
			return i
		}
	}
	return len(text)
}

// stringLength measures a quoted string with \" and \\; one that is not closed in its line is bad.
func stringLength(text string) (lexer.TokenType, int) {
	for i := 1; i < len(text); i++ {
		switch text[i] {
		case '\\':
			if i+1 < len(text) && text[i+1] != '\n' {
				i++
			}
		case '"':
			return kindString, i + 1
		case '\n':
			return kindBad, i
		}
	}
	return kindBad, len(text)
}

// numberLength measures a number with its unit: 4k7ohm, 1.5e-3A, 25ppm/K^2. A stroke belongs to it only if the whole is
// a unit of the language.
func numberLength(text string) int {
	digits := func(i int) int {
		for i < len(text) && text[i] >= '0' && text[i] <= '9' {
			i++
		}
		return i
	}
	i := digits(0)
	if i+1 < len(text) && text[i] == '.' && digits(i+1) > i+1 {
		i = digits(i + 1)
	}
	if i < len(text) && (text[i] == 'e' || text[i] == 'E') {
		k := i + 1
		if k < len(text) && (text[k] == '-' || text[k] == '+') {
			k++
		}
		if digits(k) > k {
			i = digits(k)
		}
	}
	start := i
	i += nameLength(text[i:])
	if i < len(text) && text[i] == '%' {
		i++
	}
	if i < len(text) && text[i] == '/' {
		below := nameLength(text[i+1:])
		end := i + 1 + below
		if strings.HasPrefix(text[end:], "^2") {
			squared := end + 2
			more := nameLength(text[squared:]) > 0 || strings.HasPrefix(text[squared:], ".") && !strings.HasPrefix(text[squared:], "..")
			if !more && unit.IsQuotient(text[start:i], text[i+1:squared]) {
				return squared
			}
		}
		if below > 0 && unit.IsQuotient(text[start:i], text[i+1:end]) {
			return end
		}
	}
	return i
}
