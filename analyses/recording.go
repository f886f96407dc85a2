package analyses

import (
	"fmt"
	"math"
	"slices"

	"poise/mna"
	"poise/netlist"
)

// recording holds what the expressions of a bench read off its run: the samples of every elementary
// quantity over the window, nothing else.
type recording struct {
	from     float64 // s, start of the window
	accuracy float64 // relative to the swing of a column
	knots    []float64
	columns  map[string]*column
	list     []*column // those of columns, in the order in which they were asked for
	words    map[string]*wordColumn
	samples  stepSamples
}

// column is one elementary quantity: four samples for every piece.
type column struct {
	tap       tap
	values    []float64
	low, high float64 // extremes so far
}

// wordColumn keeps the words that a quantity takes and when it first takes each.
type wordColumn struct {
	tap   *operatingTap
	since map[string]float64
	order []string
}

// newRecording prepares to record the elementary quantities that qs consist of.
func (m *model) newRecording(from, accuracy float64, qs []netlist.Quantity) (*recording, error) {
	r := &recording{from: from, accuracy: accuracy, columns: map[string]*column{}, words: map[string]*wordColumn{}}
	for k := range r.samples.x {
		r.samples.x[k] = make([]float64, m.system.Size())
	}
	for _, q := range qs {
		if err := r.want(m, q); err != nil {
			return nil, err
		}
	}
	return r, nil
}

// want adds the columns that q needs.
func (r *recording) want(m *model, q netlist.Quantity) error {
	switch q := q.(type) {
	case *netlist.Operating:
		if q.Shape == netlist.Word {
			return r.wantWord(m, q)
		}
		return r.wantColumn(m, q)
	case *netlist.Volts, *netlist.Amps, *netlist.Watts:
		return r.wantColumn(m, q)
	case *netlist.Reduce:
		return r.want(m, q.X)
	case *netlist.Apply:
		for _, x := range q.X {
			if err := r.want(m, x); err != nil {
				return err
			}
		}
	}
	return nil
}

func (r *recording) wantColumn(m *model, q netlist.Quantity) error {
	key := columnKey(q)
	if _, ok := r.columns[key]; ok {
		return nil
	}
	t, err := m.tapOf(q)
	if err != nil {
		return err
	}
	c := &column{tap: t, low: math.Inf(1), high: math.Inf(-1)}
	r.columns[key] = c
	r.list = append(r.list, c)
	return nil
}

func (r *recording) wantWord(m *model, q *netlist.Operating) error {
	t, err := m.operatingTap(q)
	if err != nil {
		return err
	}
	r.words[columnKey(q)] = &wordColumn{tap: t, since: map[string]float64{}}
	return nil
}

// columnKey tells elementary quantities apart by what they read.
func columnKey(q netlist.Quantity) string {
	switch q := q.(type) {
	case *netlist.Volts:
		return "volts " + q.Plus + " " + q.Minus
	case *netlist.Amps:
		return fmt.Sprintf("amps %s %s %t", q.Element, q.Pin, q.Rail)
	case *netlist.Watts:
		return "watts " + q.Element
	case *netlist.Operating:
		return "operating " + q.Element + " " + q.Name
	}
	return ""
}

// column returns the samples of an elementary quantity.
func (r *recording) column(q netlist.Quantity) ([]float64, error) {
	if r != nil {
		if c, ok := r.columns[columnKey(q)]; ok {
			return c.values, nil
		}
	}
	return nil, fmt.Errorf("%s was not recorded", columnKey(q))
}

// word returns the first word other than want and the time in s since when it held; or want.
func (r *recording) word(q *netlist.Operating, want string) (string, float64, error) {
	c, ok := r.words[columnKey(q)]
	if !ok {
		return "", math.NaN(), fmt.Errorf("%s was not recorded", columnKey(q))
	}
	for _, w := range c.order {
		if w != want {
			return w, c.since[w], nil
		}
	}
	return want, r.knots[0], nil
}

const (
	// pieceShare is the share of the accuracy that the cubic of a piece may be off a quantity that is no cubic itself: a stimulus, a
	// junction's current.
	pieceShare = 0.1
	// valueShare is the share of a quantity's size below which its swing is not looked at: rounding.
	valueShare = 1e-6
	// pieceHalvings bounds how often a step is halved; at a kink no number of halvings is enough.
	pieceHalvings = 6
)

// add records one accepted step, or the part of it that lies in the window.
func (r *recording) add(step *mna.Step) error {
	start := max(step.T0, r.from)
	if start >= step.T1 {
		return nil
	}
	if len(r.knots) == 0 {
		r.knots = append(r.knots, start)
	}
	values, err := r.sample(step, start, step.T1)
	if err != nil {
		return err
	}
	for _, c := range r.words {
		if err := c.add(&r.samples); err != nil {
			return err
		}
	}
	halvings := pieceHalvings
	if !slices.ContainsFunc(r.list, func(c *column) bool { return !c.tap.cubic() }) {
		halvings = 0
	}
	return r.record(step, start, step.T1, values, halvings)
}

// sample reads all columns at four points of a piece of the step.
func (r *recording) sample(step *mna.Step, from, until float64) ([][samplesPerStep]float64, error) {
	s := &r.samples
	s.h = until - from
	for k := range s.x {
		s.t[k] = from + s.h*float64(k)/(samplesPerStep-1)
		if k == samplesPerStep-1 {
			s.t[k] = until
		}
		step.At(s.t[k], s.x[k])
	}
	values := make([][samplesPerStep]float64, len(r.list))
	for i, c := range r.list {
		if err := c.tap.sample(s, values[i][:]); err != nil {
			return nil, err
		}
		for _, v := range values[i] {
			c.low, c.high = math.Min(c.low, v), math.Max(c.high, v)
		}
	}
	return values, nil
}

// record keeps the samples of a piece if their cubics are good enough, else those of its halves.
func (r *recording) record(step *mna.Step, from, until float64, values [][samplesPerStep]float64, halvings int) error {
	middle := from + (until-from)/2
	if halvings == 0 || !(middle > from && middle < until) {
		r.keep(until, values)
		return nil
	}
	left, err := r.sample(step, from, middle)
	if err != nil {
		return err
	}
	right, err := r.sample(step, middle, until)
	if err != nil {
		return err
	}
	if r.good(values, left, right) {
		r.keep(until, values)
		return nil
	}
	if err := r.record(step, from, middle, left, halvings-1); err != nil {
		return err
	}
	return r.record(step, middle, until, right, halvings-1)
}

// good reports whether the cubics of a piece agree with the samples of its halves.
func (r *recording) good(values, left, right [][samplesPerStep]float64) bool {
	for i, c := range r.list {
		if c.tap.cubic() {
			continue
		}
		allowed := pieceShare * r.accuracy * math.Max(c.high-c.low, valueShare*math.Max(math.Abs(c.low), math.Abs(c.high)))
		whole := newCubic(values[i][:])
		for k := range samplesPerStep {
			u := float64(k) / (2 * (samplesPerStep - 1))
			if !(math.Abs(whole.at(u)-left[i][k]) <= allowed && math.Abs(whole.at(u+0.5)-right[i][k]) <= allowed) {
				return false
			}
		}
	}
	return true
}

// keep adds a piece that ends at a time.
func (r *recording) keep(until float64, values [][samplesPerStep]float64) {
	r.knots = append(r.knots, until)
	for i, c := range r.list {
		c.values = append(c.values, values[i][:]...)
	}
}

func (c *wordColumn) add(s *stepSamples) error {
	for k, x := range s.x {
		v, err := c.tap.read(x, s.t[k])
		if err != nil {
			return err
		}
		if _, ok := c.since[v.Word]; !ok {
			c.since[v.Word] = s.t[k]
			c.order = append(c.order, v.Word)
		}
	}
	return nil
}

// run integrates the set-up's transient and records what qs need.
func (e *evaluation) run(qs []netlist.Quantity) error {
	run := e.setup.Run
	r, err := e.model.newRecording(run.From, e.setup.Circuit.Accuracy, qs)
	if err != nil {
		return err
	}
	o := mna.TransientOptions{Until: run.Until, MaxStep: run.Step, Accuracy: e.setup.Circuit.Accuracy, Cold: run.Cold, Logger: e.log}
	if !run.Cold {
		if o.Start, err = e.quiescent(); err != nil {
			return err
		}
	}
	_, err = e.model.system.Transient(e.ctx, o, func(step *mna.Step) error {
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

// waveform computes a quantity over the window of the run.
func (e *evaluation) waveform(q netlist.Quantity) (*Waveform, error) {
	if e.record == nil {
		return nil, &InputError{Message: "a waveform needs a run"}
	}
	switch q.(type) {
	case *netlist.Volts, *netlist.Amps, *netlist.Watts, *netlist.Operating:
		values, err := e.record.column(q)
		if err != nil {
			return nil, err
		}
		return &Waveform{knots: e.record.knots, values: values}, nil
	}
	w := &Waveform{knots: e.record.knots, values: make([]float64, samplesPerStep*(len(e.record.knots)-1))}
	p := nowhere()
	for p.sample = range w.values {
		v, err := e.number(q, p)
		if err != nil {
			return nil, err
		}
		w.values[p.sample] = real(v)
	}
	return w, nil
}

// reducers make a number of a waveform. Their definitions are those of the language reference.
var reducers = map[string]func(w *Waveform, numbers map[string]float64) (float64, error){
	"peak":   func(w *Waveform, _ map[string]float64) (float64, error) { v, _ := w.Peak(); return v, nil },
	"trough": func(w *Waveform, _ map[string]float64) (float64, error) { v, _ := w.Trough(); return v, nil },
	"pp":     func(w *Waveform, _ map[string]float64) (float64, error) { return w.PeakToPeak(), nil },
	"mean":   func(w *Waveform, _ map[string]float64) (float64, error) { return w.Mean(), nil },
	"rms":    func(w *Waveform, _ map[string]float64) (float64, error) { return w.RMS(), nil },
	"value":  func(w *Waveform, n map[string]float64) (float64, error) { return w.At(n["at"]) },
	"tone": func(w *Waveform, n map[string]float64) (float64, error) {
		a, err := w.Tone(n["frequency"])
		return math.Hypot(real(a), imag(a)), err
	},
	"tone_phase": func(w *Waveform, n map[string]float64) (float64, error) {
		a, err := w.Tone(n["frequency"])
		return math.Atan2(imag(a), real(a)), err
	},
	"rise":      func(w *Waveform, _ map[string]float64) (float64, error) { return w.Rise() },
	"fall":      func(w *Waveform, _ map[string]float64) (float64, error) { return w.Fall() },
	"overshoot": func(w *Waveform, _ map[string]float64) (float64, error) { return w.Overshoot() },
	"settles":   func(w *Waveform, n map[string]float64) (float64, error) { return w.Settling(n["within"]), nil },
	"slew":      func(w *Waveform, _ map[string]float64) (float64, error) { return w.Slew(), nil },
	"crosses": func(w *Waveform, n map[string]float64) (float64, error) {
		return w.Crossing(n["level"], int(n["n"]))
	},
	"outside": func(w *Waveform, n map[string]float64) (float64, error) { return w.Outside(n["low"], n["high"]), nil },
	"drift":   func(w *Waveform, _ map[string]float64) (float64, error) { return w.Drift(), nil },
}

func (e *evaluation) reduce(q *netlist.Reduce) (complex128, error) {
	f, ok := reducers[q.Name]
	if !ok {
		return 0, fmt.Errorf("the reducer %s cannot be computed", q.Name)
	}
	w, err := e.waveform(q.X)
	if err != nil {
		return 0, err
	}
	v, err := f(w, q.Numbers)
	return complex(v, 0), err
}
