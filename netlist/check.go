package netlist

import (
	"fmt"
	"maps"
	"slices"
	"strings"

	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// check elaborates the whole program, and every bench at the ends of its grid, to find all that is wrong.
func (p *program) check() *Design {
	d := &Design{File: p.main, Cautions: p.cautions, program: p}
	if p.design != nil {
		d.Name = p.design.Name.Name
		if p.design.Title != nil {
			d.Title = p.design.Title.Value
		}
	}
	e := p.begin(&p.reporter, nil, nil)
	e.learning = true
	e.elaborate()
	p.checkPresence(e)
	if !p.unread && !e.full {
		e.structure("")
	}
	used := usage{lets: map[string]bool{}, decls: map[any]bool{}}
	used.add(e)
	p.checkUninstantiated(used)
	for _, s := range p.benches {
		d.Benches = append(d.Benches, p.checkBench(d, s, used))
	}
	if !p.failed() {
		p.warnUnused(used)
	}
	return d
}

// checkPresence wants a file to say what it is and to hold a circuit.
func (p *program) checkPresence(e *elaborator) {
	start := syntax.Position{Line: 1, Column: 1}
	at := syntax.Span{File: p.main, Start: start, End: start}
	switch {
	case p.unread:
	case p.design == nil:
		p.failHint("design NAME \"title\"", CodeNoDesign, at, "the file does not say what it is")
	case len(p.circuit)+len(p.rails)+len(e.circuit.Elements) == 0 && !p.failed():
		p.fail(CodeNoCircuit, at, "the file describes no circuit")
	}
}

// usage notes what is used of what a file declares.
type usage struct {
	lets  map[string]bool
	decls map[any]bool // parts and blocks
}

func (u usage) add(e *elaborator) {
	for name, b := range e.file.scope.lets {
		if b.used {
			u.lets[name] = true
		}
	}
	maps.Copy(u.decls, e.used)
}

// checkUninstantiated looks at parts and blocks of which there is no instance, for what is wrong in them.
func (p *program) checkUninstantiated(used usage) {
	for _, b := range sortedBlocks(maps.Values(p.blocks)) {
		if !used.decls[b] && !p.inLibrary(b.File) {
			e := p.begin(&p.reporter, nil, nil)
			e.learning = true
			e.ambient()
			e.unusedBlock(b)
			used.add(e)
		}
	}
	e := p.begin(&p.reporter, nil, nil)
	e.learning = true
	e.ambient()
	for _, decl := range sortedDecls(maps.Values(p.parts)) {
		if !used.decls[decl] && !p.inLibrary(decl.File) {
			v := e.partValues(e.file, decl)
			e.device(e.file, nil, decl, e.file, v, decl.Name.Place())
		}
	}
	used.add(e)
}

func sortedBlocks(blocks func(func(*syntax.Block) bool)) []*syntax.Block {
	return slices.SortedFunc(blocks, func(a, b *syntax.Block) int {
		if a.File != b.File {
			return strings.Compare(a.File, b.File)
		}
		return a.Start.Offset - b.Start.Offset
	})
}

// warnUnused names parts, blocks and lets of the main file that nothing uses.
func (p *program) warnUnused(used usage) {
	for name, at := range p.named {
		isUsed := used.lets[name]
		if d, ok := p.parts[name]; ok {
			isUsed = used.decls[d]
		} else if b, ok := p.blocks[name]; ok {
			isUsed = used.decls[b]
		}
		if !isUsed && at.File == p.main {
			p.warn(CodeUnused, at, "nothing uses %s", name)
		}
	}
}

// checkBench checks one bench: its statements, its grid, and the set-ups at the ends of its grid.
func (p *program) checkBench(d *Design, s *syntax.Bench, used usage) *Bench {
	b := &Bench{Name: s.Name.Name, Span: s.Span, design: d, tree: s}
	if s.Title != nil {
		b.Title = s.Title.Value
	}
	e := p.begin(&p.reporter, b, nil)
	e.learning = true
	e.benchStatements(b)
	e.axes(b)
	first := make([]float64, len(b.Vary))
	for i, v := range b.Vary {
		first[i] = v.Values[0]
	}
	f := p.setupIn(&p.reporter, b, first, true)
	b.Expectations = f.expects
	used.add(f.elaborator)
	if open := f.opened(); open != "" && !p.unread && !f.full {
		f.structure(open)
	}
	f.unusedLets()
	for i, v := range b.Vary {
		for _, value := range v.ends() {
			point := slices.Clone(first)
			point[i] = value
			p.setupIn(&p.reporter, b, point, false)
		}
	}
	return b
}

// ends returns the values of an axis that are looked at when a file is loaded, besides the first: the last, and all of a short list.
func (v *Vary) ends() []float64 {
	const short = 10
	if len(v.Values) <= short {
		return v.Values[1:]
	}
	return v.Values[len(v.Values)-1:]
}

// setupIn elaborates a bench at a point with problems in the file told apart from those of the file itself.
func (p *program) setupIn(r *reporter, b *Bench, point []float64, learning bool) *filled {
	r.where, r.bench = " (in the bench "+b.Name+pointText(b, point)+")", b.Span
	f := p.setup(r, b, point, learning)
	r.where, r.bench = "", syntax.Span{}
	return f
}

// pointText says where on its grid a bench is.
func pointText(b *Bench, point []float64) string {
	var list []string
	for i, v := range b.Vary {
		list = append(list, v.Target+" = "+unit.Show(point[i], v.dimension))
	}
	if len(list) == 0 {
		return ""
	}
	return ", with " + strings.Join(list, ", ")
}

// benchStatements looks at what a bench may hold, and once only.
func (e *elaborator) benchStatements(b *Bench) {
	results := 0
	for _, x := range b.tree.Body {
		switch x := x.(type) {
		case *syntax.Run:
			if b.HasRun {
				e.fail(CodeBench, x.Place(), "the bench has a run already")
			}
			b.HasRun = true
		case *syntax.Spread:
			e.later(x.Place(), "`spread`")
		case *syntax.Extremes:
			e.later(x.Place(), "`extremes`")
		case *syntax.Expect:
			results++
			if x.Share != nil {
				e.later(x.Share.Place(), "`for`, the share of samples,")
			}
		case *syntax.Plot:
			results++
		case *syntax.Set, *syntax.Let, *syntax.Drive, *syntax.Vary:
		default:
			e.fail(syntax.CodeMisplaced, x.Place(), "this statement does not belong in a bench")
		}
	}
	if results == 0 && !e.program.unread {
		e.warn(CodeNothing, b.tree.Name.Place(), "the bench %s expects and plots nothing", b.Name)
	}
}

// opened says, for messages, which inputs a bench leaves open; "" for none.
func (f *filled) opened() string {
	var names []string
	for _, in := range f.circuit.Inputs {
		if in.Open {
			names = append(names, in.Name)
		}
	}
	if len(names) == 0 {
		return ""
	}
	return fmt.Sprintf(" (in the bench %s, where %s is open)", f.name, strings.Join(names, " and "))
}

// unusedLets names the values of a bench that nothing in it uses.
func (f *filled) unusedLets() {
	for _, x := range f.tree.Body {
		l, ok := x.(*syntax.Let)
		if !ok {
			continue
		}
		if b := f.bench.lets[l.Name.Name]; b != nil && !b.used && !f.failed() {
			f.warn(CodeUnused, l.Name.Place(), "nothing uses %s", l.Name.Name)
		}
	}
}
