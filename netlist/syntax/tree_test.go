package syntax

import (
	"fmt"
	"reflect"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// shape writes a tree as an s-expression: (Type field ...). Names, numbers and texts stand as written; a field that is not among the
// common ones, or is a flag, says its name. What is not written is left out.
func shape(x any) string { return shapeOf(reflect.ValueOf(x)) }

func shapeOf(v reflect.Value) string {
	switch x := v.Interface().(type) {
	case Ident:
		return x.Name
	case Ref:
		return x.String()
	case Text:
		return fmt.Sprintf("%q", x.Value)
	case *Number:
		return x.Text
	case *Name:
		return x.String()
	case *String:
		return fmt.Sprintf("%q", x.Value)
	case *Binary:
		return fmt.Sprintf("(%s %s %s)", x.Op, shape(x.X), shape(x.Y))
	case *Unary:
		return fmt.Sprintf("(- %s)", shape(x.X))
	case Operator:
		return [...]string{">=", ">", "<=", "<", "within", "+-", "="}[x]
	}
	switch v.Kind() {
	case reflect.Pointer, reflect.Interface:
		return shapeOf(v.Elem())
	case reflect.Slice:
		parts := make([]string, v.Len())
		for i := range parts {
			parts[i] = shapeOf(v.Index(i))
		}
		return "[" + strings.Join(parts, " ") + "]"
	case reflect.Struct:
		return shapeOfFields(v)
	}
	return fmt.Sprint(v.Interface())
}

func shapeOfFields(v reflect.Value) string {
	parts := []string{v.Type().Name()}
	for i := range v.NumField() {
		field := v.Type().Field(i)
		if f := v.Field(i); field.Anonymous || f.IsZero() && field.Name != "Operator" || f.Kind() == reflect.Slice && f.Len() == 0 {
			continue
		} else if f.Kind() == reflect.Bool {
			parts = append(parts, strings.ToLower(field.Name))
			continue
		}
		text := shapeOf(v.Field(i))
		switch field.Name {
		case "Name", "Value", "Title", "X", "Elements", "Operator", "Args", "Func", "Type", "Base", "Body", "Node", "Modifiers", "Statements":
		default:
			text = strings.ToLower(field.Name) + ":" + text
		}
		parts = append(parts, text)
	}
	return "(" + strings.Join(parts, " ") + ")"
}

func TestStatementTrees(t *testing.T) {
	g := grammar(t)
	for _, c := range []struct{ src, want string }{
		{`design d "a \"t\" \\"`, `(Design d "a \"t\" \\")`},
		{`design rest`, `(Design rest)`},
		{`use "std/x.poise"`, `(Use path:"std/x.poise")`},
		{`caution patient`, `(Caution kind:patient)`},
		{`let a = 1.5e-3A`, `(Let a 1.5e-3A)`},
		{`set A1.R1 = 2ohm`, `(Set target:A1.R1 2ohm)`},
		{`rail vp = 9V tol 5% tc 25ppm/K, 0.1ppm/K^2 start 1V`, `(Rail vp 9V [(Modifier tol 5%) (Modifier tc 25ppm/K second:0.1ppm/K^2) (Modifier start 1V)])`},
		{`part p = npn`, `(PartDecl p npn)`},
		{`part p = npn { }`, `(PartDecl p npn braces)`},
		{"part p = npn { Is = 6.7fA tol 2%, betaF = 410\n rB = 3ohm\n}", `(PartDecl p npn params:[(Param Is 6.7fA [(Modifier tol 2%)]) (Param betaF 410) (Param rB 3ohm)] braces)`},
		{`part p = d { r = 1ohm tc 3ppm/K, s = 2ohm tc 3ppm/K, k tol 1%, t = 1 }`, `(PartDecl p d params:[(Param r 1ohm [(Modifier tc 3ppm/K)]) (Param s 2ohm [(Modifier tc 3ppm/K second:k) (Modifier tol 1%)]) (Param t 1)] braces)`},
		{`part p = d { r = 1ohm tc 3ppm/K, }`, `(PartDecl p d params:[(Param r 1ohm [(Modifier tc 3ppm/K)])] braces)`},
		{`a -- R1 4k7ohm tol 1% -- _ -- C1 Cx -- gnd`, `(Path [(Element a) (Element R1 4k7ohm [(Modifier tol 1%)]) (Element _) (Element C1 Cx) (Element gnd)])`},
		{"a --\n R1 e24(4.6V / Iq) --\n b", `(Path [(Element a) (Element R1 (Call e24 [(Arg (/ 4.6V Iq))])) (Element b)])`},
		{`out -- E1 (40 * volts(a, b)) -- gnd`, `(Path [(Element out) (Element E1 (Paren (* 40 (Call volts [(Arg a) (Arg b)])))) (Element gnd)])`},
		{`e -- Hcell -220mV -- c`, `(Path [(Element e) (Element Hcell -220mV) (Element c)])`},
		{`Q1 = pair(b: bp, c: _, e: A1.x)`, `(Instance Q1 pair pins:[(PinBinding pin:b bp) (PinBinding pin:c _) (PinBinding pin:e A1.x)])`},
		{"M1 = mirror(in: x\n, out: y\n) with R = 1ohm,\n S = 2 * R", `(Instance M1 mirror pins:[(PinBinding pin:in x) (PinBinding pin:out y)] with:[(Assign R 1ohm) (Assign S (* 2 R))])`},
		{"Q1 = pair(\nb\n:\nx\n)", `(Instance Q1 pair pins:[(PinBinding pin:b x)])`},
		{"block k(a\n, b\n) {\n}", `(Block k pins:[a b])`},
		{"input i = (\na\n, b\n) current", `(Input i nodes:[a b] current)`},
		{"block k(a, b) {\n let r = 1\n}", `(Block k pins:[a b] [(Let r 1)])`},
		{`couple (L1, A.L2) = 0.995`, `(Couple members:[L1 A.L2] 0.995)`},
		{`match R1 R2 R3 within 0.2%`, `(Match members:[R1 R2 R3] within:0.2%)`},
		{`match Q1 Q2 { Is within 2%, betaF within 6% }`, `(Match members:[Q1 Q2] params:[(MatchParam Is within:2%) (MatchParam betaF within:6%)])`},
		{`input i = (a, b) current`, `(Input i nodes:[a b] current)`},
		{`output o = (a, b) rest 4.5V`, `(Output o nodes:[a b] rest:4.5V)`},
		{`bench spread "t" { extremes }`, `(Bench spread "t" [(Extremes)])`},
		{`drive bridge common = sine(2Vpp, 50Hz)`, `(Drive target:bridge mode:common (Call sine [(Arg 2Vpp) (Arg 50Hz)]))`},
		{`drive vp = 9V`, `(Drive target:vp 9V)`},
		{`drive A.V1 open`, `(Drive target:A.V1 open)`},
		{`run 1s`, `(Run until:1s)`},
		{`run 2 * T from 500ms step 1us cold`, `(Run until:(* 2 T) from:500ms step:1us cold)`},
		{`run periodic 50Hz settle 10`, `(Run periodic:50Hz settle:10)`},
		{`vary Rd = 1ohm..5ohm by 1ohm`, `(Vary target:Rd from:1ohm to:5ohm by:1ohm)`},
		{`vary Rd = lo..hi count 3`, `(Vary target:Rd from:lo to:hi count:3)`},
		{"vary temperature = -40degC, 27degC,\n 85degC", `(Vary target:temperature list:[-40degC 27degC 85degC])`},
		{`spread 200 seed 7`, `(Spread samples:200 seed:7)`},
		{`expect volts(out) within 3.8V..5.2V`, `(Expect quantity:(Call volts [(Arg out)]) comparison:(Comparison within 3.8V high:5.2V))`},
		{`expect "l" amps(Q2.c) = 120uA +- 10% for 99%`, `(Expect label:"l" quantity:(Call amps [(Arg Q2.c)]) comparison:(Comparison +- 120uA tolerance:10% relative) share:99%)`},
		{`expect x = 40dB ± 0.1dB`, `(Expect quantity:x comparison:(Comparison +- 40dB tolerance:0.1dB))`},
		{`expect x = 1V +- 30ppm`, `(Expect quantity:x comparison:(Comparison +- 1V tolerance:30ppm relative))`},
		{`expect Q1.region = active`, `(Expect quantity:Q1.region comparison:(Comparison = active))`},
		{`expect cmrr at 50Hz >= 30dB`, `(Expect quantity:(Measure cmrr at:50Hz) comparison:(Comparison >= 30dB))`},
		{`expect cmrr over 1Hz..10kHz per decade 20 < 3`, `(Expect quantity:(Measure cmrr low:1Hz high:10kHz perdecade:20) comparison:(Comparison < 3))`},
		{`expect (dm_gain at 1Hz) / (dm_gain at 1kHz) > 1`, `(Expect quantity:(/ (Paren (Measure dm_gain at:1Hz)) (Paren (Measure dm_gain at:1kHz))) comparison:(Comparison > 1))`},
		{`expect abs(gain(i.signal, volts(a)) over 1Hz..10Hz) <= 1`, `(Expect quantity:(Call abs [(Arg (Measure (Call gain [(Arg i.signal) (Arg (Call volts [(Arg a)]))]) low:1Hz high:10Hz))]) comparison:(Comparison <= 1))`},
		{"plot volts(out),\n cmrr over 1Hz..3Hz \"t\"", `(Plot quantities:[(Call volts [(Arg out)]) (Measure cmrr low:1Hz high:3Hz)] "t")`},
	} {
		f, list := Parse("t", c.src+"\n", Limits{})
		require.NoError(t, list.Err(), c.src)
		require.Len(t, f.Statements, 1, c.src)
		assert.Equal(t, c.want, shape(f.Statements[0]), c.src)
		assert.True(t, recognises(t, g, c.src+"\n"), "the grammar does not know %s", c.src)
	}
}

func TestExpressionTrees(t *testing.T) {
	g := grammar(t)
	for _, c := range []struct{ src, want string }{
		{"a + b * c ^ d", "(+ a (* b (^ c d)))"},
		{"a ^ b ^ c", "(^ a (^ b c))"},
		{"a - b - c", "(- (- a b) c)"},
		{"a / b * c", "(* (/ a b) c)"},
		{"a || b || c", "(|| (|| a b) c)"},
		{"a || b ^ c * d", "(* (|| a (^ b c)) d)"},
		{"-a ^ b", "(- (^ a b))"},
		{"-a || b", "(- (|| a b))"},
		{"-a * b", "(* (- a) b)"},
		{"a * -b", "(* a (- b))"},
		{"a * -b || c", "(* a (- (|| b c)))"},
		{"a ^ -b || c", "(|| (^ a (- b)) c)"},
		{"a ^ -b ^ c", "(^ a (- (^ b c)))"},
		{"a || -b * c", "(* (|| a (- b)) c)"},
		{"a ^ -2 || c", "(|| (^ a -2) c)"},
		{"- - a", "(- (- a))"},
		// A sign before a literal belongs to it where it touches it, unless an operator behind it binds more tightly.
		{"-40degC", "-40degC"},
		{"- 40degC", "(- 40degC)"},
		{"+3V", "3V"},
		{"-2^2", "(- (^ 2 2))"},
		{"-2ohm || 3ohm", "(- (|| 2ohm 3ohm))"},
		{"(-2)^2", "(^ (Paren -2) 2)"},
		{"2^-2", "(^ 2 -2)"},
		{"2^-2^2", "(^ 2 (- (^ 2 2)))"},
		{"-2 * 3", "(* -2 3)"},
		// Behind an operand a sign is an operator, however the blanks lie.
		{"3-2", "(- 3 2)"},
		{"2V -1V", "(- 2V 1V)"},
		{"2V - -1V", "(- 2V -1V)"},
		{"a-1", "(- a 1)"},
		{"1e-3-2", "(- 1e-3 2)"},
		// A stroke belongs to a literal only if the whole is a unit.
		{"4.6V/Iq", "(/ 4.6V Iq)"},
		{"1.2V/us", "1.2V/us"},
		{"3mV/V", "3mV/V"},
		{"25ppm/K^2", "25ppm/K^2"},
		{"25ppm/K^25", "(^ 25ppm/K 25)"},
		{"25ppm/K^2.5", "(^ 25ppm/K 2.5)"},
		{"f(0ppm/K^2..3ppm/K^2)", "(Call f [(Arg (Range low:0ppm/K^2 high:3ppm/K^2))])"},
		{"3V/s2", "(/ 3V s2)"},
		{"3V/K^2", "(^ 3V/K 2)"},
		{"3V / us", "(/ 3V us)"},
		{"1e3/f", "(/ 1e3 f)"},
		{"f()", "(Call f)"},
		{"f(\n a\n ,\n b\n)", "(Call f [(Arg a) (Arg b)])"},
		{"(\n a +\n b\n)", "(Paren (+ a b))"},
		// A line goes on inside parentheses, wherever it ends.
		{"(\n-\na\n+ b\n* (c\n)\n)\n", "(Paren (+ (- a) (* b (Paren c))))"},
		{"f\n", "f"},
		{"f(a\n.b\n, n\n:\n1Hz\n..\n2Hz\n)", "(Call f [(Arg a.b) (Arg n (Range low:1Hz high:2Hz))])"},
		{"(cmrr\nat\n1Hz\n)", "(Paren (Measure cmrr at:1Hz))"},
		{"(1\n-2)", "(Paren (- 1 2))"},
		{"sine(1V, 50Hz, phase: 30deg, at: 1us, over:2s, from: 1, within: 3, start: 2)", "(Call sine [(Arg 1V) (Arg 50Hz) (Arg phase 30deg) (Arg at 1us) (Arg over 2s) (Arg from 1) (Arg within 3) (Arg start 2)])"},
		{"hiss(3nV/rtHz, band: 1Hz..10kHz)", "(Call hiss [(Arg 3nV/rtHz) (Arg band (Range low:1Hz high:10kHz))])"},
		{`samples("f.csv", column: 2)`, `(Call samples [(Arg "f.csv") (Arg column 2)])`},
		{"f(3..5)", "(Call f [(Arg (Range low:3 high:5))])"},
		{"cmrr over 3..5", "(Measure cmrr low:3 high:5)"},
		{"A1.B.x(1)", "(Call A1.B.x [(Arg 1)])"},
		{"common + differential * count", "(+ common (* differential count))"},
		{"10Ω + 1µF", "(+ 10Ω 1µF)"},
		{"größe * 2", "(* größe 2)"},
	} {
		x, list := ParseExpr(c.src)
		require.NoError(t, list.Err(), c.src)
		assert.Equal(t, c.want, shape(x), c.src)
		assert.True(t, recognises(t, g, "plot f("+c.src+")\n"), "the grammar does not know %s", c.src)
	}
}

// TestWordsOfOnePlace: words that mean something only in one place are names elsewhere, and a bench may have any name.
func TestWordsOfOnePlace(t *testing.T) {
	for _, w := range []string{"rest", "current", "open", "cold", "by", "count", "seed", "per", "for", "settle", "periodic", "step", "signal", "common", "differential", "decade"} {
		_, list := Parse("t", strings.ReplaceAll("let $ = 3\na -- $ ($ * 2) -- gnd\npart $ = $ { $ = $ }\ninput $ = ($)\noutput $ = ($) rest $\nblock $($) {\n}\n$ = $($: $) with $ = $\nbench $ {\n  drive $ = $\n  expect $.$ over $..$ >= $\n}\n", "$", w), Limits{})
		assert.NoError(t, list.Err(), w)
	}
	for _, w := range append(append([]string{}, statementWords()...), "at", "over", "within", "from", "with", "tol", "sigma", "tc", "start") {
		_, list := Parse("t", "bench "+w+" {\n}\n", Limits{})
		assert.NoError(t, list.Err(), w)
		_, list = Parse("t", "let "+w+" = 3\n", Limits{})
		require.Len(t, list, 1, w)
		assert.Equal(t, CodeReserved, list[0].Code, w)
	}
}

func TestParseStatements(t *testing.T) {
	list, diagnostics := ParseStatements("b", "set a = 1\nlet b = 2\nrun 1s\nexpect volts(x) >= 3V\nplot volts(x)\ndrive i open\nvary a = 1, 2\nspread 3\nextremes\n", true)
	require.NoError(t, diagnostics.Err())
	assert.Len(t, list, 9)
	_, diagnostics = ParseStatements("b", "set a = 1\nrail b = 2V\n  x -- R1 1ohm -- y\n", true)
	require.Len(t, diagnostics, 2)
	assert.Equal(t, "b:2:1: this statement does not belong in a bench", diagnostics[0].Error())
	assert.Equal(t, "b:3:3: this statement does not belong in a bench", diagnostics[1].Error())
	_, diagnostics = ParseStatements("b", "rail b = 2V\nrun 1s\n", false)
	require.Len(t, diagnostics, 1)
	assert.Equal(t, "b:2:1: this statement belongs in a bench", diagnostics[0].Error())
}

// TestSpans: every node covers its own text: parents cover children, and the text of leaves is what the source has there.
func TestSpans(t *testing.T) {
	for name, src := range sources(t) {
		f, list := Parse(name, src, Limits{})
		require.NoError(t, list.Err(), name)
		for _, s := range f.Statements {
			checkSpans(t, f, s, s.Place())
		}
	}
}

func checkSpans(t *testing.T, f *File, n Node, outer Span) {
	Walk(n, func(m Node) bool {
		at := m.Place()
		if c, ok := m.(*Comparison); ok && reflect.ValueOf(c).Elem().FieldByName("Span").IsZero() {
			return false
		}
		require.Equal(t, f.Name, at.File, "%T", m)
		require.True(t, outer.Start.Offset <= at.Start.Offset && at.Start.Offset < at.End.Offset && at.End.Offset <= outer.End.Offset, "%T %v in %v", m, at, outer)
		for _, p := range []Position{at.Start, at.End} {
			before := f.Source[:p.Offset]
			require.Equal(t, strings.Count(before, "\n")+1, p.Line, "%T", m)
			require.Equal(t, len([]rune(before[strings.LastIndexByte(before, '\n')+1:]))+1, p.Column, "%T", m)
		}
		text := f.Source[at.Start.Offset:at.End.Offset]
		require.Equal(t, strings.TrimSpace(text), text, "%T", m)
		switch m := m.(type) {
		case *Ident:
			require.Equal(t, m.Name, text)
		case *Number:
			require.Equal(t, m.Text, strings.TrimPrefix(text, "+"))
		}
		if m != n {
			checkSpans(t, f, m, at)
			return false
		}
		return true
	})
}
