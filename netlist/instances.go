package netlist

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// instance elaborates NAME = TYPE(pin: node, ...) with k = v, ...
func (e *elaborator) instance(f *frame, s *syntax.Instance) {
	full := f.prefix + s.Name.Name
	if b := e.program.blocks[s.Type.Name]; b != nil {
		e.program.used[b.Name.Name] = true
		e.blockInstance(f, s, b, full)
		return
	}
	decl, home := f.part(s.Type.Name)
	if decl == nil {
		e.unknownType(f, s.Type)
		for _, b := range s.Pins {
			e.degree[e.node(f, b.Node)]++
		}
		return
	}
	family, values, ok := e.partValues(home, decl)
	if family == nil {
		for _, b := range s.Pins {
			e.degree[e.node(f, b.Node)]++
		}
		return
	}
	x := Element{Name: full, Kind: family.Name, Part: decl.Name.Name, Span: s.Span}
	nodes, pinsOK := e.pins(f, s, family)
	if !e.claimElement(full, s.Name.Place()) {
		return
	}
	for _, p := range family.Pins {
		x.Pins = append(x.Pins, p.Name)
	}
	x.Nodes = nodes
	device, made := e.device(f, s.With, decl, home, family, values, s.Type.Place())
	if !ok || !pinsOK || !made {
		// It stays known by its name, so that one error does not bring others.
		x.Device = nil
	} else {
		x.Device = device
	}
	e.push(x)
}

// pathInstance makes a device with two pins in a path.
func (e *elaborator) pathInstance(f *frame, p *syntax.Element, x *Element, decl *syntax.PartDecl, home *frame) bool {
	family, values, ok := e.partValues(home, decl)
	if family == nil {
		return false
	}
	if len(family.Pins) != 2 {
		return e.fail(CodePin, p.Value.Place(), fmt.Sprintf("%s is a %s, which has %d pins; in a path stands what has two", decl.Name.Name, family.Name, len(family.Pins)))
	}
	if _, plain := e.modifiers(f.scope, p.Modifiers, "a "+family.Name); !ok || !plain {
		return false
	}
	device, ok := e.device(f, nil, decl, home, family, values, p.Value.Place())
	x.Kind, x.Part, x.Device = family.Name, decl.Name.Name, device
	x.Pins = []string{family.Pins[0].Name, family.Pins[1].Name}
	return ok
}

func (e *elaborator) unknownType(f *frame, t syntax.Ident) {
	d := e.diagnostic(CodeFamily, t.Place(), fmt.Sprintf("there is no part or block called %s", t.Name))
	var names []string
	for g := f; g != nil; g = g.outer {
		for n := range g.parts {
			names = append(names, n)
		}
	}
	for n := range e.program.blocks {
		names = append(names, n)
	}
	slices.Sort(names)
	if e.program.family(t.Name) != nil {
		d.Hint = fmt.Sprintf("%s is a family; declare a part of it first: part NAME = %s { ... }", t.Name, t.Name)
	} else if near, ok := syntax.Nearest(t.Name, names); ok {
		d.Hint = "did you mean " + near + "?"
	}
	e.add(d)
}

// partValues returns the family of a part and its parameters with all defaults.
func (e *elaborator) partValues(home *frame, decl *syntax.PartDecl) (*devices.Family, []float64, bool) {
	e.program.used[decl.Name.Name] = true
	chain, family := e.chain(home, decl)
	if family == nil {
		return nil, nil, false
	}
	if v, ok := e.values[decl]; ok && home == e.file {
		return family, v, v != nil
	}
	values := family.Defaults()
	ok := true
	for i := len(chain) - 1; i >= 0; i-- {
		ok = e.assignParams(home.scope, chain[i], family, values) && ok
	}
	if home == e.file {
		if e.values[decl] = values; !ok {
			e.values[decl] = nil
		}
	}
	return family, values, ok
}

// chain follows a part to its family.
func (e *elaborator) chain(home *frame, decl *syntax.PartDecl) ([]*syntax.PartDecl, *devices.Family) {
	list := []*syntax.PartDecl{decl}
	for {
		base := list[len(list)-1].Base
		next, _ := home.part(base.Name)
		if next == nil {
			family := e.program.family(base.Name)
			if family == nil && !e.has2(CodeFamily, base.Place()) {
				e.unknownFamily(home, base)
			}
			return list, family
		}
		if slices.Contains(list, next) {
			e.fail(CodeCycle, base.Place(), fmt.Sprintf("the part %s is made of itself", decl.Name.Name))
			return list, nil
		}
		e.program.used[next.Name.Name] = true
		list = append(list, next)
	}
}

// has2 reports whether a problem is reported already at a place.
func (e *elaborator) has2(code syntax.Code, at syntax.Span) bool {
	return slices.ContainsFunc(e.list, func(d *Diagnostic) bool { return d.Code == code && d.Span == at })
}

func (e *elaborator) unknownFamily(home *frame, base syntax.Ident) {
	if slices.Contains(laterFamilies, base.Name) {
		e.fail(CodeLater, base.Place(), fmt.Sprintf("the family %s is not available in this version", base.Name))
		return
	}
	d := e.diagnostic(CodeFamily, base.Place(), fmt.Sprintf("there is no family or part called %s", base.Name))
	var names []string
	for _, f := range e.program.families {
		names = append(names, f.Name)
	}
	for n := range home.parts {
		names = append(names, n)
	}
	if near, ok := syntax.Nearest(base.Name, names); ok {
		d.Hint = "did you mean " + near + "?"
	} else {
		d.Hint = "`poise parts` lists the families"
	}
	e.add(d)
}

// assignParams evaluates the parameters that a declaration sets.
func (e *elaborator) assignParams(s *scope, decl *syntax.PartDecl, family *devices.Family, values []float64) bool {
	ok := true
	seen := map[string]bool{}
	for _, p := range decl.Params {
		if seen[p.Name.Name] {
			ok = e.reportOnce(CodeDuplicate, p.Name.Place(), fmt.Sprintf("%s stands here twice", p.Name.Name))
		}
		seen[p.Name.Name] = true
		ok = e.assign(s, p.Name, p.Value, family, values) && ok
		if _, good := e.modifiers(s, p.Modifiers, "a parameter", "tol", "sigma"); !good {
			ok = false
		}
	}
	return ok
}

// reportOnce reports a problem unless it is reported already: a part is looked at for every instance.
func (e *elaborator) reportOnce(code syntax.Code, at syntax.Span, message string) bool {
	if !e.has2(code, at) {
		e.fail(code, at, message)
	}
	return false
}

// assign evaluates one parameter.
func (e *elaborator) assign(s *scope, name syntax.Ident, x syntax.Expr, family *devices.Family, values []float64) bool {
	i := family.Index(name.Name)
	if i < 0 {
		return e.unknownParam(name, family)
	}
	p := &family.Params[i]
	u, err := unit.ParseUnit(p.Unit)
	if err != nil {
		return e.fail(CodeLiteral, name.Place(), fmt.Sprintf("the family %s gives %s an unknown unit: %s", family.Name, p.Name, err))
	}
	v, ok := e.wanted(s, x, u.Dimension, p.Name)
	if !ok {
		return false
	}
	if !p.Holds(v) {
		return e.fail(CodeRange, x.Place(), fmt.Sprintf("%s is %s, want %s", p.Name, unit.Show(v, u.Dimension), paramRange(p, u.Dimension)))
	}
	values[i] = v
	return true
}

// paramRange writes the physical range of a parameter.
func paramRange(p *devices.Param, d unit.Dimension) string {
	low, high := unit.Show(p.Min, d), unit.Show(p.Max, d)
	above := "at least " + low
	if p.MinOpen {
		above = "more than " + low
	}
	if math.IsInf(p.Max, 1) {
		return above
	}
	if p.MaxOpen {
		return above + " and less than " + high
	}
	return above + " and at most " + high
}

func (e *elaborator) unknownParam(name syntax.Ident, family *devices.Family) bool {
	if e.has2(CodeParameter, name.Place()) {
		return false
	}
	d := e.diagnostic(CodeParameter, name.Place(), fmt.Sprintf("the family %s has no parameter called %s", family.Name, name.Name))
	var names []string
	for _, p := range family.Params {
		names = append(names, p.Name)
	}
	if near, ok := syntax.Nearest(name.Name, names); ok {
		d.Hint = "did you mean " + near + "?"
	} else {
		d.Hint = fmt.Sprintf("`poise parts %s` lists them", family.Name)
	}
	return e.add(d)
}

// device makes the device of an instance: its part's, changed by what `with` says.
func (e *elaborator) device(f *frame, with []syntax.Assign, decl *syntax.PartDecl, home *frame, family *devices.Family, values []float64, at syntax.Span) (mna.Device, bool) {
	place := devices.Place{Temperature: e.circuit.Temperature, Area: 1}
	ok := true
	own := false
	for _, a := range with {
		switch a.Name.Name {
		case "area":
			var good bool
			if place.Area, good = e.wanted(f.scope, a.Value, unit.Number, "area"); good && !(place.Area > 0) {
				good = e.fail(CodeRange, a.Value.Place(), "an area is positive")
			}
			ok = ok && good
		case "warmer":
			var good bool
			place.Warmer, good = e.wanted(f.scope, a.Value, unit.Temperature, "warmer")
			ok = ok && good
		default:
			if !own {
				values, own = slices.Clone(values), true
			}
			ok = values != nil && e.assign(f.scope, a.Name, a.Value, family, values) && ok
		}
	}
	if !ok || values == nil {
		return nil, false
	}
	key := deviceKey{decl, place}
	if d, known := e.made[key]; known && !own && home == e.file {
		return d, true
	}
	d, err := family.New(values, place)
	if err != nil {
		var p *devices.ParamError
		if errors.As(err, &p) {
			return nil, e.fail(CodeRange, at, fmt.Sprintf("%s of %s: want %s", p.Param, decl.Name.Name, p.Want))
		}
		return nil, e.fail(CodeRange, at, err.Error())
	}
	if !own && home == e.file {
		e.made[key] = d
	}
	return d, true
}

// pins returns the nodes of a family's pins in their order.
func (e *elaborator) pins(f *frame, s *syntax.Instance, family *devices.Family) ([]int, bool) {
	var names []string
	for _, p := range family.Pins {
		names = append(names, p.Name)
	}
	given, ok := e.pinNodes(f, s, names)
	nodes := make([]int, len(family.Pins))
	var missing []string
	for i, p := range family.Pins {
		n, isGiven := given[p.Name]
		switch {
		case isGiven:
			nodes[i] = n
		case !p.Optional:
			missing = append(missing, p.Name)
		case p.Joins != "gnd":
			nodes[i] = given[p.Joins]
		}
	}
	if len(missing) > 0 {
		ok = e.fail(CodeMissingPin, s.Place(), fmt.Sprintf("%s leaves %s unconnected", s.Name.Name, pinList(missing)))
	}
	return nodes, ok
}

func pinList(names []string) string {
	if len(names) == 1 {
		return "its pin " + names[0]
	}
	return "its pins " + strings.Join(names, ", ")
}

// pinNodes evaluates the pins that an instance writes.
func (e *elaborator) pinNodes(f *frame, s *syntax.Instance, names []string) (map[string]int, bool) {
	given := map[string]int{}
	ok := true
	for _, b := range s.Pins {
		node := e.node(f, b.Node)
		e.degree[node]++
		if !slices.Contains(names, b.Pin.Name) {
			d := e.diagnostic(CodePin, b.Pin.Place(), fmt.Sprintf("%s has no pin called %s", s.Type.Name, b.Pin.Name))
			if near, found := syntax.Nearest(b.Pin.Name, names); found {
				d.Hint = "did you mean " + near + "?"
			} else {
				d.Hint = "its pins are " + strings.Join(names, ", ")
			}
			ok = e.add(d)
			continue
		}
		if _, twice := given[b.Pin.Name]; twice {
			ok = e.fail(CodeDuplicate, b.Pin.Place(), fmt.Sprintf("the pin %s stands here twice", b.Pin.Name))
			continue
		}
		given[b.Pin.Name] = node
	}
	return given, ok
}

// blockInstance elaborates the contents of a block.
func (e *elaborator) blockInstance(f *frame, s *syntax.Instance, b *syntax.Block, full string) {
	if slices.Contains(f.blocks, b) {
		e.reportOnce(CodeRecursion, s.Type.Place(), fmt.Sprintf("the block %s contains itself", b.Name.Name))
		return
	}
	if len(f.blocks) >= e.program.limits.Nesting {
		e.reportOnce(CodeLimit, s.Place(), fmt.Sprintf("blocks stand within blocks more than %d deep", e.program.limits.Nesting))
		return
	}
	if _, twice := e.element[full]; twice {
		e.fail(CodeDuplicate, s.Name.Place(), fmt.Sprintf("there is a part called %s already", full))
		return
	}
	var names []string
	for _, p := range b.Pins {
		names = append(names, p.Name)
	}
	given, _ := e.pinNodes(f, s, names)
	inner := &frame{scope: newScope(e.file.scope), prefix: full + ".", outer: e.file, parts: map[string]*syntax.PartDecl{}, pins: map[string]int{}, blocks: append(slices.Clone(f.blocks), b)}
	var missing []string
	for _, p := range names {
		n, ok := given[p]
		if !ok {
			missing = append(missing, p)
			n = e.enter(inner.prefix+p, s.Place())
			e.degree[n] += 2 // one error is enough
		} else {
			// Inside, the pin is one more connection only if something joins it.
			e.degree[n]--
		}
		inner.pins[p] = n
	}
	if len(missing) > 0 {
		e.fail(CodeMissingPin, s.Place(), fmt.Sprintf("%s leaves %s unconnected", s.Name.Name, pinList(missing)))
	}
	e.blockBody(f, s, b, inner)
}

// blockBody binds the block's lets, changed by `with`, and elaborates its circuit.
func (e *elaborator) blockBody(f *frame, s *syntax.Instance, b *syntax.Block, inner *frame) {
	var lets []*syntax.Let
	var circuit []syntax.Statement
	for _, x := range b.Body {
		switch x := x.(type) {
		case *syntax.Let:
			lets = append(lets, x)
		case *syntax.PartDecl:
			if _, twice := inner.parts[x.Name.Name]; twice {
				e.reportOnce(CodeDuplicate, x.Name.Place(), fmt.Sprintf("there is a part called %s already", x.Name.Name))
			}
			inner.parts[x.Name.Name] = x
		case *syntax.Path, *syntax.Instance, *syntax.Match:
			circuit = append(circuit, x)
		case *syntax.Couple:
			if !e.has2(CodeLater, x.Place()) {
				e.program.laterIn(e, x.Place(), "`couple`")
			}
		default:
			e.reportOnce(syntax.CodeMisplaced, x.Place(), "this statement does not belong in a block")
		}
	}
	e.bindWith(f, s, lets, inner)
	e.bindLets(inner.scope, lets)
	e.statements(inner, circuit)
}

// bindWith changes the lets of a block for one instance.
func (e *elaborator) bindWith(f *frame, s *syntax.Instance, lets []*syntax.Let, inner *frame) {
	for _, a := range s.With {
		i := slices.IndexFunc(lets, func(l *syntax.Let) bool { return l.Name.Name == a.Name.Name })
		if i < 0 {
			d := e.diagnostic(CodeUnknown, a.Name.Place(), fmt.Sprintf("the block %s has no value called %s", s.Type.Name, a.Name.Name))
			var names []string
			for _, l := range lets {
				names = append(names, l.Name.Name)
			}
			if near, ok := syntax.Nearest(a.Name.Name, names); ok {
				d.Hint = "did you mean " + near + "?"
			}
			e.add(d)
			continue
		}
		v, ok := e.eval(f.scope, a.Value)
		if !ok || !e.plain(v, a.Value) {
			continue
		}
		inner.scope.with = append(inner.scope.with, changed{a.Name.Name, v, a.Value})
	}
}
