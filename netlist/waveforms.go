package netlist

import (
	"errors"
	"slices"
	"strings"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// signal is an evaluated waveform, or a constant.
type signal struct {
	signal    mna.Signal
	dimension unit.Dimension
}

// term is a part of a sum of waveforms: a waveform, or a value.
type term struct {
	signal mna.Signal // nil for a value
	value  value      // of a waveform only the dimension
}

// signalOf evaluates a waveform or a constant.
func (e *elaborator) signalOf(s *scope, x syntax.Expr) (signal, bool) {
	t, ok := e.term(s, x)
	if !ok {
		return signal{}, false
	}
	if t.signal == nil {
		return signal{devices.Constant(t.value.SI), t.value.Dimension}, e.plain(t.value, x) && e.finite(t.value, x)
	}
	return signal{t.signal, t.value.Dimension}, true
}

// term evaluates an expression that may hold waveforms.
func (e *elaborator) term(s *scope, x syntax.Expr) (t term, ok bool) {
	switch x := x.(type) {
	case *syntax.Paren:
		return e.term(s, x.X)
	case *syntax.Unary:
		if t, ok = e.term(s, x.X); ok && t.signal != nil {
			t.signal = devices.Scaled(t.signal, -1)
			return t, true
		}
		t.value = value{SI: -t.value.SI, Dimension: t.value.Dimension, Crest: t.value.Crest}
		return t, ok && e.plain(t.value, x.X)
	case *syntax.Binary:
		a, ok1 := e.term(s, x.X)
		b, ok2 := e.term(s, x.Y)
		if !ok1 || !ok2 {
			return t, false
		}
		if a.signal == nil && b.signal == nil {
			t.value, ok = e.combine(a.value, b.value, x)
			return t, ok
		}
		return e.combineSignals(a, b, x)
	case *syntax.Call:
		if name := x.Func.String(); isWaveformName(name) {
			w, ok := e.waveform(s, x, name)
			return term{w.signal, value{Dimension: w.dimension}}, ok
		}
	}
	t.value, ok = e.eval(s, x)
	return t, ok
}

// combineSignals adds waveforms and constants, and scales waveforms by numbers.
func (e *elaborator) combineSignals(a, b term, x *syntax.Binary) (term, bool) {
	switch {
	case (x.Op == "+" || x.Op == "-") && a.value.Dimension != b.value.Dimension:
		return a, e.fail(CodeDimension, x.OpAt, "`%s` between %s and %s", x.Op, a.value.Dimension.Noun(), b.value.Dimension.Noun())
	case x.Op == "+" || x.Op == "-":
		k := 1.0
		if x.Op == "-" {
			k = -1
		}
		ok := e.plain(a.value, x.X) && e.plain(b.value, x.Y)
		return term{devices.Sum(a.level(), devices.Scaled(b.level(), k)), value{Dimension: a.value.Dimension}}, ok
	case x.Op != "*" && x.Op != "/":
		return a, e.fail(CodeNotValue, x.OpAt, "waveforms have no `%s`; they are added, and scaled by numbers", x.Op)
	case a.signal != nil && b.signal != nil || x.Op == "/" && a.signal == nil:
		return a, e.fail(CodeNotValue, x.OpAt, "a waveform is scaled by a number, not by a waveform")
	}
	wave, k, at := a, b.value, x.Y
	if a.signal == nil {
		wave, k, at = b, a.value, x.X
	}
	if k.Dimension != unit.Number {
		return a, e.fail(CodeDimension, at.Place(), "a waveform is scaled by a plain number, not by %s", k.Dimension.Noun())
	}
	if x.Op == "/" {
		if k.SI == 0 {
			return a, e.fail(CodeRange, x.OpAt, "division by zero")
		}
		k.SI = 1 / k.SI
	}
	return term{devices.Scaled(wave.signal, k.SI), wave.value}, true
}

// level returns the term as a waveform.
func (t term) level() mna.Signal {
	if t.signal == nil {
		return devices.Constant(t.value.SI)
	}
	return t.signal
}

// waveform evaluates the call of a waveform.
func (e *elaborator) waveform(s *scope, x *syntax.Call, name string) (signal, bool) {
	switch name {
	case "points":
		return e.points(s, x)
	case "samples":
		return e.samples(s, x)
	}
	return e.waveCall(s, x)
}

// waveCall evaluates the call of a waveform with a fixed list of arguments.
func (e *elaborator) waveCall(s *scope, x *syntax.Call) (w signal, ok bool) {
	name := x.Func.String()
	form := waveforms()[name]
	given, ok := e.waveArgs(x, form)
	numbers := make(map[string]float64, len(form.args))
	for _, want := range form.args {
		a, isGiven := given[want.name]
		switch {
		case isGiven:
			v, good := e.waveArgument(s, a.Value, want, form, &w)
			numbers[want.name], ok = v, ok && good
		case want.optional:
			numbers[want.name] = want.initial
		case ok:
			ok = e.fail(CodeArguments, x.Place(), "%s needs its %s", name, want.text())
		}
	}
	if !ok {
		return w, false
	}
	var err error
	if w.signal, err = form.build(numbers); err != nil {
		return w, e.waveError(err, x, given, name)
	}
	return w, true
}

// text names an argument for a message.
func (a waveArg) text() string {
	if a.named {
		return a.name + ":"
	}
	return a.name
}

// waveArgs finds out which argument is which.
func (e *elaborator) waveArgs(x *syntax.Call, form waveform) (given map[string]syntax.Arg, ok bool) {
	given, ok = map[string]syntax.Arg{}, true
	next := 0
	for _, a := range x.Args {
		switch {
		case a.Name == nil && next < len(form.args) && form.args[next].named:
			ok = e.fail(CodeArguments, a.Place(), "this argument is written with its name: %s", form.namedText())
		case a.Name == nil && next >= len(form.args):
			ok = e.fail(CodeArguments, a.Place(), "%s takes at most %d arguments", x.Func, len(form.args))
		case a.Name == nil:
			given[form.args[next].name] = a
			next++
		case !form.takes(a.Name.Name):
			ok = e.unknownArgument(a, x.Func.String(), form)
		default:
			if _, twice := given[a.Name.Name]; twice {
				ok = e.fail(CodeArguments, a.Place(), "%s is given twice", a.Name.Name)
			}
			given[a.Name.Name] = a
		}
	}
	return given, ok
}

// namedText lists the arguments that are written with their names.
func (f *waveform) namedText() string {
	var names []string
	for _, a := range f.args {
		if a.named {
			names = append(names, a.name+":")
		}
	}
	return strings.Join(names, ", ")
}

func (f *waveform) takes(name string) bool {
	for _, a := range f.args {
		if a.name == name {
			return true
		}
	}
	return false
}

func (e *elaborator) unknownArgument(a syntax.Arg, name string, form waveform) bool {
	hint := e.guess(a.Name.Name, each(form.args, func(x *waveArg) string { return x.name }))
	if hint == "" {
		hint = "it takes " + strings.Join(slices.Collect(each(form.args, func(x *waveArg) string { return x.name })), ", ")
	}
	return e.failHint(hint, CodeArguments, a.Name.Place(), "%s takes no argument called %s", name, a.Name.Name)
}

// waveError puts an error of a waveform at the argument it is about.
func (e *elaborator) waveError(err error, x *syntax.Call, given map[string]syntax.Arg, name string) bool {
	at := x.Place()
	var w *devices.SignalError
	if errors.As(err, &w) {
		if a, ok := given[w.Argument]; ok {
			at = a.Value.Place()
		}
		return e.fail(CodeRange, at, "%s of %s: want %s", w.Argument, name, w.Want)
	}
	return e.fail(CodeRange, at, "%s", err)
}

// waveArgument evaluates one argument and, where it says so, fixes the dimension of the waveform.
func (e *elaborator) waveArgument(s *scope, x syntax.Expr, want waveArg, form waveform, w *signal) (float64, bool) {
	what := "the " + want.name
	switch want.kind {
	case waveFrequency, waveTime, waveAngle:
		return e.wanted(s, x, want.kind.dimension(), what)
	case waveEdge:
		v, ok := e.wanted(s, x, unit.Time, what)
		if ok && !(v > 0) {
			ok = e.fail(CodeRange, x.Place(), "an edge takes a time")
		}
		return v, ok
	case waveShare:
		return e.share(s, x, what)
	case waveWhole:
		return e.whole(s, x, what, 0, 1<<53)
	}
	return e.waveLevel(s, x, want, form, w)
}

// waveLevel evaluates an amplitude, a level or a density.
func (e *elaborator) waveLevel(s *scope, x syntax.Expr, want waveArg, form waveform, w *signal) (float64, bool) {
	v, ok := e.eval(s, x)
	if !ok || !e.finite(v, x) {
		return 0, false
	}
	d := v.Dimension
	if want.kind == waveDensity {
		d = map[unit.Dimension]unit.Dimension{unit.VoltageNoise: unit.Voltage, unit.CurrentNoise: unit.Current}[d]
	}
	if d != unit.Voltage && d != unit.Current {
		wish := "V or A"
		if want.kind == waveDensity {
			wish = "V/rtHz or A/rtHz"
		}
		return 0, e.fail(CodeDimension, x.Place(), "the %s is %s, want %s", want.name, v.Dimension.Noun(), wish)
	}
	if w.dimension != unit.Number && w.dimension != d {
		return 0, e.fail(CodeDimension, x.Place(), "the %s is %s, but the waveform's other values are %s", want.name, d.Noun(), w.dimension.Noun())
	}
	w.dimension = d
	return e.peakOf(v, x, want, form)
}

// peakOf turns an amplitude into the waveform's peak.
func (e *elaborator) peakOf(v value, x syntax.Expr, want waveArg, form waveform) (float64, bool) {
	if v.Crest == unit.Plain || v.Crest == unit.Peak && want.kind == waveAmplitude {
		return v.SI, true
	}
	if want.kind != waveAmplitude || form.crest == 0 {
		return 0, e.fail(CodeAmplitude, x.Place(), "the %s is a plain value or a peak (V, Vpk, A, Apk): this waveform has no peak-to-peak or rms amplitude", want.name)
	}
	if v.Crest == unit.PeakToPeak {
		return v.SI / 2, true
	}
	return v.SI * form.crest, true
}

// points evaluates points(t, v, t, v, ...).
func (e *elaborator) points(s *scope, x *syntax.Call) (w signal, ok bool) {
	if len(x.Args) < 2 || len(x.Args)%2 != 0 {
		return w, e.fail(CodeArguments, x.Place(), "points needs pairs of a time and a value")
	}
	ok = true
	p := devices.Points{}
	level := waveArg{name: "value", kind: waveLevel}
	for i := 0; i < len(x.Args); i += 2 {
		for _, a := range x.Args[i : i+2] {
			if a.Name != nil {
				return w, e.fail(CodeArguments, a.Name.Place(), "points takes no argument called %s", a.Name.Name)
			}
		}
		t, ok1 := e.wanted(s, x.Args[i].Value, unit.Time, "the time of a point")
		v, ok2 := e.waveLevel(s, x.Args[i+1].Value, level, waveform{}, &w)
		ok = ok && ok1 && ok2
		if n := len(p.Times); ok && n > 0 && !(t > p.Times[n-1]) {
			ok = e.fail(CodeRange, x.Args[i].Place(), "the times of points ascend")
		}
		p.Times, p.Values = append(p.Times, t), append(p.Values, v)
	}
	if !ok {
		return w, false
	}
	var err error
	if w.signal, err = p.New(); err != nil {
		return w, e.fail(CodeRange, x.Place(), "%s", err)
	}
	return w, true
}
