package netlist

import (
	"fmt"
	"iter"
	"maps"
	"slices"
	"strings"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// elaborator turns a program into a flat circuit for one set-up.
type elaborator struct {
	*reporter
	program  *program
	learning bool // at load: what is computed once is kept in the program

	file     *frame
	bench    *scope              // nil without a bench
	settings map[string]*setting // what the bench changes
	setOrder []string            // their names, as written
	forcing  []*binding          // values being evaluated, outermost first

	circuit *Circuit
	nodes   map[string]int // by full name; a block's pin is another name of the outer node
	mention []syntax.Span  // where each node is first written
	degree  []int32        // connections of each node
	element map[string]int
	rail    map[string]int
	stands  map[string]syntax.Span // instances of blocks, by full name
	lost    map[string]bool        // instances of which nothing is known, for lack of their part or block
	made    map[deviceKey]mna.Device
	values  map[*syntax.PartDecl]partValues
	used    map[any]bool // *syntax.PartDecl and *syntax.Block
	unnamed int
	full    bool // the limit of parts is reached
	matches map[matching]bool
}

// setting is a value that a bench puts in the place of what the file says.
type setting struct {
	target  syntax.Ref
	binding *binding
	found   bool
}

// deviceKey tells devices apart that are made of the same part in the same place.
type deviceKey struct {
	part  *syntax.PartDecl
	place devices.Place
}

// begin prepares an elaboration with all names of values declared and none evaluated. Of a bench, and where it is on its grid (nil: at
// the values of the file), it takes over what the bench changes.
func (p *program) begin(r *reporter, b *Bench, point []float64) *elaborator {
	e := &elaborator{
		reporter: r, program: p, settings: map[string]*setting{},
		circuit: &Circuit{Nodes: []string{"gnd"}}, nodes: map[string]int{"gnd": 0}, mention: make([]syntax.Span, 1), degree: make([]int32, 1),
		element: map[string]int{}, rail: map[string]int{}, stands: map[string]syntax.Span{}, lost: map[string]bool{},
		made: map[deviceKey]mna.Device{}, values: map[*syntax.PartDecl]partValues{}, used: map[any]bool{},
	}
	e.file = &frame{scope: newScope(nil), parts: p.parts}
	for _, b := range predefined() {
		e.file.scope.lets[b.name] = b
	}
	e.declare(e.file.scope, p.lets)
	for _, s := range p.sets {
		e.setPredefined(s)
	}
	if b != nil {
		e.enter(b, point)
	}
	return e
}

// elaborate evaluates everything that stands in the file.
func (e *elaborator) elaborate() {
	e.demand(e.file.scope)
	if e.bench != nil {
		e.demand(e.bench)
	}
	e.ambient()
	e.rails()
	e.statements(e.file, e.program.circuit)
	e.ports()
	for _, name := range e.setOrder {
		if s := e.settings[name]; !s.found {
			e.force(s.binding, s.binding.at)
			e.unknownTarget(s.target)
		}
	}
}

// suspect stands for a part that could not be made: it may join its nodes in any way, so that one error does not bring others.
func (e *elaborator) suspect(nodes ...int) {
	e.circuit.Elements = append(e.circuit.Elements, Element{Nodes: nodes})
}

// setPredefined takes over `set` of the file.
func (e *elaborator) setPredefined(s *syntax.Set) {
	name := s.Target.String()
	if _, settable := isPredefined(name); !settable {
		e.failHint("a file sets temperature and accuracy; a bench sets lets, rails and parts, too", CodeUnknown, s.Target.Place(), "%s cannot be set here", name)
		return
	}
	if e.file.scope.lets[name].base != nil {
		e.fail(CodeDuplicate, s.Target.Place(), "%s is set twice", name)
		return
	}
	e.file.scope.replace(&binding{name: name, at: s.Value.Place(), expr: s.Value, where: e.file.scope, used: true})
}

// ambient takes over temperature and accuracy.
func (e *elaborator) ambient() {
	const (
		coldest, hottest = 1, 1500   // K: the laws of the devices mean nothing beyond
		finest, coarsest = 1e-9, 0.1 // finer than rounding allows; coarser than a waveform is worth
	)
	c := e.circuit
	c.Temperature, c.Accuracy = devices.ReferenceTemperature, defaultAccuracy
	temperature, accuracy := e.file.scope.lets["temperature"], e.file.scope.lets["accuracy"]
	if t, ok := e.force(temperature, temperature.at); ok {
		if c.Temperature = t.SI; !(t.SI >= coldest && t.SI <= hottest) {
			e.fail(CodeRange, temperature.at, "the temperature is %s, want %d K to %d K", unit.Show(t.SI, unit.Temperature), coldest, hottest)
			c.Temperature = devices.ReferenceTemperature
		}
	}
	if a, ok := e.force(accuracy, accuracy.at); ok {
		if c.Accuracy = a.SI; !(a.SI >= finest && a.SI <= coarsest) {
			e.fail(CodeRange, accuracy.at, "the accuracy is %s, want %g to %g", unit.Trim(a.SI, unit.ShownDigits), finest, coarsest)
			c.Accuracy = defaultAccuracy
		}
	}
}

// rails makes the held nodes.
func (e *elaborator) rails() {
	for _, r := range e.program.rails {
		name := r.Name.Name
		if i, twice := e.rail[name]; twice {
			e.fail(CodeDuplicate, r.Name.Place(), "there is a rail called %s already, in line %d", name, e.circuit.Rails[i].Span.Start.Line)
			continue
		}
		if name == "gnd" || name == "_" {
			e.fail(CodeDuplicate, r.Name.Place(), "%s cannot be a rail", name)
			continue
		}
		w := e.railSignal(r)
		e.modifiers(e.file.scope, r.Modifiers, "a rail", "tol", "sigma")
		node := e.nodeAt(e.file, r.Name)
		e.degree[node]++
		e.rail[name] = len(e.circuit.Rails)
		e.circuit.Rails = append(e.circuit.Rails, Rail{Name: name, Node: node, Signal: w, Span: r.Span})
	}
}

func (e *elaborator) railSignal(r *syntax.Rail) mna.Signal {
	w, ok := e.signalOf(e.file.scope, r.Value)
	if ok && w.dimension != unit.Voltage {
		ok = e.fail(CodeDimension, r.Value.Place(), "the rail %s is %s, want a voltage (V)", r.Name.Name, w.dimension.Noun())
	}
	if v, is := e.changed(r.Name.Name, unit.Voltage); is {
		return devices.Constant(v.SI)
	}
	if !ok {
		return devices.Constant(0)
	}
	return w.signal
}

// changed returns the value that the bench puts in the place of a rail's or a part's.
func (e *elaborator) changed(name string, want unit.Dimension) (v value, is bool) {
	s := e.settings[name]
	if s == nil || s.binding.base != nil {
		return v, false // a let of this name is changed; what uses it follows
	}
	s.found = true
	v, ok := e.force(s.binding, s.binding.at)
	if ok && v.Dimension != want {
		ok = e.fail(CodeDimension, s.binding.at, "%s is %s, not %s", name, want.Noun(), v.Dimension.Noun())
	}
	return v, ok && e.plain(v, s.binding.expr)
}

// unknownTarget says that there is nothing of a name that a bench could change.
func (e *elaborator) unknownTarget(r syntax.Ref) {
	name := r.String()
	_, fixed := e.file.scope.lets[name]
	i, isElement := e.element[name]
	switch {
	case e.full || e.unsure(r) || e.isLost(name):
	case fixed:
		e.fail(CodeUnknown, r.Place(), "%s cannot be changed", name)
	case isElement && e.circuit.Elements[i].Kind == "":
	case isElement:
		e.fail(CodeUnknown, r.Place(), "%s has no single value that could be set; it is made of the part %s", name, e.circuit.Elements[i].Part)
	default:
		hint := e.guess(name, both(e.file.scope.names(), maps.Keys(e.element), maps.Keys(e.rail)))
		e.failHint(hint, CodeUnknown, r.Place(), "there is no value, rail or part called %s to change", name)
	}
}

// frame is where circuit statements stand: the file, or an instance of a block.
type frame struct {
	scope     *scope
	prefix    string // of full names: "A1."
	outer     *frame // the file's, for a block
	parts     map[string]*syntax.PartDecl
	pins      map[string]int
	blocks    []*syntax.Block                 // being elaborated, outermost first
	instances map[string]*blockInstanceStatus // those of blocks
}

// blockInstanceStatus says how far an instance of a block is.
type blockInstanceStatus struct {
	statement *syntax.Instance
	begun     bool // its contents are being elaborated, or are
	pinBegun  bool // one of its pins is being looked up
}

// part looks a declaration up from the inside out, with the frame in which it stands.
func (f *frame) part(name string) (*syntax.PartDecl, *frame) {
	for ; f != nil; f = f.outer {
		if d, ok := f.parts[name]; ok {
			return d, f
		}
	}
	return nil, nil
}

// partNames yields all parts that can be seen.
func (f *frame) partNames() iter.Seq[string] {
	if f == nil {
		return func(func(string) bool) {}
	}
	return both(maps.Keys(f.parts), f.outer.partNames())
}

// statements elaborates the circuit of a file or of a block's instance.
func (e *elaborator) statements(f *frame, list []syntax.Statement) {
	f.instances = map[string]*blockInstanceStatus{}
	for _, s := range list {
		if i, ok := s.(*syntax.Instance); ok && e.program.blocks[i.Type.Name] != nil {
			f.instances[i.Name.Name] = &blockInstanceStatus{statement: i}
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

// node returns the number of a node as written in a frame.
func (e *elaborator) node(f *frame, r syntax.Ref) int {
	if len(r.Names) == 1 {
		return e.nodeAt(f, r.Names[0])
	}
	return e.nodeWithin(f, r)
}

// nodeAt returns the number of a node by a name without dots; a new name makes a new node.
func (e *elaborator) nodeAt(f *frame, n syntax.Ident) int {
	switch {
	case n.Name == "gnd":
		return 0
	case n.Name == "_":
		e.unnamed++
		return e.newNode(fmt.Sprintf("%s_%d", f.prefix, e.unnamed), n.Place())
	}
	if node, isPin := f.pins[n.Name]; isPin {
		return node
	}
	full := f.prefix + n.Name
	if i, ok := e.nodes[full]; ok {
		return i
	}
	return e.newNode(full, n.Place())
}

// nodeWithin returns a node inside an instance, A1.x, for a part outside.
func (e *elaborator) nodeWithin(f *frame, r syntax.Ref) int {
	if status := f.instances[r.Names[0].Name]; status != nil {
		if n, ok := e.pinOf(f, status, r); ok {
			return n
		}
		if !status.begun {
			e.instance(f, status.statement)
		}
	}
	full := f.prefix + r.String()
	if n, ok := e.lookUp(full); ok {
		return n
	}
	e.unknownNode(r, full)
	n := e.newNode(full, r.Place())
	e.degree[n] += 2 // one error is enough
	return n
}

// pinOf finds the outer node of an instance's pin from the statement alone, so that two blocks may name each other's pins.
func (e *elaborator) pinOf(f *frame, status *blockInstanceStatus, r syntax.Ref) (int, bool) {
	if len(r.Names) != 2 || status.pinBegun {
		return 0, false
	}
	for _, b := range status.statement.Pins {
		if b.Pin.Name == r.Names[1].Name && b.Node.String() != "_" {
			status.pinBegun = true
			n := e.node(f, b.Node)
			status.pinBegun = false
			return n, true
		}
	}
	return 0, false
}

func (e *elaborator) newNode(full string, at syntax.Span) int {
	i := len(e.circuit.Nodes)
	e.nodes[full] = i
	e.circuit.Nodes = append(e.circuit.Nodes, full)
	e.mention = append(e.mention, at)
	e.degree = append(e.degree, 0)
	return i
}

// lookUp finds a node by its full name, or by the pin of a device that stands on it: Q1.c.
func (e *elaborator) lookUp(full string) (int, bool) {
	if i, ok := e.nodes[full]; ok {
		return i, true
	}
	dot := strings.LastIndexByte(full, '.')
	if dot < 0 {
		return 0, false
	}
	i, ok := e.element[full[:dot]]
	if !ok || e.circuit.Elements[i].Part == "" {
		return 0, false
	}
	pin := slices.Index(e.circuit.Elements[i].Pins, full[dot+1:])
	if pin < 0 {
		return 0, false
	}
	return e.circuit.Elements[i].Nodes[pin], true
}

// isLost reports whether a full name lies within an instance of which nothing is known.
func (e *elaborator) isLost(full string) bool {
	for len(e.lost) > 0 {
		if e.lost[full] {
			return true
		}
		dot := strings.LastIndexByte(full, '.')
		if dot < 0 {
			return false
		}
		full = full[:dot]
	}
	return false
}

// unknownElement says that there is no part of a name.
func (e *elaborator) unknownElement(r syntax.Ref, full string) bool {
	if e.unsure(r) || e.isLost(full) {
		return false
	}
	hint := e.guess(full, maps.Keys(e.element))
	if _, isNode := e.nodes[full]; isNode && hint == "" {
		hint = full + " is a node"
	}
	return e.failHint(hint, CodeUnknown, r.Place(), "there is no part called %s", full)
}

// unknownNode says that there is no node of a name.
func (e *elaborator) unknownNode(r syntax.Ref, full string) bool {
	if e.unsure(r) || e.isLost(full) {
		return false
	}
	hint := e.guess(full, maps.Keys(e.nodes))
	if _, isElement := e.element[full]; isElement && hint == "" {
		hint = full + " is a part, not a node"
	}
	return e.failHint(hint, CodeUnknown, r.Place(), "there is no node called %s", full)
}

// claimElement reserves the full name of an element.
func (e *elaborator) claimElement(full string, at syntax.Span) bool {
	if i, twice := e.element[full]; twice {
		return e.fail(CodeDuplicate, at, "there is a part called %s already, in %s", full, e.program.lineName(e.circuit.Elements[i].Span, at.File))
	}
	if old, twice := e.stands[full]; twice {
		return e.fail(CodeDuplicate, at, "there is an instance called %s already, in %s", full, e.program.lineName(old, at.File))
	}
	if _, isRail := e.rail[full]; isRail {
		return e.fail(CodeDuplicate, at, "%s is a rail already", full)
	}
	return true
}

// roomFor reports whether the circuit may have one more part.
func (e *elaborator) roomFor(at syntax.Span) bool {
	if len(e.circuit.Elements) < e.program.limits.Parts {
		return true
	}
	if !e.full {
		e.full = true
		e.fail(CodeLimit, at, "the circuit has more than %d parts", e.program.limits.Parts)
	}
	return false
}

// push adds an element. One without a device stays known by its name, so that one error does not bring others; its kind is empty.
func (e *elaborator) push(x Element) {
	if x.Device == nil {
		x.Kind = ""
	}
	e.element[x.Name] = len(e.circuit.Elements)
	e.circuit.Elements = append(e.circuit.Elements, x)
}
