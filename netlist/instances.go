package netlist

import (
	"maps"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
)

// instance elaborates NAME = TYPE(pin: node, ...) with k = v, ...
func (e *elaborator) instance(f *frame, s *syntax.Instance) {
	if b := e.program.blocks[s.Type.Name]; b != nil {
		if status := f.instances[s.Name.Name]; status != nil && status.statement == s {
			if status.begun {
				return // a path has asked for it
			}
			status.begun = true
		}
		e.used[b] = true
		e.blockInstance(f, s, b)
		return
	}
	full := f.prefix + s.Name.Name
	decl, home := f.part(s.Type.Name)
	var v partValues
	if decl != nil {
		e.used[decl] = true
		v = e.partValues(home, decl)
	} else {
		e.unknownType(f, s.Type)
	}
	if v.family == nil {
		e.lost[full] = true
		var nodes []int
		for _, b := range s.Pins {
			n := e.node(f, b.Node)
			e.degree[n] += 2 // one error is enough
			nodes = append(nodes, n)
		}
		e.suspect(nodes...)
		return
	}
	x := Element{Name: full, Kind: v.family.Name, Part: decl.Name.Name, Span: s.Span}
	x.Pins, x.Nodes = e.pins(f, s, v.family)
	if !e.roomFor(s.Name.Place()) {
		return
	}
	if !e.claimElement(full, s.Name.Place()) {
		e.suspect(x.Nodes...)
		return
	}
	x.Device = e.device(f, s.With, decl, home, v, s.Type.Place())
	e.push(x)
}

// pathInstance makes a device with two pins in a path.
func (e *elaborator) pathInstance(f *frame, p *syntax.Element, x *Element, decl *syntax.PartDecl, home *frame) {
	e.used[decl] = true
	v := e.partValues(home, decl)
	if v.family == nil {
		return
	}
	if len(v.family.Pins) != 2 {
		e.fail(CodePin, p.Value.Place(), "%s is made of %s, which has %d pins; in a path stands what has two", decl.Name.Name, v.family.Name, len(v.family.Pins))
		return
	}
	if _, ok := e.modifiers(f.scope, p.Modifiers, "a part of the family "+v.family.Name); !ok {
		return
	}
	x.Kind, x.Part = v.family.Name, decl.Name.Name
	x.Pins = []string{v.family.Pins[0].Name, v.family.Pins[1].Name}
	x.Device = e.device(f, nil, decl, home, v, p.Value.Place())
}

// unknownType says that there is nothing that an instance could be made of.
func (e *elaborator) unknownType(f *frame, t syntax.Ident) {
	switch {
	case e.unsure(syntax.Ref{Names: []syntax.Ident{t}}):
	case e.program.family(t.Name) != nil:
		e.failHint("part NAME = "+t.Name+" { ... }", CodeFamily, t.Place(), "%s is a family; a part of it is declared first", t.Name)
	case slices.Contains(laterFamilies(), t.Name):
		e.later(t.Place(), "the family "+t.Name)
	default:
		hint := e.guess(t.Name, both(f.partNames(), maps.Keys(e.program.blocks)))
		e.failHint(hint, CodeFamily, t.Place(), "there is no part or block called %s", t.Name)
	}
}

// pins returns the names of a family's pins and their nodes.
func (e *elaborator) pins(f *frame, s *syntax.Instance, family *devices.Family) (names []string, nodes []int) {
	for _, p := range family.Pins {
		names = append(names, p.Name)
	}
	given := e.pinNodes(f, s, names)
	nodes = make([]int, len(names))
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
	e.missingPins(s, missing)
	return names, nodes
}

func (e *elaborator) missingPins(s *syntax.Instance, missing []string) {
	switch {
	case len(missing) == 1:
		e.fail(CodeMissingPin, s.Place(), "%s leaves its pin %s unconnected", s.Name.Name, missing[0])
	case len(missing) > 1:
		e.fail(CodeMissingPin, s.Place(), "%s leaves its pins %s unconnected", s.Name.Name, strings.Join(missing, ", "))
	}
}

// pinNodes evaluates the pins that an instance writes.
func (e *elaborator) pinNodes(f *frame, s *syntax.Instance, names []string) map[string]int {
	given := make(map[string]int, len(s.Pins))
	for _, b := range s.Pins {
		node := e.node(f, b.Node)
		e.degree[node]++
		if _, twice := given[b.Pin.Name]; twice {
			e.fail(CodeDuplicate, b.Pin.Place(), "the pin %s stands here twice", b.Pin.Name)
			continue
		}
		if given[b.Pin.Name] = node; slices.Contains(names, b.Pin.Name) {
			continue
		}
		hint := e.guess(b.Pin.Name, slices.Values(names))
		if hint == "" {
			hint = "its pins are " + strings.Join(names, ", ")
		}
		e.failHint(hint, CodePin, b.Pin.Place(), "%s has no pin called %s", s.Type.Name, b.Pin.Name)
	}
	return given
}
