package netlist

import (
	"maps"
	"math"
	"slices"
	"sync"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// function is a function of values. Its arguments are finite.
type function struct {
	most int // arguments; 0: any number from 1
	// dimension returns that of the result, and false for a dimension that the function does not take.
	dimension func(unit.Dimension) (unit.Dimension, bool)
	compute   func(a []float64) (float64, error)
}

// functions returns the functions of the language by their names.
var functions = sync.OnceValue(func() map[string]function {
	number := func(d unit.Dimension) (unit.Dimension, bool) { return unit.Number, d == unit.Number }
	any := func(d unit.Dimension) (unit.Dimension, bool) { return d, true }
	one := func(dimension func(unit.Dimension) (unit.Dimension, bool), f func(float64) float64) function {
		return function{1, dimension, func(a []float64) (float64, error) { return f(a[0]), nil }}
	}
	preferred := func(series int) function {
		return function{1, any, func(a []float64) (float64, error) { return unit.Preferred(series, a[0]) }}
	}
	return map[string]function{
		"sqrt": one(unit.Dimension.Sqrt, math.Sqrt), "abs": one(any, math.Abs),
		"exp": one(number, math.Exp), "ln": one(number, math.Log), "log10": one(number, math.Log10), "tanh": one(number, math.Tanh),
		"sin": one(number, math.Sin), "cos": one(number, math.Cos), "atan": one(number, math.Atan),
		"min": {0, any, func(a []float64) (float64, error) { return slices.Min(a), nil }},
		"max": {0, any, func(a []float64) (float64, error) { return slices.Max(a), nil }},
		"e6":  preferred(6), "e12": preferred(12), "e24": preferred(24), "e48": preferred(48), "e96": preferred(96), "e192": preferred(192),
	}
})

// call evaluates a function of values.
func (e *elaborator) call(s *scope, x *syntax.Call) (v value, ok bool) {
	name := x.Func.String()
	f, known := functions()[name]
	if !known {
		return v, e.noFunction(x)
	}
	args, d, ok := e.functionArgs(s, x, f)
	if !ok {
		return v, false
	}
	if v.Dimension, ok = f.dimension(d); !ok {
		return v, e.fail(CodeDimension, x.Args[0].Place(), "%s", noResult(name, d))
	}
	var err error
	if v.SI, err = f.compute(args); err != nil {
		return v, e.fail(CodeRange, x.Args[0].Place(), "%s", err)
	}
	return v, e.finite(v, x)
}

// noResult says that a function does not take a dimension.
func noResult(name string, d unit.Dimension) string {
	if name == "sqrt" {
		return "the square root of " + d.Noun() + " has no unit"
	}
	return name + " of " + d.Noun() + "; a plain number is wanted"
}

// functionArgs evaluates arguments, which are all of one dimension.
func (e *elaborator) functionArgs(s *scope, x *syntax.Call, f function) (args []float64, d unit.Dimension, ok bool) {
	if !e.counted(x, 1, f.most) {
		return nil, d, false
	}
	ok = true
	for i, a := range x.Args {
		v, good := e.single(s, a.Value)
		switch {
		case !good:
			ok = false
		case i == 0:
			d = v.Dimension
		case ok && v.Dimension != d:
			ok = e.fail(CodeDimension, a.Place(), "%s between %s and %s", x.Func, d.Noun(), v.Dimension.Noun())
		}
		args = append(args, v.SI)
	}
	return args, d, ok
}

// counted checks that a call has no named arguments and from least to most others; most 0 stands for any number.
func (e *elaborator) counted(x *syntax.Call, least, most int) bool {
	for _, a := range x.Args {
		if a.Name != nil {
			return e.fail(CodeArguments, a.Place(), "%s takes no argument called %s", x.Func, a.Name.Name)
		}
	}
	n := len(x.Args)
	switch {
	case n < least && least == 1:
		return e.fail(CodeArguments, x.Place(), "%s takes an argument", x.Func)
	case n < least:
		return e.fail(CodeArguments, x.Place(), "%s takes %d arguments, not %d", x.Func, least, n)
	case most > 0 && n > most:
		return e.fail(CodeArguments, x.Args[most].Place(), "%s takes no more than %d", x.Func, most)
	}
	return true
}

// noFunction says that a call is no function of values.
func (e *elaborator) noFunction(x *syntax.Call) bool {
	name := x.Func.String()
	switch {
	case isWaveformName(name):
		return e.fail(CodeNotValue, x.Place(), "%s(...) is a waveform; here a single value is wanted", name)
	case isQuantityName(name):
		return e.fail(CodeNotValue, x.Place(), "%s is a quantity of the circuit; here a value is wanted that is known beforehand", name)
	case e.unsure(x.Func):
		return false
	}
	hint := e.guess(name, both(maps.Keys(functions()), slices.Values(waveformNames())))
	return e.failHint(hint, CodeUnknown, x.Func.Place(), "there is no function called %s", name)
}
