package netlist

import (
	"iter"
	"maps"
	"math"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// value is an evaluated expression.
type value = unit.Value

// scope is where names of values are looked up: a bench in its file, a block's instance in the file.
type scope struct {
	outer *scope
	lets  map[string]*binding
	order []string // of those that are declared
}

func newScope(outer *scope) *scope { return &scope{outer: outer, lets: map[string]*binding{}} }

// find looks a name up from the inside out.
func (s *scope) find(name string) *binding {
	for ; s != nil; s = s.outer {
		if b, ok := s.lets[name]; ok {
			return b
		}
	}
	return nil
}

// names yields all names of a scope.
func (s *scope) names() iter.Seq[string] {
	return func(yield func(string) bool) {
		for at := s; at != nil; at = at.outer {
			for name := range maps.Keys(at.lets) {
				if !yield(name) {
					return
				}
			}
		}
	}
}

// binding is a named value, evaluated when it is first asked for, so that lets may stand in any order.
type binding struct {
	name  string
	at    syntax.Span // where it is named, or where its new value stands
	expr  syntax.Expr // nil: the value is given
	where *scope      // where expr is evaluated
	base  *binding    // what it stands in the place of: its value has the same dimension
	fixed bool        // cannot be changed: pi
	used  bool        // something asked for it

	state bindingState
	value value
}

type bindingState uint8

const (
	notEvaluated bindingState = iota
	evaluating
	evaluated
	broken // what is wrong is reported
)

// predefined returns the values that every file has.
func predefined() []*binding {
	given := func(name string, si float64, d unit.Dimension, fixed bool) *binding {
		return &binding{name: name, value: value{SI: si, Dimension: d}, fixed: fixed, used: true}
	}
	return []*binding{
		given("pi", math.Pi, unit.Number, true),
		given("k_B", devices.Boltzmann, unit.Energy.Div(unit.Temperature), true),
		given("q_e", devices.ElementaryCharge, unit.Charge, true),
		given("temperature", devices.ReferenceTemperature, unit.Temperature, false),
		given("accuracy", defaultAccuracy, unit.Number, false),
	}
}

const defaultAccuracy = 1e-4

// isPredefined reports whether a name is predefined, and whether it can be set.
func isPredefined(name string) (is, settable bool) {
	switch name {
	case "pi", "k_B", "q_e":
		return true, false
	case "temperature", "accuracy":
		return true, true
	}
	return false, false
}

// declare enters lets into a scope without evaluating them.
func (e *elaborator) declare(s *scope, lets []*syntax.Let) {
	for _, l := range lets {
		name := l.Name.Name
		if old, twice := s.lets[name]; twice && old.expr != nil {
			e.fail(CodeDuplicate, l.Name.Place(), "there is a value called %s already, in %s", name, e.program.lineName(old.at, l.File))
			continue
		}
		if e.canName(l.Name) {
			s.lets[name] = &binding{name: name, at: l.Name.Place(), expr: l.Value, where: s}
			s.order = append(s.order, name)
		}
	}
}

// canName reports whether a name may be given to a value.
func (e *elaborator) canName(n syntax.Ident) bool {
	if is, settable := isPredefined(n.Name); is {
		hint := ""
		if settable {
			hint = "to change it write `set " + n.Name + " = ...`"
		}
		return e.failHint(hint, CodeDuplicate, n.Place(), "%s is predefined", n.Name)
	}
	if unit.IsUnitName(n.Name) {
		return e.fail(CodeUnitName, n.Place(), "%s is a unit and cannot be the name of a value", n.Name)
	}
	return true
}

// replace puts a binding in the place of a let of a scope. In its own expression the name still means the old value, so that
// `set Iq = 1.1 * Iq` does what it says.
func (s *scope) replace(b *binding) {
	b.base = s.lets[b.name]
	if b.expr != nil {
		b.where = &scope{outer: b.where, lets: map[string]*binding{b.name: b.base}}
	}
	s.lets[b.name] = b
}

// change puts a binding in the place of a let; its expression belongs to another scope.
func (s *scope) change(b *binding) {
	b.base = s.lets[b.name]
	s.lets[b.name] = b
}

// force evaluates a binding once; at is where it is asked for.
func (e *elaborator) force(b *binding, at syntax.Span) (value, bool) {
	switch b.state {
	case evaluated:
		return b.value, true
	case broken:
		return value{}, false
	case evaluating:
		return value{}, e.fail(CodeCycle, at, "the value of %s depends on itself: %s", b.name, e.ring(b))
	}
	b.state = evaluating
	e.forcing = append(e.forcing, b)
	v, ok := e.valueOf(b)
	e.forcing = e.forcing[:len(e.forcing)-1]
	b.value, b.state = v, evaluated
	if !ok {
		b.state = broken
	}
	return v, ok
}

// ring names the values on the way round a cycle.
func (e *elaborator) ring(b *binding) string {
	var names []string
	for i := len(e.forcing) - 1; i >= 0; i-- {
		names = append(names, e.forcing[i].name)
		if e.forcing[i] == b {
			break
		}
	}
	slices.Reverse(names)
	names = append(names, b.name)
	return strings.Join(names, " needs ")
}

func (e *elaborator) valueOf(b *binding) (v value, ok bool) {
	v, ok = b.value, true
	if b.expr != nil {
		if v, ok = e.eval(b.where, b.expr); !ok || !e.finite(v, b.expr) {
			return v, false
		}
	}
	if b.base == nil {
		return v, ok
	}
	base, known := e.force(b.base, b.at)
	if known && base.Dimension != v.Dimension {
		return v, e.fail(CodeDimension, b.at, "%s is %s, not %s", b.name, base.Dimension.Noun(), v.Dimension.Noun())
	}
	return v, known
}

// demand evaluates what is declared in a scope, whether or not something asks for it.
func (e *elaborator) demand(s *scope) {
	for _, name := range s.order {
		b := s.lets[name]
		e.force(b, b.at)
	}
}
