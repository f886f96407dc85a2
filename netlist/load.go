package netlist

import (
	"embed"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path"
	"slices"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
)

// Limits protect the host from files that are not meant well. Zero values stand for the defaults.
type Limits struct {
	FileBytes int // of one file; 0: 16 MiB
	Files     int // brought in by use; 0: 100
	Nesting   int // of instances of blocks; 0: 50
	Parts     int // of the flat circuit; 0: 2,000,000
	Points    int // of a bench's grid; 0: 100,000
	Samples   int // of a samples file; 0: 10,000,000
}

func (l Limits) resolved() Limits {
	set := func(v *int, d int) {
		if *v == 0 {
			*v = d
		}
	}
	set(&l.FileBytes, 16<<20)
	set(&l.Files, 100)
	set(&l.Nesting, 50)
	set(&l.Parts, 2_000_000)
	set(&l.Points, 100_000)
	set(&l.Samples, 10_000_000)
	return l
}

// Option changes how a file is loaded.
type Option func(*program)

// WithLimits sets the loader's limits.
func WithLimits(l Limits) Option { return func(p *program) { p.limits = l.resolved() } }

// WithFamilies adds families of devices to those of package devices. A family with the name of another takes its place.
func WithFamilies(families ...devices.Family) Option {
	return func(p *program) {
		for _, f := range families {
			p.addFamily(f)
		}
	}
}

//go:embed std/*.poise
var library embed.FS

// program is all that the files say, before any number is known.
type program struct {
	fsys     fs.FS
	limits   Limits
	families []devices.Family
	sources  map[string]string // text of each file, for excerpts
	samples  map[string][]byte
	list     syntax.DiagnosticList

	design   *syntax.Design
	cautions []string
	lets     []*syntax.Let
	sets     []*syntax.Set
	parts    map[string]*syntax.PartDecl
	blocks   map[string]*syntax.Block
	rails    []*syntax.Rail
	circuit  []syntax.Statement // paths, instances, matches
	inputs   []*syntax.Input
	outputs  []*syntax.Output
	benches  []*syntax.Bench
	own      map[string]bool // parts, blocks and lets of the main file: those that a warning may name
	named    map[string]syntax.Span
	used     map[string]bool // parts, blocks and lets that something uses
}

// Load reads the file at a path of fsys and everything it uses, and checks all of it: names, units, values, structure, and every
// bench. Errors are a syntax.DiagnosticList, every one at its place and in source order; errors.As finds a single *Diagnostic in it.
// Files brought in by use, and files of samples, are read from fsys too, so nothing outside it is reached.
func Load(fsys fs.FS, name string, opts ...Option) (*Design, error) {
	p := newProgram(fsys, opts)
	src, err := p.read(name, p.limits.FileBytes)
	if err != nil {
		return nil, syntax.DiagnosticList{{Code: CodeFile, Message: reason(err), Span: syntax.Span{File: name}}}
	}
	return p.load(name, string(src))
}

func newProgram(fsys fs.FS, opts []Option) *program {
	p := &program{
		fsys: fsys, families: devices.Families(), sources: map[string]string{}, samples: map[string][]byte{},
		parts: map[string]*syntax.PartDecl{}, blocks: map[string]*syntax.Block{}, own: map[string]bool{},
		named: map[string]syntax.Span{}, used: map[string]bool{},
	}
	p.limits = p.limits.resolved()
	for _, o := range opts {
		o(p)
	}
	return p
}

func (p *program) addFamily(f devices.Family) {
	if i := slices.IndexFunc(p.families, func(g devices.Family) bool { return g.Name == f.Name }); i >= 0 {
		p.families[i] = f
		return
	}
	p.families = append(p.families, f)
}

func (p *program) family(name string) *devices.Family {
	for i := range p.families {
		if p.families[i].Name == name {
			return &p.families[i]
		}
	}
	return nil
}

// reason puts an error of the file system in few words.
func reason(err error) string {
	var pathError *fs.PathError
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return "there is no such file"
	case errors.Is(err, fs.ErrPermission):
		return "the file may not be read"
	case errors.As(err, &pathError):
		return pathError.Err.Error()
	}
	return err.Error()
}

// read reads a file of the root, or of the library that ships with Poise.
func (p *program) read(name string, most int) ([]byte, error) {
	var fsys fs.FS = p.fsys
	if strings.HasPrefix(name, "std/") {
		fsys = library
	}
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, int64(most)+1))
	if err != nil {
		return nil, err
	}
	if len(data) > most {
		return nil, fmt.Errorf("the file is larger than the %d bytes that are read", most)
	}
	return data, nil
}

// load parses and checks the main file.
func (p *program) load(name, src string) (*Design, error) {
	f := p.parse(name, src)
	p.collect(f, true)
	files := []string{name}
	p.bringIn(f, &files)
	if p.design == nil && len(p.list.Errors()) == 0 {
		p.problem(CodeNoDesign, syntax.Span{File: name, Start: syntax.Position{Line: 1, Column: 1}, End: syntax.Position{Line: 1, Column: 1}}, "the file does not say what it is: it needs a line `design NAME \"title\"`")
	}
	d := p.check(name)
	list := p.list.Sort()
	d.Warnings = list.Warnings()
	if err := list.Err(); err != nil {
		return nil, err
	}
	p.list = nil
	return d, nil
}

func (p *program) parse(name, src string) *syntax.File {
	f, list := syntax.Parse(name, src, syntax.Limits{Bytes: p.limits.FileBytes})
	p.sources[name] = f.Source
	p.list = append(p.list, list...)
	return f
}

// bringIn reads the files that a file uses, and what those use.
func (p *program) bringIn(f *syntax.File, stack *[]string) {
	for _, s := range f.Statements {
		u, ok := s.(*syntax.Use)
		if !ok {
			continue
		}
		name := u.Path.Value
		if !strings.HasPrefix(name, "std/") {
			name = path.Join(path.Dir(u.File), name)
		}
		switch {
		case path.IsAbs(u.Path.Value) || strings.HasPrefix(name, "../") || !fs.ValidPath(name) || strings.Contains(u.Path.Value, `\`):
			p.problem(CodeFile, u.Path.Place(), fmt.Sprintf("%s lies outside the folder that files may be read from", u.Path.Value))
			continue
		case slices.Contains(*stack, name):
			p.problem(CodeFile, u.Path.Place(), fmt.Sprintf("%s uses itself, in the end", u.Path.Value))
			continue
		case p.sources[name] != "":
			continue
		case len(p.sources) >= p.limits.Files:
			p.problem(CodeLimit, u.Path.Place(), fmt.Sprintf("more than %d files are used", p.limits.Files))
			return
		}
		src, err := p.read(name, p.limits.FileBytes)
		if err != nil {
			p.problem(CodeFile, u.Path.Place(), fmt.Sprintf("%s: %s", u.Path.Value, reason(err)))
			continue
		}
		g := p.parse(name, string(src))
		p.collect(g, false)
		*stack = append(*stack, name)
		p.bringIn(g, stack)
		*stack = (*stack)[:len(*stack)-1]
	}
}

// problem reports an error at a place.
func (p *program) problem(code syntax.Code, at syntax.Span, message string) *Diagnostic {
	d := &Diagnostic{Code: code, Span: at, Message: message, Line: syntax.LineOf(p.sources[at.File], at.Start.Offset)}
	p.list = append(p.list, d)
	return d
}

func (p *program) warn(code syntax.Code, at syntax.Span, message string) {
	p.problem(code, at, message).Severity = syntax.Warning
}

// collect sorts the statements of a file by kind. Of a file that is used only parts, blocks and lets count.
func (p *program) collect(f *syntax.File, main bool) {
	for _, s := range f.Statements {
		switch s := s.(type) {
		case *syntax.Let:
			if p.claim(s.Name) {
				p.lets = append(p.lets, s)
				p.own[s.Name.Name] = main
			}
		case *syntax.PartDecl:
			if p.claim(s.Name) {
				p.parts[s.Name.Name] = s
				p.own[s.Name.Name] = main
			}
		case *syntax.Block:
			if p.claim(s.Name) {
				p.blocks[s.Name.Name] = s
				p.own[s.Name.Name] = main
			}
		case *syntax.Use:
		default:
			if main {
				p.collectMain(s)
			}
		}
	}
}

func (p *program) collectMain(s syntax.Statement) {
	switch s := s.(type) {
	case *syntax.Design:
		if p.design != nil {
			p.problem(CodeDuplicate, s.Place(), "the file says twice what it is")
			return
		}
		p.design = s
	case *syntax.Caution:
		if s.Kind.Name != "patient" && s.Kind.Name != "mains" {
			p.problem(CodeUnknown, s.Kind.Place(), fmt.Sprintf("there is no caution called %s", s.Kind.Name)).Hint = "there are `caution patient` and `caution mains`"
			return
		}
		if !slices.Contains(p.cautions, s.Kind.Name) {
			p.cautions = append(p.cautions, s.Kind.Name)
		}
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
		for _, b := range p.benches {
			if b.Name.Name == s.Name.Name {
				p.problem(CodeDuplicate, s.Name.Place(), fmt.Sprintf("there is a bench called %s already, in line %d", s.Name.Name, b.Start.Line))
				return
			}
		}
		p.benches = append(p.benches, s)
	case *syntax.Couple:
		p.later(s.Place(), "`couple`")
	default:
		p.problem(syntax.CodeMisplaced, s.Place(), "this statement belongs in a bench")
	}
}

// later says that a statement's analysis is not part of this version.
func (p *program) later(at syntax.Span, what string) {
	p.problem(CodeLater, at, what+" is not available in this version")
}

// claim reserves the name of a part, a block or a let.
func (p *program) claim(n syntax.Ident) bool {
	if at, ok := p.named[n.Name]; ok {
		where := fmt.Sprintf("in line %d", at.Start.Line)
		if at.File != n.File {
			where = fmt.Sprintf("in %s:%d", at.File, at.Start.Line)
		}
		p.problem(CodeDuplicate, n.Place(), fmt.Sprintf("%s is there already, %s", n.Name, where))
		return false
	}
	p.named[n.Name] = n.Place()
	return true
}
