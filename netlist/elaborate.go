package netlist

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// elaborator turns a program into a flat circuit for one set-up.
type elaborator struct {
	program   *program
	list      syntax.DiagnosticList
	overrides map[string]*override
	checking  bool // at load: warn, too

	file    *frame
	circuit *Circuit
	nodes   map[string]int // by full name; a block's pin is another name of the outer node
	mention []syntax.Span  // where each node is first written
	degree  []int32        // connections of each node
	element map[string]int
	rail    map[string]int
	made    map[deviceKey]mna.Device
	values  map[*syntax.PartDecl][]float64
	unnamed int
}

// override is a value that a bench puts in the place of what the file says.
type override struct {
	value value
	at    syntax.Span
	found bool
}

// deviceKey tells devices apart that are made of the same part in the same place.
type deviceKey struct {
	part  *syntax.PartDecl
	place devices.Place
}

// frame is where circuit statements stand: the file, or an instance of a block.
type frame struct {
	scope  *scope
	prefix string // of full names: "A1."
	outer  *frame
	parts  map[string]*syntax.PartDecl
	pins   map[string]int
	blocks []*syntax.Block // being elaborated, outermost first
}

func (f *frame) part(name string) (*syntax.PartDecl, *frame) {
	for ; f != nil; f = f.outer {
		if d, ok := f.parts[name]; ok {
			return d, f
		}
	}
	return nil, nil
}

func (e *elaborator) diagnostic(code syntax.Code, at syntax.Span, message string) *Diagnostic {
	return &Diagnostic{Code: code, Span: at, Message: message, Line: syntax.LineOf(e.program.sources[at.File], at.Start.Offset)}
}

// add reports a problem; it returns false, for callers that have just failed.
func (e *elaborator) add(d *Diagnostic) bool {
	e.list = append(e.list, d)
	return false
}

func (e *elaborator) fail(code syntax.Code, at syntax.Span, message string) bool {
	return e.add(e.diagnostic(code, at, message))
}

func (e *elaborator) warn(code syntax.Code, at syntax.Span, message string) {
	if e.checking {
		d := e.diagnostic(code, at, message)
		d.Severity = syntax.Warning
		e.list = append(e.list, d)
	}
}

func (e *elaborator) nodeKnown(name string) bool {
	_, ok := e.nodes[name]
	return ok
}

// elaborate evaluates the program with the overrides in place.
func (p *program) elaborate(overrides map[string]*override, checking bool) *elaborator {
	e := &elaborator{
		program: p, overrides: overrides, checking: checking,
		circuit: &Circuit{Nodes: []string{"gnd"}}, nodes: map[string]int{"gnd": 0}, mention: make([]syntax.Span, 1), degree: make([]int32, 1),
		element: map[string]int{}, rail: map[string]int{}, made: map[deviceKey]mna.Device{}, values: map[*syntax.PartDecl][]float64{},
	}
	e.file = &frame{scope: newScope(nil), parts: p.parts}
	e.predefine()
	e.bindLets(e.file.scope, p.lets)
	e.ambient()
	e.rails()
	e.statements(e.file, p.circuit)
	e.ports()
	return e
}

// predefine binds the values that every file has, as the file and the bench set them.
func (e *elaborator) predefine() {
	for name, v := range predefined() {
		e.file.scope.lets[name] = &binding{state: evaluated, value: v, name: syntax.Ident{Name: name}}
	}
	for _, s := range e.program.sets {
		name := s.Target.String()
		if !settable[name] {
			d := e.diagnostic(CodeUnknown, s.Target.Place(), fmt.Sprintf("%s cannot be set here", name))
			d.Hint = "a file sets temperature and accuracy; a bench sets any let, rail or part, too"
			e.add(d)
			continue
		}
		old := e.file.scope.lets[name]
		v, ok := e.eval(e.file.scope, s.Value)
		if ok && e.plain(v, s.Value) && v.Dimension != old.value.Dimension {
			ok = e.fail(CodeDimension, s.Value.Place(), fmt.Sprintf("%s is %s, not %s", name, old.value.Dimension.Noun(), v.Dimension.Noun()))
		}
		if ok {
			old.value = v
		}
	}
	for name := range settable {
		if o, ok := e.overrides[name]; ok {
			o.found = true
			b := e.file.scope.lets[name]
			if e.fits(o, b.value.Dimension, name) {
				b.value = o.value
			}
		}
	}
}

// fits checks the dimension of an override.
func (e *elaborator) fits(o *override, want unit.Dimension, name string) bool {
	if o.value.Dimension == want {
		return true
	}
	return e.fail(CodeDimension, o.at, fmt.Sprintf("%s is %s, not %s", name, want.Noun(), o.value.Dimension.Noun()))
}

// bindLets enters lets into a scope and evaluates them all.
func (e *elaborator) bindLets(s *scope, lets []*syntax.Let) {
	var list []*binding
	for _, l := range lets {
		name := l.Name.Name
		if !e.canName(l.Name) {
			continue
		}
		if _, twice := s.lets[name]; twice {
			e.fail(CodeDuplicate, l.Name.Place(), fmt.Sprintf("there is a value called %s already", name))
			continue
		}
		b := &binding{expr: l.Value, where: s, name: l.Name}
		if s == e.file.scope {
			used := new(bool)
			b.used = used
		}
		s.lets[name] = b
		list = append(list, b)
	}
	for _, b := range list {
		was := b.used != nil && *b.used
		_, ok := e.force(b, b.name.Place())
		if b.used != nil {
			*b.used = was
		}
		if o, is := e.overrides[b.name.Name]; is && s == e.file.scope {
			o.found = true
			if ok && e.fits(o, b.value.Dimension, b.name.Name) {
				b.value = o.value
			}
		}
	}
	for _, c := range s.with {
		if b := s.lets[c.name]; b != nil && b.state == evaluated {
			if b.value.Dimension != c.value.Dimension {
				e.fail(CodeDimension, c.expr.Place(), fmt.Sprintf("%s is %s, not %s", c.name, b.value.Dimension.Noun(), c.value.Dimension.Noun()))
				continue
			}
			b.value = c.value
		}
	}
	if len(e.overrides) > 0 && s == e.file.scope || len(s.with) > 0 {
		e.revalue(list)
	}
	if s == e.file.scope {
		for _, b := range list {
			if *b.used {
				e.program.used[b.name.Name] = true
			}
		}
	}
}

// revalue evaluates lets again whose values may depend on an override.
func (e *elaborator) revalue(list []*binding) {
	for _, b := range list {
		_, fixed := e.overrides[b.name.Name]
		changed := slices.ContainsFunc(b.where.with, func(c changed) bool { return c.name == b.name.Name })
		if b.state == evaluated && !changed && !(fixed && b.where == e.file.scope) {
			b.state = notEvaluated
		}
	}
	for _, b := range list {
		e.force(b, b.name.Place())
	}
}

// canName reports whether a name may be given to a value.
func (e *elaborator) canName(n syntax.Ident) bool {
	if _, taken := predefined()[n.Name]; taken {
		d := e.diagnostic(CodeDuplicate, n.Place(), fmt.Sprintf("%s is predefined", n.Name))
		if settable[n.Name] {
			d.Hint = fmt.Sprintf("to change it write `set %s = ...`", n.Name)
		}
		return e.add(d)
	}
	if unit.IsUnitName(n.Name) {
		return e.fail(CodeUnitName, n.Place(), fmt.Sprintf("%s is a unit and cannot be the name of a value", n.Name))
	}
	return true
}

// ambient takes over temperature and accuracy.
func (e *elaborator) ambient() {
	t := e.file.scope.lets["temperature"].value.SI
	const coldest, hottest = 1, 1500 // K: the laws of the devices mean nothing beyond
	if !(t >= coldest && t <= hottest) {
		e.fail(CodeRange, e.settingPlace("temperature"), fmt.Sprintf("a temperature of %s; want %d K to %d K", unit.Show(t, unit.Temperature), coldest, hottest))
		t = devices.ReferenceTemperature
	}
	a := e.file.scope.lets["accuracy"].value.SI
	const finest, coarsest = 1e-9, 0.1
	if !(a >= finest && a <= coarsest) {
		e.fail(CodeRange, e.settingPlace("accuracy"), fmt.Sprintf("an accuracy of %g; want %g to %g", a, finest, coarsest))
		a = 1e-4
	}
	e.circuit.Temperature, e.circuit.Accuracy = t, a
}

// settingPlace finds where a predefined value is set.
func (e *elaborator) settingPlace(name string) syntax.Span {
	if o, ok := e.overrides[name]; ok {
		return o.at
	}
	for _, s := range e.program.sets {
		if s.Target.String() == name {
			return s.Value.Place()
		}
	}
	return syntax.Span{}
}

// rails makes the held nodes.
func (e *elaborator) rails() {
	for _, r := range e.program.rails {
		name := r.Name.Name
		if _, twice := e.rail[name]; twice || name == "gnd" {
			e.fail(CodeDuplicate, r.Name.Place(), fmt.Sprintf("there is a rail called %s already", name))
			continue
		}
		w, ok := e.signalOf(e.file.scope, r.Value)
		if ok && w.dimension != unit.Voltage {
			ok = e.fail(CodeDimension, r.Value.Place(), fmt.Sprintf("the rail %s is %s, want a voltage (V)", name, w.dimension.Noun()))
		}
		e.modifiers(e.file.scope, r.Modifiers, "a rail", "tol", "sigma")
		if o, is := e.overrides[name]; is {
			o.found = true
			if e.fits(o, unit.Voltage, name) {
				w.signal = devices.Constant(o.value.SI)
			}
		}
		if !ok {
			w.signal = devices.Constant(0)
		}
		node := e.nodeAt(e.file, r.Name)
		e.degree[node]++
		e.rail[name] = len(e.circuit.Rails)
		e.circuit.Rails = append(e.circuit.Rails, Rail{Name: name, Node: node, Signal: w.signal, Span: r.Span})
	}
}

// node returns the number of a node as written in a frame.
func (e *elaborator) node(f *frame, r syntax.Ref) int {
	if len(r.Names) == 1 {
		return e.nodeAt(f, r.Names[0])
	}
	return e.enter(f.prefix+r.String(), r.Place())
}

func (e *elaborator) nodeAt(f *frame, n syntax.Ident) int {
	switch {
	case n.Name == "gnd":
		return 0
	case n.Name == "_":
		e.unnamed++
		return e.enter(fmt.Sprintf("%s_%d", f.prefix, e.unnamed), n.Place())
	}
	if node, isPin := f.pins[n.Name]; isPin {
		return node
	}
	return e.enter(f.prefix+n.Name, n.Place())
}

func (e *elaborator) enter(full string, at syntax.Span) int {
	if i, ok := e.nodes[full]; ok {
		return i
	}
	i := len(e.circuit.Nodes)
	e.nodes[full] = i
	e.circuit.Nodes = append(e.circuit.Nodes, full)
	e.mention = append(e.mention, at)
	e.degree = append(e.degree, 0)
	return i
}

// statements elaborates the circuit of a file or of a block's instance.
func (e *elaborator) statements(f *frame, list []syntax.Statement) {
	// The pins of blocks first: a path may name A1.out before the instance A1 stands.
	for _, s := range list {
		if i, ok := s.(*syntax.Instance); ok && e.program.blocks[i.Type.Name] != nil {
			for _, b := range i.Pins {
				if b.Node.String() != "_" {
					e.nodes[f.prefix+i.Name.Name+"."+b.Pin.Name] = e.node(f, b.Node)
				}
			}
		}
	}
	for _, s := range list {
		switch s := s.(type) {
		case *syntax.Path:
			e.path(f, s)
		case *syntax.Instance:
			e.instance(f, s)
		}
	}
	for _, s := range list {
		if m, ok := s.(*syntax.Match); ok {
			e.match(f, m)
		}
	}
}

// path elaborates node -- part -- node ...
func (e *elaborator) path(f *frame, p *syntax.Path) {
	if len(p.Elements) < 3 {
		e.fail(syntax.CodeUnexpected, p.Place(), "a path joins at least two nodes by a part")
		return
	}
	left := e.node(f, *p.Elements[0].Node)
	for i := 1; i+1 < len(p.Elements); i += 2 {
		right := e.node(f, *p.Elements[i+1].Node)
		e.pathPart(f, &p.Elements[i], left, right)
		left = right
	}
}

// claimElement reserves the full name of an element.
func (e *elaborator) claimElement(full string, at syntax.Span) bool {
	if i, twice := e.element[full]; twice {
		return e.fail(CodeDuplicate, at, fmt.Sprintf("there is a part called %s already, in line %d", full, e.circuit.Elements[i].Span.Start.Line))
	}
	if _, isRail := e.rail[full]; isRail {
		return e.fail(CodeDuplicate, at, fmt.Sprintf("%s is a rail already", full))
	}
	if len(e.circuit.Elements) >= e.program.limits.Parts {
		if len(e.circuit.Elements) == e.program.limits.Parts && !e.has(CodeLimit) {
			e.fail(CodeLimit, at, fmt.Sprintf("the circuit has more than %d parts", e.program.limits.Parts))
		}
		return false
	}
	return true
}

func (e *elaborator) has(code syntax.Code) bool {
	return slices.ContainsFunc(e.list, func(d *Diagnostic) bool { return d.Code == code })
}

func (e *elaborator) push(x Element) {
	e.element[x.Name] = len(e.circuit.Elements)
	e.circuit.Elements = append(e.circuit.Elements, x)
}

var pathPins = []string{"left", "right"}

// pathPart makes the device of a part between two nodes.
func (e *elaborator) pathPart(f *frame, p *syntax.Element, left, right int) {
	full := f.prefix + p.Name.Name
	e.degree[left]++
	e.degree[right]++
	if !e.claimElement(full, p.Name.Place()) {
		return
	}
	x := Element{Name: full, Pins: pathPins, Nodes: []int{left, right}, Span: p.Span, Path: true}
	if e.pathDevice(f, p, &x) {
		e.push(x)
	} else {
		// It stays known by its name, so that one error does not bring others.
		x.Kind, x.Device = KindResistor, devices.NewResistor(1)
		e.push(x)
	}
}

// pathDevice finds out what the value makes of a part.
func (e *elaborator) pathDevice(f *frame, p *syntax.Element, x *Element) bool {
	if n, ok := p.Value.(*syntax.Name); ok && len(n.Names) == 1 {
		if decl, home := f.part(n.Names[0].Name); decl != nil {
			return e.pathInstance(f, p, x, decl, home)
		}
		if e.program.family(n.Names[0].Name) != nil && f.scope.find(n.Names[0].Name) == nil {
			return e.fail(CodeFamily, p.Value.Place(), fmt.Sprintf("%s is a family; a part of it is declared first: part NAME = %s { ... }", n.Names[0].Name, n.Names[0].Name))
		}
	}
	if quantity := circuitQuantity(p.Value); quantity != nil {
		e.program.laterIn(e, quantity.Place(), "a source whose value depends on the circuit")
		return false
	}
	w := signal{}
	var v value
	ok := true
	wave := isWaveform(p.Value)
	if wave {
		w, ok = e.signalOf(f.scope, p.Value)
		v.Dimension = w.dimension
	} else {
		v, ok = e.eval(f.scope, p.Value)
		ok = ok && e.plain(v, p.Value) && e.finite(v, p.Value)
	}
	if !ok {
		return false
	}
	if o, is := e.overrides[x.Name]; is {
		o.found = true
		if !e.fits(o, v.Dimension, x.Name) {
			return false
		}
		v, w, wave = o.value, signal{devices.Constant(o.value.SI), v.Dimension}, false
	}
	if !wave {
		w = signal{devices.Constant(v.SI), v.Dimension}
	}
	return e.partOf(f, p, x, v, w)
}

// partOf makes the part that a dimension stands for.
func (e *elaborator) partOf(f *frame, p *syntax.Element, x *Element, v value, w signal) bool {
	switch v.Dimension {
	case unit.Resistance, unit.Conductance:
		return e.resistor(f, p, x, v)
	case unit.Capacitance:
		x.Kind = KindCapacitor
		m, ok := e.modifiers(f.scope, p.Modifiers, "a capacitor", "tol", "sigma", "tc", "start")
		if !ok || !e.positive(p, v, "a capacitance") || !e.started(p, m, unit.Voltage) {
			return false
		}
		if e.checking && v.SI > hugeCapacitance {
			e.warn(CodeMagnitude, p.Value.Place(), fmt.Sprintf("%s is a capacitor of %s", x.Name, unit.Show(v.SI, v.Dimension)))
		}
		x.Value = v.SI * devices.TemperatureFactor(m.tc1, m.tc2, e.circuit.Temperature)
		x.Device = devices.NewCapacitor(x.Value, m.start.SI)
	case unit.Inductance:
		x.Kind = KindInductor
		m, ok := e.modifiers(f.scope, p.Modifiers, "an inductor", "tol", "sigma", "tc", "start")
		if !ok || !e.positive(p, v, "an inductance") || !e.started(p, m, unit.Current) {
			return false
		}
		if e.checking && v.SI > hugeInductance {
			e.warn(CodeMagnitude, p.Value.Place(), fmt.Sprintf("%s is an inductor of %s", x.Name, unit.Show(v.SI, v.Dimension)))
		}
		x.Value = v.SI * devices.TemperatureFactor(m.tc1, m.tc2, e.circuit.Temperature)
		x.Device = devices.NewInductor(x.Value, m.start.SI)
	case unit.Voltage:
		x.Kind, x.Signal, x.Value, x.Device = KindVoltageSource, w.signal, w.signal.At(0), devices.NewVoltageSource(w.signal)
		_, ok := e.modifiers(f.scope, p.Modifiers, "a voltage source", "tol", "sigma")
		return ok
	case unit.Current:
		x.Kind, x.Signal, x.Value, x.Device = KindCurrentSource, w.signal, w.signal.At(0), devices.NewCurrentSource(w.signal)
		_, ok := e.modifiers(f.scope, p.Modifiers, "a current source", "tol", "sigma")
		return ok
	default:
		return e.fail(CodeDimension, p.Value.Place(), fmt.Sprintf("the value of %s is %s; a part in a path is in ohm, S, F, H, V or A, or is a part with two pins", x.Name, v.Dimension.Noun()))
	}
	return true
}

// Values that no front end needs: more likely a slip of the prefix.
const (
	tinyResistance  = 0.05 // ohm
	hugeResistance  = 1e14 // ohm
	hugeCapacitance = 0.05 // F
	hugeInductance  = 1e4  // H
)

func (e *elaborator) resistor(f *frame, p *syntax.Element, x *Element, v value) bool {
	x.Kind = KindResistor
	m, ok := e.modifiers(f.scope, p.Modifiers, "a resistor", "tol", "sigma", "tc")
	if !ok {
		return false
	}
	if v.Dimension == unit.Resistance && v.SI == 0 {
		d := e.diagnostic(CodeRange, p.Value.Place(), fmt.Sprintf("%s has 0 ohm", x.Name))
		d.Hint = "join the two nodes: give them one name"
		return e.add(d)
	}
	if !e.positive(p, v, map[bool]string{true: "a resistance", false: "a conductance"}[v.Dimension == unit.Resistance]) {
		return false
	}
	ohms := v.SI
	if v.Dimension == unit.Conductance {
		ohms = 1 / v.SI
	}
	if e.checking && (ohms < tinyResistance || ohms > hugeResistance) {
		e.warn(CodeMagnitude, p.Value.Place(), fmt.Sprintf("%s is a resistor of %s", x.Name, unit.Show(ohms, unit.Resistance)))
	}
	x.Value = ohms * devices.TemperatureFactor(m.tc1, m.tc2, e.circuit.Temperature)
	if !(x.Value > 0) {
		return e.fail(CodeRange, p.Place(), fmt.Sprintf("with its temperature coefficient %s is %s at %s", x.Name, unit.Show(x.Value, unit.Resistance), unit.Show(e.circuit.Temperature, unit.Temperature)))
	}
	x.Device = devices.NewResistor(x.Value)
	return true
}

func (e *elaborator) positive(p *syntax.Element, v value, what string) bool {
	if v.SI > 0 {
		return true
	}
	return e.fail(CodeRange, p.Value.Place(), fmt.Sprintf("%s is %s; %s is positive", p.Name.Name, unit.Show(v.SI, v.Dimension), what))
}

func (e *elaborator) started(p *syntax.Element, m modifiers, want unit.Dimension) bool {
	if math.IsNaN(m.start.SI) || m.start.Dimension == want {
		return true
	}
	return e.fail(CodeDimension, m.startAt, fmt.Sprintf("%s starts with %s, not with %s", p.Name.Name, want.Noun(), m.start.Dimension.Noun()))
}

// modifiers are what may follow a value.
type modifiers struct {
	tc1, tc2 float64 // 1/K, 1/K^2
	start    value   // NaN if not given
	startAt  syntax.Span
}

// modifiers evaluates what follows a value; what says what carries it, allowed what that may be.
func (e *elaborator) modifiers(s *scope, list []syntax.Modifier, what string, allowed ...string) (m modifiers, ok bool) {
	m.start.SI = math.NaN()
	ok = true
	seen := map[string]bool{}
	for _, x := range list {
		name := x.Name.Name
		switch {
		case !slices.Contains(allowed, name):
			ok = e.fail(CodeModifier, x.Place(), fmt.Sprintf("%s carries no `%s`", what, name))
			continue
		case seen[name]:
			ok = e.fail(CodeModifier, x.Place(), fmt.Sprintf("`%s` stands here twice", name))
			continue
		case name == "sigma" && seen["tol"] || name == "tol" && seen["sigma"]:
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
		_, ok = e.share(s, x.Value, "`"+x.Name.Name+"`", 0, 1)
	case "tc":
		if m.tc1, ok = e.wanted(s, x.Value, perKelvin, "a temperature coefficient"); ok && x.Second != nil {
			m.tc2, ok = e.wanted(s, x.Second, perKelvin.Div(unit.Temperature), "a quadratic temperature coefficient")
		}
	case "start":
		if m.start, ok = e.eval(s, x.Value); ok {
			ok = e.plain(m.start, x.Value)
		}
		m.startAt = x.Value.Place()
	}
	return ok
}

// circuitQuantity finds volts(...) or amps(...) in an expression.
func circuitQuantity(x syntax.Expr) syntax.Expr {
	switch x := x.(type) {
	case *syntax.Paren:
		return circuitQuantity(x.X)
	case *syntax.Unary:
		return circuitQuantity(x.X)
	case *syntax.Binary:
		if q := circuitQuantity(x.X); q != nil {
			return q
		}
		return circuitQuantity(x.Y)
	case *syntax.Call:
		if name := x.Func.String(); name == "volts" || name == "amps" {
			return x
		}
		for _, a := range x.Args {
			if q := circuitQuantity(a.Value); q != nil {
				return q
			}
		}
	}
	return nil
}

// laterIn reports within an elaboration what is not part of this version.
func (p *program) laterIn(e *elaborator, at syntax.Span, what string) {
	e.fail(CodeLater, at, what+" is not available in this version")
}

// match checks that the members of a match are there and alike.
func (e *elaborator) match(f *frame, m *syntax.Match) {
	if len(m.Members) < 2 {
		e.fail(CodeArguments, m.Place(), "a match has at least two members")
	}
	var first *Element
	for _, r := range m.Members {
		full := f.prefix + r.String()
		i, ok := e.element[full]
		if !ok {
			e.unknownElement(r.Place(), full)
			continue
		}
		x := &e.circuit.Elements[i]
		if m.Within != nil && x.Part != "" {
			e.fail(CodeArguments, r.Place(), fmt.Sprintf("%s is an instance: say which of its parameters match, in { }", full))
		}
		if m.Within == nil && x.Part == "" {
			e.fail(CodeArguments, r.Place(), fmt.Sprintf("%s has a single value: write `match ... within x`", full))
		}
		if first != nil && first.Kind != x.Kind {
			e.fail(CodeArguments, r.Place(), fmt.Sprintf("%s is a %s and %s a %s: they cannot match", first.Name, first.Kind, full, x.Kind))
		}
		first = x
	}
	if m.Within != nil {
		e.share(f.scope, m.Within, "the match", 0, 1)
		return
	}
	for _, p := range m.Params {
		e.share(f.scope, p.Within, "the match", 0, 1)
		if first == nil {
			continue
		}
		if family := e.program.family(first.Kind); family != nil && family.Index(p.Name.Name) < 0 {
			e.unknownParam(p.Name, family)
		}
	}
}

// unknownElement says that there is no part of a name.
func (e *elaborator) unknownElement(at syntax.Span, name string) bool {
	d := e.diagnostic(CodeUnknown, at, fmt.Sprintf("there is no part called %s", name))
	var names []string
	for n := range e.element {
		names = append(names, n)
	}
	slices.Sort(names)
	if near, ok := syntax.Nearest(name, names); ok {
		d.Hint = "did you mean " + near + "?"
	}
	return e.add(d)
}

// unknownNode says that there is no node of a name.
func (e *elaborator) unknownNode(at syntax.Span, name string) bool {
	d := e.diagnostic(CodeUnknown, at, fmt.Sprintf("there is no node called %s", name))
	var names []string
	for n := range e.nodes {
		if !strings.Contains(n, "_") || strings.Contains(name, "_") {
			names = append(names, n)
		}
	}
	slices.Sort(names)
	if near, ok := syntax.Nearest(name, names); ok {
		d.Hint = "did you mean " + near + "?"
	}
	return e.add(d)
}
