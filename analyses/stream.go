package analyses

import (
	"fmt"

	"poise/mna"
	"poise/netlist"
)

// stream computes one expression piece by piece as the run goes on and gives the pieces to its accumulators.
type stream struct {
	expression   *expression
	accumulators []accumulator
	kinds        map[string]accumulator
	y            samples
	piece, line  piece
}

// add takes the samples of all columns in a piece, which may be broken.
func (s *stream) add(from, until float64, columns []samples, broken bool) {
	s.expression.read(columns, &s.y)
	s.piece.set(from, until, &s.y)
	if !broken {
		s.pass(&s.piece)
		return
	}
	for k := range samplesPerStep - 1 {
		if s.piece.line(k, &s.line) {
			s.pass(&s.line)
		}
	}
}

func (s *stream) pass(p *piece) {
	for _, a := range s.accumulators {
		a.add(p)
	}
}

// reading is what became of a quantity that a run was to accumulate.
type reading struct {
	accumulator accumulator
	err         error // why it could not be
}

// stream arranges that the pieces of the waveform x are accumulated for q by a reducer.
func (e *evaluation) stream(r *recording, q, x netlist.Quantity, reduce reducer, n numbers) error {
	if err := r.want(x, false); err != nil {
		return err
	}
	expression, err := e.compile(r, x)
	if err != nil {
		r.readings[q] = &reading{err: err}
		return nil
	}
	s, ok := r.streams[expression.key]
	if !ok {
		s = &stream{expression: expression, kinds: map[string]accumulator{}}
		r.streams[expression.key] = s
		r.order = append(r.order, s)
		r.bend(expression)
	}
	kind := reduce.key(n)
	a, ok := s.kinds[kind]
	if !ok {
		a = reduce.start(r.window, r.accuracy, n)
		s.kinds[kind] = a
		s.accumulators = append(s.accumulators, a)
	}
	r.readings[q] = &reading{accumulator: a}
	return nil
}

// keep arranges that q can be read as a waveform after the run.
func (e *evaluation) keep(r *recording, q netlist.Quantity) error {
	if err := r.want(q, true); err != nil {
		return err
	}
	e.bendWithin(r, q)
	return e.reduceWithin(r, q)
}

// reduceWithin arranges that the reducers within q can be computed after the run. One that works on the result of another must wait for it and so
// needs the waveform.
func (e *evaluation) reduceWithin(r *recording, q netlist.Quantity) error {
	switch q := q.(type) {
	case *netlist.Reduce:
		reduce, ok := reducers[q.Name]
		if !ok || hasReducer(q.X) {
			return e.keep(r, q.X)
		}
		return e.stream(r, q, q.X, reduce, q.Numbers)
	case *netlist.Apply:
		for _, x := range q.X {
			if err := e.reduceWithin(r, x); err != nil {
				return err
			}
		}
	}
	return nil
}

// follow arranges that a verdict on q, or its number, can be had after the run.
func (e *evaluation) follow(r *recording, q netlist.Quantity) error {
	switch q.Describe().Shape {
	case netlist.Waveform:
		if hasReducer(q) {
			return e.keep(r, q)
		}
		return e.stream(r, q, q, reducers["peak"], nil)
	case netlist.Word:
		return r.want(q, false)
	}
	return e.reduceWithin(r, q)
}

func hasReducer(q netlist.Quantity) bool {
	switch q := q.(type) {
	case *netlist.Reduce:
		return true
	case *netlist.Apply:
		for _, x := range q.X {
			if hasReducer(x) {
				return true
			}
		}
	}
	return false
}

// run integrates the set-up's transient. Afterwards the waveforms kept can be read, and what is measured has been accumulated.
func (e *evaluation) run(kept, measured []netlist.Quantity) error {
	run := e.setup.Run
	r := newRecording(e.model, window{run.From, run.Until}, e.setup.Circuit.Accuracy)
	for _, q := range kept {
		if err := e.keep(r, q); err != nil {
			return err
		}
	}
	for _, q := range measured {
		if err := e.follow(r, q); err != nil {
			return err
		}
	}
	o := mna.TransientOptions{Until: run.Until, MaxStep: run.Step, Accuracy: e.setup.Circuit.Accuracy, Cold: run.Cold, Logger: e.log}
	if !run.Cold {
		x, err := e.quiescent()
		if err != nil {
			return err
		}
		o.Start = x
	}
	_, err := e.model.system.Transient(e.ctx, o, func(step *mna.Step) error {
		if e.progress != nil {
			e.progress(step.T1, run.Until)
		}
		return r.add(step)
	})
	if err != nil {
		return err
	}
	e.record = r
	return nil
}

// waveform computes a quantity over the window of the run from the columns that were kept.
func (e *evaluation) waveform(q netlist.Quantity) (*Waveform, error) {
	r := e.record
	if r == nil {
		return nil, &InputError{Message: "a waveform needs a run"}
	}
	if err := r.has(q); err != nil {
		return nil, err
	}
	x, err := e.compile(r, q)
	if err != nil {
		return nil, err
	}
	if x.column >= 0 && len(r.broken) == 0 {
		return &Waveform{knots: r.knots, values: r.list[x.column].values}, nil
	}
	return r.waveform(x), nil
}

// has reports a column that q needs and that was not kept.
func (r *recording) has(q netlist.Quantity) error {
	return elements(q, func(q netlist.Quantity) error {
		if c, ok := r.columns[columnKey(q)]; ok && c.kept {
			return nil
		}
		return fmt.Errorf("%s was not recorded", q.Describe().Text)
	})
}
