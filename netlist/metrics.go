package netlist

import (
	"fmt"
	"iter"
	"maps"
	"math"
	"slices"
	"strings"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// measure resolves quantity at F, or over F1..F2.
func (m *measurer) measure(x *syntax.Measure) (Quantity, bool) {
	if m.band != nil {
		return nil, m.fail(CodeNeedsBand, x.Place(), "the frequency is said twice")
	}
	inner := *m
	var ok bool
	if inner.band, ok = m.bandOf(x); !ok {
		return nil, false
	}
	q, ok := inner.quantity(x.X)
	if !ok {
		return nil, false
	}
	if !usesBand(q) {
		return nil, m.fail(CodeNeedsBand, x.Place(), "%s does not depend on a frequency", m.textOf(x.X.Place()))
	}
	return retext(q, m.info(x, q.Describe().Unit)), true
}

// bandOf evaluates at F, or over F1..F2 per decade n.
func (m *measurer) bandOf(x *syntax.Measure) (band *Band, ok bool) {
	band = &Band{}
	if x.At != nil {
		band.At, ok = m.frequency(x.At)
		return band, ok
	}
	var ok2 bool
	band.Low, ok = m.frequency(x.Low)
	band.High, ok2 = m.frequency(x.High)
	if !ok || !ok2 {
		return band, false
	}
	if !(band.Low < band.High) {
		at := x.Low.Place()
		at.End = x.High.Place().End
		return band, m.fail(CodeEmptyRange, at, "the range of frequencies is empty or reversed")
	}
	if x.PerDecade != nil {
		const most = 10_000
		n, ok := m.whole(m.scope, x.PerDecade, "the points a decade", 1, most)
		band.PerDecade = int(n)
		return band, ok
	}
	return band, true
}

func (m *measurer) frequency(x syntax.Expr) (float64, bool) {
	f, ok := m.wanted(m.scope, x, unit.Frequency, "the frequency")
	if ok && !(f > 0) {
		ok = m.fail(CodeRange, x.Place(), "a frequency is positive")
	}
	return f, ok
}

// usesBand reports whether a quantity is measured at a frequency or over a range.
func usesBand(q Quantity) bool {
	switch q := q.(type) {
	case *Metric:
		return q.Band != Band{}
	case *Apply:
		return slices.ContainsFunc(q.X, usesBand)
	case *Quiescent:
		return usesBand(q.X)
	}
	return false
}

// retext gives a quantity the text and place of the whole it stands for.
func retext(q Quantity, whole Info) Quantity {
	switch q := q.(type) {
	case *Metric:
		c := *q
		c.Text, c.Span = whole.Text, whole.Span
		return &c
	case *Apply:
		c := *q
		c.Text, c.Span = whole.Text, whole.Span
		return &c
	}
	return q
}

// metric resolves a metric with its ports or rail.
func (m *measurer) metric(x syntax.Expr, info *MetricInfo, args []syntax.Arg) (Quantity, bool) {
	q := &Metric{Name: info.Name}
	names, ok := m.metricArgs(info, args)
	if !ok {
		return nil, false
	}
	if info.Rail {
		if len(names) == 0 {
			return nil, m.fail(CodeArguments, x.Place(), "%s needs a rail, as in %s(vp)", info.Name, info.Name)
		}
		if q.Rail = names[0].String(); !m.isRail(names[0]) {
			return nil, false
		}
		names = names[1:]
	}
	in, out, ok := m.portsOf(x, info, names)
	if !ok {
		return nil, false
	}
	current := false
	if in != nil {
		q.Input, current = in.Name, in.Current
	}
	if out != nil {
		q.Output = out.Name
	}
	q.Info = m.info(x, info.unit(current))
	q.Complex = info.Complex
	return m.banded(x, q, info)
}

// metricArgs reads the names that a metric is given.
func (m *measurer) metricArgs(info *MetricInfo, args []syntax.Arg) (names []syntax.Ref, ok bool) {
	for _, a := range args {
		if a.Name != nil {
			return nil, m.fail(CodeArguments, a.Place(), "%s takes no argument called %s", info.Name, a.Name.Name)
		}
		r, ok := m.refOf(a, "a port")
		if !ok {
			return nil, false
		}
		names = append(names, r)
	}
	return names, true
}

func (m *measurer) isRail(r syntax.Ref) bool {
	if _, ok := m.rail[r.String()]; ok || m.unsure(r) {
		return ok
	}
	return m.failHint(m.guess(r.String(), maps.Keys(m.rail)), CodeUnknown, r.Place(), "there is no rail called %s", r)
}

// banded gives a metric its frequency or range.
func (m *measurer) banded(x syntax.Expr, q *Metric, info *MetricInfo) (Quantity, bool) {
	switch {
	case m.band != nil && info.Needs == NeedsFrequency:
		q.Band = *m.band
		if m.band.High > 0 {
			q.Shape = Curve
		}
	case m.band != nil && info.Needs == MayHaveRange:
		if m.band.At > 0 {
			return nil, m.fail(CodeNeedsBand, x.Place(), "%s is searched over a range, not at one frequency", info.Name)
		}
		q.Band = *m.band
	case m.band == nil && info.Needs == NeedsFrequency:
		hint := fmt.Sprintf("write `%s at 50Hz` or `%s over 10Hz..10kHz`", q.Text, q.Text)
		return nil, m.failHint(hint, CodeNeedsBand, x.Place(), "%s needs a frequency", info.Name)
	}
	return q, true
}

// portsOf finds the input and the output of a metric: those it names, or the only ones.
func (m *measurer) portsOf(x syntax.Expr, info *MetricInfo, names []syntax.Ref) (in *Input, out *Output, ok bool) {
	c := m.circuit
	for _, r := range names {
		i := slices.IndexFunc(c.Inputs, func(p Input) bool { return p.Name == r.String() })
		o := slices.IndexFunc(c.Outputs, func(p Output) bool { return p.Name == r.String() })
		switch {
		case i >= 0 && info.Input && in == nil:
			in = &c.Inputs[i]
		case o >= 0 && info.Output && out == nil:
			out = &c.Outputs[o]
		default:
			return nil, nil, m.wrongPort(r, info, i >= 0 || o >= 0)
		}
	}
	if info.Input && in == nil {
		if len(c.Inputs) != 1 {
			return nil, nil, m.whichPort(x, info, "input", m.inputNames())
		}
		in = &c.Inputs[0]
	}
	if info.Output && out == nil {
		if len(c.Outputs) != 1 {
			return nil, nil, m.whichPort(x, info, "output", m.outputNames())
		}
		out = &c.Outputs[0]
	}
	return in, out, m.suits(x, info, in, out)
}

// wrongPort says that a metric cannot use what it names.
func (m *measurer) wrongPort(r syntax.Ref, info *MetricInfo, isPort bool) bool {
	if m.unsure(r) {
		return false
	}
	if !isPort {
		return m.failHint(m.guess(r.String(), both(m.inputNames(), m.outputNames())), CodePort, r.Place(), "there is no port called %s", r)
	}
	var takes []string
	if info.Input {
		takes = append(takes, "one input")
	}
	if info.Output {
		takes = append(takes, "one output")
	}
	return m.fail(CodePort, r.Place(), "%s takes %s", info.Name, strings.Join(takes, " and "))
}

// whichPort says that a metric needs to name a port, or that there is none.
func (m *measurer) whichPort(x syntax.Expr, info *MetricInfo, kind string, ports iter.Seq[string]) bool {
	names := slices.Collect(ports)
	switch {
	case len(names) == 0 && m.program.unread:
		return false
	case len(names) == 0:
		return m.fail(CodePort, x.Place(), "%s needs an %s, and the file has none", info.Name, kind)
	}
	return m.failHint(fmt.Sprintf("%s(%s)", info.Name, names[0]), CodePort, x.Place(), "say which %s is meant: %s", kind, strings.Join(names, ", "))
}

// suits checks that ports are as a metric needs them.
func (m *measurer) suits(x syntax.Expr, info *MetricInfo, in *Input, out *Output) bool {
	switch {
	case info.Input && in.Open:
		return m.fail(CodePort, x.Place(), "%s drives the input %s, which is open in this bench", info.Name, in.Name)
	case info.Pair && len(in.Nodes) != 2:
		return m.fail(CodePort, x.Place(), "%s needs an input with two nodes; %s has one", info.Name, in.Name)
	case info.PairOutput && len(out.Nodes) != 2:
		return m.fail(CodePort, x.Place(), "%s needs an output with two nodes; %s has one", info.Name, out.Name)
	case info.Rest && len(out.Nodes) == 1 && !out.HasRest:
		return m.failHint(fmt.Sprintf("output %s = (...) rest 4.5V", out.Name), CodePort, x.Place(), "%s needs to know where the output %s is meant to be", info.Name, out.Name)
	}
	return true
}

// gain resolves gain(x, y).
func (m *measurer) gain(x *syntax.Call) (Quantity, bool) {
	if !m.counted(x, 2, 2) {
		return nil, false
	}
	r, ok := m.refOf(x.Args[0], "a source, a rail or a port's mode")
	if !ok {
		return nil, false
	}
	q := &Metric{Name: "gain"}
	from, ok := m.gainFrom(r, q)
	if !ok {
		return nil, false
	}
	inner := *m
	inner.band, inner.atRest = nil, true
	to, ok := inner.quantity(x.Args[1].Value)
	if !ok {
		return nil, false
	}
	switch to.(type) {
	case *Volts, *Amps:
	default:
		return nil, m.fail(CodeArguments, x.Args[1].Place(), "a gain ends at volts(...) or amps(...)")
	}
	q.To = to
	q.Info = m.info(x, to.Describe().Unit.Div(from))
	q.Complex = true
	return m.banded(x, q, &MetricInfo{Name: "gain", Needs: NeedsFrequency})
}

// gainFrom finds what a gain starts from and its dimension.
func (m *measurer) gainFrom(r syntax.Ref, q *Metric) (unit.Dimension, bool) {
	q.From = r.String()
	if _, ok := m.rail[q.From]; ok {
		return unit.Voltage, true
	}
	if i, ok := m.element[q.From]; ok {
		switch x := &m.circuit.Elements[i]; x.Kind {
		case KindVoltageSource:
			return unit.Voltage, true
		case KindCurrentSource:
			return unit.Current, true
		case "":
			return unit.Number, false
		}
		return unit.Number, m.fail(CodeArguments, r.Place(), "%s is no source; a gain starts at a source, a rail or a port's mode", r)
	}
	i := slices.IndexFunc(m.circuit.Inputs, func(in Input) bool { return in.Name == r.Names[0].Name })
	if i < 0 {
		if m.unsure(r) {
			return unit.Number, false
		}
		hint := m.guess(q.From, both(m.inputNames(), maps.Keys(m.rail)))
		return unit.Number, m.failHint(hint, CodeUnknown, r.Place(), "there is no source, rail or input called %s", r)
	}
	return m.gainFromInput(r, q, &m.circuit.Inputs[i])
}

func (m *measurer) gainFromInput(r syntax.Ref, q *Metric, in *Input) (unit.Dimension, bool) {
	modes := modesOf(in)
	switch {
	case in.Open:
		return unit.Number, m.fail(CodePort, r.Place(), "the input %s is open in this bench", in.Name)
	case len(r.Names) != 2 || !slices.Contains(modes, r.Names[1].Name):
		return unit.Number, m.fail(CodePort, r.Place(), "say the mode of %s: %s.%s", in.Name, in.Name, strings.Join(modes, " or "+in.Name+"."))
	}
	q.From, q.Mode = in.Name, r.Names[1].Name
	return drive(in.Current), true
}

// reduce resolves a reducer of a waveform.
func (m *measurer) reduce(x *syntax.Call, info *ReducerInfo) (Quantity, bool) {
	switch {
	case m.run == nil:
		return nil, m.fail(CodeNeedsRun, x.Place(), "%s measures a waveform; the bench needs a `run`", info.Name)
	case len(x.Args) == 0 || x.Args[0].Name != nil:
		return nil, m.fail(CodeArguments, x.Place(), "%s needs a waveform", info.Name)
	}
	q, ok := m.quantity(x.Args[0].Value)
	if !ok {
		return nil, false
	}
	if q.Describe().Shape != Waveform {
		return nil, m.fail(CodeArguments, x.Args[0].Place(), "%s measures a waveform; this is none", info.Name)
	}
	r := &Reduce{Info: m.info(x, info.unit(q.Describe().Unit)), Name: info.Name, X: q, Numbers: map[string]float64{}}
	given, ok := m.reducerArgs(x, info)
	for _, a := range info.Args {
		if y, is := given[a.Name]; is {
			ok = m.reducerNumber(y, a, q.Describe().Unit, r.Numbers) && ok
		}
	}
	return r, ok
}

// reducerArgs finds out which argument behind the waveform is which.
func (m *measurer) reducerArgs(x *syntax.Call, info *ReducerInfo) (given map[string]syntax.Expr, ok bool) {
	given, ok = map[string]syntax.Expr{}, true
	next := 0
	for _, a := range x.Args[1:] {
		i := next
		if a.Name != nil {
			i = slices.IndexFunc(info.Args, func(r ReducerArg) bool { return r.Name == a.Name.Name })
		} else {
			next++
		}
		switch {
		case i < 0:
			hint := m.guess(a.Name.Name, each(info.Args, func(r *ReducerArg) string { return r.Name }))
			ok = m.failHint(hint, CodeArguments, a.Name.Place(), "%s takes no argument called %s", info.Name, a.Name.Name)
		case i >= len(info.Args):
			ok = m.fail(CodeArguments, a.Place(), "%s takes no more arguments", info.Name)
		case a.Name == nil && info.Args[i].Named:
			ok = m.fail(CodeArguments, a.Place(), "this argument is written with its name: %s:", info.Args[i].Name)
		case given[info.Args[i].Name] != nil:
			ok = m.fail(CodeArguments, a.Place(), "%s is given twice", info.Args[i].Name)
		default:
			given[info.Args[i].Name] = a.Value
		}
	}
	for _, a := range info.Args {
		if ok && given[a.Name] == nil {
			ok = m.fail(CodeArguments, x.Place(), "%s needs its %s", info.Name, a.text())
		}
	}
	return given, ok
}

// text names an argument for a message.
func (a ReducerArg) text() string {
	if a.Named {
		return a.Name + ":"
	}
	return a.Name
}

// reducerNumber evaluates one argument of a reducer of a waveform in the unit d.
func (m *measurer) reducerNumber(x syntax.Expr, a ReducerArg, d unit.Dimension, into map[string]float64) bool {
	r, isRange := x.(*syntax.Range)
	switch {
	case isRange && a.Kind == ArgRange:
		return m.reducerRange(r, d, into)
	case a.Kind == ArgRange:
		return m.fail(CodeArguments, x.Place(), "the %s is written a..b", a.Name)
	case isRange:
		return m.fail(CodeArguments, x.Place(), "the %s is a single value", a.Name)
	}
	want := map[ArgKind]unit.Dimension{ArgTime: unit.Time, ArgFrequency: unit.Frequency, ArgLevel: d, ArgCount: unit.Number}[a.Kind]
	v, ok := m.wanted(m.scope, x, want, "the "+a.Name)
	into[a.Name] = v
	switch {
	case !ok:
	case (a.Kind == ArgFrequency || a.Kind == ArgLevel && a.Named) && !(v > 0):
		ok = m.fail(CodeRange, x.Place(), "the %s is positive", a.Name)
	case a.Kind == ArgCount && !(v >= 1 && v == math.Trunc(v) && v < 1<<31):
		ok = m.fail(CodeRange, x.Place(), "%s is a whole number from 1", a.Name)
	case a.Kind == ArgTime && m.run.Until > 0 && !(v >= m.run.From && v <= m.run.Until):
		ok = m.fail(CodeRange, x.Place(), "the window is from %s to %s", unit.Show(m.run.From, unit.Time), unit.Show(m.run.Until, unit.Time))
	}
	return ok
}

func (m *measurer) reducerRange(r *syntax.Range, d unit.Dimension, into map[string]float64) bool {
	low, ok1 := m.wanted(m.scope, r.Low, d, "the lower end")
	high, ok2 := m.wanted(m.scope, r.High, d, "the upper end")
	into["low"], into["high"] = low, high
	if ok1 && ok2 && !(low < high) {
		return m.fail(CodeEmptyRange, r.Place(), "the range is empty or reversed")
	}
	return ok1 && ok2
}
