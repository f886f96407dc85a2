package netlist

import (
	"poise/netlist/syntax"
)

// match checks that the members of a match are there and alike, and how far they may differ. It acts only on samples and extremes.
func (e *elaborator) match(f *frame, m *syntax.Match) {
	if len(m.Members) < 2 {
		e.fail(CodeArguments, m.Place(), "a match has at least two members")
	}
	var first *Element
	seen := map[string]bool{}
	for _, r := range m.Members {
		full := f.prefix + r.String()
		if seen[full] {
			e.fail(CodeDuplicate, r.Place(), "%s stands here twice", full)
			continue
		}
		seen[full] = true
		if x := e.matched(m, r, full); x != nil {
			if first != nil && first.Kind != x.Kind {
				e.fail(CodeMatch, r.Place(), "%s is a %s and %s a %s: they cannot match", first.Name, first.Kind, full, x.Kind)
			}
			first = x
		}
	}
	if m.Within != nil {
		e.share(f.scope, m.Within, "the match")
		return
	}
	e.matchParams(f, m, first)
}

// matched finds a member of a match; it is nil if something is wrong with it.
func (e *elaborator) matched(m *syntax.Match, r syntax.Ref, full string) *Element {
	i, ok := e.element[full]
	if !ok {
		e.unknownElement(r, full)
		return nil
	}
	x := &e.circuit.Elements[i]
	key := matching{full, ""}
	switch {
	case x.Kind == "":
		return nil
	case m.Within != nil && x.Part != "":
		e.failHint("match ... { parameter within x }", CodeMatch, r.Place(), "%s is an instance: say which of its parameters match", full)
		return nil
	case m.Within == nil && x.Part == "":
		e.failHint("match ... within x", CodeMatch, r.Place(), "%s has a single value and no parameters", full)
		return nil
	case m.Within != nil && x.Signal != nil:
		e.fail(CodeMatch, r.Place(), "%s is a source: resistors, capacitors, inductors and instances match", full)
		return nil
	case m.Within != nil && !e.matchOnce(key):
		e.fail(CodeMatch, r.Place(), "%s is in another match already", full)
		return nil
	}
	return x
}

// matching is a value that a match governs.
type matching struct{ element, param string }

// matchOnce notes that a value is in a match and reports whether it is for the first time.
func (e *elaborator) matchOnce(k matching) bool {
	if e.matches[k] {
		return false
	}
	if e.matches == nil {
		e.matches = map[matching]bool{}
	}
	e.matches[k] = true
	return true
}

// matchParams checks the second form: { parameter within x, ... }.
func (e *elaborator) matchParams(f *frame, m *syntax.Match, member *Element) {
	seen := map[string]bool{}
	for _, p := range m.Params {
		e.share(f.scope, p.Within, "the match")
		if seen[p.Name.Name] {
			e.fail(CodeDuplicate, p.Name.Place(), "%s stands here twice", p.Name.Name)
		}
		seen[p.Name.Name] = true
		if member == nil {
			continue
		}
		if family := e.program.family(member.Kind); family != nil && family.Index(p.Name.Name) < 0 {
			e.unknownParam(p.Name, family)
			continue
		}
		for _, r := range m.Members {
			if !e.matchOnce(matching{f.prefix + r.String(), p.Name.Name}) {
				e.fail(CodeMatch, p.Name.Place(), "%s of %s is in another match already", p.Name.Name, r)
			}
		}
	}
}
