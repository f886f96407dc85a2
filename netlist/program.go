package netlist

import (
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
)

// program is all that the files say, before any number is known. Once it is loaded it does not change.
type program struct {
	reporter // of the load
	fsys     fs.FS
	limits   Limits
	families []devices.Family
	main     string // the file that was loaded
	unread   bool   // a file has syntax errors: what stands in it is not all known

	design   *syntax.Design
	cautions []string
	sets     []*syntax.Set
	lets     []*syntax.Let
	parts    map[string]*syntax.PartDecl
	blocks   map[string]*syntax.Block
	rails    []*syntax.Rail
	circuit  []syntax.Statement // paths, instances, matches
	inputs   []*syntax.Input
	outputs  []*syntax.Output
	benches  []*syntax.Bench
	named    map[string]syntax.Span // lets, parts and blocks, which share their names

	// What is computed once while the load checks everything, and only read afterwards.
	literals map[*syntax.Number]value
	texts    map[syntax.Span]string
	samples  map[samplesKey]samplesFile
}

func (p *program) family(name string) *devices.Family {
	for i := range p.families {
		if p.families[i].Name == name {
			return &p.families[i]
		}
	}
	return nil
}

// libraryFolder is what the paths of the files begin with that ship with Poise.
const libraryFolder = "std/"

// bringIn reads the files that a file uses, and what those use. stack is the files on the way, outermost first.
func (p *program) bringIn(f *syntax.File, stack *[]string) {
	for _, s := range f.Statements {
		if u, ok := s.(*syntax.Use); ok {
			p.bringInOne(u, stack)
		}
	}
}

func (p *program) bringInOne(u *syntax.Use, stack *[]string) {
	fsys, name, open, ok := p.used(u)
	if !ok {
		return
	}
	if i := slices.Index(*stack, name); i >= 0 {
		ring := append(slices.Clone((*stack)[i:]), name)
		p.fail(CodeFile, u.Path.Place(), "%s uses itself: %s", name, strings.Join(ring, " uses "))
		return
	}
	if _, known := p.sources[name]; known {
		return
	}
	if len(p.sources) >= p.limits.Files {
		p.fail(CodeLimit, u.Path.Place(), "more than %d files are used", p.limits.Files)
		return
	}
	src, err := p.read(fsys, open)
	if err != nil {
		p.failHint(p.libraryHint(fsys), fileCode(err), u.Path.Place(), "%s: %s", u.Path.Value, reason(err))
		return
	}
	g := p.parse(name, string(src))
	p.collect(g, false)
	*stack = append(*stack, name)
	p.bringIn(g, stack)
	*stack = (*stack)[:len(*stack)-1]
}

// used finds the file that use names: where it is read, its name in messages and its path there.
func (p *program) used(u *syntax.Use) (fsys fs.FS, name, open string, ok bool) {
	written := u.Path.Value
	if strings.HasPrefix(written, libraryFolder) {
		return library, written, written, true
	}
	if p.inLibrary(u.File) {
		return library, path.Join(path.Dir(u.File), written), path.Join(path.Dir(u.File), written), true
	}
	name = path.Join(path.Dir(u.File), written)
	if path.IsAbs(written) || !fs.ValidPath(name) || strings.ContainsAny(written, `\:`) {
		return nil, "", "", p.fail(CodeFile, u.Path.Place(), "%s lies outside the folder that files may be read from", written)
	}
	if open = name; strings.HasPrefix(name, libraryFolder) {
		name = "./" + name // a folder of the user's own that is called so, too
	}
	return p.fsys, name, open, true
}

// inLibrary reports whether a file ships with Poise. The main file never does.
func (p *program) inLibrary(file string) bool {
	return file != p.main && strings.HasPrefix(file, libraryFolder)
}

// libraryHint lists the files of the library to one who names another.
func (p *program) libraryHint(fsys fs.FS) string {
	if fsys != fs.FS(library) {
		return ""
	}
	names, err := fs.Glob(library, libraryFolder+"*.poise")
	if err != nil {
		return ""
	}
	return "the library has " + strings.Join(names, ", ")
}

// collect sorts the statements of a file by kind. Of a file that is used only parts, blocks and lets count.
func (p *program) collect(f *syntax.File, main bool) {
	for _, s := range f.Statements {
		switch s := s.(type) {
		case *syntax.Let:
			if p.claim(s.Name) {
				p.lets = append(p.lets, s)
			}
		case *syntax.PartDecl:
			if p.claim(s.Name) {
				p.parts[s.Name.Name] = s
			}
		case *syntax.Block:
			if p.claim(s.Name) && p.blockPins(s) {
				p.blocks[s.Name.Name] = s
			}
		case *syntax.Use:
		default:
			if main {
				p.collectMain(s)
			}
		}
	}
}

// claim reserves the name of a part, a block or a let.
func (p *program) claim(n syntax.Ident) bool {
	if at, ok := p.named[n.Name]; ok {
		if at.File == p.main && n.File != p.main {
			return p.fail(CodeDuplicate, at, "there is %s in a file that is used, too, in %s", n.Name, p.lineName(n.Place(), at.File))
		}
		return p.fail(CodeDuplicate, n.Place(), "there is %s already, in %s", n.Name, p.lineName(at, n.File))
	}
	p.named[n.Name] = n.Place()
	return true
}

// blockPins checks the names of a block's pins.
func (p *program) blockPins(b *syntax.Block) bool {
	seen := map[string]bool{"gnd": true, "_": true}
	ok := true
	for _, pin := range b.Pins {
		switch {
		case pin.Name == "gnd" || pin.Name == "_":
			ok = p.fail(CodeDuplicate, pin.Place(), "%s cannot be a pin: a block sees it anyway", pin.Name)
		case seen[pin.Name]:
			ok = p.fail(CodeDuplicate, pin.Place(), "the pin %s stands here twice", pin.Name)
		}
		seen[pin.Name] = true
	}
	return ok
}

// lineName says in which line something stands, to one who reads a file.
func (p *program) lineName(at syntax.Span, file string) string {
	if at.File == file {
		return fmt.Sprintf("line %d", at.Start.Line)
	}
	return fmt.Sprintf("%s:%d", at.File, at.Start.Line)
}

func (p *program) collectMain(s syntax.Statement) {
	switch s := s.(type) {
	case *syntax.Design:
		if p.design != nil {
			p.fail(CodeDuplicate, s.Place(), "the file says twice what it is, first in line %d", p.design.Start.Line)
			return
		}
		p.design = s
	case *syntax.Caution:
		p.caution(s)
	case *syntax.Set:
		p.sets = append(p.sets, s)
	case *syntax.Rail:
		p.rails = append(p.rails, s)
	case *syntax.Path, *syntax.Instance, *syntax.Match:
		p.circuit = append(p.circuit, s)
	case *syntax.Input:
		p.inputs = append(p.inputs, s)
	case *syntax.Output:
		p.outputs = append(p.outputs, s)
	case *syntax.Bench:
		p.claimBench(s)
	case *syntax.Couple:
		p.later(s.Place(), "`couple`")
	default:
		p.fail(syntax.CodeMisplaced, s.Place(), "this statement belongs in a bench")
	}
}

// caution notes what the design touches.
func (p *program) caution(s *syntax.Caution) {
	kinds := []string{"patient", "mains"}
	switch {
	case !slices.Contains(kinds, s.Kind.Name):
		p.failHint("there are `caution patient` and `caution mains`", CodeUnknown, s.Kind.Place(), "there is no caution called %s", s.Kind.Name)
	case slices.Contains(p.cautions, s.Kind.Name):
		p.fail(CodeDuplicate, s.Place(), "this caution stands here already")
	default:
		p.cautions = append(p.cautions, s.Kind.Name)
	}
}

func (p *program) claimBench(s *syntax.Bench) {
	if i := slices.IndexFunc(p.benches, func(b *syntax.Bench) bool { return b.Name.Name == s.Name.Name }); i >= 0 {
		p.fail(CodeDuplicate, s.Name.Place(), "there is a bench called %s already, in line %d", s.Name.Name, p.benches[i].Start.Line)
		return
	}
	p.benches = append(p.benches, s)
}
