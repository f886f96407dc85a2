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

// fixedValues keeps the numbers that do not depend on the frequency at which an expression is
// computed, for instance quiescent(x) and what reducers make of a run.
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

// place is where an expression is computed: at a frequency of a curve, or at none.
type place struct {
	r         *responder // made when first needed
	frequency float64    // Hz; NaN outside a curve
}

func nowhere() *place { return &place{frequency: math.NaN()} }

// number computes q at a place. A real quantity has no imaginary part.
func (e *evaluation) number(q netlist.Quantity, p *place) (complex128, error) {
	switch q := q.(type) {
	case *netlist.Constant:
		return complex(q.Value, 0), nil
	case *netlist.Volts, *netlist.Amps, *netlist.Watts, *netlist.Operating:
		return e.atRest(q)
	case *netlist.Quiescent:
		return e.once(q, func() (complex128, error) { return e.number(q.X, &place{r: p.r, frequency: p.frequency}) })
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

// atRest is an elementary quantity at the quiescent point.
func (e *evaluation) atRest(q netlist.Quantity) (complex128, error) {
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
	f, ok := operationOf(q.Op, isComplex)
	if !ok {
		return cmplx.NaN(), fmt.Errorf("the operation %s cannot be computed", q.Op)
	}
	return f(x), nil
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
	v, err := t.at(x, 0)
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
