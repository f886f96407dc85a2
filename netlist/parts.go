package netlist

import (
	"errors"
	"iter"
	"math"
	"slices"
	"strings"
	"sync"

	"poise/devices"
	"poise/mna"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// partValues are the parameters of a part with all defaults, in the order of its family. They are nil if something is wrong with them.
type partValues struct {
	family *devices.Family
	values []float64
}

// partValues evaluates a part, following it to its family. The family is nil if it has none.
func (e *elaborator) partValues(home *frame, decl *syntax.PartDecl) partValues {
	if v, ok := e.values[decl]; ok && home == e.file {
		return v
	}
	chain, family := e.chain(home, decl)
	v := partValues{family: family}
	if family != nil {
		v.values = family.Defaults()
		ok := true
		for i := len(chain) - 1; i >= 0; i-- {
			ok = e.assignParams(chain[i].home.scope, chain[i].decl, family, v.values) && ok
		}
		if !ok {
			v.values = nil
		}
	}
	if home == e.file {
		e.values[decl] = v
	}
	return v
}

// link is one declaration on the way from a part to its family.
type link struct {
	decl *syntax.PartDecl
	home *frame
}

// chain follows a part to its family.
func (e *elaborator) chain(home *frame, decl *syntax.PartDecl) ([]link, *devices.Family) {
	list := []link{{decl, home}}
	for {
		last := list[len(list)-1]
		base := last.decl.Base
		next, where := last.home.part(base.Name)
		if next == nil {
			family := e.program.family(base.Name)
			if family == nil {
				e.unknownFamily(last.home, base)
			}
			return list, family
		}
		if slices.ContainsFunc(list, func(l link) bool { return l.decl == next }) {
			e.fail(CodeCycle, base.Place(), "the part %s is made of itself", decl.Name.Name)
			return list, nil
		}
		e.used[next] = true
		list = append(list, link{next, where})
	}
}

// laterFamilies are families of devices of the language that this version does not have.
func laterFamilies() []string { return []string{"njfet", "pjfet", "nmos", "pmos", "opamp", "switch"} }

func (e *elaborator) familyNames() iter.Seq[string] {
	return each(e.program.families, func(f *devices.Family) string { return f.Name })
}

func (e *elaborator) unknownFamily(home *frame, base syntax.Ident) {
	switch {
	case slices.Contains(laterFamilies(), base.Name):
		e.later(base.Place(), "the family "+base.Name)
	case e.program.blocks[base.Name] != nil:
		e.fail(CodeFamily, base.Place(), "%s is a block; a part is made of a family or of another part", base.Name)
	case e.unsure(syntax.Ref{Names: []syntax.Ident{base}}):
	default:
		hint := e.guess(base.Name, both(e.familyNames(), home.partNames()))
		if hint == "" {
			hint = "the families are " + strings.Join(slices.Collect(e.familyNames()), ", ")
		}
		e.failHint(hint, CodeFamily, base.Place(), "there is no family or part called %s", base.Name)
	}
}

// assignParams evaluates the parameters that a declaration sets.
func (e *elaborator) assignParams(s *scope, decl *syntax.PartDecl, family *devices.Family, values []float64) bool {
	ok := true
	seen := map[string]bool{}
	for _, p := range decl.Params {
		if seen[p.Name.Name] {
			ok = e.fail(CodeDuplicate, p.Name.Place(), "%s stands here twice", p.Name.Name)
		}
		seen[p.Name.Name] = true
		ok = e.assign(s, p.Name, p.Value, family, values) && ok
		_, good := e.modifiers(s, p.Modifiers, "a parameter", "tol", "sigma")
		ok = ok && good
	}
	return ok
}

// assign evaluates one parameter.
func (e *elaborator) assign(s *scope, name syntax.Ident, x syntax.Expr, family *devices.Family, values []float64) bool {
	i := family.Index(name.Name)
	if i < 0 {
		return e.unknownParam(name, family)
	}
	p := &family.Params[i]
	d, err := dimensionOf(p.Unit)
	if err != nil {
		return e.fail(CodeLiteral, name.Place(), "the family %s gives %s an unknown unit: %s", family.Name, p.Name, err)
	}
	v, ok := e.wanted(s, x, d, p.Name)
	if !ok {
		return false
	}
	if !p.Holds(v) {
		return e.fail(CodeRange, x.Place(), "%s is %s, want %s", p.Name, unit.Show(v, d), paramRange(p, d))
	}
	values[i] = v
	return true
}

// dimensions holds the units of the families' parameters and operating quantities that have been parsed.
var dimensions sync.Map // string to unit.Dimension

// dimensionOf returns the dimension of a unit of a catalogue.
func dimensionOf(name string) (unit.Dimension, error) {
	if d, ok := dimensions.Load(name); ok {
		return d.(unit.Dimension), nil
	}
	v, err := unit.ParseUnit(name)
	if err == nil {
		dimensions.Store(name, v.Dimension)
	}
	return v.Dimension, err
}

// paramRange writes the physical range of a parameter.
func paramRange(p *devices.Param, d unit.Dimension) string {
	var limits []string
	if !math.IsInf(p.Min, -1) {
		limits = append(limits, map[bool]string{true: "more than ", false: "at least "}[p.MinOpen]+unit.Show(p.Min, d))
	}
	if !math.IsInf(p.Max, 1) {
		limits = append(limits, map[bool]string{true: "less than ", false: "at most "}[p.MaxOpen]+unit.Show(p.Max, d))
	}
	if len(limits) == 0 {
		return "a number"
	}
	return strings.Join(limits, " and ")
}

func (e *elaborator) unknownParam(name syntax.Ident, family *devices.Family) bool {
	hint := e.guess(name.Name, each(family.Params, func(p *devices.Param) string { return p.Name }))
	if hint == "" {
		hint = "`poise parts " + family.Name + "` lists them"
	}
	return e.failHint(hint, CodeParameter, name.Place(), "the family %s has no parameter called %s", family.Name, name.Name)
}

// device makes the device of an instance: its part's, changed by what `with` says. It is nil if something is wrong.
func (e *elaborator) device(f *frame, with []syntax.Assign, decl *syntax.PartDecl, home *frame, v partValues, at syntax.Span) mna.Device {
	place := devices.Place{Temperature: e.circuit.Temperature, Area: 1}
	own, ok := e.place(f, with, v, &place)
	if !ok || v.values == nil {
		return nil
	}
	key := deviceKey{decl, place}
	shared := home == e.file && own == nil
	if d, known := e.made[key]; known && shared {
		return d
	}
	values := v.values
	if own != nil {
		values = own
	}
	d, err := v.family.New(values, place)
	if err != nil {
		e.deviceError(err, decl, at)
		return nil
	}
	if shared {
		e.made[key] = d
	}
	return d
}

// place evaluates what `with` says of a part's instance: where it stands, and parameters of its own, nil if there are none.
func (e *elaborator) place(f *frame, with []syntax.Assign, v partValues, place *devices.Place) (own []float64, ok bool) {
	ok = true
	seen := map[string]bool{}
	for _, a := range with {
		if seen[a.Name.Name] {
			ok = e.fail(CodeDuplicate, a.Name.Place(), "%s stands here twice", a.Name.Name)
			continue
		}
		seen[a.Name.Name] = true
		good := true
		switch a.Name.Name {
		case "area":
			if place.Area, good = e.wanted(f.scope, a.Value, unit.Number, "area"); good && !(place.Area > 0) {
				good = e.fail(CodeRange, a.Value.Place(), "the area is %s, want a positive number", unit.Trim(place.Area, unit.ShownDigits))
			}
		case "warmer":
			if good = e.difference(a.Value); good {
				place.Warmer, good = e.wanted(f.scope, a.Value, unit.Temperature, "warmer")
			}
		default:
			if own == nil {
				own = slices.Clone(v.values)
			}
			if v.values == nil {
				own = v.family.Defaults() // to look at what is written, all the same
			}
			good = e.assign(f.scope, a.Name, a.Value, v.family, own)
		}
		ok = ok && good
	}
	if ok && len(with) > 0 && !(place.Temperature+place.Warmer > 0) {
		ok = e.fail(CodeRange, with[0].Place(), "the part would be colder than 0 K")
	}
	return own, ok
}

// deviceError reports parameters that the family does not take together.
func (e *elaborator) deviceError(err error, decl *syntax.PartDecl, at syntax.Span) {
	var p *devices.ParamError
	if errors.As(err, &p) {
		e.fail(CodeRange, at, "%s of %s: want %s", p.Param, decl.Name.Name, p.Want)
		return
	}
	e.fail(CodeRange, at, "%s: %s", decl.Name.Name, err)
}
