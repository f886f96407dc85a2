package netlist

import (
	"maps"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// measurer turns expressions into quantities for one set-up.
type measurer struct {
	*elaborator
	scope  *scope
	run    *Run  // with one, elementary quantities are waveforms
	band   *Band // of at or over, around what is resolved
	atRest bool  // within quiescent(...)
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
		return m.combineQuantities(x)
	case *syntax.Measure:
		return m.measure(x)
	case *syntax.Name:
		return m.name(x)
	case *syntax.Call:
		return m.quantityCall(x)
	case nil:
		return nil, false // a statement that could not be read
	}
	return nil, m.fail(CodeNotValue, x.Place(), "this is no quantity")
}

// isPlain reports whether an expression names no quantity of the circuit.
func isPlain(x syntax.Expr) bool {
	switch x := x.(type) {
	case *syntax.Number:
		return true
	case *syntax.Name:
		_, isMetric := metrics()[x.String()]
		return len(x.Names) == 1 && !isMetric && !slices.Contains(laterQuantities(), x.String())
	case *syntax.Paren:
		return isPlain(x.X)
	case *syntax.Unary:
		return isPlain(x.X)
	case *syntax.Binary:
		return isPlain(x.X) && isPlain(x.Y)
	case *syntax.Call:
		_, isFunction := functions()[x.Func.String()]
		return isFunction && !slices.ContainsFunc(x.Args, func(a syntax.Arg) bool { return !isPlain(a.Value) })
	}
	return false
}

// textOf returns what is written at a place, formatted.
func (m *measurer) textOf(at syntax.Span) string {
	if text, known := m.program.texts[at]; known {
		return text
	}
	src := m.sources[at.File]
	if at.End.Offset > len(src) || at.Start.Offset > at.End.Offset {
		return ""
	}
	text := syntax.Tidy(src[at.Start.Offset:at.End.Offset])
	if m.learning {
		m.program.texts[at] = text
	}
	return text
}

func (m *measurer) info(x syntax.Expr, d unit.Dimension) Info {
	return Info{Span: x.Place(), Text: m.textOf(x.Place()), Unit: d}
}

func (m *measurer) constant(x syntax.Expr) (Quantity, bool) {
	if n, ok := x.(*syntax.Name); ok && m.scope.find(n.String()) == nil {
		return nil, m.unknown(n.Ref)
	}
	v, ok := m.single(m.scope, x)
	if !ok {
		return nil, false
	}
	return &Constant{m.info(x, v.Dimension), v.SI}, true
}

// unknown says that there is no quantity of a name.
func (m *measurer) unknown(r syntax.Ref) bool {
	name := r.String()
	if m.unsure(r) || m.isLost(name) {
		return false
	}
	_, isNode := m.nodes[name]
	_, isElement := m.element[name]
	_, isRail := m.rail[name]
	hint := ""
	switch {
	case isRail:
		hint = "its voltage is volts(" + name + "), what it delivers amps(" + name + ")"
	case isNode:
		hint = "the voltage of the node is volts(" + name + ")"
	case isElement:
		hint = "the current of the part is amps(" + name + ")"
	default:
		hint = m.guess(name, both(slices.Values(quantityNames()), m.scope.names()))
	}
	return m.failHint(hint, CodeUnknown, r.Place(), "there is no quantity called %s", name)
}

// apply combines quantities.
func (m *measurer) apply(op string, x syntax.Expr, d unit.Dimension, isComplex bool, qs ...Quantity) (Quantity, bool) {
	shape, ok := m.shapeOf(x, qs...)
	if !ok {
		return nil, false
	}
	info := m.info(x, d)
	info.Shape, info.Complex = shape, isComplex
	return &Apply{info, op, qs}, true
}

// shapeOf joins the shapes of quantities.
func (m *measurer) shapeOf(x syntax.Expr, qs ...Quantity) (Shape, bool) {
	shape := Scalar
	for _, q := range qs {
		s := q.Describe().Shape
		switch {
		case s == Word:
			return s, m.fail(CodeShapes, q.Describe().Span, "a word cannot be computed with")
		case s == Scalar:
		case shape == Scalar:
			shape = s
		case shape != s:
			return s, m.fail(CodeShapes, x.Place(), "a waveform and a curve over frequency do not go together")
		}
	}
	return shape, true
}

// combineQuantities resolves x op y.
func (m *measurer) combineQuantities(x *syntax.Binary) (Quantity, bool) {
	a, ok1 := m.quantity(x.X)
	b, ok2 := m.quantity(x.Y)
	if !ok1 || !ok2 {
		return nil, false
	}
	d, ok := m.resultOf(x, a, b)
	if !ok {
		return nil, false
	}
	isComplex := (a.Describe().Complex || b.Describe().Complex) && x.Op != "^"
	return m.apply(x.Op, x, d, isComplex, a, b)
}

// resultOf returns the dimension of x op y.
func (m *measurer) resultOf(x *syntax.Binary, a, b Quantity) (d unit.Dimension, ok bool) {
	da, db := a.Describe().Unit, b.Describe().Unit
	switch x.Op {
	case "*":
		return da.Mul(db), true
	case "/":
		return da.Div(db), true
	case "^":
		k, isConstant := b.(*Constant)
		if !isConstant || db != unit.Number {
			return d, m.fail(CodeDimension, x.Y.Place(), "an exponent is a plain number that is known beforehand")
		}
		if d, ok = da.Pow(k.Value); !ok {
			return d, m.fail(CodeDimension, x.OpAt, "%s to the power %s has no unit", da.Noun(), unit.Trim(k.Value, unit.ShownDigits))
		}
		return d, true
	}
	if da != db {
		return d, m.fail(CodeDimension, x.OpAt, "`%s` between %s and %s", x.Op, da.Noun(), db.Noun())
	}
	return da, true
}

// name resolves a metric without arguments, or an operating quantity.
func (m *measurer) name(x *syntax.Name) (Quantity, bool) {
	name := x.String()
	if slices.Contains(laterQuantities(), name) {
		return nil, m.later(x.Place(), name)
	}
	if info, ok := metrics()[name]; ok {
		return m.metric(x, info, nil)
	}
	if len(x.Names) < 2 {
		return nil, m.unknown(x.Ref)
	}
	owner := syntax.Ref{Span: x.Span, Names: x.Names[:len(x.Names)-1]}
	i, ok := m.element[owner.String()]
	switch {
	case !ok:
		return nil, m.unknownElement(owner, owner.String())
	case m.circuit.Elements[i].Kind == "":
		return nil, false
	}
	return m.operating(x, &m.circuit.Elements[i], x.Names[len(x.Names)-1])
}

// operating resolves Q1.gm.
func (m *measurer) operating(x *syntax.Name, e *Element, last syntax.Ident) (Quantity, bool) {
	if e.Part == "" {
		return nil, m.fail(CodeUnknown, last.Place(), "%s is a %s, which has no operating quantities; its current is amps(%s)", e.Name, e.Kind, e.Name)
	}
	family := m.program.family(e.Kind)
	i := slices.IndexFunc(family.Operating, func(o devices.OperatingQuantity) bool { return o.Name == last.Name })
	if i < 0 {
		hint := m.guess(last.Name, each(family.Operating, func(o *devices.OperatingQuantity) string { return o.Name }))
		if slices.Contains(e.Pins, last.Name) {
			hint = "the current into its pin is amps(" + e.Name + "." + last.Name + ")"
		}
		return nil, m.failHint(hint, CodeUnknown, last.Place(), "a part of the family %s has no operating quantity called %s", family.Name, last.Name)
	}
	o := family.Operating[i]
	d, err := dimensionOf(o.Unit)
	if err != nil {
		return nil, m.fail(CodeLiteral, last.Place(), "the family %s gives %s an unknown unit: %s", family.Name, o.Name, err)
	}
	info := m.info(x, d)
	if info.Shape = m.shape(); len(o.Words) > 0 {
		info.Shape = Word
	}
	return &Operating{info, e.Name, last.Name}, true
}

// shape is that of elementary quantities here.
func (m *measurer) shape() Shape {
	if m.run != nil && !m.atRest {
		return Waveform
	}
	return Scalar
}

// quantityCall resolves f(...).
func (m *measurer) quantityCall(x *syntax.Call) (Quantity, bool) {
	name := x.Func.String()
	switch name {
	case "volts":
		return m.volts(x)
	case "amps":
		return m.amps(x)
	case "watts":
		return m.watts(x)
	case "quiescent":
		return m.quiescent(x)
	case "gain":
		return m.gain(x)
	case "real", "imag", "abs", "phase":
		return m.complexPart(x, name)
	}
	if slices.Contains(laterQuantities(), name) {
		return nil, m.later(x.Func.Place(), name)
	}
	if info, ok := metrics()[name]; ok {
		return m.metric(x, info, x.Args)
	}
	if info, ok := reducers()[name]; ok {
		return m.reduce(x, info)
	}
	if f, ok := functions()[name]; ok {
		return m.function(x, name, f)
	}
	return nil, m.unknown(x.Func)
}

// refOf reads an argument that is a name of the circuit.
func (m *measurer) refOf(a syntax.Arg, what string) (syntax.Ref, bool) {
	if n, ok := a.Value.(*syntax.Name); ok {
		return n.Ref, true
	}
	return syntax.Ref{}, m.fail(CodeArguments, a.Place(), "want the name of %s", what)
}

func (m *measurer) node(a syntax.Arg) (string, bool) {
	r, ok := m.refOf(a, "a node")
	if !ok {
		return "", false
	}
	i, known := m.lookUp(r.String())
	if !known {
		return "", m.unknownNode(r, r.String())
	}
	return m.circuit.Nodes[i], true
}

func (m *measurer) volts(x *syntax.Call) (Quantity, bool) {
	if !m.counted(x, 1, 2) {
		return nil, false
	}
	q := &Volts{Info: m.info(x, unit.Voltage), Minus: "gnd"}
	q.Shape = m.shape()
	var ok bool
	q.Plus, ok = m.node(x.Args[0])
	if len(x.Args) == 2 {
		var ok2 bool
		q.Minus, ok2 = m.node(x.Args[1])
		ok = ok && ok2
	}
	return q, ok
}

// amps resolves amps(part), amps(rail) and amps(Q1.c).
func (m *measurer) amps(x *syntax.Call) (Quantity, bool) {
	if !m.counted(x, 1, 1) {
		return nil, false
	}
	r, ok := m.refOf(x.Args[0], "a part")
	if !ok {
		return nil, false
	}
	q := &Amps{Info: m.info(x, unit.Current), Element: r.String()}
	q.Shape = m.shape()
	if _, q.Rail = m.rail[q.Element]; q.Rail {
		return q, true
	}
	i, known := m.element[q.Element]
	if !known {
		return m.pinCurrent(q, r)
	}
	if e := &m.circuit.Elements[i]; !e.Path && e.Kind != "" {
		return nil, m.fail(CodePin, r.Place(), "%s has the pins %s: say which, as in amps(%s.%s)", r, strings.Join(e.Pins, ", "), r, e.Pins[0])
	}
	return q, true
}

// pinCurrent resolves amps(Q1.c).
func (m *measurer) pinCurrent(q *Amps, r syntax.Ref) (Quantity, bool) {
	n := len(r.Names)
	owner := syntax.Ref{Names: r.Names[:n-1]}.String()
	i, known := m.element[owner]
	if !known || n < 2 {
		return nil, m.unknownElement(r, r.String())
	}
	e, pin := &m.circuit.Elements[i], r.Names[n-1]
	switch {
	case e.Kind == "":
		return nil, false
	case e.Part == "":
		return nil, m.failHint("amps("+owner+")", CodePin, pin.Place(), "%s has two ends and no pins", owner)
	case !slices.Contains(e.Pins, pin.Name):
		return nil, m.failHint("its pins are "+strings.Join(e.Pins, ", "), CodePin, pin.Place(), "%s has no pin called %s", owner, pin.Name)
	}
	q.Element, q.Pin = owner, pin.Name
	return q, true
}

// watts resolves watts(part).
func (m *measurer) watts(x *syntax.Call) (Quantity, bool) {
	if !m.counted(x, 1, 1) {
		return nil, false
	}
	r, ok := m.refOf(x.Args[0], "a part")
	if !ok {
		return nil, false
	}
	if _, known := m.element[r.String()]; !known {
		return nil, m.unknownElement(r, r.String())
	}
	q := &Watts{Info: m.info(x, unit.Power), Element: r.String()}
	q.Shape = m.shape()
	return q, true
}

// quiescent resolves quiescent(x): x without the run.
func (m *measurer) quiescent(x *syntax.Call) (Quantity, bool) {
	if !m.counted(x, 1, 1) {
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
}

// complexPart resolves real, imag, abs and phase.
func (m *measurer) complexPart(x *syntax.Call, name string) (Quantity, bool) {
	if !m.counted(x, 1, 1) {
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

// function resolves a function of values, computed point by point.
func (m *measurer) function(x *syntax.Call, name string, f function) (Quantity, bool) {
	if !m.counted(x, 1, f.most) {
		return nil, false
	}
	if strings.HasPrefix(name, "e") && name != "exp" {
		return nil, m.fail(CodeNotValue, x.Place(), "%s rounds a value that is known beforehand, not a quantity of the circuit", name)
	}
	var qs []Quantity
	for _, a := range x.Args {
		q, ok := m.quantity(a.Value)
		if !ok {
			return nil, false
		}
		if d := q.Describe().Unit; len(qs) > 0 && d != qs[0].Describe().Unit {
			return nil, m.fail(CodeDimension, a.Place(), "%s between %s and %s", name, qs[0].Describe().Unit.Noun(), d.Noun())
		}
		qs = append(qs, q)
	}
	d, ok := f.dimension(qs[0].Describe().Unit)
	if !ok {
		return nil, m.fail(CodeDimension, x.Args[0].Place(), "%s", noResult(name, qs[0].Describe().Unit))
	}
	return m.apply(name, x, d, false, qs...)
}

// laterQuantities are quantities of the language that this version does not compute.
func laterQuantities() []string {
	return []string{"noise_out", "noise_in", "noise_out_rms", "noise_in_rms", "noise_figure", "thd", "imd", "rectified"}
}

// elementary are the quantities that are neither metrics nor reducers.
func elementary() []string {
	return []string{"volts", "amps", "watts", "quiescent", "gain", "real", "imag", "abs", "phase"}
}

// quantityNames lists what a quantity may begin with, for suggestions.
func quantityNames() []string {
	return slices.Concat(elementary(), slices.Collect(maps.Keys(metrics())), slices.Collect(maps.Keys(reducers())), laterQuantities())
}

// isQuantityName reports whether a name begins a quantity of the circuit, and not a value.
func isQuantityName(name string) bool {
	return name != "abs" && slices.Contains(quantityNames(), name)
}
