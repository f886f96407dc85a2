// Package syntax turns the text of a .poise file into a tree and back: lexer,
// parser, tree, printer and the positions and diagnostics they share. It knows the
// grammar and nothing of what names or units mean.
package syntax

// Position is a place in a file.
type Position struct {
	Offset int // bytes from the start, 0-based
	Line   int // 1-based; 0 means no position (built by a program, not read)
	Column int // in runes, 1-based
}

// Span is a half-open range of one file. A zero Span means no place in a text.
type Span struct {
	File  string // path as given to the loader, slashes
	Start Position
	End   Position // just past the last character
}

// Place returns the span itself; nodes embed Span and so have it.
func (s Span) Place() Span { return s }

// Node is anything with a place in a file.
type Node interface{ Place() Span }

// File is one parsed file.
type File struct {
	Name       string
	Source     string // the text, without byte-order mark
	Statements []Statement
	Comments   []Comment // all comments of the file in order; the printer puts them back
}

// Comment runs from # to the end of its line, without the line end.
type Comment struct {
	Span
	Text string // with the #
}

// Ident is a name as written.
type Ident struct {
	Span
	Name string
}

// Ref is a name or a dotted path of names: A1.x.
type Ref struct {
	Span
	Names []Ident
}

// String returns the names joined by dots.
func (r Ref) String() string {
	s := ""
	for i, n := range r.Names {
		if i > 0 {
			s += "."
		}
		s += n.Name
	}
	return s
}

// Text is a quoted string; Value is without quotes and escapes.
type Text struct {
	Span
	Value string
}

// Statement is one statement of a file, a block or a bench.
type Statement interface {
	Node
	statement()
}

type (
	// Design: design NAME "title"
	Design struct {
		Span
		Name  Ident
		Title *Text
	}
	// Use: use "file.poise"
	Use struct {
		Span
		Path Text
	}
	// Caution: caution patient
	Caution struct {
		Span
		Kind Ident
	}
	// Let: let NAME = expression
	Let struct {
		Span
		Name  Ident
		Value Expr
	}
	// Set: set NAME = expression
	Set struct {
		Span
		Target Ref
		Value  Expr
	}
	// Rail: rail NAME = value modifiers
	Rail struct {
		Span
		Name      Ident
		Value     Expr
		Modifiers []Modifier
	}
	// PartDecl: part NAME = FAMILY { parameter = value, ... }
	PartDecl struct {
		Span
		Name   Ident
		Base   Ident
		Params []Param
		Braces bool // whether { } was written
	}
	// Path: node -- part -- node ... Elements alternates nodes and parts and begins and ends with a node.
	// Several parts may follow each other without a node between them only as `_` says.
	Path struct {
		Span
		Elements []Element
	}
	// Instance: NAME = TYPE(pin: node, ...) with k = v, ...
	Instance struct {
		Span
		Name Ident
		Type Ident
		Pins []PinBinding
		With []Assign
	}
	// Block: block NAME(pin, ...) { ... }
	Block struct {
		Span
		Name Ident
		Pins []Ident
		Body []Statement
	}
	// Couple: couple (L1, L2) = 0.995
	Couple struct {
		Span
		Members []Ref
		Value   Expr
	}
	// Match: match A B within x   or   match A B { parameter within x, ... }
	Match struct {
		Span
		Members []Ref
		Within  Expr // nil in the second form
		Params  []MatchParam
	}
	// Input: input NAME = (a, b) current
	Input struct {
		Span
		Name    Ident
		Nodes   []Ref
		Current bool
	}
	// Output: output NAME = (a, b) rest 4.5V
	Output struct {
		Span
		Name  Ident
		Nodes []Ref
		Rest  Expr // nil if not written
	}
	// Bench: bench NAME "title" { ... }
	Bench struct {
		Span
		Name  Ident
		Title *Text
		Body  []Statement
	}

	// Drive: drive PORT MODE = value, drive RAIL = value, drive PORT open. Only in a bench.
	Drive struct {
		Span
		Target Ref
		Mode   *Ident // nil if not written
		Value  Expr   // nil if Open
		Open   bool
	}
	// Run: run T [from t0] [step h] [cold], run periodic F [settle N]. Only in a bench.
	Run struct {
		Span
		Until    Expr // nil if periodic
		From     Expr
		Step     Expr
		Cold     bool
		Periodic Expr
		Settle   Expr
	}
	// Vary: vary NAME = a..b by step, a..b count n, or v1, v2, ... Only in a bench.
	Vary struct {
		Span
		Target Ref
		From   Expr // nil for a list
		To     Expr
		By     Expr
		Count  Expr
		List   []Expr
	}
	// Spread: spread N seed s. Only in a bench.
	Spread struct {
		Span
		Samples Expr
		Seed    Expr
	}
	// Extremes: extremes. Only in a bench.
	Extremes struct {
		Span
	}
	// Expect: expect "label" quantity comparison for share. Only in a bench.
	Expect struct {
		Span
		Label      *Text
		Quantity   Expr
		Comparison Comparison
		Share      Expr // for 99%, nil if not written
	}
	// Plot: plot quantity, ... "title". Only in a bench.
	Plot struct {
		Span
		Quantities []Expr
		Title      *Text
	}
)

// Modifier is tol, sigma, tc or start behind a value.
type Modifier struct {
	Span
	Name   Ident // tol sigma tc start
	Value  Expr
	Second Expr // the quadratic value of tc, else nil
}

// Param is one entry of a part: NAME = value [tol x | sigma x].
type Param struct {
	Span
	Name      Ident
	Value     Expr
	Modifiers []Modifier
}

// MatchParam is one entry of a match of instances: NAME within x.
type MatchParam struct {
	Span
	Name   Ident
	Within Expr
}

// PinBinding is pin: node.
type PinBinding struct {
	Span
	Pin  Ident
	Node Ref // a single name "_" is a node without a name
}

// Assign is k = v.
type Assign struct {
	Span
	Name  Ident
	Value Expr
}

// Element is a node or a part of a path.
type Element struct {
	Span
	// Node is set for a node; the name "_" is a node without a name.
	Node *Ref
	// Name, Value and Modifiers are set for a part.
	Name      *Ident
	Value     Expr
	Modifiers []Modifier
}

// Operator of a comparison.
type Operator uint8

const (
	AtLeast Operator = iota // >= value
	Above                   // >  value
	AtMost                  // <= value
	Below                   // <  value
	Within                  // within a..b
	Near                    // = v +- tolerance
	Equal                   // = word or value without a tolerance (words only, the resolver says)
)

// Comparison is the right side of an expectation.
type Comparison struct {
	Span
	Operator  Operator
	Value     Expr // the limit, the lower end of within, the middle of near
	High      Expr // the upper end of within
	Tolerance Expr // of near
	Relative  bool // the tolerance was written in %, ppm (a share of the middle) rather than absolutely
}

// Expr is an expression.
type Expr interface {
	Node
	expr()
}

type (
	// Number is a literal with its unit, as written: 4k7ohm, -40degC (a sign before a literal belongs to it).
	Number struct {
		Span
		Text string
	}
	// Name is a reference to a value, node, part ...
	Name struct {
		Ref
	}
	// Unary is -x.
	Unary struct {
		Span
		X Expr
	}
	// Binary is x op y with op one of + - * / ^ ||.
	Binary struct {
		Span
		Op   string
		OpAt Span
		X, Y Expr
	}
	// Paren is (x).
	Paren struct {
		Span
		X Expr
	}
	// Call is f(x, ..., name: y). Range arguments (a..b) are Range expressions.
	Call struct {
		Span
		Func Ref
		Args []Arg
	}
	// Range is a..b, only as an argument of a call.
	Range struct {
		Span
		Low, High Expr
	}
	// Measure is quantity at F, or quantity over F1..F2 per decade n.
	Measure struct {
		Span
		X         Expr
		At        Expr // nil if over
		Low, High Expr
		PerDecade Expr
	}
	// String is a quoted string as an argument: samples("file.csv").
	String struct {
		Text
	}
)

// Arg is one argument of a call; Name is nil for a positional one.
type Arg struct {
	Span
	Name  *Ident
	Value Expr
}

func (*Design) statement()   {}
func (*Use) statement()      {}
func (*Caution) statement()  {}
func (*Let) statement()      {}
func (*Set) statement()      {}
func (*Rail) statement()     {}
func (*PartDecl) statement() {}
func (*Path) statement()     {}
func (*Instance) statement() {}
func (*Block) statement()    {}
func (*Couple) statement()   {}
func (*Match) statement()    {}
func (*Input) statement()    {}
func (*Output) statement()   {}
func (*Bench) statement()    {}
func (*Drive) statement()    {}
func (*Run) statement()      {}
func (*Vary) statement()     {}
func (*Spread) statement()   {}
func (*Extremes) statement() {}
func (*Expect) statement()   {}
func (*Plot) statement()     {}

func (*Number) expr()  {}
func (*Name) expr()    {}
func (*Unary) expr()   {}
func (*Binary) expr()  {}
func (*Paren) expr()   {}
func (*Call) expr()    {}
func (*Range) expr()   {}
func (*Measure) expr() {}
func (*String) expr()  {}
