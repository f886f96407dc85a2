package netlist

import (
	"math"
	"slices"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// path elaborates node -- part -- node ...
func (e *elaborator) path(f *frame, p *syntax.Path) {
	if len(p.Elements) == 0 || p.Elements[0].Node == nil {
		return // the parser has reported it
	}
	left := e.node(f, *p.Elements[0].Node)
	for i := 1; i+1 < len(p.Elements); i += 2 {
		right := e.node(f, *p.Elements[i+1].Node)
		e.pathPart(f, &p.Elements[i], left, right)
		left = right
	}
}

var pathPins = []string{"left", "right"}

// pathPart makes the device of a part between two nodes.
func (e *elaborator) pathPart(f *frame, p *syntax.Element, left, right int) {
	x := Element{Name: f.prefix + p.Name.Name, Pins: pathPins, Nodes: []int{left, right}, Span: p.Span, Path: true}
	e.degree[left]++
	e.degree[right]++
	if !e.roomFor(p.Name.Place()) {
		return
	}
	if !e.claimElement(x.Name, p.Name.Place()) {
		e.suspect(left, right)
		return
	}
	if left == right {
		e.warn(CodeShort, p.Name.Place(), "both ends of %s are at the node %s", x.Name, e.circuit.Nodes[left])
	}
	if decl, home := e.partNamed(f, p.Value); decl != nil {
		e.pathInstance(f, p, &x, decl, home)
	} else {
		e.pathDevice(f, p, &x)
	}
	e.push(x)
}

// partNamed returns the part that a value names; a let that is nearer goes before it.
func (e *elaborator) partNamed(f *frame, x syntax.Expr) (*syntax.PartDecl, *frame) {
	n, ok := x.(*syntax.Name)
	if !ok || len(n.Names) != 1 {
		return nil, nil
	}
	name := n.Names[0].Name
	decl, home := f.part(name)
	if _, local := f.scope.lets[name]; local && home != f {
		return nil, nil
	}
	return decl, home
}

// pathDevice makes the part that the value of a path part stands for.
func (e *elaborator) pathDevice(f *frame, p *syntax.Element, x *Element) {
	w, ok := e.pathValue(f, p, x.Name)
	if !ok {
		return
	}
	if v, is := e.changed(x.Name, w.dimension); is {
		w = signal{devices.Constant(v.SI), w.dimension}
	}
	v := w.signal.At(0)
	switch w.dimension {
	case unit.Resistance, unit.Conductance:
		e.resistor(f, p, x, v, w.dimension)
	case unit.Capacitance:
		e.capacitor(f, p, x, v)
	case unit.Inductance:
		e.inductor(f, p, x, v)
	case unit.Voltage:
		if _, ok := e.modifiers(f.scope, p.Modifiers, "a voltage source", "tol", "sigma"); ok {
			x.Kind, x.Signal, x.Value, x.Device = KindVoltageSource, w.signal, v, devices.NewVoltageSource(w.signal)
		}
	case unit.Current:
		if e.noTolerance(p, x.Name) {
			x.Kind, x.Signal, x.Value, x.Device = KindCurrentSource, w.signal, v, devices.NewCurrentSource(w.signal)
		}
	default:
		e.fail(CodeDimension, p.Value.Place(), "the value of %s is %s; a part in a path is in ohm, S, F, H, V or A, or is a part with two pins", x.Name, w.dimension.Noun())
	}
}

// pathValue evaluates the value of a path part.
func (e *elaborator) pathValue(f *frame, p *syntax.Element, full string) (w signal, ok bool) {
	if n, is := p.Value.(*syntax.Name); is && len(n.Names) == 1 && f.scope.find(n.Names[0].Name) == nil {
		if name := n.Names[0].Name; e.program.family(name) != nil {
			return w, e.failHint("part NAME = "+name+" { ... }", CodeFamily, n.Place(), "%s is a family; a part of it is declared first", name)
		} else if e.program.blocks[name] != nil {
			return w, e.failHint(full+" = "+name+"(pin: node, ...)", CodeFamily, n.Place(), "%s is a block; in a path stands a part with two pins", name)
		}
	}
	if quantity := circuitQuantity(p.Value); quantity != nil {
		return w, e.later(quantity.Place(), "a source whose value depends on the circuit")
	}
	return e.signalOf(f.scope, p.Value)
}

// circuitQuantity finds volts(...), amps(...) or watts(...) in an expression.
func circuitQuantity(x syntax.Expr) (found syntax.Expr) {
	switch x.(type) {
	case nil, *syntax.Number, *syntax.Name:
		return nil
	}
	syntax.Walk(x, func(n syntax.Node) bool {
		if c, ok := n.(*syntax.Call); ok && found == nil {
			if name := c.Func.String(); name == "volts" || name == "amps" || name == "watts" {
				found = c
			}
		}
		return found == nil
	})
	return found
}

// noTolerance refuses modifiers of a current source: one that carries a tolerance is more likely a resistor with a slip in its value.
func (e *elaborator) noTolerance(p *syntax.Element, full string) bool {
	for _, m := range p.Modifiers {
		if m.Name.Name == "tol" || m.Name.Name == "sigma" {
			return e.fail(CodeModifier, p.Value.Place(), "the value of %s is a current (A), and a current source carries no `%s`", full, m.Name.Name)
		}
	}
	_, ok := e.modifiers(nil, p.Modifiers, "a current source")
	return ok
}

// Values that no front end needs: more likely a slip of the prefix.
const (
	tinyResistance  = 0.05 // ohm
	hugeResistance  = 1e14 // ohm
	hugeCapacitance = 0.05 // F
	hugeInductance  = 1e4  // H
)

func (e *elaborator) resistor(f *frame, p *syntax.Element, x *Element, v float64, d unit.Dimension) {
	m, ok := e.modifiers(f.scope, p.Modifiers, "a resistor", "tol", "sigma", "tc")
	if d == unit.Resistance && v == 0 {
		e.failHint("join the two nodes: give them one name", CodeRange, p.Value.Place(), "%s has 0 ohm", x.Name)
		return
	}
	what := "a resistance"
	if d == unit.Conductance {
		what = "a conductance"
	}
	if !e.positive(p, v, d, what) || !ok {
		return
	}
	if d == unit.Conductance {
		v = 1 / v
	}
	if v < tinyResistance || v > hugeResistance {
		e.warn(CodeMagnitude, p.Value.Place(), "%s is a resistor of %s", x.Name, unit.Show(v, unit.Resistance))
	}
	if x.Value, ok = e.atTemperature(p, v, m, unit.Resistance); ok {
		x.Kind, x.Device = KindResistor, devices.NewResistor(x.Value)
	}
}

func (e *elaborator) capacitor(f *frame, p *syntax.Element, x *Element, v float64) {
	m, ok := e.modifiers(f.scope, p.Modifiers, "a capacitor", "tol", "sigma", "tc", "start")
	if !e.positive(p, v, unit.Capacitance, "a capacitance") || !ok || !e.started(p, m, unit.Voltage) {
		return
	}
	if v > hugeCapacitance {
		e.warn(CodeMagnitude, p.Value.Place(), "%s is a capacitor of %s", x.Name, unit.Show(v, unit.Capacitance))
	}
	if x.Value, ok = e.atTemperature(p, v, m, unit.Capacitance); ok {
		x.Kind, x.Device = KindCapacitor, devices.NewCapacitor(x.Value, m.start.SI)
	}
}

func (e *elaborator) inductor(f *frame, p *syntax.Element, x *Element, v float64) {
	m, ok := e.modifiers(f.scope, p.Modifiers, "an inductor", "tol", "sigma", "tc", "start")
	if !e.positive(p, v, unit.Inductance, "an inductance") || !ok || !e.started(p, m, unit.Current) {
		return
	}
	if v > hugeInductance {
		e.warn(CodeMagnitude, p.Value.Place(), "%s is an inductor of %s", x.Name, unit.Show(v, unit.Inductance))
	}
	if x.Value, ok = e.atTemperature(p, v, m, unit.Inductance); ok {
		x.Kind, x.Device = KindInductor, devices.NewInductor(x.Value, m.start.SI)
	}
}

// positive wants a positive value.
func (e *elaborator) positive(p *syntax.Element, v float64, d unit.Dimension, what string) bool {
	if v > 0 {
		return true
	}
	hint := ""
	if v < 0 && (d == unit.Resistance || d == unit.Conductance) {
		hint = "a negative resistance is a current source whose value is an expression of volts(...)"
	}
	return e.failHint(hint, CodeRange, p.Value.Place(), "%s is %s; %s is positive", p.Name.Name, unit.Show(v, d), what)
}

// atTemperature applies the temperature coefficients.
func (e *elaborator) atTemperature(p *syntax.Element, v float64, m modifiers, d unit.Dimension) (float64, bool) {
	t := e.circuit.Temperature
	v *= devices.TemperatureFactor(m.tc1, m.tc2, t)
	if !(v > 0) || math.IsInf(v, 0) {
		return v, e.fail(CodeRange, m.tcAt, "with this temperature coefficient %s is %s at %s", p.Name.Name, unit.Show(v, d), unit.Show(t, unit.Temperature))
	}
	return v, true
}

// started checks the kind of a start.
func (e *elaborator) started(p *syntax.Element, m modifiers, want unit.Dimension) bool {
	if math.IsNaN(m.start.SI) || m.start.Dimension == want {
		return true
	}
	return e.fail(CodeDimension, m.startAt, "%s starts with %s, not with %s", p.Name.Name, want.Noun(), m.start.Dimension.Noun())
}

// modifiers are what may follow a value.
type modifiers struct {
	tc1, tc2 float64 // 1/K, 1/K^2
	tcAt     syntax.Span
	start    value // NaN if not given
	startAt  syntax.Span
}

// modifiers evaluates what follows a value; what says what carries it, allowed what that may be. tol and sigma act only on samples and
// extremes; they are checked here.
func (e *elaborator) modifiers(s *scope, list []syntax.Modifier, what string, allowed ...string) (m modifiers, ok bool) {
	m.start.SI = math.NaN()
	ok = true
	var seen map[string]bool
	if len(list) > 0 {
		seen = map[string]bool{}
	}
	for _, x := range list {
		name := x.Name.Name
		switch {
		case !slices.Contains(allowed, name):
			ok = e.fail(CodeModifier, x.Place(), "%s carries no `%s`", what, name)
			continue
		case seen[name]:
			ok = e.fail(CodeModifier, x.Place(), "`%s` stands here twice", name)
			continue
		case name == "sigma" && seen["tol"], name == "tol" && seen["sigma"]:
			ok = e.fail(CodeModifier, x.Place(), "a value has either `tol` (uniform within) or `sigma` (normal)")
			continue
		}
		seen[name] = true
		ok = e.modifier(s, x, &m) && ok
	}
	return m, ok
}

func (e *elaborator) modifier(s *scope, x syntax.Modifier, m *modifiers) (ok bool) {
	perKelvin := unit.Number.Div(unit.Temperature)
	switch x.Name.Name {
	case "tol", "sigma":
		_, ok = e.share(s, x.Value, "`"+x.Name.Name+"`")
	case "tc":
		m.tcAt = x.Value.Place()
		if m.tc1, ok = e.wanted(s, x.Value, perKelvin, "a temperature coefficient"); ok && x.Second != nil {
			m.tc2, ok = e.wanted(s, x.Second, perKelvin.Div(unit.Temperature), "a quadratic temperature coefficient")
		}
	case "start":
		m.start, ok = e.single(s, x.Value)
		m.startAt = x.Value.Place()
	}
	return ok
}
