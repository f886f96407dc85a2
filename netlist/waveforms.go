package netlist

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"math"
	"path"
	"strconv"
	"strings"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// waveArg is one argument of a waveform.
type waveArg struct {
	name     string
	kind     waveKind
	optional bool
	initial  float64 // value if it is not written
}

type waveKind uint8

const (
	waveAmplitude waveKind = iota // V or A, with the waveform's own crest factor
	waveLevel                     // V or A
	waveDensity                   // V/rtHz or A/rtHz
	waveFrequency
	waveTime
	waveAngle
	waveShare
	waveWhole
)

func (k waveKind) dimension() unit.Dimension {
	return map[waveKind]unit.Dimension{waveFrequency: unit.Frequency, waveTime: unit.Time}[k]
}

// waveform describes a call. crest is the peak over the root mean square; 0: no such value is defined.
type waveform struct {
	args  []waveArg
	crest float64
	build func(a map[string]float64) (mna.Signal, error)
}

func positional(name string, kind waveKind) waveArg { return waveArg{name: name, kind: kind} }

func optionalArg(name string, kind waveKind, initial float64) waveArg {
	return waveArg{name: name, kind: kind, optional: true, initial: initial}
}

// waveforms are the calls of the language but for points and samples, whose arguments are lists and files.
func waveforms() map[string]waveform {
	amplitude, frequency := positional("amplitude", waveAmplitude), positional("frequency", waveFrequency)
	phase := optionalArg("phase", waveAngle, 0)
	return map[string]waveform{
		"sine": {[]waveArg{amplitude, frequency, phase, optionalArg("delay", waveTime, 0)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Sine{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Delay: a["delay"]}.New()
		}},
		"triangle": {[]waveArg{amplitude, frequency, phase, optionalArg("skew", waveShare, 0.5)}, math.Sqrt(3), func(a map[string]float64) (mna.Signal, error) {
			return devices.Triangle{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Skew: a["skew"]}.New()
		}},
		"square": {[]waveArg{amplitude, frequency, phase, optionalArg("duty", waveShare, 0.5), optionalArg("edge", waveTime, 0)}, 1, func(a map[string]float64) (mna.Signal, error) {
			return devices.Square{Peak: a["amplitude"], Frequency: a["frequency"], Phase: a["phase"], Duty: a["duty"], Edge: a["edge"]}.New()
		}},
		"step": {[]waveArg{positional("from", waveLevel), positional("to", waveLevel), optionalArg("at", waveTime, 0), optionalArg("edge", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Step{From: a["from"], To: a["to"], Start: a["at"], Edge: a["edge"]}.New()
		}},
		"ramp": {[]waveArg{positional("from", waveLevel), positional("to", waveLevel), optionalArg("at", waveTime, 0), positional("over", waveTime)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Ramp{From: a["from"], To: a["to"], Start: a["at"], Over: a["over"]}.New()
		}},
		"pulse": {[]waveArg{positional("low", waveLevel), positional("high", waveLevel), optionalArg("at", waveTime, 0), positional("width", waveTime), optionalArg("edge", waveTime, 0), optionalArg("every", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Pulse{Low: a["low"], High: a["high"], Start: a["at"], Width: a["width"], Edge: a["edge"], Every: a["every"]}.New()
		}},
		"modulated": {[]waveArg{amplitude, frequency, positional("tone", waveFrequency), optionalArg("depth", waveShare, 0.8)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Modulated{Peak: a["amplitude"], Carrier: a["frequency"], Tone: a["tone"], Depth: a["depth"]}.New()
		}},
		"surge": {[]waveArg{amplitude, positional("front", waveTime), positional("tail", waveTime), optionalArg("at", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Surge{Peak: a["amplitude"], Front: a["front"], Tail: a["tail"], Start: a["at"]}.New()
		}},
		"ringing": {[]waveArg{amplitude, frequency, positional("decay", waveTime), optionalArg("at", waveTime, 0)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Ringing{Peak: a["amplitude"], Frequency: a["frequency"], Decay: a["decay"], Start: a["at"]}.New()
		}},
		"bursts": {[]waveArg{amplitude, positional("front", waveTime), positional("tail", waveTime), positional("rate", waveFrequency), positional("length", waveTime), positional("every", waveTime)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Bursts{Peak: a["amplitude"], Front: a["front"], Tail: a["tail"], Rate: a["rate"], Length: a["length"], Every: a["every"]}.New()
		}},
		"hiss": {[]waveArg{positional("density", waveDensity), positional("band", waveFrequency), optionalArg("seed", waveWhole, 1)}, 0, func(a map[string]float64) (mna.Signal, error) {
			return devices.Hiss{Density: a["density"], Band: a["band"], Seed: uint64(a["seed"])}.New()
		}},
		"chirp": {[]waveArg{amplitude, positional("from", waveFrequency), positional("to", waveFrequency), positional("over", waveTime)}, math.Sqrt2, func(a map[string]float64) (mna.Signal, error) {
			return devices.Chirp{Peak: a["amplitude"], From: a["from"], To: a["to"], Over: a["over"]}.New()
		}},
	}
}

func waveformNamed(name string) bool {
	_, ok := waveforms()[name]
	return ok || name == "points" || name == "samples"
}

func waveformNames() []string {
	names := []string{"points", "samples"}
	for n := range waveforms() {
		names = append(names, n)
	}
	return names
}

// signal is an evaluated waveform, or a constant.
type signal struct {
	signal    mna.Signal
	dimension unit.Dimension
}

// isWaveform reports whether an expression holds the call of a waveform.
func isWaveform(x syntax.Expr) bool {
	switch x := x.(type) {
	case *syntax.Paren:
		return isWaveform(x.X)
	case *syntax.Unary:
		return isWaveform(x.X)
	case *syntax.Binary:
		return isWaveform(x.X) || isWaveform(x.Y)
	case *syntax.Call:
		return waveformNamed(x.Func.String())
	}
	return false
}

// signalOf evaluates a waveform or a constant.
func (e *elaborator) signalOf(s *scope, x syntax.Expr) (w signal, ok bool) {
	if !isWaveform(x) {
		v, ok := e.eval(s, x)
		if !ok || !e.plain(v, x) || !e.finite(v, x) {
			return w, false
		}
		return signal{devices.Constant(v.SI), v.Dimension}, true
	}
	switch x := x.(type) {
	case *syntax.Paren:
		return e.signalOf(s, x.X)
	case *syntax.Unary:
		w, ok = e.signalOf(s, x.X)
		if ok {
			w.signal = devices.Scaled(w.signal, -1)
		}
		return w, ok
	case *syntax.Binary:
		return e.combineSignals(s, x)
	case *syntax.Call:
		switch x.Func.String() {
		case "points":
			return e.points(s, x)
		case "samples":
			return e.samples(s, x)
		}
		return e.waveCall(s, x)
	}
	return w, e.fail(CodeNotValue, x.Place(), "this is no waveform")
}

// combineSignals adds waveforms and constants, and scales them by numbers.
func (e *elaborator) combineSignals(s *scope, x *syntax.Binary) (w signal, ok bool) {
	switch x.Op {
	case "+", "-":
		a, ok1 := e.signalOf(s, x.X)
		b, ok2 := e.signalOf(s, x.Y)
		if !ok1 || !ok2 {
			return w, false
		}
		if a.dimension != b.dimension {
			return w, e.fail(CodeDimension, x.OpAt, fmt.Sprintf("`%s` between %s and %s", x.Op, a.dimension.Noun(), b.dimension.Noun()))
		}
		if x.Op == "-" {
			b.signal = devices.Scaled(b.signal, -1)
		}
		return signal{devices.Sum(a.signal, b.signal), a.dimension}, true
	case "*", "/":
		wave, factor := x.X, x.Y
		if x.Op == "*" && isWaveform(x.Y) {
			wave, factor = x.Y, x.X
		}
		if isWaveform(factor) {
			return w, e.fail(CodeNotValue, x.OpAt, "a waveform is scaled by a number, not by a waveform")
		}
		a, ok1 := e.signalOf(s, wave)
		k, ok2 := e.wanted(s, factor, unit.Number, "the factor of a waveform")
		if !ok1 || !ok2 {
			return w, false
		}
		if x.Op == "/" {
			if k = 1 / k; math.IsInf(k, 0) {
				return w, e.fail(CodeRange, x.OpAt, "division by zero")
			}
		}
		return signal{devices.Scaled(a.signal, k), a.dimension}, true
	}
	return w, e.fail(CodeNotValue, x.OpAt, fmt.Sprintf("waveforms have no `%s`; they are added, and scaled by numbers", x.Op))
}

// waveCall evaluates the call of a waveform with a fixed list of arguments.
func (e *elaborator) waveCall(s *scope, x *syntax.Call) (w signal, ok bool) {
	name := x.Func.String()
	form := waveforms()[name]
	given := map[string]syntax.Arg{}
	ok = true
	next := 0
	for _, a := range x.Args {
		if a.Name == nil {
			if next >= len(form.args) {
				ok = e.fail(CodeArguments, a.Place(), fmt.Sprintf("%s takes at most %d arguments", name, len(form.args)))
				continue
			}
			given[form.args[next].name] = a
			next++
			continue
		}
		if !form.takes(a.Name.Name) {
			ok = e.unknownArgument(a, name, form)
			continue
		}
		if _, twice := given[a.Name.Name]; twice {
			ok = e.fail(CodeArguments, a.Place(), fmt.Sprintf("%s is given twice", a.Name.Name))
			continue
		}
		given[a.Name.Name] = a
	}
	numbers := map[string]float64{}
	for _, want := range form.args {
		a, isGiven := given[want.name]
		if !isGiven {
			if !want.optional {
				ok = e.fail(CodeArguments, x.Place(), fmt.Sprintf("%s needs its %s", name, want.name))
			}
			numbers[want.name] = want.initial
			continue
		}
		v, good := e.waveArgument(s, a.Value, want, form, &w)
		numbers[want.name] = v
		ok = ok && good
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

func (f *waveform) takes(name string) bool {
	for _, a := range f.args {
		if a.name == name {
			return true
		}
	}
	return false
}

func (e *elaborator) unknownArgument(a syntax.Arg, name string, form waveform) bool {
	d := e.diagnostic(CodeArguments, a.Name.Place(), fmt.Sprintf("%s takes no argument called %s", name, a.Name.Name))
	var names []string
	for _, x := range form.args {
		names = append(names, x.name)
	}
	if near, ok := syntax.Nearest(a.Name.Name, names); ok {
		d.Hint = "did you mean " + near + "?"
	} else {
		d.Hint = "it takes " + strings.Join(names, ", ")
	}
	return e.add(d)
}

// waveError puts an error of a waveform at the argument it is about.
func (e *elaborator) waveError(err error, x *syntax.Call, given map[string]syntax.Arg, name string) bool {
	at := x.Place()
	var w *devices.SignalError
	if errors.As(err, &w) {
		if a, ok := given[w.Argument]; ok {
			at = a.Value.Place()
		}
		return e.fail(CodeRange, at, fmt.Sprintf("%s of %s: want %s", w.Argument, name, w.Want))
	}
	return e.fail(CodeRange, at, err.Error())
}

// waveArgument evaluates one argument and, where it says so, fixes the dimension of the waveform.
func (e *elaborator) waveArgument(s *scope, x syntax.Expr, want waveArg, form waveform, w *signal) (float64, bool) {
	what := "the " + want.name
	switch want.kind {
	case waveFrequency, waveTime:
		return e.wanted(s, x, want.kind.dimension(), what)
	case waveAngle:
		return e.wanted(s, x, unit.Number, what)
	case waveShare:
		return e.share(s, x, what, 0, 1)
	case waveWhole:
		v, ok := e.wanted(s, x, unit.Number, what)
		if ok && !(v >= 0 && v == math.Trunc(v) && v < 1<<53) {
			return v, e.fail(CodeRange, x.Place(), what+" is a whole number of at least 0")
		}
		return v, ok
	}
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
		return 0, e.fail(CodeDimension, x.Place(), fmt.Sprintf("%s is %s, want %s", what, v.Dimension.Noun(), wish))
	}
	if w.dimension != unit.Number && w.dimension != d {
		return 0, e.fail(CodeDimension, x.Place(), fmt.Sprintf("%s is %s, but the waveform's other values are %s", what, d.Noun(), w.dimension.Noun()))
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
		return 0, e.fail(CodeAmplitude, x.Place(), fmt.Sprintf("the %s is a plain value or a peak (V, Vpk, A, Apk): this waveform has no peak-to-peak or rms amplitude", want.name))
	}
	if v.Crest == unit.PeakToPeak {
		return v.SI / 2, true
	}
	return v.SI * form.crest, true
}

// points evaluates points(t, v, t, v, ...).
func (e *elaborator) points(s *scope, x *syntax.Call) (w signal, ok bool) {
	p := devices.Points{}
	ok = true
	if len(x.Args) < 2 || len(x.Args)%2 != 0 {
		return w, e.fail(CodeArguments, x.Place(), "points needs pairs of a time and a value")
	}
	level := waveArg{name: "value", kind: waveLevel}
	for i := 0; i < len(x.Args); i += 2 {
		t, ok1 := e.wanted(s, x.Args[i].Value, unit.Time, "the time of a point")
		v, ok2 := e.waveArgument(s, x.Args[i+1].Value, level, waveform{}, &w)
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
		return w, e.fail(CodeRange, x.Place(), err.Error())
	}
	return w, true
}

// samples evaluates samples("file.csv", column: n, repeat: 1): the first column of the file is the time in s, column n (2 if not written) the
// value in V, or in A with unit: 1A.
func (e *elaborator) samples(s *scope, x *syntax.Call) (w signal, ok bool) {
	column, repeat, scale := 2.0, 0.0, value{SI: 1, Dimension: unit.Voltage}
	var file *syntax.String
	ok = true
	for i, a := range x.Args {
		text, isText := a.Value.(*syntax.String)
		switch {
		case i == 0 && a.Name == nil && isText:
			file = text
		case a.Name != nil && a.Name.Name == "column":
			var good bool
			column, good = e.wanted(s, a.Value, unit.Number, "the column")
			if good && !(column >= 2 && column == math.Trunc(column)) {
				good = e.fail(CodeRange, a.Place(), "the column is a whole number from 2; the first holds the times")
			}
			ok = ok && good
		case a.Name != nil && a.Name.Name == "repeat":
			var good bool
			repeat, good = e.wanted(s, a.Value, unit.Number, "repeat")
			ok = ok && good
		case a.Name != nil && a.Name.Name == "unit":
			var good bool
			if scale, good = e.eval(s, a.Value); good && scale.Dimension != unit.Voltage && scale.Dimension != unit.Current {
				good = e.fail(CodeDimension, a.Place(), "the unit of samples is V or A")
			}
			ok = ok && good
		default:
			ok = e.fail(CodeArguments, a.Place(), "samples takes a file, column:, repeat: and unit:")
		}
	}
	if file == nil {
		return w, e.fail(CodeArguments, x.Place(), "samples needs the name of a file in quotes")
	}
	if !ok {
		return w, false
	}
	times, values, ok := e.readSamples(file, int(column))
	if !ok {
		return w, false
	}
	for i := range values {
		values[i] *= scale.SI
	}
	w.dimension = scale.Dimension
	var err error
	if w.signal, err = (devices.Points{Times: times, Values: values, Repeat: repeat != 0}).New(); err != nil {
		return w, e.fail(CodeRange, x.Place(), err.Error())
	}
	return w, true
}

// readSamples reads two columns of a file beside the one that names it.
func (e *elaborator) readSamples(file *syntax.String, column int) (times, values []float64, ok bool) {
	name := path.Join(path.Dir(file.File), file.Value)
	data, ok := e.program.samples[name]
	if !ok {
		var err error
		if data, err = e.program.read(name, e.program.limits.FileBytes); err != nil {
			return nil, nil, e.fail(CodeFile, file.Place(), fmt.Sprintf("%s: %s", file.Value, reason(err)))
		}
	}
	r := csv.NewReader(bytes.NewReader(data))
	r.Comment, r.TrimLeadingSpace, r.FieldsPerRecord = '#', true, -1
	rows, err := r.ReadAll()
	if err != nil {
		return nil, nil, e.fail(CodeFile, file.Place(), fmt.Sprintf("%s: %s", file.Value, err))
	}
	if len(rows) > e.program.limits.Samples {
		return nil, nil, e.fail(CodeLimit, file.Place(), fmt.Sprintf("%s has %d samples; at most %d are read", file.Value, len(rows), e.program.limits.Samples))
	}
	for i, row := range rows {
		if len(row) < column {
			return nil, nil, e.fail(CodeFile, file.Place(), fmt.Sprintf("%s: row %d has %d columns, not %d", file.Value, i+1, len(row), column))
		}
		t, err1 := strconv.ParseFloat(strings.TrimSpace(row[0]), 64)
		v, err2 := strconv.ParseFloat(strings.TrimSpace(row[column-1]), 64)
		if err1 != nil || err2 != nil || math.IsNaN(t+v) || math.IsInf(t, 0) || math.IsInf(v, 0) {
			if i == 0 {
				continue // a row of titles
			}
			return nil, nil, e.fail(CodeFile, file.Place(), fmt.Sprintf("%s: row %d is not a time and a value", file.Value, i+1))
		}
		if n := len(times); n > 0 && !(t > times[n-1]) {
			return nil, nil, e.fail(CodeFile, file.Place(), fmt.Sprintf("%s: the times do not ascend in row %d", file.Value, i+1))
		}
		times, values = append(times, t), append(values, v)
	}
	return times, values, true
}
