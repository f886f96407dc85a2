package netlist

import (
	"iter"
	"maps"
	"slices"

	"poise/netlist/syntax"
)

// blockInstance elaborates the contents of a block.
func (e *elaborator) blockInstance(f *frame, s *syntax.Instance, b *syntax.Block) {
	full := f.prefix + s.Name.Name
	given := e.pinNodes(f, s, pinsOf(b))
	if !e.mayStand(f, s, b) || !e.claimElement(full, s.Name.Place()) {
		e.lost[full] = true
		e.suspect(slices.Collect(maps.Values(given))...)
		return
	}
	e.stands[full] = s.Name.Place()
	inner := &frame{
		scope: newScope(e.file.scope), prefix: full + ".", outer: e.file,
		parts: map[string]*syntax.PartDecl{}, pins: map[string]int{}, blocks: append(slices.Clone(f.blocks), b),
	}
	var missing []string
	for _, pin := range b.Pins {
		n, ok := given[pin.Name]
		if ok {
			e.degree[n]-- // the pin connects only what stands behind it
		} else {
			missing = append(missing, pin.Name)
			n = e.newNode(inner.prefix+pin.Name, s.Place())
			e.degree[n] += 2 // one error is enough
		}
		inner.pins[pin.Name] = n
		e.nodes[inner.prefix+pin.Name] = n
	}
	e.missingPins(s, missing)
	e.blockLets(b, inner)
	e.bindWith(f, s, inner)
	e.demand(inner.scope)
	e.blockBody(b, inner)
	for _, name := range inner.scope.order {
		if e.learning && !inner.scope.lets[name].used {
			e.warn(CodeUnused, declared(b, name), "nothing uses %s", name)
		}
	}
}

func pinsOf(b *syntax.Block) []string {
	names := make([]string, len(b.Pins))
	for i, p := range b.Pins {
		names[i] = p.Name
	}
	return names
}

// mayStand keeps blocks from containing themselves, and from nesting too deeply.
func (e *elaborator) mayStand(f *frame, s *syntax.Instance, b *syntax.Block) bool {
	if slices.Contains(f.blocks, b) {
		return e.fail(CodeRecursion, s.Type.Place(), "the block %s contains itself", b.Name.Name)
	}
	if len(f.blocks) >= e.program.limits.Nesting {
		return e.fail(CodeLimit, s.Type.Place(), "blocks stand within blocks more than %d deep", e.program.limits.Nesting)
	}
	return true
}

// blockLets declares the values of an instance.
func (e *elaborator) blockLets(b *syntax.Block, inner *frame) {
	var lets []*syntax.Let
	for _, x := range b.Body {
		if l, ok := x.(*syntax.Let); ok {
			lets = append(lets, l)
		}
	}
	e.declare(inner.scope, lets)
}

// declared returns where a block declares a value.
func declared(b *syntax.Block, name string) syntax.Span {
	for _, x := range b.Body {
		if l, ok := x.(*syntax.Let); ok && l.Name.Name == name {
			return l.Name.Place()
		}
	}
	return b.Place()
}

// bindWith changes the values of a block for one instance, and again where a bench changes them by their full names.
func (e *elaborator) bindWith(f *frame, s *syntax.Instance, inner *frame) {
	seen := map[string]bool{}
	for _, a := range s.With {
		name := a.Name.Name
		switch _, known := inner.scope.lets[name]; {
		case !known:
			e.failHint(e.guess(name, maps.Keys(inner.scope.lets)), CodeUnknown, a.Name.Place(), "the block %s has no value called %s", s.Type.Name, name)
		case seen[name]:
			e.fail(CodeDuplicate, a.Name.Place(), "%s stands here twice", name)
		default:
			inner.scope.change(&binding{name: name, at: a.Value.Place(), expr: a.Value, where: f.scope})
		}
		seen[name] = true
	}
	for full, set := range e.settings {
		name, ok := within(full, inner.prefix)
		if ok && inner.scope.lets[name] != nil {
			set.found = true
			set.binding.name = name
			inner.scope.change(set.binding)
		}
	}
}

// within returns the rest of a full name behind a prefix.
func within(full, prefix string) (string, bool) {
	if len(full) > len(prefix) && full[:len(prefix)] == prefix {
		return full[len(prefix):], true
	}
	return "", false
}

// blockBody elaborates the circuit of an instance.
func (e *elaborator) blockBody(b *syntax.Block, inner *frame) {
	var circuit []syntax.Statement
	for _, x := range b.Body {
		switch x := x.(type) {
		case *syntax.Let:
		case *syntax.PartDecl:
			if old, twice := inner.parts[x.Name.Name]; twice {
				e.fail(CodeDuplicate, x.Name.Place(), "there is a part called %s already, in line %d", x.Name.Name, old.Start.Line)
				continue
			}
			inner.parts[x.Name.Name] = x
		case *syntax.Path, *syntax.Instance, *syntax.Match:
			circuit = append(circuit, x)
		case *syntax.Couple:
			e.later(x.Place(), "`couple`")
		default:
			e.fail(syntax.CodeMisplaced, x.Place(), "this statement does not belong in a block")
		}
	}
	e.statements(inner, circuit)
	for _, d := range sortedDecls(maps.Values(inner.parts)) {
		if e.learning && !e.used[d] {
			e.warn(CodeUnused, d.Name.Place(), "nothing uses %s", d.Name.Name)
			e.partValues(inner, d)
		}
	}
}

// sortedDecls puts declarations in the order in which they stand.
func sortedDecls(decls iter.Seq[*syntax.PartDecl]) []*syntax.PartDecl {
	return slices.SortedFunc(decls, func(a, b *syntax.PartDecl) int {
		if a.File != b.File {
			return len(a.File) - len(b.File)
		}
		return a.Start.Offset - b.Start.Offset
	})
}

// unusedBlock looks at a block of which there is no instance, for what is wrong inside.
func (e *elaborator) unusedBlock(b *syntax.Block) {
	f := &frame{scope: e.file.scope, prefix: "", parts: e.file.parts}
	s := &syntax.Instance{Span: b.Name.Span, Name: syntax.Ident{Span: b.Name.Span, Name: b.Name.Name}, Type: b.Name}
	for _, p := range b.Pins {
		s.Pins = append(s.Pins, syntax.PinBinding{Span: p.Span, Pin: p, Node: syntax.Ref{Span: p.Span, Names: []syntax.Ident{p}}})
	}
	e.blockInstance(f, s, b)
}
