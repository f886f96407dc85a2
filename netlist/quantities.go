package netlist

import (
	"fmt"
	"math"
	"slices"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// measurer turns expressions into quantities for one set-up.
type measurer struct {
	e     *elaborator
	scope *scope
	run   bool // elementary quantities are waveforms
	band  *Band
	// atRest is set within quiescent(...).
	atRest bool
}

// quantity resolves an expression in circuit quantities.
func (m *measurer) quantity(x syntax.Expr) (Quantity, bool) {
	if isPlain(x) {
		return m.constant(x)
	}
	switch x := x.(type) {
	case *syntax.Paren:
		return m.quantity(x.X)
	case *syntax.Unary:
		q, ok := m.quantity(x.X)
		if !ok {
			return nil, false
		}
		return m.apply("neg", x, q.Describe().Unit, q.Describe().Complex, q)
	case *syntax.Binary:
		return m.binary(x)
	case *syntax.Measure:
		return m.measure(x)
	case *syntax.Name:
		return m.name(x)
	case *syntax.Call:
		return m.call(x)
	}
	return nil, m.e.fail(CodeNotValue, x.Place(), "this is no quantity")
}

// isPlain reports whether an expression names no quantity of the circuit.
func isPlain(x syntax.Expr) bool {
	switch x := x.(type) {
	case *syntax.Number:
		return true
	case *syntax.Name:
		_, isMetric := metricInfo(x.String())
		return len(x.Names) == 1 && !isMetric && !slices.Contains(laterNames, x.String())
	case *syntax.Paren:
		return isPlain(x.X)
	case *syntax.Unary:
		return isPlain(x.X)
	case *syntax.Binary:
		return isPlain(x.X) && isPlain(x.Y)
	case *syntax.Call:
		if !isFunction(x.Func.String()) {
			return false
		}
		for _, a := range x.Args {
			if !isPlain(a.Value) {
				return false
			}
		}
		return true
	}
	return false
}

func (m *measurer) text(x syntax.Expr) string {
	at := x.Place()
	src := m.e.program.sources[at.File]
	if at.End.Offset > len(src) || at.Start.Offset > at.End.Offset {
		return ""
	}
	return syntax.Tidy(src[at.Start.Offset:at.End.Offset])
}

func (m *measurer) info(x syntax.Expr, d unit.Dimension) Info {
	return Info{Span: x.Place(), Text: m.text(x), Unit: d}
}

func (m *measurer) constant(x syntax.Expr) (Quantity, bool) {
	if n, ok := x.(*syntax.Name); ok && m.scope.find(n.String()) == nil {
		return nil, m.unknown(n.Ref)
	}
	v, ok := m.e.eval(m.scope, x)
	if !ok || !m.e.plain(v, x) {
		return nil, false
	}
	return &Constant{m.info(x, v.Dimension), v.SI}, true
}

func (m *measurer) unknown(r syntax.Ref) bool {
	name := r.String()
	d := m.e.diagnostic(CodeUnknown, r.Place(), fmt.Sprintf("there is no quantity called %s", name))
	if m.e.nodeKnown(name) {
		d.Hint = fmt.Sprintf("%s is a node; its voltage is volts(%s)", name, name)
	} else if _, ok := m.e.element[name]; ok {
		d.Hint = fmt.Sprintf("%s is a part; its current is amps(%s)", name, name)
	} else if near, ok := syntax.Nearest(name, append(quantityNames(), m.scope.names()...)); ok {
		d.Hint = "did you mean " + near + "?"
	}
	return m.e.add(d)
}

// shapeOf joins the shapes of quantities.
func (m *measurer) shapeOf(x syntax.Expr, qs ...Quantity) (Shape, bool) {
	shape := Scalar
	for _, q := range qs {
		s := q.Describe().Shape
		switch {
		case s == Word:
			return s, m.e.fail(CodeShapes, q.Describe().Span, "a word cannot be computed with")
		case s == Scalar:
		case shape == Scalar:
			shape = s
		case shape != s:
			return s, m.e.fail(CodeShapes, x.Place(), "a waveform and a curve over frequency do not go together")
		}
	}
	return shape, true
}

func (m *measurer) apply(op string, x syntax.Expr, d unit.Dimension, isComplex bool, qs ...Quantity) (Quantity, bool) {
	shape, ok := m.shapeOf(x, qs...)
	if !ok {
		return nil, false
	}
	info := m.info(x, d)
	info.Shape, info.Complex = shape, isComplex
	return &Apply{info, op, qs}, true
}

func (m *measurer) binary(x *syntax.Binary) (Quantity, bool) {
	a, ok1 := m.quantity(x.X)
	b, ok2 := m.quantity(x.Y)
	if !ok1 || !ok2 {
		return nil, false
	}
	da, db := a.Describe().Unit, b.Describe().Unit
	d := da
	switch x.Op {
	case "*":
		d = da.Mul(db)
	case "/":
		d = da.Div(db)
	case "^":
		k, isConstant := b.(*Constant)
		if !isConstant || db != unit.Number {
			return nil, m.e.fail(CodeDimension, x.Y.Place(), "an exponent is a plain number that is known beforehand")
		}
		var ok bool
		if d, ok = da.Pow(k.Value); !ok {
			return nil, m.e.fail(CodeDimension, x.OpAt, fmt.Sprintf("%s to the power %g has no unit", da.Noun(), k.Value))
		}
	default:
		if da != db {
			return nil, m.e.fail(CodeDimension, x.OpAt, fmt.Sprintf("`%s` between %s and %s", x.Op, da.Noun(), db.Noun()))
		}
	}
	isComplex := (a.Describe().Complex || b.Describe().Complex) && x.Op != "^"
	return m.apply(x.Op, x, d, isComplex, a, b)
}

// measure resolves quantity at F, or over F1..F2.
func (m *measurer) measure(x *syntax.Measure) (Quantity, bool) {
	if m.band != nil {
		return nil, m.e.fail(CodeNeedsBand, x.Place(), "the frequency is said twice")
	}
	band := &Band{}
	var ok bool
	if x.At != nil {
		if band.At, ok = m.frequency(x.At); !ok {
			return nil, false
		}
	} else {
		var ok2 bool
		band.Low, ok = m.frequency(x.Low)
		band.High, ok2 = m.frequency(x.High)
		if !ok || !ok2 {
			return nil, false
		}
		if !(band.Low < band.High) {
			return nil, m.e.fail(CodeEmptyRange, x.Low.Place(), "the range of frequencies is empty or reversed")
		}
		if x.PerDecade != nil && !m.perDecade(x.PerDecade, band) {
			return nil, false
		}
	}
	inner := *m
	inner.band = band
	q, ok := inner.quantity(x.X)
	if !ok {
		return nil, false
	}
	if !usesBand(q) {
		return nil, m.e.fail(CodeNeedsBand, x.Place(), fmt.Sprintf("%s does not depend on a frequency", m.text(x.X)))
	}
	return retext(q, m.info(x, q.Describe().Unit)), true
}

func (m *measurer) perDecade(x syntax.Expr, band *Band) bool {
	n, ok := m.e.wanted(m.scope, x, unit.Number, "the points a decade")
	const most = 10000
	if ok && !(n >= 1 && n == math.Trunc(n) && n <= most) {
		return m.e.fail(CodeRange, x.Place(), fmt.Sprintf("the points a decade are a whole number from 1 to %d", most))
	}
	band.PerDecade = int(n)
	return ok
}

func (m *measurer) frequency(x syntax.Expr) (float64, bool) {
	f, ok := m.e.wanted(m.scope, x, unit.Frequency, "the frequency")
	if ok && !(f > 0) {
		ok = m.e.fail(CodeRange, x.Place(), "a frequency is positive")
	}
	return f, ok
}

func usesBand(q Quantity) bool {
	switch q := q.(type) {
	case *Metric:
		return q.Band != Band{}
	case *Apply:
		return slices.ContainsFunc(q.X, usesBand)
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

// name resolves a metric without arguments, or an operating quantity.
func (m *measurer) name(x *syntax.Name) (Quantity, bool) {
	name := x.String()
	if slices.Contains(laterNames, name) {
		return nil, m.e.fail(CodeLater, x.Place(), name+" is not available in this version")
	}
	if info, ok := metricInfo(name); ok {
		return m.metric(x, info, nil)
	}
	if len(x.Names) < 2 {
		return nil, m.unknown(x.Ref)
	}
	last := x.Names[len(x.Names)-1]
	owner := syntax.Ref{Names: x.Names[:len(x.Names)-1]}.String()
	i, ok := m.e.element[owner]
	if !ok {
		at := x.Place()
		return nil, m.e.unknownElement(at, owner)
	}
	element := &m.e.circuit.Elements[i]
	family := m.e.program.family(element.Kind)
	if family == nil || element.Part == "" {
		return nil, m.e.fail(CodeUnknown, last.Place(), fmt.Sprintf("%s is a %s, which has no operating quantities; its current is amps(%s)", owner, element.Kind, owner))
	}
	var names []string
	for _, o := range family.Operating {
		if o.Name != last.Name {
			names = append(names, o.Name)
			continue
		}
		u, err := unit.ParseUnit(o.Unit)
		if err != nil {
			return nil, m.e.fail(CodeLiteral, last.Place(), err.Error())
		}
		info := m.info(x, u.Dimension)
		info.Shape = m.shape()
		if len(o.Words) > 0 {
			info.Shape = Word
		}
		return &Operating{info, owner, last.Name}, true
	}
	d := m.e.diagnostic(CodeUnknown, last.Place(), fmt.Sprintf("a %s has no operating quantity called %s", family.Name, last.Name))
	if near, found := syntax.Nearest(last.Name, names); found {
		d.Hint = "did you mean " + near + "?"
	}
	return nil, m.e.add(d)
}

// shape is that of elementary quantities here.
func (m *measurer) shape() Shape {
	if m.run && !m.atRest {
		return Waveform
	}
	return Scalar
}

func (m *measurer) call(x *syntax.Call) (Quantity, bool) {
	name := x.Func.String()
	switch name {
	case "volts":
		return m.volts(x)
	case "amps", "watts":
		return m.ampsOrWatts(x, name)
	case "quiescent":
		if !m.arguments(x, 1, 1) {
			return nil, false
		}
		inner := *m
		inner.atRest = true
		q, ok := inner.quantity(x.Args[0].Value)
		if !ok {
			return nil, false
		}
		info := m.info(x, q.Describe().Unit)
		info.Shape, info.Complex = q.Describe().Shape, q.Describe().Complex
		return &Quiescent{info, q}, true
	case "gain":
		return m.gain(x)
	case "real", "imag", "abs", "phase":
		return m.part(x, name)
	case "min", "max", "sqrt", "exp", "ln", "log10", "tanh", "sin", "cos", "atan":
		return m.function(x, name)
	}
	if slices.Contains(laterNames, name) {
		return nil, m.e.fail(CodeLater, x.Func.Place(), name+" is not available in this version")
	}
	if info, ok := metricInfo(name); ok {
		return m.metric(x, info, x.Args)
	}
	if info, ok := reducerInfo(name); ok {
		return m.reduce(x, info)
	}
	return nil, m.unknown(x.Func)
}

// arguments checks the number of unnamed arguments.
func (m *measurer) arguments(x *syntax.Call, least, most int) bool {
	for _, a := range x.Args {
		if a.Name != nil {
			return m.e.fail(CodeArguments, a.Place(), fmt.Sprintf("%s takes no argument called %s", x.Func.String(), a.Name.Name))
		}
	}
	if n := len(x.Args); n < least || n > most {
		want := fmt.Sprint(least)
		if most > least {
			want = fmt.Sprintf("%d to %d", least, most)
		}
		return m.e.fail(CodeArguments, x.Place(), fmt.Sprintf("%s takes %s arguments, not %d", x.Func.String(), want, n))
	}
	return true
}

// refOf reads an argument that is a name of the circuit.
func (m *measurer) refOf(a syntax.Arg, what string) (syntax.Ref, bool) {
	n, ok := a.Value.(*syntax.Name)
	if !ok {
		return syntax.Ref{}, m.e.fail(CodeArguments, a.Place(), "want the name of "+what)
	}
	return n.Ref, true
}

func (m *measurer) node(a syntax.Arg) (string, bool) {
	r, ok := m.refOf(a, "a node")
	if !ok {
		return "", false
	}
	i, known := m.e.nodes[r.String()]
	if !known {
		return "", m.e.unknownNode(r.Place(), r.String())
	}
	return m.e.circuit.Nodes[i], true
}

func (m *measurer) volts(x *syntax.Call) (Quantity, bool) {
	if !m.arguments(x, 1, 2) {
		return nil, false
	}
	q := &Volts{Info: m.info(x, unit.Voltage), Minus: "gnd"}
	q.Shape = m.shape()
	var ok bool
	if q.Plus, ok = m.node(x.Args[0]); !ok {
		return nil, false
	}
	if len(x.Args) == 2 {
		if q.Minus, ok = m.node(x.Args[1]); !ok {
			return nil, false
		}
	}
	return q, true
}

func (m *measurer) ampsOrWatts(x *syntax.Call, name string) (Quantity, bool) {
	if !m.arguments(x, 1, 1) {
		return nil, false
	}
	r, ok := m.refOf(x.Args[0], "a part")
	if !ok {
		return nil, false
	}
	if name == "watts" {
		if _, known := m.e.element[r.String()]; !known {
			return nil, m.e.unknownElement(r.Place(), r.String())
		}
		q := &Watts{Info: m.info(x, unit.Power), Element: r.String()}
		q.Shape = m.shape()
		return q, true
	}
	q := &Amps{Info: m.info(x, unit.Current), Element: r.String()}
	q.Shape = m.shape()
	if _, isRail := m.e.rail[r.String()]; isRail {
		q.Rail = true
		return q, true
	}
	if i, known := m.e.element[r.String()]; known {
		if e := &m.e.circuit.Elements[i]; !e.Path {
			return nil, m.e.fail(CodePin, r.Place(), fmt.Sprintf("%s has the pins %s: say which, as in amps(%s.%s)", r, pinNames(e.Pins), r, e.Pins[0]))
		}
		return q, true
	}
	return m.pinCurrent(q, r)
}

func pinNames(pins []string) string {
	s := ""
	for i, p := range pins {
		if i > 0 {
			s += ", "
		}
		s += p
	}
	return s
}

// pinCurrent resolves amps(Q1.c).
func (m *measurer) pinCurrent(q *Amps, r syntax.Ref) (Quantity, bool) {
	n := len(r.Names)
	owner := syntax.Ref{Names: r.Names[:n-1]}.String()
	i, known := m.e.element[owner]
	if !known {
		return nil, m.e.unknownElement(r.Place(), r.String())
	}
	e := &m.e.circuit.Elements[i]
	if !slices.Contains(e.Pins, r.Names[n-1].Name) || e.Part == "" {
		return nil, m.e.fail(CodePin, r.Names[n-1].Place(), fmt.Sprintf("%s has no pin called %s; its pins are %s", owner, r.Names[n-1].Name, pinNames(e.Pins)))
	}
	q.Element, q.Pin = owner, r.Names[n-1].Name
	return q, true
}

func (m *measurer) part(x *syntax.Call, name string) (Quantity, bool) {
	if !m.arguments(x, 1, 1) {
		return nil, false
	}
	q, ok := m.quantity(x.Args[0].Value)
	if !ok {
		return nil, false
	}
	d := q.Describe().Unit
	if name == "phase" {
		d = unit.Number
	}
	return m.apply(name, x, d, false, q)
}

func (m *measurer) function(x *syntax.Call, name string) (Quantity, bool) {
	most := 1
	if name == "min" || name == "max" {
		most = 100
	}
	if !m.arguments(x, 1, most) {
		return nil, false
	}
	var qs []Quantity
	for _, a := range x.Args {
		q, ok := m.quantity(a.Value)
		if !ok {
			return nil, false
		}
		if len(qs) > 0 && q.Describe().Unit != qs[0].Describe().Unit {
			return nil, m.e.fail(CodeDimension, a.Place(), fmt.Sprintf("%s between %s and %s", name, qs[0].Describe().Unit.Noun(), q.Describe().Unit.Noun()))
		}
		qs = append(qs, q)
	}
	d := qs[0].Describe().Unit
	if name == "sqrt" {
		var ok bool
		if d, ok = d.Sqrt(); !ok {
			return nil, m.e.fail(CodeDimension, x.Place(), "the square root of "+qs[0].Describe().Unit.Noun()+" has no unit")
		}
	} else if _, isMath := mathFunctions[name]; isMath && d != unit.Number {
		return nil, m.e.fail(CodeDimension, x.Args[0].Place(), fmt.Sprintf("%s of %s; a plain number is wanted", name, d.Noun()))
	}
	return m.apply(name, x, d, false, qs...)
}

// reduce resolves a reducer of a waveform.
func (m *measurer) reduce(x *syntax.Call, info ReducerInfo) (Quantity, bool) {
	if !m.run {
		return nil, m.e.fail(CodeNeedsRun, x.Place(), fmt.Sprintf("%s measures a waveform; the bench needs a `run`", info.Name))
	}
	if len(x.Args) == 0 {
		return nil, m.e.fail(CodeArguments, x.Place(), info.Name+" needs a waveform")
	}
	q, ok := m.quantity(x.Args[0].Value)
	if !ok {
		return nil, false
	}
	if q.Describe().Shape != Waveform {
		return nil, m.e.fail(CodeArguments, x.Args[0].Place(), info.Name+" measures a waveform; this is none")
	}
	r := &Reduce{Info: m.info(x, info.unit(q.Describe().Unit)), Name: info.Name, X: q, Numbers: map[string]float64{}}
	rest := x.Args[1:]
	for i, a := range info.Args {
		at := slices.IndexFunc(rest, func(g syntax.Arg) bool { return g.Name != nil && g.Name.Name == a.Name })
		if at < 0 && i < len(rest) && rest[i].Name == nil && !a.Named {
			at = i
		}
		if at < 0 {
			how := a.Name
			if a.Named {
				how += ": (with its name)"
			}
			return nil, m.e.fail(CodeArguments, x.Place(), fmt.Sprintf("%s needs its %s", info.Name, how))
		}
		if !m.reducerNumber(rest[at].Value, a, q.Describe().Unit, r.Numbers) {
			return nil, false
		}
	}
	if len(rest) > len(info.Args) {
		return nil, m.e.fail(CodeArguments, rest[len(info.Args)].Place(), info.Name+" takes no more arguments")
	}
	return r, true
}

func (m *measurer) reducerNumber(x syntax.Expr, a ReducerArg, d unit.Dimension, into map[string]float64) bool {
	if r, isRange := x.(*syntax.Range); isRange != (a.Kind == ArgRange) {
		return m.e.fail(CodeArguments, x.Place(), fmt.Sprintf("the %s is a range a..b: %t", a.Name, a.Kind == ArgRange))
	} else if isRange {
		low, ok1 := m.e.wanted(m.scope, r.Low, d, "the lower end")
		high, ok2 := m.e.wanted(m.scope, r.High, d, "the upper end")
		into["low"], into["high"] = low, high
		if ok1 && ok2 && !(low <= high) {
			return m.e.fail(CodeEmptyRange, x.Place(), "the range is reversed")
		}
		return ok1 && ok2
	}
	want := map[ArgKind]unit.Dimension{ArgTime: unit.Time, ArgFrequency: unit.Frequency, ArgLevel: d, ArgCount: unit.Number}[a.Kind]
	v, ok := m.e.wanted(m.scope, x, want, "the "+a.Name)
	if !ok {
		return false
	}
	switch {
	case a.Kind == ArgFrequency && !(v > 0), a.Kind == ArgLevel && a.Named && !(v > 0):
		return m.e.fail(CodeRange, x.Place(), fmt.Sprintf("the %s is positive", a.Name))
	case a.Kind == ArgCount && !(v >= 1 && v == math.Trunc(v) && v < 1<<31):
		return m.e.fail(CodeRange, x.Place(), fmt.Sprintf("%s is a whole number from 1", a.Name))
	}
	into[a.Name] = v
	return true
}

// metric resolves a metric with its ports or rail.
func (m *measurer) metric(x syntax.Expr, info MetricInfo, args []syntax.Arg) (Quantity, bool) {
	q := &Metric{Name: info.Name}
	var names []syntax.Ref
	for _, a := range args {
		if a.Name != nil {
			return nil, m.e.fail(CodeArguments, a.Place(), fmt.Sprintf("%s takes no argument called %s", info.Name, a.Name.Name))
		}
		r, ok := m.refOf(a, "a port")
		if !ok {
			return nil, false
		}
		names = append(names, r)
	}
	if info.Rail {
		if len(names) == 0 {
			return nil, m.e.fail(CodeArguments, x.Place(), info.Name+" needs a rail, as in psrr(vp)")
		}
		if _, ok := m.e.rail[names[0].String()]; !ok {
			return nil, m.e.fail(CodeUnknown, names[0].Place(), fmt.Sprintf("there is no rail called %s", names[0]))
		}
		q.Rail, names = names[0].String(), names[1:]
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

// banded gives a metric its frequency or range.
func (m *measurer) banded(x syntax.Expr, q *Metric, info MetricInfo) (Quantity, bool) {
	switch {
	case m.band != nil && info.Needs == NeedsFrequency:
		q.Band = *m.band
		if m.band.High > 0 {
			q.Shape = Curve
		}
	case m.band != nil && info.Needs == MayHaveRange:
		if m.band.At > 0 {
			return nil, m.e.fail(CodeNeedsBand, x.Place(), info.Name+" is searched over a range, not at one frequency")
		}
		q.Band = *m.band
	case m.band == nil && info.Needs == NeedsFrequency:
		d := m.e.diagnostic(CodeNeedsBand, x.Place(), info.Name+" needs a frequency")
		d.Hint = fmt.Sprintf("write `%s at 50Hz` or `%s over 10Hz..10kHz`", q.Text, q.Text)
		return nil, m.e.add(d)
	}
	return q, true
}

// portsOf finds the input and output of a metric: those it names, or the only ones.
func (m *measurer) portsOf(x syntax.Expr, info MetricInfo, names []syntax.Ref) (in *Input, out *Output, ok bool) {
	c := m.e.circuit
	for _, r := range names {
		i := slices.IndexFunc(c.Inputs, func(p Input) bool { return p.Name == r.String() })
		o := slices.IndexFunc(c.Outputs, func(p Output) bool { return p.Name == r.String() })
		switch {
		case i >= 0 && info.Input && in == nil:
			in = &c.Inputs[i]
		case o >= 0 && info.Output && out == nil:
			out = &c.Outputs[o]
		default:
			return nil, nil, m.e.fail(CodePort, r.Place(), fmt.Sprintf("%s is no port that %s can use here", r, info.Name))
		}
	}
	if info.Input && in == nil {
		if len(c.Inputs) != 1 {
			return nil, nil, m.e.fail(CodePort, x.Place(), portTrouble(info.Name, "input", len(c.Inputs)))
		}
		in = &c.Inputs[0]
	}
	if info.Output && out == nil {
		if len(c.Outputs) != 1 {
			return nil, nil, m.e.fail(CodePort, x.Place(), portTrouble(info.Name, "output", len(c.Outputs)))
		}
		out = &c.Outputs[0]
	}
	if info.Pair && len(in.Nodes) != 2 {
		return nil, nil, m.e.fail(CodePort, x.Place(), fmt.Sprintf("%s needs an input with two nodes; %s has one", info.Name, in.Name))
	}
	if info.PairOutput && len(out.Nodes) != 2 {
		return nil, nil, m.e.fail(CodePort, x.Place(), fmt.Sprintf("%s needs an output with two nodes; %s has one", info.Name, out.Name))
	}
	return in, out, true
}

func portTrouble(metric, kind string, n int) string {
	if n == 0 {
		return fmt.Sprintf("%s needs an %s, and the file has none", metric, kind)
	}
	return fmt.Sprintf("the file has %d %ss: say which, as in %s(in, out)", n, kind, metric)
}

// gain resolves gain(x, y).
func (m *measurer) gain(x *syntax.Call) (Quantity, bool) {
	if !m.arguments(x, 2, 2) {
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
	inner.band, inner.run = nil, false
	to, ok := inner.quantity(x.Args[1].Value)
	if !ok {
		return nil, false
	}
	switch to.(type) {
	case *Volts, *Amps:
	default:
		return nil, m.e.fail(CodeArguments, x.Args[1].Place(), "a gain ends at volts(...) or amps(...)")
	}
	q.To = to
	q.Info = m.info(x, to.Describe().Unit.Div(from))
	q.Complex = true
	return m.banded(x, q, MetricInfo{Name: "gain", Needs: NeedsFrequency})
}

// gainFrom finds what a gain starts from and its dimension.
func (m *measurer) gainFrom(r syntax.Ref, q *Metric) (unit.Dimension, bool) {
	name := r.String()
	if _, ok := m.e.rail[name]; ok {
		q.From = name
		return unit.Voltage, true
	}
	if i, ok := m.e.element[name]; ok {
		q.From = name
		switch m.e.circuit.Elements[i].Kind {
		case KindVoltageSource:
			return unit.Voltage, true
		case KindCurrentSource:
			return unit.Current, true
		}
		return unit.Number, m.e.fail(CodeArguments, r.Place(), fmt.Sprintf("%s is no source; a gain starts at a source, a rail or a port's mode", name))
	}
	n := len(r.Names)
	for i := range m.e.circuit.Inputs {
		in := &m.e.circuit.Inputs[i]
		if in.Name == r.Names[0].Name && n == 2 && slices.Contains(modesOf(in), r.Names[1].Name) {
			q.From, q.Mode = in.Name, r.Names[1].Name
			return drive(in.Current), true
		}
		if in.Name == r.Names[0].Name {
			return unit.Number, m.e.fail(CodePort, r.Place(), fmt.Sprintf("say the mode of %s: %s", in.Name, pinNames(modesOf(in))))
		}
	}
	return unit.Number, m.e.fail(CodeUnknown, r.Place(), fmt.Sprintf("there is no source, rail or port called %s", name))
}

// modesOf lists the modes of an input.
func modesOf(in *Input) []string {
	if len(in.Nodes) == 1 {
		return []string{"signal"}
	}
	return []string{"differential", "common"}
}
