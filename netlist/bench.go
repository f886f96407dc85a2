package netlist

import (
	"fmt"
	"maps"
	"math"
	"slices"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// check elaborates the whole program once, and every bench, to find all that is wrong.
func (p *program) check(file string) *Design {
	d := &Design{File: file, Cautions: p.cautions, program: p}
	if p.design != nil {
		d.Name = p.design.Name.Name
		if p.design.Title != nil {
			d.Title = p.design.Title.Value
		}
	}
	e := p.elaborate(nil, true)
	e.everyPart()
	broken := len(e.list.Errors()) > 0 || len(p.list.Errors()) > 0
	if !broken {
		e.structure()
	}
	if len(e.circuit.Elements) == 0 && len(e.list.Errors()) == 0 && len(p.list.Errors()) == 0 {
		e.fail(syntax.CodeUnexpected, syntax.Span{File: file, Start: syntax.Position{Line: 1, Column: 1}, End: syntax.Position{Line: 1, Column: 1}}, "the file describes no circuit")
	}
	p.list = append(p.list, e.list...)
	for _, s := range p.benches {
		b, list := p.bench(d, s)
		p.list = append(p.list, list...)
		d.Benches = append(d.Benches, b)
	}
	p.warnUnused(e)
	return d
}

// everyPart evaluates the parts that no instance has evaluated, too.
func (e *elaborator) everyPart() {
	names := make([]string, 0, len(e.program.parts))
	for name := range e.program.parts {
		names = append(names, name)
	}
	slices.Sort(names)
	for _, name := range names {
		used := e.program.used[name]
		bases := maps.Clone(e.program.used)
		e.partValues(e.file, e.program.parts[name])
		if !used {
			e.program.used = bases
		}
	}
}

// warnUnused names parts, blocks and lets of the main file that nothing uses.
func (p *program) warnUnused(e *elaborator) {
	if len(p.list.Errors()) > 0 {
		return
	}
	for name, own := range p.own {
		if !own || p.used[name] {
			continue
		}
		if b := e.file.scope.lets[name]; b != nil && b.used != nil && *b.used {
			continue
		}
		p.warn(CodeUnused, p.named[name], fmt.Sprintf("nothing uses %s", name))
	}
}

// bench checks one bench: its grid, its first point, its structure.
func (p *program) bench(d *Design, s *syntax.Bench) (*Bench, syntax.DiagnosticList) {
	b := &Bench{Name: s.Name.Name, Span: s.Span, design: d, tree: s}
	if s.Title != nil {
		b.Title = s.Title.Value
	}
	e := p.elaborate(nil, false)
	e.list = nil // what is wrong with the file is reported already
	scope := newScope(e.file.scope)
	expects, plots := 0, 0
	for _, x := range s.Body {
		switch x := x.(type) {
		case *syntax.Vary:
			e.vary(b, scope, x)
		case *syntax.Run:
			if b.HasRun {
				e.fail(CodeBench, x.Place(), "the bench has a run already")
			}
			b.HasRun = true
		case *syntax.Spread:
			p.laterIn(e, x.Place(), "`spread`")
		case *syntax.Extremes:
			p.laterIn(e, x.Place(), "`extremes`")
		case *syntax.Expect:
			expects++
			if x.Share != nil {
				p.laterIn(e, x.Share.Place(), "`for`, the share of spread samples,")
			}
		case *syntax.Plot:
			plots++
		case *syntax.Set, *syntax.Let, *syntax.Drive:
		default:
			e.fail(syntax.CodeMisplaced, x.Place(), "this statement does not belong in a bench")
		}
	}
	if expects+plots == 0 {
		e.checking = true
		e.warn(CodeNothing, s.Place(), fmt.Sprintf("the bench %s expects and plots nothing", b.Name))
	}
	list := e.list
	if len(list.Errors()) > 0 || len(p.list.Errors()) > 0 {
		return b, list
	}
	var point []float64
	for _, v := range b.Vary {
		point = append(point, v.Values[0])
	}
	f := p.setup(b, point)
	if len(f.e.list.Errors()) == 0 && slices.ContainsFunc(f.e.circuit.Inputs, func(in Input) bool { return in.Open }) {
		f.e.structure()
	}
	b.Expectations = f.expects
	return b, append(list, f.e.list...)
}

// vary evaluates one axis of the grid.
func (e *elaborator) vary(b *Bench, s *scope, x *syntax.Vary) {
	v := Vary{Target: x.Target.String(), Span: x.Span}
	var d unit.Dimension
	one := func(x syntax.Expr) (float64, bool) {
		y, ok := e.eval(s, x)
		if !ok || !e.plain(y, x) || !e.finite(y, x) {
			return 0, false
		}
		if len(v.Values) > 0 && y.Dimension != d {
			return 0, e.fail(CodeDimension, x.Place(), fmt.Sprintf("the values of one axis are alike: %s beside %s", y.Dimension.Noun(), d.Noun()))
		}
		d = y.Dimension
		return y.SI, true
	}
	if x.From == nil {
		for _, item := range x.List {
			if y, ok := one(item); ok {
				v.Values = append(v.Values, y)
			}
		}
	} else {
		e.varyRange(s, x, &v, &d)
	}
	if len(v.Values) == 0 {
		return
	}
	total := len(v.Values)
	for _, other := range b.Vary {
		if other.Target == v.Target {
			e.fail(CodeDuplicate, x.Target.Place(), fmt.Sprintf("%s is varied twice", v.Target))
			return
		}
		total *= len(other.Values)
	}
	if total > e.program.limits.Points {
		e.fail(CodeLimit, x.Place(), fmt.Sprintf("the grid has %d points; at most %d are computed", total, e.program.limits.Points))
		return
	}
	v.Unit, v.dimension = d.Symbol(), d
	b.Vary = append(b.Vary, v)
}

// varyRange evaluates a..b by step, or a..b count n.
func (e *elaborator) varyRange(s *scope, x *syntax.Vary, v *Vary, d *unit.Dimension) {
	from, ok1 := e.eval(s, x.From)
	to, ok2 := e.eval(s, x.To)
	if !ok1 || !ok2 {
		return
	}
	if from.Dimension != to.Dimension {
		e.fail(CodeDimension, x.To.Place(), fmt.Sprintf("the range goes from %s to %s", from.Dimension.Noun(), to.Dimension.Noun()))
		return
	}
	*d = from.Dimension
	n := 0.0
	if x.Count != nil {
		var ok bool
		if n, ok = e.wanted(s, x.Count, unit.Number, "the count"); !ok {
			return
		}
		if !(n >= 2 && n == math.Trunc(n)) {
			e.fail(CodeRange, x.Count.Place(), "the count is a whole number from 2")
			return
		}
	} else {
		step, ok := e.wanted(s, x.By, from.Dimension, "the step")
		if !ok {
			return
		}
		if !(step*(to.SI-from.SI) > 0) {
			e.fail(CodeEmptyRange, x.By.Place(), "the step does not lead from the first value to the last")
			return
		}
		const slack = 1e-9 // of a step: the last value is met in spite of rounding
		n = math.Floor((to.SI-from.SI)/step+slack) + 1
		to.SI = from.SI + (n-1)*step
	}
	if n > float64(e.program.limits.Points) {
		e.fail(CodeLimit, x.Place(), fmt.Sprintf("the range has more than %d points", e.program.limits.Points))
		return
	}
	if from.SI == to.SI && n > 1 {
		e.fail(CodeEmptyRange, x.From.Place(), "the range is empty")
		return
	}
	for i := range int(n) {
		share := 0.0
		if n > 1 {
			share = float64(i) / (n - 1)
		}
		v.Values = append(v.Values, from.SI+share*(to.SI-from.SI))
	}
}

// filled is a set-up being made, with the problems met on the way.
type filled struct {
	e       *elaborator
	setup   *Setup
	expects []Expectation
	scope   *scope
}

// setup evaluates a bench at one point of its grid.
func (p *program) setup(b *Bench, point []float64) *filled {
	overrides := map[string]*override{}
	base := p.elaborateLets()
	scope := newScope(base.file.scope)
	for i, v := range b.Vary {
		overrides[v.Target] = &override{value: value{SI: point[i], Dimension: v.dimension}, at: v.Span}
	}
	base.benchLets(b, scope, overrides)
	for _, s := range b.tree.Body {
		if x, ok := s.(*syntax.Set); ok {
			name := x.Target.String()
			if _, twice := overrides[name]; twice {
				base.fail(CodeDuplicate, x.Target.Place(), fmt.Sprintf("%s is set twice", name))
				continue
			}
			if v, ok := base.eval(scope, x.Value); ok && base.plain(v, x.Value) {
				overrides[name] = &override{value: v, at: x.Value.Place()}
			}
		}
	}
	e := p.elaborate(overrides, false)
	e.list = append(base.list, e.list...)
	inner := newScope(e.file.scope)
	e.benchLets(b, inner, overrides)
	for name, o := range overrides {
		if !o.found {
			e.unknownTarget(o.at, name)
		}
	}
	f := &filled{e: e, setup: &Setup{Circuit: e.circuit}, scope: inner}
	f.fill(b)
	return f
}

// elaborateLets evaluates the values of the file alone.
func (p *program) elaborateLets() *elaborator {
	e := &elaborator{program: p, circuit: &Circuit{Nodes: []string{"gnd"}}, nodes: map[string]int{}, element: map[string]int{}, rail: map[string]int{}}
	e.file = &frame{scope: newScope(nil), parts: p.parts}
	e.predefine()
	e.bindLets(e.file.scope, p.lets)
	e.list = nil // they are reported when the file is elaborated
	return e
}

// benchLets binds the lets of a bench, some of which may be varied.
func (e *elaborator) benchLets(b *Bench, s *scope, overrides map[string]*override) {
	var lets []*syntax.Let
	for _, x := range b.tree.Body {
		if l, ok := x.(*syntax.Let); ok {
			lets = append(lets, l)
			if o, is := overrides[l.Name.Name]; is {
				o.found = true
				s.with = append(s.with, changed{l.Name.Name, o.value, l.Value})
			}
		}
	}
	e.bindLets(s, lets)
}

func (e *elaborator) unknownTarget(at syntax.Span, name string) {
	d := e.diagnostic(CodeUnknown, at, fmt.Sprintf("there is no value, rail or part called %s to change", name))
	names := e.file.scope.names()
	for n := range e.element {
		names = append(names, n)
	}
	for n := range e.rail {
		names = append(names, n)
	}
	slices.Sort(names)
	if near, ok := syntax.Nearest(name, names); ok {
		d.Hint = "did you mean " + near + "?"
	}
	e.add(d)
}

// fill evaluates drives, run, expectations and plots.
func (f *filled) fill(b *Bench) {
	for _, s := range b.tree.Body {
		if x, ok := s.(*syntax.Drive); ok {
			f.drive(x)
		}
	}
	for _, s := range b.tree.Body {
		if x, ok := s.(*syntax.Run); ok && f.setup.Run == nil {
			f.run(x)
		}
	}
	m := &measurer{e: f.e, scope: f.scope, run: f.setup.Run != nil}
	f.setup.measurer = m
	for _, s := range b.tree.Body {
		switch x := s.(type) {
		case *syntax.Expect:
			f.expect(m, x)
		case *syntax.Plot:
			p := Plotted{Span: x.Span}
			if x.Title != nil {
				p.Title = x.Title.Value
			}
			for _, y := range x.Quantities {
				q, ok := m.quantity(y)
				if !ok {
					continue
				}
				if s := q.Describe().Shape; s == Scalar || s == Word {
					f.e.fail(CodeShapes, y.Place(), "this is a single value; a plot shows waveforms of a run, or a metric over a range of frequencies")
				}
				p.Quantities = append(p.Quantities, q)
			}
			f.setup.Plots = append(f.setup.Plots, p)
		}
	}
}

// drive puts a value or waveform in the place of what the circuit says.
func (f *filled) drive(x *syntax.Drive) {
	e, c := f.e, f.e.circuit
	name := x.Target.String()
	for i := range c.Inputs {
		if c.Inputs[i].Name == name {
			f.driveInput(x, &c.Inputs[i])
			return
		}
	}
	r, isRail := e.rail[name]
	s, isElement := e.element[name]
	isSource := isElement && c.Elements[s].Signal != nil
	switch {
	case !isRail && !isSource:
		d := e.diagnostic(CodeUnknown, x.Target.Place(), fmt.Sprintf("there is no input, rail or source called %s", name))
		var names []string
		for _, in := range c.Inputs {
			names = append(names, in.Name)
		}
		for n := range e.rail {
			names = append(names, n)
		}
		slices.Sort(names)
		if near, ok := syntax.Nearest(name, names); ok {
			d.Hint = "did you mean " + near + "?"
		}
		e.add(d)
		return
	case x.Mode != nil || x.Open:
		e.fail(CodeBench, x.Place(), fmt.Sprintf("%s is no input: write `drive %s = ...`", name, name))
		return
	}
	w, ok := e.signalOf(f.scope, x.Value)
	if !ok {
		return
	}
	want := unit.Voltage
	if isSource && c.Elements[s].Kind == KindCurrentSource {
		want = unit.Current
	}
	if w.dimension != want {
		e.fail(CodeDimension, x.Value.Place(), fmt.Sprintf("%s is driven by %s, not by %s", name, want.Noun(), w.dimension.Noun()))
		return
	}
	if isRail {
		c.Rails[r].Signal = w.signal
		return
	}
	element := &c.Elements[s]
	element.Signal, element.Value = w.signal, w.signal.At(0)
	if want == unit.Voltage {
		element.Device = devices.NewVoltageSource(w.signal)
	} else {
		element.Device = devices.NewCurrentSource(w.signal)
	}
}

func (f *filled) driveInput(x *syntax.Drive, in *Input) {
	e := f.e
	if x.Open {
		in.Open = true
		return
	}
	modes := modesOf(in)
	if x.Mode == nil || !slices.Contains(modes, x.Mode.Name) {
		e.fail(CodePort, x.Place(), fmt.Sprintf("say the mode in which %s is driven: %s", in.Name, pinNames(modes)))
		return
	}
	w, ok := e.signalOf(f.scope, x.Value)
	if !ok {
		return
	}
	if want := drive(in.Current); w.dimension != want {
		e.fail(CodeDimension, x.Value.Place(), fmt.Sprintf("%s is driven by %s, not by %s", in.Name, want.Noun(), w.dimension.Noun()))
		return
	}
	place := &in.Single
	switch x.Mode.Name {
	case "differential":
		place = &in.Differential
	case "common":
		place = &in.Common
	}
	if *place != nil {
		e.fail(CodeDuplicate, x.Place(), fmt.Sprintf("the %s mode of %s is driven twice", x.Mode.Name, in.Name))
		return
	}
	*place = w.signal
}

func (f *filled) run(x *syntax.Run) {
	e := f.e
	if x.Periodic != nil {
		e.program.laterIn(e, x.Place(), "`run periodic`")
		return
	}
	r := &Run{Cold: x.Cold, Span: x.Span}
	ok := true
	read := func(y syntax.Expr, what string, into *float64) {
		if y == nil {
			return
		}
		v, good := e.wanted(f.scope, y, unit.Time, what)
		*into = v
		ok = ok && good
	}
	read(x.Until, "the end of the run", &r.Until)
	read(x.From, "the start of the window", &r.From)
	read(x.Step, "the longest step", &r.Step)
	switch {
	case !ok:
		return
	case !(r.Until > 0):
		e.fail(CodeEmptyRange, x.Until.Place(), "a run lasts longer than 0 s")
		return
	case !(r.From >= 0 && r.From < r.Until):
		e.fail(CodeEmptyRange, x.From.Place(), "the window starts at 0 s or later and before the end of the run")
		return
	case x.Step != nil && !(r.Step > 0):
		e.fail(CodeRange, x.Step.Place(), "the longest step is positive")
		return
	}
	f.setup.Run = r
}

// expect resolves one expectation.
func (f *filled) expect(m *measurer, x *syntax.Expect) {
	n := Expectation{Span: x.Span}
	if x.Label != nil {
		n.Label = x.Label.Value
	}
	src := f.e.program.sources[x.File]
	n.Text = syntax.Tidy(src[x.Quantity.Place().Start.Offset:min(len(src), x.Comparison.End.Offset)])
	q, ok := m.quantity(x.Quantity)
	if !ok {
		return
	}
	l, ok := f.limit(q, &x.Comparison)
	if !ok {
		return
	}
	n.Unit, n.Ratio, n.Word = q.Describe().Unit.Symbol(), l.Ratio, l.Word
	f.expects = append(f.expects, n)
	f.setup.Expected = append(f.setup.Expected, Expected{q, l})
}

// limit evaluates a comparison.
func (f *filled) limit(q Quantity, c *syntax.Comparison) (l Limit, ok bool) {
	e := f.e
	l.Low, l.High = math.Inf(-1), math.Inf(1)
	if q.Describe().Shape == Word {
		return f.wordLimit(q, c)
	}
	v, ok := e.eval(f.scope, c.Value)
	if !ok || !e.plain(v, c.Value) {
		return l, false
	}
	if !f.sameUnit(q, v, c.Value) {
		return l, false
	}
	l.Ratio = v.Ratio
	switch c.Operator {
	case syntax.AtLeast:
		l.Low = v.SI
	case syntax.Above:
		l.Low, l.LowOpen = v.SI, true
	case syntax.AtMost:
		l.High = v.SI
	case syntax.Below:
		l.High, l.HighOpen = v.SI, true
	case syntax.Within:
		high, ok := e.eval(f.scope, c.High)
		if !ok || !e.plain(high, c.High) || !f.sameUnit(q, high, c.High) {
			return l, false
		}
		l.Low, l.High, l.Ratio = v.SI, high.SI, v.Ratio || high.Ratio
		if !(l.Low < l.High) {
			at := c.Value.Place()
			at.End = c.High.Place().End
			return l, e.fail(CodeEmptyRange, at, "the range is empty or reversed")
		}
	case syntax.Near:
		return l, f.near(q, v, c, &l)
	default:
		d := e.diagnostic(CodeComparison, c.Place(), "a number is hardly ever met exactly")
		d.Hint = "write `= value +- tolerance`"
		return l, e.add(d)
	}
	return l, true
}

// near evaluates = v +- tolerance.
func (f *filled) near(q Quantity, v value, c *syntax.Comparison, l *Limit) bool {
	e := f.e
	t, ok := e.eval(f.scope, c.Tolerance)
	if !ok || !e.plain(t, c.Tolerance) {
		return false
	}
	switch {
	case c.Relative:
		l.Low, l.High = v.SI-math.Abs(v.SI)*t.SI, v.SI+math.Abs(v.SI)*t.SI
	case t.Ratio:
		if !v.Ratio {
			return e.fail(CodeDimension, c.Tolerance.Place(), "a tolerance in dB belongs to a value in dB")
		}
		r := math.Max(t.SI, 1/t.SI)
		l.Low, l.High = v.SI/r, v.SI*r
	default:
		if !f.sameUnit(q, t, c.Tolerance) {
			return false
		}
		l.Low, l.High = v.SI-t.SI, v.SI+t.SI
	}
	if !(l.Low < l.High) {
		return e.fail(CodeEmptyRange, c.Tolerance.Place(), "a tolerance is positive")
	}
	return true
}

func (f *filled) sameUnit(q Quantity, v value, x syntax.Expr) bool {
	if v.Dimension == q.Describe().Unit {
		return true
	}
	return f.e.fail(CodeDimension, x.Place(), fmt.Sprintf("%s is %s, but the limit is %s", q.Describe().Text, q.Describe().Unit.Noun(), v.Dimension.Noun()))
}

// wordLimit evaluates = word.
func (f *filled) wordLimit(q Quantity, c *syntax.Comparison) (l Limit, ok bool) {
	e := f.e
	for {
		inner, is := q.(*Quiescent)
		if !is {
			break
		}
		q = inner.X
	}
	o := q.(*Operating)
	i := e.element[o.Element]
	family := e.program.family(e.circuit.Elements[i].Kind)
	at := slices.IndexFunc(family.Operating, func(x devices.OperatingQuantity) bool { return x.Name == o.Name })
	words := family.Operating[at].Words
	n, isName := c.Value.(*syntax.Name)
	if c.Operator != syntax.Equal || !isName {
		return l, e.fail(CodeComparison, c.Place(), fmt.Sprintf("%s is one of the words %s: write `= word`", q.Describe().Text, pinNames(words)))
	}
	if !slices.Contains(words, n.String()) {
		return l, e.fail(CodeComparison, n.Place(), fmt.Sprintf("%s is one of the words %s", q.Describe().Text, pinNames(words)))
	}
	l.Word = n.String()
	return l, true
}
