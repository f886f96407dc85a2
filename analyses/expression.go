package analyses

import (
	"fmt"
	"math"
	"strings"

	"poise/netlist"
)

// expression computes a waveform from the samples of the elementary quantities that a recording takes. It has buffers of its own and belongs to
// one goroutine.
type expression struct {
	column    int // of the recording, if it is nothing else; or -1
	operation operation
	arguments []*expression
	x         []complex128 // the arguments at one sample
	out       [samplesPerStep]complex128
	fixed     bool   // does not change over time
	straight  bool   // a sum of multiples of columns: a cubic where they are
	key       string // the same for expressions that compute the same
}

// compile makes an expression of q for a recording that has the columns it needs. What does not change over time is computed now.
func (e *evaluation) compile(r *recording, q netlist.Quantity) (*expression, error) {
	if apply, ok := q.(*netlist.Apply); ok && apply.Shape == netlist.Waveform {
		return e.compileApply(r, apply)
	}
	if q.Describe().Shape != netlist.Waveform {
		v, err := e.number(q, nowhere())
		if err != nil {
			return nil, err
		}
		x := &expression{column: -1, fixed: true, straight: true, key: fmt.Sprintf("%x %x", math.Float64bits(real(v)), math.Float64bits(imag(v)))}
		for k := range x.out {
			x.out[k] = v
		}
		return x, nil
	}
	key := columnKey(q)
	c, ok := r.columns[key]
	if !ok {
		return nil, fmt.Errorf("%s was not recorded", q.Describe().Text)
	}
	return &expression{column: c.index, straight: true, key: key}, nil
}

func (e *evaluation) compileApply(r *recording, q *netlist.Apply) (*expression, error) {
	x := &expression{column: -1, x: make([]complex128, len(q.X))}
	isComplex := false
	var keys []string
	for _, argument := range q.X {
		a, err := e.compile(r, argument)
		if err != nil {
			return nil, err
		}
		x.arguments = append(x.arguments, a)
		keys = append(keys, a.key)
		isComplex = isComplex || argument.Describe().Complex
	}
	var ok bool
	if x.operation, ok = operationOf(q.Op, isComplex); !ok {
		return nil, fmt.Errorf("the operation %s cannot be computed", q.Op)
	}
	x.straight = isStraight(q.Op, x.arguments)
	x.key = fmt.Sprintf("%s %t(%s)", q.Op, isComplex, strings.Join(keys, ", "))
	return x, nil
}

// isStraight reports whether an operation makes a sum of multiples of columns.
func isStraight(op string, arguments []*expression) bool {
	changing := 0
	for _, a := range arguments {
		if !a.straight {
			return false
		}
		if !a.fixed {
			changing++
		}
	}
	switch op {
	case "+", "-", "neg", "real":
		return true
	case "*":
		return changing <= 1
	case "/":
		return arguments[1].fixed
	}
	return false
}

// read fills y with the expression's real values for the samples of all columns.
func (x *expression) read(columns []samples, y *samples) {
	if x.column >= 0 {
		*y = columns[x.column]
		return
	}
	x.compute(columns)
	for k, v := range x.out {
		y[k] = real(v)
	}
}

func (x *expression) compute(columns []samples) {
	if x.column >= 0 {
		for k, v := range columns[x.column] {
			x.out[k] = complex(v, 0)
		}
		return
	}
	if x.operation == nil {
		return
	}
	for _, a := range x.arguments {
		a.compute(columns)
	}
	for k := range x.out {
		for i, a := range x.arguments {
			x.x[i] = a.out[k]
		}
		x.out[k] = x.operation(x.x)
	}
}
