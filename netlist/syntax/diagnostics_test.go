package syntax

import (
	"errors"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// An expectation stands before the token that the error is to be reported at: «P101 a pattern of its message and hint». A chunk ends at a
// line of ---. An error without an expectation fails, and so does an expectation without its error.
var expectation = regexp.MustCompile(`«(P\d+) ([^»]*)»`)

type wantError struct {
	offset  int
	code    Code
	pattern string
}

// expectations takes the expectations out of a chunk.
func expectations(chunk string) (string, []wantError) {
	var src strings.Builder
	var wants []wantError
	last := 0
	for _, m := range expectation.FindAllStringSubmatchIndex(chunk, -1) {
		src.WriteString(chunk[last:m[0]])
		wants = append(wants, wantError{src.Len(), Code(chunk[m[2]:m[3]]), chunk[m[4]:m[5]]})
		last = m[1]
	}
	src.WriteString(chunk[last:])
	return src.String(), wants
}

func TestErrors(t *testing.T) {
	names, err := filepath.Glob("testdata/errors/*.txt")
	require.NoError(t, err)
	require.NotEmpty(t, names)
	for _, name := range names {
		text, err := os.ReadFile(name)
		require.NoError(t, err)
		line := 1
		for _, chunk := range strings.SplitAfter(string(text), "---\n") {
			t.Run(filepath.Base(name)+":"+strconv.Itoa(line), func(t *testing.T) { checkChunk(t, strings.TrimSuffix(chunk, "---\n")) })
			line += strings.Count(chunk, "\n")
		}
	}
}

func checkChunk(t *testing.T, chunk string) {
	src, wants := expectations(chunk)
	_, list := Parse("t", src, Limits{})
	for i, d := range list {
		if i >= len(wants) {
			assert.Fail(t, "an error that is not expected", "%s\n%s", d.Error(), d.Excerpt())
			continue
		}
		w := wants[i]
		assert.Equal(t, w.offset, d.Span.Start.Offset, "%s\n%s", d.Error(), d.Excerpt())
		assert.Equal(t, w.code, d.Code, d.Error())
		assert.Regexp(t, w.pattern, d.Message+" / "+d.Hint)
		assert.Equal(t, LineOf(src, d.Span.Start.Offset), d.Line)
	}
	for _, w := range wants[min(len(wants), len(list)):] {
		assert.Fail(t, "an error is missing", "%s %s in\n%s", w.code, w.pattern, src)
	}
}

// TestCodes gives every code by its example.
func TestCodes(t *testing.T) {
	last := Code("")
	for _, c := range Codes() {
		assert.Less(t, last, c.Code)
		last = c.Code
		assert.NotEmpty(t, c.Meaning)
		before, after, marked := strings.Cut(c.Example, "«")
		var list DiagnosticList
		if c.Bench {
			_, list = ParseStatements("t", before+after, true)
		} else {
			_, list = Parse("t", before+after, c.Limits)
		}
		require.Len(t, list, 1, c.Code)
		assert.Equal(t, c.Code, list[0].Code)
		if marked {
			assert.Equal(t, len(before), list[0].Span.Start.Offset, c.Code)
		} else {
			assert.Equal(t, Position{Line: 1, Column: 1}, list[0].Span.Start, c.Code)
		}
	}
}

func TestLimits(t *testing.T) {
	for _, c := range []struct {
		src    string
		limits Limits
		want   string
	}{
		{"let a = 1\n", Limits{Bytes: 9}, "t:1:1: the file has 10 bytes; at most 9 are read"},
		{"let a = 1\n", Limits{Bytes: 10, Tokens: 5}, ""},
		{"let a = 1\n", Limits{Tokens: 4}, "t:1:1: the file has more than 4 words, numbers and signs"},
		{"block a() {\nblock b() {\n}\n}\n", Limits{Depth: 2}, ""},
		{"block a() {\nblock b() {\n}\n}\n", Limits{Depth: 1}, "t:2:11: blocks nest more than 1 deep"},
		{"let a = " + strings.Repeat("(", maxNesting-1) + "1" + strings.Repeat(")", maxNesting-1) + "\n", Limits{}, ""},
		{"let a = " + strings.Repeat("(", 1_000_000) + "\n", Limits{}, "t:1:509: the expression nests more than 500 deep"},
		{"let a = " + strings.Repeat("- ", 1_000_000) + "1\n", Limits{}, "t:1:1009: the expression nests more than 500 deep"},
		{"let a = " + strings.Repeat("1^", 1_000_000) + "1\n", Limits{}, "t:1:1009: the expression nests more than 500 deep"},
		{"let a = 1" + strings.Repeat("+1", maxOperators) + "\n", Limits{}, ""},
		{"let a = 1" + strings.Repeat("+1", maxOperators+1) + "\n", Limits{}, "t:1:20010: the expression has more than 10000 operators"},
	} {
		_, list := Parse("t", c.src, c.limits)
		if c.want == "" {
			assert.NoError(t, list.Err())
			continue
		}
		if assert.Len(t, list, 1, c.want) {
			assert.Equal(t, c.want, list[0].Error())
		}
	}
}

// TestManyErrorsInALine: the time is linear in their number, not in its square. The test would not end in time otherwise.
func TestManyErrorsInALine(t *testing.T) {
	const braces = 200_000
	_, list := Parse("t", strings.Repeat("}", braces), Limits{})
	assert.Len(t, list, braces)
	text := list.Error()
	assert.Contains(t, text, "(and 199970 more)")
	assert.Less(t, len(text), 20_000)
}

func TestDiagnosticText(t *testing.T) {
	_, list := Parse("m.poise", "let größe = 3 $ 4\nvp -- R1 1kohm * 2 -- gnd\n}\n", Limits{})
	assert.Equal(t, strings.Join([]string{
		"m.poise:1:15: \"$\" is no part of the language",
		"    1 | let größe = 3 $ 4",
		"      |               ^",
		"m.poise:2:16: found `*`, want `--` or a modifier",
		"    2 | vp -- R1 1kohm * 2 -- gnd",
		"      |                ^",
		"      = an expression as the value of a part stands in parentheses",
		"m.poise:3:1: this brace closes nothing",
		"    3 | }",
		"      | ^",
	}, "\n"), list.Error())
	var d *Diagnostic
	require.True(t, errors.As(list.Err(), &d))
	assert.Equal(t, CodeBadCharacter, d.Code)
	var l DiagnosticList
	require.True(t, errors.As(list.Err(), &l))
	assert.Len(t, l, 3)
}

func TestExcerpt(t *testing.T) {
	at := func(line, column, endLine, endColumn int) Span {
		return Span{File: "f", Start: Position{Line: line, Column: column}, End: Position{Line: endLine, Column: endColumn}}
	}
	for _, c := range []struct {
		d    Diagnostic
		want string
	}{
		{Diagnostic{Span: at(7, 5, 7, 8), Line: "let abc = 1", Note: "a note", Hint: "a hint"}, "    7 | let abc = 1\n      |     ^^^ a note\n      = a hint\n"},
		{Diagnostic{Span: at(123456, 1, 123456, 4), Line: "let"}, "123456 | let\n       | ^^^\n"},
		{Diagnostic{Span: at(7, 9, 9, 2), Line: "bench b { # x"}, "    7 | bench b { # x\n      |         ^^^^^\n"},
		{Diagnostic{Span: at(7, 4, 7, 5), Line: "let\r"}, "    7 | let\n      |    ^\n"},
		{Diagnostic{Span: at(7, 2, 7, 3), Line: "\tx\x1b[2J"}, "    7 |  x [2J\n      |  ^\n"},
		{Diagnostic{Span: at(7, 99, 7, 120), Line: "short"}, "    7 | short\n      |      ^\n"},
		{Diagnostic{Hint: "only a hint"}, "      = only a hint\n"},
		{Diagnostic{}, ""},
	} {
		assert.Equal(t, c.want, c.d.Excerpt())
	}
	long := Diagnostic{Span: at(1, 5001, 1, 5004), Line: strings.Repeat("x", 5000) + "abc" + strings.Repeat("y", 5000)}
	lines := strings.Split(long.Excerpt(), "\n")
	at3 := strings.Index(lines[1], "^^^")
	assert.Equal(t, "abc", lines[0][at3:at3+3])
	assert.Less(t, len(lines[0]), 200)
}

func TestDiagnosticPlaces(t *testing.T) {
	for _, c := range []struct {
		d    Diagnostic
		want string
	}{
		{Diagnostic{Message: "m"}, "m"},
		{Diagnostic{Message: "m", Span: Span{File: "f"}}, "f: m"},
		{Diagnostic{Message: "m", Span: Span{Start: Position{Line: 2, Column: 3}}}, "2:3: m"},
		{Diagnostic{Message: "m", Severity: Warning, Span: Span{File: "f", Start: Position{Line: 2, Column: 3}}}, "f:2:3: warning: m"},
	} {
		assert.Equal(t, c.want, c.d.Error())
	}
}

func TestDiagnosticList(t *testing.T) {
	at := func(file string, offset int) Span {
		return Span{File: file, Start: Position{Offset: offset, Line: 1, Column: offset + 1}}
	}
	a, b := &Diagnostic{Message: "a", Span: at("f", 3)}, &Diagnostic{Message: "b", Span: at("f", 1), Severity: Warning}
	c, twice := &Diagnostic{Message: "c", Span: at("e", 9)}, &Diagnostic{Message: "a", Span: at("f", 3)}
	list := DiagnosticList{a, b, c, twice}.Sort()
	assert.Equal(t, DiagnosticList{c, b, a}, list)
	assert.Equal(t, DiagnosticList{b}, list.Warnings())
	assert.Equal(t, DiagnosticList{c, a}, list.Errors())
	assert.NoError(t, DiagnosticList{b}.Err())
	assert.NoError(t, DiagnosticList(nil).Err())
	assert.EqualError(t, DiagnosticList{b, c}.Err(), "e:1:10: c")
	_, list = ParseExpr("1 +")
	assert.EqualError(t, list.Err(), "1:4: found the end of the line, want an expression\n    1 | 1 +\n      |    ^")
}

func TestNearest(t *testing.T) {
	candidates := []string{"common", "differential", "Rload", "signal"}
	for _, c := range []struct{ name, want string }{{"comon", "common"}, {"rload", "Rload"}, {"diferentail", "differential"}, {"common", ""}, {"xyz", ""}, {"", ""}} {
		got, ok := Nearest(c.name, candidates)
		assert.Equal(t, c.want, got, c.name)
		assert.Equal(t, c.want != "", ok)
	}
}
