package netlist

import (
	"math"
	"strings"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// eval computes an expression without circuit quantities. What is wrong is reported; then ok is false.
func (e *elaborator) eval(s *scope, x syntax.Expr) (v value, ok bool) {
	switch x := x.(type) {
	case *syntax.Number:
		return e.literal(x)
	case *syntax.Name:
		return e.named(s, x)
	case *syntax.Paren:
		return e.eval(s, x.X)
	case *syntax.Unary:
		if v, ok = e.eval(s, x.X); !ok || !e.plain(v, x.X) {
			return v, false
		}
		return value{SI: -v.SI, Dimension: v.Dimension}, true
	case *syntax.Binary:
		return e.binary(s, x)
	case *syntax.Call:
		return e.call(s, x)
	case *syntax.String:
		return v, e.fail(CodeNotValue, x.Place(), "a text has no value here")
	case *syntax.Range:
		return v, e.fail(CodeNotValue, x.Place(), "a range has no value here")
	case *syntax.Measure:
		return v, e.fail(CodeNotValue, x.Place(), "a metric is a quantity of the circuit; here a value is wanted that is known beforehand")
	}
	return v, false // a part of a statement that could not be read
}

// literal reads a number.
func (e *elaborator) literal(x *syntax.Number) (value, bool) {
	if v, known := e.program.literals[x]; known {
		return v, true
	}
	v, err := unit.Parse(x.Text)
	if err == nil {
		if e.learning {
			e.program.literals[x] = v
		}
		return v, true
	}
	message, hint := err.Error(), ""
	if l, is := err.(*unit.LiteralError); is {
		hint = l.Hint
		if message = "`" + l.Text + "` " + l.Want; l.Text != x.Text {
			message = x.Text + ": " + message
		}
	}
	return value{}, e.failHint(hint, CodeLiteral, x.Place(), "%s", message)
}

// named evaluates a name.
func (e *elaborator) named(s *scope, x *syntax.Name) (value, bool) {
	name := x.String()
	if len(x.Names) == 1 {
		if b := s.find(name); b != nil {
			if e.learning {
				b.used = true
			}
			return e.force(b, x.Place())
		}
	}
	if e.unsure(x.Ref) {
		return value{}, false
	}
	_, isNode := e.nodes[name]
	switch {
	case isNode:
		return value{}, e.fail(CodeUnknown, x.Place(), "%s is a node, not a value; its voltage is volts(%s)", name, name)
	case unit.IsUnitName(name):
		return value{}, e.fail(CodeUnknown, x.Place(), "%s is a unit: it follows its number without a blank", name)
	}
	return value{}, e.failHint(e.guess(name, s.names()), CodeUnknown, x.Place(), "there is no value called %s", name)
}

// finite wants a result that is a number.
func (e *elaborator) finite(v value, x syntax.Expr) bool {
	if math.IsNaN(v.SI) || math.IsInf(v.SI, 0) {
		return e.fail(CodeRange, x.Place(), "the result is not a finite number")
	}
	return true
}

// plain refuses an amplitude where only a waveform may take one.
func (e *elaborator) plain(v value, x syntax.Expr) bool {
	if v.Crest == unit.Plain {
		return true
	}
	return e.failHint("write V or A", CodeAmplitude, x.Place(), "Vpp, Vpk, Vrms and their like are amplitudes, which only a waveform takes")
}

// single evaluates a plain finite value.
func (e *elaborator) single(s *scope, x syntax.Expr) (value, bool) {
	v, ok := e.eval(s, x)
	return v, ok && e.plain(v, x) && e.finite(v, x)
}

// binary evaluates x op y. Both sides are looked at, for the errors of both.
func (e *elaborator) binary(s *scope, x *syntax.Binary) (value, bool) {
	a, ok1 := e.eval(s, x.X)
	b, ok2 := e.eval(s, x.Y)
	if !ok1 || !ok2 {
		return value{}, false
	}
	return e.combine(a, b, x)
}

// combine computes x op y of evaluated sides.
func (e *elaborator) combine(a, b value, x *syntax.Binary) (v value, ok bool) {
	if v, ok = scaledAmplitude(a, b, x.Op); ok {
		return v, e.finite(v, x)
	}
	if !e.plain(a, x.X) || !e.plain(b, x.Y) {
		return v, false
	}
	switch x.Op {
	case "*":
		v = value{SI: a.SI * b.SI, Dimension: a.Dimension.Mul(b.Dimension)}
	case "/":
		if b.SI == 0 {
			return v, e.fail(CodeRange, x.OpAt, "division by zero")
		}
		v = value{SI: a.SI / b.SI, Dimension: a.Dimension.Div(b.Dimension)}
	case "^":
		return e.raise(a, b, x)
	default:
		return e.alike(a, b, x)
	}
	return v, e.finite(v, x)
}

// scaledAmplitude multiplies an amplitude by a number: twice 3Vpp is 6Vpp.
func scaledAmplitude(a, b value, op string) (value, bool) {
	switch {
	case op == "*" && a.Crest != unit.Plain && b.Dimension == unit.Number && b.Crest == unit.Plain:
		a.SI *= b.SI
		return a, true
	case op == "*" && b.Crest != unit.Plain && a.Dimension == unit.Number && a.Crest == unit.Plain:
		b.SI *= a.SI
		return b, true
	case op == "/" && a.Crest != unit.Plain && b.Dimension == unit.Number && b.Crest == unit.Plain && b.SI != 0:
		a.SI /= b.SI
		return a, true
	}
	return value{}, false
}

// alike evaluates an operator whose sides are of one kind: + - ||.
func (e *elaborator) alike(a, b value, x *syntax.Binary) (v value, ok bool) {
	if a.Dimension != b.Dimension {
		return v, e.fail(CodeDimension, x.OpAt, "`%s` between %s and %s", x.Op, a.Dimension.Noun(), b.Dimension.Noun())
	}
	v.Dimension = a.Dimension
	switch x.Op {
	case "+":
		v.SI = a.SI + b.SI
	case "-":
		v.SI = a.SI - b.SI
	default:
		v.SI = a.SI * b.SI / (a.SI + b.SI)
	}
	return v, e.finite(v, x)
}

func (e *elaborator) raise(a, b value, x *syntax.Binary) (v value, ok bool) {
	if b.Dimension != unit.Number {
		return v, e.fail(CodeDimension, x.Y.Place(), "an exponent is a plain number, not %s", b.Dimension.Noun())
	}
	d, ok := a.Dimension.Pow(b.SI)
	if !ok {
		return v, e.fail(CodeDimension, x.OpAt, "%s to the power %s has no unit", a.Dimension.Noun(), unit.Trim(b.SI, unit.ShownDigits))
	}
	v = value{SI: math.Pow(a.SI, b.SI), Dimension: d}
	return v, e.finite(v, x)
}

// wanted evaluates an expression that must have a dimension; what names it in the message.
func (e *elaborator) wanted(s *scope, x syntax.Expr, d unit.Dimension, what string) (float64, bool) {
	v, ok := e.single(s, x)
	if ok && v.Dimension != d {
		return 0, e.fail(CodeDimension, x.Place(), "%s is %s, want %s", what, v.Dimension.Noun(), d.Noun())
	}
	return v.SI, ok
}

// share evaluates a part of a whole: a plain number from 0 to 1.
func (e *elaborator) share(s *scope, x syntax.Expr, what string) (float64, bool) {
	v, ok := e.wanted(s, x, unit.Number, what)
	if ok && !(v >= 0 && v <= 1) {
		return v, e.fail(CodeRange, x.Place(), "%s is %s %%, want 0 to 100 %%", what, unit.Trim(100*v, unit.ShownDigits))
	}
	return v, ok
}

// whole evaluates a whole number from low to high.
func (e *elaborator) whole(s *scope, x syntax.Expr, what string, low, high float64) (float64, bool) {
	v, ok := e.wanted(s, x, unit.Number, what)
	if ok && !(v >= low && v <= high && v == math.Trunc(v)) {
		return v, e.fail(CodeRange, x.Place(), "%s is %s, want a whole number from %g to %g", what, unit.Trim(v, unit.ShownDigits), low, high)
	}
	return v, ok
}

// difference wants a value that is a difference: of temperatures one is written in K, since degC counts from 0 K.
func (e *elaborator) difference(x syntax.Expr) bool {
	switch x := x.(type) {
	case *syntax.Paren:
		return e.difference(x.X)
	case *syntax.Number:
		if degrees, ok := strings.CutSuffix(x.Text, "degC"); ok {
			return e.failHint("write "+degrees+"K", CodeDimension, x.Place(), "a difference of temperatures is in K; degC is an absolute temperature")
		}
	}
	return true
}
