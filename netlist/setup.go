package netlist

import (
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// enter takes over what a bench changes, at a point of its grid, or at the values of the file if point is nil.
func (e *elaborator) enter(b *Bench, point []float64) {
	e.bench = newScope(e.file.scope)
	var lets []*syntax.Let
	for _, s := range b.tree.Body {
		l, ok := s.(*syntax.Let)
		if !ok {
			continue
		}
		name := l.Name.Name
		if old := e.file.scope.lets[name]; old != nil && old.expr != nil {
			e.failHint("set "+name+" = ...", CodeDuplicate, l.Name.Place(), "%s is a value of the file, in %s; a bench changes it with `set`", name, e.program.lineName(e.program.named[name], l.File))
			continue
		}
		lets = append(lets, l)
	}
	e.declare(e.bench, lets)
	for _, s := range b.tree.Body {
		if x, ok := s.(*syntax.Set); ok {
			e.change(x.Target, &binding{at: x.Value.Place(), expr: x.Value, where: e.bench})
		}
	}
	for i, x := range point {
		v := b.Vary[i]
		e.change(v.target, &binding{at: v.Span, value: value{SI: x, Dimension: v.dimension}})
	}
}

// change puts a value in the place of what the file says: of a let at once, of a rail or a part when it is made.
func (e *elaborator) change(target syntax.Ref, b *binding) {
	name := target.String()
	if e.settings[name] != nil {
		e.fail(CodeDuplicate, target.Place(), "%s is set twice", name)
		return
	}
	b.name, b.used = name, true
	s := &setting{target: target, binding: b}
	e.settings[name] = s
	e.setOrder = append(e.setOrder, name)
	for _, scope := range []*scope{e.bench, e.file.scope} {
		if old := scope.lets[name]; old != nil && !old.fixed {
			b.used = false
			s.found = true
			scope.replace(b)
			return
		}
	}
}

// filled is a set-up being made, with the expectations of its bench.
type filled struct {
	*elaborator
	name    string
	tree    *syntax.Bench
	setup   *Setup
	expects []Expectation
	driven  map[string]bool // rails, sources, and ports with their modes, that a drive has set
}

// setup elaborates a bench at one point of its grid.
func (p *program) setup(r *reporter, b *Bench, point []float64, learning bool) *filled {
	e := p.begin(r, b, point)
	e.learning = learning
	e.elaborate()
	f := &filled{elaborator: e, name: b.Name, tree: b.tree, setup: &Setup{Circuit: e.circuit}, driven: map[string]bool{}}
	f.fill()
	return f
}

// fill evaluates drives, run, expectations and plots.
func (f *filled) fill() {
	for _, s := range f.tree.Body {
		switch x := s.(type) {
		case *syntax.Drive:
			f.drive(x)
		case *syntax.Run:
			if f.setup.Run == nil {
				f.run(x)
			}
		}
	}
	m := &measurer{elaborator: f.elaborator, scope: f.bench, run: f.setup.Run}
	f.setup.measurer = m
	for _, s := range f.tree.Body {
		switch x := s.(type) {
		case *syntax.Expect:
			f.expect(m, x)
		case *syntax.Plot:
			f.plot(m, x)
		}
	}
}

// run evaluates run T from t0 step h cold.
func (f *filled) run(x *syntax.Run) {
	if x.Periodic != nil {
		f.later(x.Place(), "`run periodic`")
		f.setup.Run = &Run{Span: x.Span} // what needs a run has one
		return
	}
	r := &Run{Cold: x.Cold, Span: x.Span}
	f.setup.Run = r
	until := f.time(x.Until, "the end of the run", &r.Until)
	from := f.time(x.From, "the start of the window", &r.From)
	step := f.time(x.Step, "the longest step", &r.Step)
	switch {
	case until && !(r.Until > 0):
		f.fail(CodeEmptyRange, x.Until.Place(), "a run lasts longer than 0 s")
	case from && !(r.From >= 0):
		f.fail(CodeEmptyRange, x.From.Place(), "the window starts at 0 s or later")
	case until && from && !(r.From < r.Until):
		f.fail(CodeEmptyRange, x.From.Place(), "the window starts before the end of the run")
	}
	if step && x.Step != nil && !(r.Step > 0) {
		f.fail(CodeRange, x.Step.Place(), "the longest step is positive")
	}
}

// time evaluates a time that may be left out.
func (f *filled) time(x syntax.Expr, what string, into *float64) (ok bool) {
	if x == nil {
		return true
	}
	*into, ok = f.wanted(f.bench, x, unit.Time, what)
	return ok
}

// plot resolves one plot.
func (f *filled) plot(m *measurer, x *syntax.Plot) {
	p := Plotted{Span: x.Span}
	if x.Title != nil {
		p.Title = x.Title.Value
	}
	for _, y := range x.Quantities {
		q, ok := m.quantity(y)
		if !ok {
			continue
		}
		switch s := q.Describe().Shape; {
		case s == Scalar || s == Word:
			f.fail(CodeShapes, y.Place(), "this is a single value; a plot shows waveforms of a run, or a metric over a range of frequencies")
		case len(p.Quantities) > 0 && s != p.Quantities[0].Describe().Shape:
			f.fail(CodeShapes, y.Place(), "a waveform and a curve over frequency do not go together: write two plots")
		default:
			p.Quantities = append(p.Quantities, q)
		}
	}
	f.setup.Plots = append(f.setup.Plots, p)
}
