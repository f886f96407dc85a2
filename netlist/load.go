package netlist

import (
	"embed"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"slices"

	"poise/devices"
	"poise/netlist/syntax"
)

// Limits protect the host from files that are not meant well. A zero value stands for the default.
type Limits struct {
	FileBytes int // of one file; 0: 16 MiB
	Files     int // read in all; 0: 100
	Depth     int // of braces and parentheses within each other; 0: the parser's default
	Nesting   int // of instances of blocks within each other; 0: 50
	Parts     int // of the flat circuit; 0: 2,000,000
	Points    int // of a bench's grid; 0: 100,000
	Samples   int // of a file of samples; 0: 10,000,000
}

// resolved returns the limits with the defaults in place.
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

// Load reads the file at a path of fsys and everything it uses, and checks all of it: names, units, values, structure, and every
// bench at the ends of its grid. Errors are a DiagnosticList, every one at its place and in source order; errors.As finds a single
// *Diagnostic in it.
//
// Files brought in by use, and files of samples, are read from fsys too, relative to the file that names them, so nothing
// outside it is reached. (An os.Root's file system does not follow symbolic links out of it; os.DirFS does.)
func Load(fsys fs.FS, name string, opts ...Option) (*Design, error) {
	p := newProgram(fsys, opts)
	src, err := p.read(fsys, name)
	if err != nil {
		p.fail(fileCode(err), syntax.Span{File: name}, "%s", reason(err))
		return nil, p.list.Err()
	}
	return p.load(name, string(src))
}

//go:embed std/*.poise
var library embed.FS

// newProgram prepares an empty program.
func newProgram(fsys fs.FS, opts []Option) *program {
	p := &program{
		fsys: fsys, families: devices.Families(), parts: map[string]*syntax.PartDecl{}, blocks: map[string]*syntax.Block{},
		named: map[string]syntax.Span{}, literals: map[*syntax.Number]value{}, texts: map[syntax.Span]string{}, samples: map[samplesKey]samplesFile{},
		reporter: reporter{sources: map[string]string{}, warnings: true},
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

// tooLarge is the error of a file over the limit.
type tooLarge struct{ most int }

func (e tooLarge) Error() string {
	return fmt.Sprintf("the file is larger than the %d bytes that are read", e.most)
}

// fileCode tells a file that is too large from one that cannot be read.
func fileCode(err error) syntax.Code {
	if errors.As(err, &tooLarge{}) {
		return CodeLimit
	}
	return CodeFile
}

// reason puts an error of the file system in few words.
func reason(err error) string {
	var pathError *fs.PathError
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return "there is no such file"
	case errors.Is(err, fs.ErrPermission):
		return "the file may not be read"
	case errors.Is(err, fs.ErrInvalid):
		return "this is no path of a file"
	case errors.As(err, &pathError):
		return pathError.Err.Error()
	}
	return err.Error()
}

// read reads a file up to the limit.
func (p *program) read(fsys fs.FS, name string) ([]byte, error) {
	f, err := fsys.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, int64(p.limits.FileBytes)+1))
	if err != nil {
		return nil, err
	}
	if len(data) > p.limits.FileBytes {
		return nil, tooLarge{p.limits.FileBytes}
	}
	return data, nil
}

// load parses and checks the main file.
func (p *program) load(name, src string) (*Design, error) {
	p.main = name
	f := p.parse(name, src)
	p.collect(f, true)
	p.bringIn(f, &[]string{name})
	d := p.check()
	list := p.list.Sort()
	if err := list.Err(); err != nil {
		return nil, err
	}
	d.Warnings = list.Warnings()
	p.list, p.seen = nil, nil
	return d, nil
}

// parse reads the text of a file into a tree.
func (p *program) parse(name, src string) *syntax.File {
	f, list := syntax.Parse(name, src, syntax.Limits{Bytes: p.limits.FileBytes, Depth: p.limits.Depth})
	p.sources[name] = f.Source
	p.doubt(list)
	p.list = append(p.list, list...)
	p.unread = p.unread || len(list) > 0
	return f
}
