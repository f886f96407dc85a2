package analyses

import (
	"context"
	"fmt"
	"log/slog"
	"math"
	"math/cmplx"
	"sync"

	"poise/mna"
	"poise/netlist"
)

// evaluation computes the quantities of one set-up. Its analyses run when first asked for, once each.
type evaluation struct {
	ctx      context.Context
	setup    *netlist.Setup
	model    *model
	log      *slog.Logger
	progress func(time, until float64)

	bias     *mna.Bias
	small    *mna.Small
	searches map[searchKey]*gainSearch
	record   *recording
	fixed    fixedValues
}

// fixedValues keeps the numbers that do not depend on the sample or the frequency at which
// an expression is computed, for instance mean(x) in volts(out) - mean(volts(out)).
type fixedValues struct {
	sync.Mutex
	of map[netlist.Quantity]complex128
}

type searchKey struct {
	input, output string
	band          netlist.Band
}

func newEvaluation(ctx context.Context, setup *netlist.Setup, log *slog.Logger) (*evaluation, error) {
	m, err := newModel(setup.Circuit)
	if err != nil {
		return nil, err
	}
	return &evaluation{
		ctx: ctx, setup: setup, model: m, log: log,
		searches: map[searchKey]*gainSearch{},
		fixed:    fixedValues{of: map[netlist.Quantity]complex128{}},
	}, nil
}

// quiescent returns the bias point: all unknowns at time 0.
func (e *evaluation) quiescent() ([]float64, error) {
	if e.bias == nil {
		b, err := e.model.system.Bias(e.ctx, mna.BiasOptions{Logger: e.log})
		if err != nil {
			return nil, err
		}
		e.bias = b
	}
	return e.bias.X, nil
}

// linear returns the circuit linearised at the bias point.
func (e *evaluation) linear() (*mna.Small, error) {
	if e.small == nil {
		x, err := e.quiescent()
		if err != nil {
			return nil, err
		}
		e.small = e.model.system.Small(x, 0)
	}
	return e.small, nil
}

// responder returns a solver of the linearised circuit for one goroutine.
func (e *evaluation) responder() (*responder, error) {
	small, err := e.linear()
	if err != nil {
		return nil, err
	}
	return newResponder(e.model, small), nil
}

// place is where an expression is computed: at a frequency of a curve, at a sample of a recorded
// waveform, or at neither.
type place struct {
	r         *responder // made when first needed
	frequency float64    // Hz; NaN outside a curve
	sample    int        // index of a recorded sample; -1 outside a waveform
}

func nowhere() *place { return &place{frequency: math.NaN(), sample: -1} }

// number computes q at a place. A real quantity has no imaginary part.
func (e *evaluation) number(q netlist.Quantity, p *place) (complex128, error) {
	switch q := q.(type) {
	case *netlist.Constant:
		return complex(q.Value, 0), nil
	case *netlist.Volts, *netlist.Amps, *netlist.Watts, *netlist.Operating:
		return e.reading(q, p)
	case *netlist.Quiescent:
		return e.once(q, func() (complex128, error) { return e.number(q.X, &place{r: p.r, frequency: p.frequency, sample: -1}) })
	case *netlist.Metric:
		return e.metric(q, p)
	case *netlist.Reduce:
		return e.once(q, func() (complex128, error) { return e.reduce(q) })
	case *netlist.Apply:
		return e.apply(q, p)
	}
	return cmplx.NaN(), fmt.Errorf("%T cannot be computed", q)
}

// once computes a quantity that is the same everywhere the first time it is asked for.
func (e *evaluation) once(q netlist.Quantity, compute func() (complex128, error)) (complex128, error) {
	e.fixed.Lock()
	v, ok := e.fixed.of[q]
	e.fixed.Unlock()
	if ok {
		return v, nil
	}
	v, err := compute()
	if err != nil {
		return cmplx.NaN(), err
	}
	e.fixed.Lock()
	e.fixed.of[q] = v
	e.fixed.Unlock()
	return v, nil
}

// reading is an elementary quantity at a recorded sample, or at rest.
func (e *evaluation) reading(q netlist.Quantity, p *place) (complex128, error) {
	if p.sample >= 0 {
		column, err := e.record.column(q)
		if err != nil {
			return cmplx.NaN(), err
		}
		return complex(column[p.sample], 0), nil
	}
	return e.once(q, func() (complex128, error) {
		t, err := e.model.tapOf(q)
		if err != nil {
			return cmplx.NaN(), err
		}
		x, err := e.quiescent()
		if err != nil {
			return cmplx.NaN(), err
		}
		v, err := t.rest(x)
		return complex(v, 0), err
	})
}

// metric computes a metric of the linearised circuit or of the quiescent state.
func (e *evaluation) metric(q *netlist.Metric, p *place) (complex128, error) {
	if compute, ok := biasMetrics[q.Name]; ok {
		return e.once(q, func() (complex128, error) {
			v, err := compute(e, q)
			return complex(v, 0), err
		})
	}
	if p.r == nil {
		r, err := e.responder()
		if err != nil {
			return cmplx.NaN(), err
		}
		p.r = r
	}
	if corner, ok := searchMetrics[q.Name]; ok {
		return e.once(q, func() (complex128, error) {
			s, err := e.search(q, p.r)
			if err != nil {
				return cmplx.NaN(), err
			}
			v, err := corner(s)
			return complex(v, 0), err
		})
	}
	compute, ok := responseMetrics[q.Name]
	if !ok {
		return cmplx.NaN(), fmt.Errorf("the metric %s cannot be computed", q.Name)
	}
	frequency := q.Band.At
	if q.Shape == netlist.Curve {
		frequency = p.frequency
	}
	if err := p.r.at(frequency); err != nil {
		return cmplx.NaN(), err
	}
	return compute(p.r, q)
}

// search looks along dm_gain once for all metrics that ask for the same range.
func (e *evaluation) search(q *netlist.Metric, r *responder) (*gainSearch, error) {
	key := searchKey{q.Input, q.Output, q.Band}
	if s, ok := e.searches[key]; ok {
		return s, nil
	}
	s, err := searchGain(e.ctx, r, q)
	if err != nil {
		return nil, err
	}
	e.searches[key] = s
	return s, nil
}

// unary holds the functions of one real number.
var unary = map[string]func(float64) float64{
	"neg": func(x float64) float64 { return -x }, "abs": math.Abs, "sqrt": math.Sqrt, "exp": math.Exp, "ln": math.Log,
	"log10": math.Log10, "tanh": math.Tanh, "sin": math.Sin, "cos": math.Cos, "atan": math.Atan,
}

// apply combines quantities at one place.
func (e *evaluation) apply(q *netlist.Apply, p *place) (complex128, error) {
	x := make([]complex128, len(q.X))
	isComplex := false
	for i, argument := range q.X {
		v, err := e.number(argument, p)
		if err != nil {
			return cmplx.NaN(), err
		}
		x[i] = v
		isComplex = isComplex || argument.Describe().Complex
	}
	v, ok := combine(q.Op, x, isComplex)
	if !ok {
		return cmplx.NaN(), fmt.Errorf("the operation %s cannot be computed", q.Op)
	}
	return v, nil
}

// combine applies an operation to numbers. Complex numbers have + - * / and their parts; what else is done to them is
// done to their magnitude.
func combine(op string, x []complex128, isComplex bool) (complex128, bool) {
	switch op {
	case "+":
		return x[0] + x[1], true
	case "-":
		return x[0] - x[1], true
	case "*":
		return x[0] * x[1], true
	case "/":
		if !isComplex {
			return complex(real(x[0])/real(x[1]), 0), true
		}
		return x[0] / x[1], true
	case "||":
		return x[0] * x[1] / (x[0] + x[1]), true
	case "real":
		return complex(real(x[0]), 0), true
	case "imag":
		return complex(imag(x[0]), 0), true
	case "phase":
		return complex(cmplx.Phase(x[0]), 0), true
	case "neg":
		return -x[0], true
	case "abs":
		return complex(cmplx.Abs(x[0]), 0), true
	}
	r := make([]float64, len(x))
	for i, v := range x {
		if r[i] = real(v); isComplex {
			r[i] = cmplx.Abs(v)
		}
	}
	return combineReal(op, r)
}

func combineReal(op string, x []float64) (complex128, bool) {
	switch op {
	case "^":
		return complex(math.Pow(x[0], x[1]), 0), true
	case "min", "max":
		v := x[0]
		for _, y := range x[1:] {
			if op == "min" {
				v = math.Min(v, y)
			} else {
				v = math.Max(v, y)
			}
		}
		return complex(v, 0), true
	}
	f, ok := unary[op]
	if !ok {
		return cmplx.NaN(), false
	}
	return complex(f(x[0]), 0), true
}

// word computes a quantity that is a word, at rest or, in a bench with a run, over the window: then
// it is the first word that differs from want, or want.
func (e *evaluation) word(q netlist.Quantity, want string) (word string, at float64, err error) {
	o, rest, err := wordQuantity(q)
	if err != nil {
		return "", math.NaN(), err
	}
	if e.setup.Run != nil && !rest {
		return e.record.word(o, want)
	}
	t, err := e.model.operatingTap(o)
	if err != nil {
		return "", math.NaN(), err
	}
	x, err := e.quiescent()
	if err != nil {
		return "", math.NaN(), err
	}
	v, err := t.read(x, 0)
	return v.Word, math.NaN(), err
}

// wordQuantity finds the operating quantity of an expression that is a word, and whether it is asked for at rest.
func wordQuantity(q netlist.Quantity) (o *netlist.Operating, rest bool, err error) {
	switch q := q.(type) {
	case *netlist.Operating:
		return q, false, nil
	case *netlist.Quiescent:
		o, _, err = wordQuantity(q.X)
		return o, true, err
	}
	return nil, false, fmt.Errorf("%T is not a word", q)
}
