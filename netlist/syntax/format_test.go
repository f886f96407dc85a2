package syntax

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// sources returns the files of the language that lie about: testdata, and those that ship with Poise.
func sources(t testing.TB) map[string]string {
	m := map[string]string{}
	for _, pattern := range []string{"testdata/*.poise", "../std/*.poise", "../../testdata/examples/*.poise"} {
		names, err := filepath.Glob(pattern)
		require.NoError(t, err)
		for _, name := range names {
			text, err := os.ReadFile(name)
			require.NoError(t, err)
			m[filepath.ToSlash(name)] = string(text)
		}
	}
	require.Contains(t, m, "testdata/mooring.poise")
	return m
}

// requireSameTree formats and prints a text and wants its tree back, comments too, and nothing to change a second time.
func requireSameTree(t testing.TB, name, src string) {
	f, list := Parse(name, src, Limits{})
	require.NoError(t, list.Err(), name)
	formatted, err := Format(name, src)
	require.NoError(t, err)
	printed := Print(f)
	for _, text := range []string{formatted, printed} {
		g, list := Parse(name, text, Limits{})
		require.NoError(t, list.Err(), "%s\n%s", name, text)
		require.Equal(t, shape(f.Statements), shape(g.Statements), "%s\n%s", src, text)
		require.Len(t, g.Comments, len(f.Comments), "%s\n%s", src, text)
		for i, c := range g.Comments {
			require.Equal(t, f.Comments[i].Text, c.Text)
		}
		again, err := Format(name, text)
		require.NoError(t, err)
		require.Equal(t, text, again, "formatting twice changes %s", name)
	}
	g, _ := Parse(name, printed, Limits{})
	require.Equal(t, printed, Print(g), "printing twice changes %s", name)
}

func TestFormatKeepsMeaning(t *testing.T) {
	g := grammar(t)
	for name, src := range sources(t) {
		requireSameTree(t, name, src)
		assert.True(t, recognises(t, g, src), "the grammar does not know %s", name)
	}
}

func TestFormat(t *testing.T) {
	for _, c := range []struct{ name, src, want string }{
		{"empty", "", ""},
		{"blank lines", "\n\n\nlet a=1\n\n\n\nlet b=2\n\n", "let a = 1\n\nlet b = 2\n"},
		{"signs", "let a=- 40degC\nlet b=-40degC\nlet c=- x\nlet d=a-1\nlet e=a -1\nlet f=2V*-3\nlet g=-2^2\nlet h=- 2^2\nlet i = +3V\nlet j=- -  x\nlet k=- -3\n",
			"let a = - 40degC\nlet b = -40degC\nlet c = -x\nlet d = a - 1\nlet e = a - 1\nlet f = 2V * -3\nlet g = -2^2\nlet h = - 2^2\nlet i = +3V\nlet j = - -x\nlet k = - -3\n"},
		{"operators", "let a=b||c^d/(e+f)*g ( 3 )\n", "let a = b || c^d / (e + f) * g(3)\n"},
		{"powers of units", "let a=25ppm/K ^ 2\nlet b=25ppm/K^2\nlet c=3V ^ 2\nlet d=25ppm/K ^ 25\n", "let a = 25ppm/K ^ 2\nlet b = 25ppm/K^2\nlet c = 3V^2\nlet d = 25ppm/K ^ 25\n"},
		{"path", "a--R1(3V)--b\nb  --  R2 -3V tol 1%--_--C1 2nF-- gnd\n", "a -- R1 (3V) -- b\nb -- R2 -3V tol 1% -- _ -- C1 2nF -- gnd\n"},
		{"path over lines", "a -- R1 1ohm --\n b --\n\n# why\n R2 2ohm -- gnd\nlet x = 1\n", "a -- R1 1ohm --\n  b --\n\n  # why\n  R2 2ohm -- gnd\nlet x = 1\n"},
		{"lists", "input i=(a,b)current\ncouple(L1,L2)=0.9\nblock k (a,b){\n}\nM=k(a :x , b:y)with r=1\n", "input i = (a, b) current\ncouple (L1, L2) = 0.9\nblock k(a, b) {\n}\nM = k(a: x, b: y) with r = 1\n"},
		{"ranges", "bench b{\nexpect volts( x )within 1V .. 2V\nvary a=1 .. 5 by 1\n\n}\n", "bench b {\n  expect volts(x) within 1V..2V\n  vary a = 1..5 by 1\n}\n"},
		{"one line", "bench b{expect volts(x)>=1V}\nmatch Q1 Q2{Is within 2%,betaF within 6%}\n", "bench b { expect volts(x) >= 1V }\nmatch Q1 Q2 { Is within 2%, betaF within 6% }\n"},
		{"entries", "part p=npn{ Is=1fA,betaF=2\nrB=3ohm\n}\n", "part p = npn { Is = 1fA, betaF = 2\n  rB = 3ohm\n}\n"},
		{"parentheses", "let a=f(1,\n2,\n(3+\n4)\n)\n", "let a = f(1,\n  2,\n  (3 +\n    4)\n)\n"},
		{"lines in parentheses", "let a=f(1\n+2\n,-\n3)\nlet b=(\n1 # one\n\n\n)*2\n", "let a = f(1\n  + 2\n  , -\n  3)\nlet b = (\n  1  # one\n\n) * 2\n"},
		{"comments", "#a\nlet a=1#b\nlet bbb=2   #  c\n\nlet c=3 # d\n  # e\nbench b { # f\n# g\nextremes#h\n# i\n}# j", "#a\nlet a = 1    #b\nlet bbb = 2  #  c\n\nlet c = 3  # d\n# e\nbench b {  # f\n  # g\n  extremes  #h\n  # i\n}  # j\n"},
		{"line ends", "let a = 1\r\nlet b = 2\r\n", "let a = 1\nlet b = 2\n"},
		{"byte-order mark", "\uFEFFlet a = 1\n", "let a = 1\n"},
		{"texts", "use   \"a  b#c\"\n", "use \"a  b#c\"\n"},
	} {
		got, err := Format("t", c.src)
		require.NoError(t, err, c.name)
		assert.Equal(t, c.want, got, c.name)
		requireSameTree(t, c.name, c.src)
	}
	got, err := Format("t", "let a =\n")
	require.Error(t, err)
	assert.Equal(t, "let a =\n", got)
}

// TestPrintBuiltTree prints what no file has been.
func TestPrintBuiltTree(t *testing.T) {
	id := func(name string) Ident { return Ident{Name: name} }
	ref := func(names ...string) (r Ref) {
		for _, n := range names {
			r.Names = append(r.Names, id(n))
		}
		return r
	}
	number := func(text string) Expr { return &Number{Text: text} }
	node := func(name string) Element { r := ref(name); return Element{Node: &r} }
	part := func(name string, v Expr) Element { n := id(name); return Element{Name: &n, Value: v} }
	f := &File{Statements: []Statement{
		&Design{Name: id("d"), Title: &Text{Value: `a "b"`}},
		&Rail{Name: id("vp"), Value: number("9V")},
		&Rail{Name: id("vn"), Value: number("-9V")},
		&Path{Elements: []Element{node("vp"), part("R1", &Binary{Op: "*", X: number("2"), Y: number("1ohm")}), node("_"), part("R2", number("1ohm")), node("vn")}},
		&PartDecl{Name: id("p"), Base: id("npn"), Params: []Param{{Name: id("Is"), Value: number("1fA")}, {Name: id("betaF"), Value: number("2")}}},
		&Bench{Name: id("b"), Body: []Statement{&Expect{Quantity: &Call{Func: ref("volts"), Args: []Arg{{Value: &Name{ref("A", "x")}}}}, Comparison: Comparison{Operator: Above, Value: number("1V")}}}},
	}}
	want := "design d \"a \\\"b\\\"\"\n\nrail vp = 9V\nrail vn = -9V\n\nvp -- R1 (2 * 1ohm) -- _ -- R2 1ohm -- vn\n\npart p = npn {\n  Is = 1fA\n  betaF = 2\n}\n\nbench b {\n  expect volts(A.x) > 1V\n}\n"
	assert.Equal(t, want, Print(f))
}

// TestExprString writes trees that need parentheses which they do not have.
func TestExprString(t *testing.T) {
	n := func(text string) Expr { return &Number{Text: text} }
	b := func(x Expr, op string, y Expr) Expr { return &Binary{Op: op, X: x, Y: y} }
	for _, c := range []struct {
		x    Expr
		want string
	}{
		{nil, ""},
		{(*Number)(nil), ""},
		{b(b(n("1"), "+", n("2")), "*", n("3")), "(1 + 2) * 3"},
		{b(n("1"), "-", b(n("2"), "-", n("3"))), "1 - (2 - 3)"},
		{b(b(n("1"), "^", n("2")), "^", n("3")), "(1^2)^3"},
		{b(n("1"), "^", b(n("2"), "^", n("3"))), "1^2^3"},
		{b(n("-2"), "^", n("2")), "(-2)^2"},
		{b(n("-2"), "||", n("2")), "(-2) || 2"},
		{b(n("-2"), "*", n("-2")), "-2 * -2"},
		{b(n("2"), "^", n("-2")), "2^-2"},
		{b(&Unary{X: n("2")}, "^", n("2")), "(- 2)^2"},
		{b(n("3"), "^", &Unary{X: b(n("2"), "||", n("1"))}), "3^-(2 || 1)"},
		{&Unary{X: n("40degC")}, "- 40degC"},
		{&Unary{X: b(n("1"), "+", n("2"))}, "-(1 + 2)"},
		{&Measure{X: &Name{Ref{Names: []Ident{{Name: "cmrr"}}}}, Low: n("1Hz"), High: n("2Hz"), PerDecade: n("9")}, "cmrr over 1Hz..2Hz per decade 9"},
		{&String{Text{Value: "a"}}, `"a"`},
	} {
		assert.Equal(t, c.want, ExprString(c.x))
		if c.want != "" {
			x, list := ParseExpr(c.want)
			require.NoError(t, list.Err(), c.want)
			assert.Equal(t, c.want, ExprString(x))
		}
	}
}

func TestTidy(t *testing.T) {
	for src, want := range map[string]string{
		"volts( out )within 1V .. 2V": "volts(out) within 1V..2V",
		"cmrr  at 50Hz":               "cmrr at 50Hz",
		"x = -40degC+-1%":             "x = -40degC +- 1%",
		"f(a,\n  b # why\n )":         "f(a, b)",
		"a-1":                         "a - 1",
		"- a ^ 2":                     "-a^2",
		"a $ b":                       "a $ b",
	} {
		assert.Equal(t, want, Tidy(src))
	}
}

func TestFormatOfMooring(t *testing.T) {
	src := sources(t)["testdata/mooring.poise"]
	got, err := Format("mooring.poise", src)
	require.NoError(t, err)
	want, err := os.ReadFile("testdata/mooring.formatted")
	require.NoError(t, err)
	assert.Equal(t, string(want), got)
	assert.Equal(t, strings.Count(src, "\n"), strings.Count(got, "\n"))
}
