package analyses

import (
	"fmt"
	"math"
	"slices"

	"poise/mna"
	"poise/netlist"
)

// recording looks at the steps of a run. It reads the elementary quantities that the bench's expressions consist of, cuts the steps into pieces on which
// each of them is a cubic, and hands the pieces on: to the accumulators of what is measured, which keep nothing of them, and
// to the columns that are asked for as waveforms, which keep them all.
type recording struct {
	window
	model    *model
	accuracy float64 // relative to the swing of a column
	columns  map[string]*column
	list     []*column // those of columns, in the order in which they were asked for
	bent     map[string]*bent
	words    map[string]*wordColumn
	streams  map[string]*stream
	order    []*stream // those of streams, in the order in which they were asked for
	readings map[netlist.Quantity]*reading
	keeps    bool      // a column keeps its pieces
	knots    []float64 // s, of the pieces that are kept
	broken   []int     // those of them that no cubic fits
	begun    float64   // s, start of the first piece; NaN before
	needs    []mna.Unknown
	cutter
}

// column is one elementary quantity.
type column struct {
	tap       tap
	index     int
	kept      bool
	values    []float64 // four for every piece, if it is kept
	low, high float64   // extremes so far
	noise     float64   // rounding of what was read last
}

// wordColumn keeps the words that a quantity takes and when it first takes each.
type wordColumn struct {
	tap   *operatingTap
	since map[string]float64
	order []string
}

func newRecording(m *model, w window, accuracy float64) *recording {
	return &recording{
		window: w, model: m, accuracy: accuracy, begun: math.NaN(), columns: map[string]*column{}, bent: map[string]*bent{}, words: map[string]*wordColumn{},
		streams: map[string]*stream{}, readings: map[netlist.Quantity]*reading{},
	}
}

// elements calls f with the elementary quantities of the waveforms that q consists of; those of a reducer are not among them.
func elements(q netlist.Quantity, f func(netlist.Quantity) error) error {
	switch q := q.(type) {
	case *netlist.Volts, *netlist.Amps, *netlist.Watts, *netlist.Operating:
		return f(q)
	case *netlist.Apply:
		for _, x := range q.X {
			if err := elements(x, f); err != nil {
				return err
			}
		}
	}
	return nil
}

// want adds the columns that q needs; kept ones can be read as waveforms afterwards.
func (r *recording) want(q netlist.Quantity, kept bool) error {
	return elements(q, func(q netlist.Quantity) error {
		if o, ok := q.(*netlist.Operating); ok && o.Shape == netlist.Word {
			return r.wantWord(o)
		}
		key := columnKey(q)
		c, ok := r.columns[key]
		if !ok {
			t, err := r.model.tapOf(q)
			if err != nil {
				return err
			}
			c = &column{tap: t, index: len(r.list), low: math.Inf(1), high: math.Inf(-1)}
			r.columns[key] = c
			r.list = append(r.list, c)
		}
		c.kept = c.kept || kept
		r.keeps = r.keeps || kept
		return nil
	})
}

func (r *recording) wantWord(q *netlist.Operating) error {
	t, err := r.model.operatingTap(q)
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

// word returns the first word other than want and the time in s since when it held; or want.
func (r *recording) word(q *netlist.Operating, want string) (string, float64, error) {
	c, ok := r.words[columnKey(q)]
	if !ok {
		return "", math.NaN(), fmt.Errorf("%s was not recorded", q.Describe().Text)
	}
	for _, w := range c.order {
		if w != want {
			return w, c.since[w], nil
		}
	}
	return want, r.begun, nil
}

// add looks at one accepted step, or the part of it that lies in the window.
func (r *recording) add(step *mna.Step) error {
	start := max(step.T0, r.from)
	if start >= step.T1 {
		return nil
	}
	if math.IsNaN(r.begun) {
		r.begin(start)
	}
	return r.cut(step, start)
}

// begin makes ready for the first piece.
func (r *recording) begin(start float64) {
	r.begun = start
	if r.keeps {
		r.knots = append(r.knots, start)
	}
	r.needs = r.unknowns()
	r.cutter = newCutter(len(r.list), r.model.system.Size(), r.accuracy)
}

// unknowns returns those that the taps read, each once.
func (r *recording) unknowns() []mna.Unknown {
	var list []mna.Unknown
	for _, c := range r.list {
		list = append(list, c.tap.needs()...)
	}
	for _, c := range r.words {
		list = append(list, c.tap.needs()...)
	}
	slices.Sort(list)
	return slices.Compact(list)
}

// look reads all columns at a time t in s of a step into a slot of their taps.
func (r *recording) look(step *mna.Step, t float64, slot int) error {
	x, at := r.x, t
	if t == step.T1 {
		// A device's own signal is read as the step sees it: before a jump at its end.
		x, at = step.End(), math.Nextafter(t, math.Inf(-1))
	} else {
		step.Values(t, r.needs, x)
	}
	for _, c := range r.list {
		if err := c.tap.load(slot, x, at); err != nil {
			return err
		}
	}
	if slot < samplesPerStep {
		for _, c := range r.words {
			if err := c.add(x, at); err != nil {
				return err
			}
		}
	}
	return nil
}

// read fills values with the samples of all columns over h seconds, out of four slots of their taps.
func (r *recording) read(at slots, h float64, values []samples) {
	for i, c := range r.list {
		c.noise = c.tap.read(at, h, &values[i])
		for _, v := range values[i] {
			c.low, c.high = min(c.low, v), max(c.high, v)
		}
	}
}

const (
	// pieceShare is the share of the accuracy that the cubic of a piece may be off a quantity that is no cubic itself: a stimulus, a
	// junction's current, an unknown in a step of high order.
	pieceShare = 0.1
	// valueShare is the share of a quantity's size below which its swing is not looked at: rounding.
	valueShare = 1e-6
)

// allowance is how far the cubic of a piece may be off a quantity that has been between low and high.
func allowance(accuracy, low, high float64) float64 {
	return pieceShare * accuracy * math.Max(high-low, valueShare*math.Max(math.Abs(low), math.Abs(high)))
}

// good reports whether the cubics of a piece agree with the samples of its halves.
func (r *recording) good(values, left, right []samples) bool {
	for i, c := range r.list {
		if !agree(&values[i], &left[i], &right[i], allowance(r.accuracy, c.low, c.high)+c.noise) {
			return false
		}
	}
	for _, b := range r.bent {
		if !b.good(r, values, left, right) {
			return false
		}
	}
	return true
}

// agree reports whether the cubic through the samples of a piece is within what is allowed of those of its halves. Nothing is gained by halving what
// is not a number.
func agree(whole, left, right *samples, allowed float64) bool {
	if whole.isNaN() {
		return true
	}
	c := newCubic(whole[:])
	for k := range samplesPerStep {
		u := float64(k) / (2 * (samplesPerStep - 1))
		if !(math.Abs(c.at(u)-left[k]) <= allowed && math.Abs(c.at(u+0.5)-right[k]) <= allowed) {
			return false
		}
	}
	return true
}

// pass hands on a piece from one time to another, in s. A broken one, at a kink, is taken for the straight lines between its samples: a cubic would
// swing beyond them.
func (r *recording) pass(from, until float64, values []samples, broken bool) {
	for _, s := range r.order {
		s.add(from, until, values, broken)
	}
	if !r.keeps {
		return
	}
	if broken {
		r.broken = append(r.broken, len(r.knots)-1)
	}
	r.knots = append(r.knots, until)
	for i, c := range r.list {
		if c.kept {
			c.values = append(c.values, values[i][:]...)
		}
	}
}

// waveform computes an expression from the pieces that were kept.
func (r *recording) waveform(x *expression) *Waveform {
	w := &Waveform{}
	columns := make([]samples, len(r.list))
	broken := r.broken
	var y samples
	var p, line piece
	for i := range len(r.knots) - 1 {
		for k, c := range r.list {
			if c.kept {
				columns[k] = samples(c.values[samplesPerStep*i:])
			}
		}
		x.read(columns, &y)
		p.set(r.knots[i], r.knots[i+1], &y)
		if len(broken) == 0 || broken[0] != i {
			w.append(&p)
			continue
		}
		broken = broken[1:]
		for k := range samplesPerStep - 1 {
			if p.line(k, &line) {
				w.append(&line)
			}
		}
	}
	return w
}

func (c *wordColumn) add(x []float64, t float64) error {
	v, err := c.tap.at(x, t)
	if err != nil {
		return err
	}
	if _, ok := c.since[v.Word]; !ok {
		c.since[v.Word] = t
		c.order = append(c.order, v.Word)
	}
	return nil
}
