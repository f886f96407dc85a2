package netlist

import (
	"fmt"
	"math"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// value is an evaluated expression.
type value = unit.Value

// scope is where names of values are looked up: a bench in its file, a block's instance in the file.
type scope struct {
	outer *scope
	lets  map[string]*binding
	with  []changed // values that an instance of a block changes
}

// changed is a value that stands in the place of a let's.
type changed struct {
	name  string
	value value
	expr  syntax.Expr
}

// binding is a named value, evaluated when first asked for.
type binding struct {
	expr  syntax.Expr
	where *scope // where expr is evaluated
	name  syntax.Ident
	state bindingState
	value value
	used  *bool
}

type bindingState uint8

const (
	notEvaluated bindingState = iota
	evaluating
	evaluated
	broken
)

func newScope(outer *scope) *scope { return &scope{outer: outer, lets: map[string]*binding{}} }

func (s *scope) find(name string) *binding {
	for ; s != nil; s = s.outer {
		if b, ok := s.lets[name]; ok {
			return b
		}
	}
	return nil
}

// names lists all names of a scope, for suggestions.
func (s *scope) names() []string {
	var n []string
	for ; s != nil; s = s.outer {
		for name := range s.lets {
			n = append(n, name)
		}
	}
	return n
}

// predefined are the values that every file has. temperature and accuracy can be set.
func predefined() map[string]value {
	return map[string]value{
		"pi":          {SI: math.Pi},
		"temperature": {SI: devices.ReferenceTemperature, Dimension: unit.Temperature},
		"accuracy":    {SI: 1e-4},
		"k_B":         {SI: devices.Boltzmann, Dimension: unit.Energy.Div(unit.Temperature)},
		"q_e":         {SI: devices.ElementaryCharge, Dimension: unit.Charge},
	}
}

// settable are the predefined values that a file or a bench may change.
var settable = map[string]bool{"temperature": true, "accuracy": true}

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
		if v, ok = e.eval(s, x.X); !ok {
			return v, false
		}
		v.SI = -v.SI
		v.Ratio = false
		return v, e.plain(v, x.X)
	case *syntax.Binary:
		return e.binary(s, x)
	case *syntax.Call:
		return e.call(s, x)
	case *syntax.String:
		return v, e.fail(CodeArguments, x.Place(), "a text has no value here")
	}
	return v, e.fail(CodeNotValue, x.Place(), "this is not a value")
}

// literal reads a number.
func (e *elaborator) literal(x *syntax.Number) (value, bool) {
	v, err := unit.Parse(x.Text)
	if err == nil {
		return v, true
	}
	d := e.diagnostic(CodeLiteral, x.Place(), err.Error())
	if l, isLiteral := err.(*unit.LiteralError); isLiteral {
		d.Message = fmt.Sprintf("%s: `%s` %s", x.Text, l.Text, l.Want)
		if l.Text == x.Text {
			d.Message = fmt.Sprintf("`%s`: %s", l.Text, l.Want)
		}
		d.Hint = l.Hint
	}
	return value{}, e.add(d)
}

// named evaluates a name.
func (e *elaborator) named(s *scope, x *syntax.Name) (value, bool) {
	name := x.String()
	if len(x.Names) == 1 {
		if b := s.find(name); b != nil {
			return e.force(b, x.Place())
		}
	}
	d := e.diagnostic(CodeUnknown, x.Place(), fmt.Sprintf("there is no value called %s", name))
	switch {
	case e.nodeKnown(name):
		d.Message = fmt.Sprintf("%s is a node, not a value; its voltage is volts(%s)", name, name)
	case unit.IsUnitName(name):
		d.Message = fmt.Sprintf("`%s` is a unit; it follows its number without a space", name)
	default:
		if near, ok := syntax.Nearest(name, s.names()); ok {
			d.Hint = "did you mean " + near + "?"
		}
	}
	return value{}, e.add(d)
}

// force evaluates a binding once.
func (e *elaborator) force(b *binding, at syntax.Span) (value, bool) {
	if b.used != nil {
		*b.used = true
	}
	switch b.state {
	case evaluated:
		return b.value, true
	case broken:
		return value{}, false
	case evaluating:
		return value{}, e.fail(CodeCycle, at, fmt.Sprintf("the value of %s depends on itself", b.name.Name))
	}
	b.state = evaluating
	v, ok := e.eval(b.where, b.expr)
	if ok {
		ok = e.finite(v, b.expr)
	}
	b.value, b.state = v, evaluated
	if !ok {
		b.state = broken
	}
	return v, ok
}

// finite wants a result that is a number.
func (e *elaborator) finite(v value, x syntax.Expr) bool {
	if math.IsNaN(v.SI) || math.IsInf(v.SI, 0) {
		return e.fail(CodeRange, x.Place(), "the result is not a finite number")
	}
	return true
}

// plain refuses an amplitude unit where only a waveform may take one.
func (e *elaborator) plain(v value, x syntax.Expr) bool {
	if v.Crest == unit.Plain {
		return true
	}
	d := e.diagnostic(CodeAmplitude, x.Place(), "Vpp, Vpk, Vrms and their like are amplitudes, which only a waveform takes")
	d.Hint = "write V or A"
	return e.add(d)
}

func (e *elaborator) binary(s *scope, x *syntax.Binary) (v value, ok bool) {
	a, ok1 := e.eval(s, x.X)
	b, ok2 := e.eval(s, x.Y)
	if !ok1 || !ok2 || !e.plain(a, x.X) || !e.plain(b, x.Y) {
		return v, false
	}
	switch x.Op {
	case "+", "-":
		if a.Dimension != b.Dimension {
			return v, e.fail(CodeDimension, x.OpAt, fmt.Sprintf("`%s` between %s and %s", x.Op, a.Dimension.Noun(), b.Dimension.Noun()))
		}
		v.Dimension = a.Dimension
		if v.SI = a.SI + b.SI; x.Op == "-" {
			v.SI = a.SI - b.SI
		}
	case "*":
		v = value{SI: a.SI * b.SI, Dimension: a.Dimension.Mul(b.Dimension)}
	case "/":
		if b.SI == 0 {
			return v, e.fail(CodeRange, x.OpAt, "division by zero")
		}
		v = value{SI: a.SI / b.SI, Dimension: a.Dimension.Div(b.Dimension)}
	case "||":
		if a.Dimension != b.Dimension {
			return v, e.fail(CodeDimension, x.OpAt, fmt.Sprintf("`||` between %s and %s", a.Dimension.Noun(), b.Dimension.Noun()))
		}
		v = value{SI: a.SI * b.SI / (a.SI + b.SI), Dimension: a.Dimension}
	case "^":
		return e.raise(a, b, x)
	}
	return v, e.finite(v, x)
}

func (e *elaborator) raise(a, b value, x *syntax.Binary) (v value, ok bool) {
	if b.Dimension != unit.Number {
		return v, e.fail(CodeDimension, x.Y.Place(), "an exponent is a plain number, not "+b.Dimension.Noun())
	}
	d, ok := a.Dimension.Pow(b.SI)
	if !ok {
		return v, e.fail(CodeDimension, x.OpAt, fmt.Sprintf("%s to the power %g has no unit", a.Dimension.Noun(), b.SI))
	}
	v = value{SI: math.Pow(a.SI, b.SI), Dimension: d}
	return v, e.finite(v, x)
}

// mathFunctions take one plain number.
var mathFunctions = map[string]func(float64) float64{
	"exp": math.Exp, "ln": math.Log, "log10": math.Log10, "tanh": math.Tanh, "sin": math.Sin, "cos": math.Cos, "atan": math.Atan,
}

// series are the functions that round to a preferred value.
var series = map[string]int{"e6": 6, "e12": 12, "e24": 24, "e48": 48, "e96": 96, "e192": 192}

// functionNames lists all functions of values, for suggestions.
func functionNames() []string {
	names := []string{"sqrt", "abs", "min", "max"}
	for n := range mathFunctions {
		names = append(names, n)
	}
	for n := range series {
		names = append(names, n)
	}
	return names
}

// call evaluates a function of values.
func (e *elaborator) call(s *scope, x *syntax.Call) (v value, ok bool) {
	name := x.Func.String()
	if waveformNamed(name) {
		return v, e.fail(CodeNotValue, x.Place(), fmt.Sprintf("%s(...) is a waveform; here a single value is wanted", name))
	}
	if !isFunction(name) {
		d := e.diagnostic(CodeUnknown, x.Func.Place(), fmt.Sprintf("there is no function called %s", name))
		if near, found := syntax.Nearest(name, append(functionNames(), waveformNames()...)); found {
			d.Hint = "did you mean " + near + "?"
		}
		if _, isMetric := metricInfo(name); isMetric || name == "volts" || name == "amps" {
			d.Message = fmt.Sprintf("%s is a quantity of the circuit; here a value is wanted that is known beforehand", name)
			d.Hint = ""
		}
		return v, e.add(d)
	}
	var args []value
	for _, a := range x.Args {
		if a.Name != nil {
			return v, e.fail(CodeArguments, a.Place(), fmt.Sprintf("%s takes no argument called %s", name, a.Name.Name))
		}
		w, ok := e.eval(s, a.Value)
		if !ok || !e.plain(w, a.Value) {
			return v, false
		}
		args = append(args, w)
	}
	want := 1
	if name == "min" || name == "max" {
		want = max(1, len(args))
	}
	if len(args) != want {
		return v, e.fail(CodeArguments, x.Place(), fmt.Sprintf("%s takes one argument, not %d", name, len(args)))
	}
	return e.apply(name, args, x)
}

func isFunction(name string) bool {
	_, isMath := mathFunctions[name]
	_, isSeries := series[name]
	return isMath || isSeries || name == "sqrt" || name == "abs" || name == "min" || name == "max"
}

func (e *elaborator) apply(name string, args []value, x *syntax.Call) (v value, ok bool) {
	a := args[0]
	if f, isMath := mathFunctions[name]; isMath {
		if a.Dimension != unit.Number {
			return v, e.fail(CodeDimension, x.Args[0].Place(), fmt.Sprintf("%s of %s; a plain number is wanted", name, a.Dimension.Noun()))
		}
		v.SI = f(a.SI)
		return v, e.finite(v, x)
	}
	if n, isSeries := series[name]; isSeries {
		p, err := unit.Preferred(n, a.SI)
		if err != nil {
			return v, e.fail(CodeRange, x.Args[0].Place(), err.Error())
		}
		return value{SI: p, Dimension: a.Dimension}, true
	}
	switch name {
	case "sqrt":
		d, ok := a.Dimension.Sqrt()
		if !ok {
			return v, e.fail(CodeDimension, x.Place(), "the square root of "+a.Dimension.Noun()+" has no unit")
		}
		v = value{SI: math.Sqrt(a.SI), Dimension: d}
	case "abs":
		v = value{SI: math.Abs(a.SI), Dimension: a.Dimension}
	default:
		v = value{SI: a.SI, Dimension: a.Dimension}
		for i, b := range args[1:] {
			if b.Dimension != a.Dimension {
				return v, e.fail(CodeDimension, x.Args[i+1].Place(), fmt.Sprintf("%s between %s and %s", name, a.Dimension.Noun(), b.Dimension.Noun()))
			}
			if name == "min" {
				v.SI = math.Min(v.SI, b.SI)
			} else {
				v.SI = math.Max(v.SI, b.SI)
			}
		}
	}
	return v, e.finite(v, x)
}

// wanted evaluates an expression that must have a dimension; what names it in the message.
func (e *elaborator) wanted(s *scope, x syntax.Expr, d unit.Dimension, what string) (float64, bool) {
	v, ok := e.eval(s, x)
	if !ok || !e.plain(v, x) || !e.finite(v, x) {
		return 0, false
	}
	if v.Dimension != d {
		return 0, e.fail(CodeDimension, x.Place(), fmt.Sprintf("%s is %s, want %s", what, v.Dimension.Noun(), d.Noun()))
	}
	return v.SI, true
}

// share evaluates a part of a whole: a plain number from low to high.
func (e *elaborator) share(s *scope, x syntax.Expr, what string, low, high float64) (float64, bool) {
	v, ok := e.wanted(s, x, unit.Number, what)
	if ok && !(v >= low && v <= high) {
		return v, e.fail(CodeRange, x.Place(), fmt.Sprintf("%s is %s, want %s", what, percent(v), percentRange(low, high)))
	}
	return v, ok
}

func percent(v float64) string { return unit.Trim(100*v, unit.ShownDigits) + " %" }

func percentRange(low, high float64) string {
	if math.IsInf(high, 1) {
		return "at least " + percent(low)
	}
	return strings.TrimSuffix(percent(low), " %") + " to " + percent(high)
}
