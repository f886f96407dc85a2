package analyses

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"

	"poise/netlist"
)

// plots computes what the bench plots at this point of its grid.
func (e *evaluation) plots(at []Coordinate) ([]PlotResult, error) {
	var results []PlotResult
	for _, p := range e.setup.Plots {
		rs, err := e.traces(p.Quantities, 0)
		if err != nil {
			return nil, err
		}
		for i := range rs {
			rs[i].Title, rs[i].Point = p.Title, at
			e.addLimits(&rs[i])
		}
		results = append(results, rs...)
	}
	return results, nil
}

// traces computes quantities over their axes; those with the same axis share a result. A positive points
// asks for that many equally spaced times instead of the samples of the steps.
func (e *evaluation) traces(qs []netlist.Quantity, points int) ([]PlotResult, error) {
	var results []PlotResult
	for _, q := range qs {
		axis, trace, err := e.trace(q, points)
		if err != nil {
			return nil, err
		}
		joined := false
		for i := range results {
			if sameAxis(&results[i].X, axis) {
				results[i].Traces = append(results[i].Traces, *trace)
				joined = true
				break
			}
		}
		if !joined {
			results = append(results, PlotResult{X: *axis, Traces: []Trace{*trace}})
		}
	}
	return results, nil
}

func sameAxis(a, b *Axis) bool {
	n := len(a.Values)
	return a.Name == b.Name && n == len(b.Values) && n > 0 && a.Values[0] == b.Values[0] && a.Values[n-1] == b.Values[n-1]
}

func (e *evaluation) trace(q netlist.Quantity, points int) (*Axis, *Trace, error) {
	info := q.Describe()
	t := &Trace{Name: info.Text, Unit: info.Unit.Symbol()}
	switch info.Shape {
	case netlist.Waveform:
		w, err := e.waveform(q)
		if err != nil {
			return nil, nil, err
		}
		times, values, err := w.sampled(points)
		t.Values = values
		return &Axis{Name: "time", Unit: "s", Values: times}, t, err
	case netlist.Curve:
		c, err := e.curve(q)
		if err != nil {
			return nil, nil, err
		}
		for _, v := range c.Values {
			t.Values = append(t.Values, compared(v, c.Complex))
			if c.Complex {
				t.Phase = append(t.Phase, cmplx.Phase(v))
			}
		}
		return &Axis{Name: "frequency", Unit: "Hz", Log: true, Values: c.Frequencies}, t, nil
	}
	return nil, nil, &InputError{Message: info.Text + " is a single number; a plot shows waveforms of a run, or a metric over a range of frequencies"}
}

// sampled returns the samples of all steps, or the waveform at n equally spaced times.
func (w *Waveform) sampled(n int) (times, values []float64, err error) {
	if n > 1 {
		from, until := w.Window()
		for i := range n {
			t := from + (until-from)*float64(i)/float64(n-1)
			v, err := w.At(math.Min(t, until))
			if err != nil {
				return nil, nil, err
			}
			times, values = append(times, t), append(values, v)
		}
		return times, values, nil
	}
	for p := range w.pieces() {
		for k, v := range p.y {
			if k == 0 && len(values) > 0 && v == values[len(values)-1] {
				continue
			}
			times = append(times, p.time(float64(k)/(samplesPerStep-1)))
			values = append(values, v)
		}
	}
	return times, values, nil
}

// addLimits marks the limits that the bench's expectations set for the plotted quantities.
func (e *evaluation) addLimits(r *PlotResult) {
	for i := range r.Traces {
		t := &r.Traces[i]
		for _, x := range e.setup.Expected {
			if x.Quantity.Describe().Text == t.Name && x.Quantity.Describe().Shape != netlist.Scalar {
				t.Low, t.High = level(x.Limit.Low), level(x.Limit.High)
			}
		}
	}
}

// level is a constant limit as a trace of one value, nil for an open side.
func level(v float64) []float64 {
	if math.IsInf(v, 0) {
		return nil
	}
	return []float64{v}
}

// CurveOptions say which curves to compute.
type CurveOptions struct {
	Quantities []string // in the language; a metric without `at` or `over` gets the range below; none: see Curves
	Low, High  float64  // Hz; 0: 1 Hz and 1 MHz
	PerDecade  int      // 0: 20
}

// The range of frequencies of Curves if none is given, in Hz.
const (
	curvesLow  = 1
	curvesHigh = 1e6
)

// Curves computes metrics over frequency at the first point of the bench's grid, or of the circuit as written if b is nil.
// Without quantities it takes the bench's own curves, and if it has none dm_gain, cm_gain and cmrr as far as the ports allow.
func Curves(ctx context.Context, d *netlist.Design, b *netlist.Bench, o CurveOptions) ([]PlotResult, error) {
	e, err := evaluationOf(ctx, d, b)
	if err != nil {
		return nil, err
	}
	qs, err := e.curveQuantities(o)
	if err != nil {
		return nil, err
	}
	return e.traces(qs, 0)
}

// evaluationOf sets up the first point of a bench, or the circuit as written.
func evaluationOf(ctx context.Context, d *netlist.Design, b *netlist.Bench) (*evaluation, error) {
	setup, err := firstSetup(d, b)
	if err != nil {
		return nil, err
	}
	return newEvaluation(ctx, setup, nil)
}

func firstSetup(d *netlist.Design, b *netlist.Bench) (*netlist.Setup, error) {
	if b == nil {
		return d.Setup()
	}
	var point []float64
	for _, axis := range b.Vary {
		point = append(point, axis.Values[0])
	}
	return b.Setup(point)
}

func (e *evaluation) curveQuantities(o CurveOptions) ([]netlist.Quantity, error) {
	if !(o.High > 0) {
		o.Low, o.High = curvesLow, curvesHigh
	}
	if !(o.Low > 0 && o.Low < o.High) {
		return nil, &InputError{Message: "want a range of frequencies from low to high, above 0 Hz"}
	}
	if len(o.Quantities) == 0 {
		if own := e.ownQuantities(netlist.Curve); len(own) > 0 {
			return own, nil
		}
		o.Quantities = e.usualCurves()
	}
	var qs []netlist.Quantity
	for _, text := range o.Quantities {
		q, err := e.setup.Quantity(text)
		if err != nil {
			over := fmt.Sprintf("%s over %gHz..%gHz", text, o.Low, o.High)
			if o.PerDecade > 0 {
				over += fmt.Sprintf(" per decade %d", o.PerDecade)
			}
			var second error
			if q, second = e.setup.Quantity(over); second != nil {
				return nil, err
			}
		}
		qs = append(qs, q)
	}
	return qs, nil
}

// usualCurves names what people look at first.
func (e *evaluation) usualCurves() []string {
	if len(e.model.circuit.Inputs) == 1 && len(e.model.circuit.Inputs[0].Nodes) == 1 {
		return []string{"dm_gain"}
	}
	return []string{"dm_gain", "cm_gain", "cmrr"}
}

// ownQuantities lists what the bench plots or, failing that, expects, of one shape.
func (e *evaluation) ownQuantities(shape netlist.Shape) []netlist.Quantity {
	var qs []netlist.Quantity
	seen := map[string]bool{}
	add := func(q netlist.Quantity) {
		if q.Describe().Shape == shape && !seen[q.Describe().Text] {
			seen[q.Describe().Text] = true
			qs = append(qs, q)
		}
	}
	for _, p := range e.setup.Plots {
		for _, q := range p.Quantities {
			add(q)
		}
	}
	for _, x := range e.setup.Expected {
		add(x.Quantity)
	}
	return qs
}

// WaveOptions say which waveforms to compute.
type WaveOptions struct {
	Quantities []string // in the language; none: what the bench plots and measures
	Points     int      // equally spaced times; 0: the samples of the integrator's own steps
}

// Waveforms runs a bench at the first point of its grid and returns quantities over the window of its run.
func Waveforms(ctx context.Context, d *netlist.Design, b *netlist.Bench, o WaveOptions) ([]PlotResult, error) {
	e, err := evaluationOf(ctx, d, b)
	if err != nil {
		return nil, err
	}
	if e.setup.Run == nil {
		return nil, &InputError{Message: "the bench has no run"}
	}
	var qs []netlist.Quantity
	for _, text := range o.Quantities {
		q, err := e.setup.Quantity(text)
		if err != nil {
			return nil, err
		}
		qs = append(qs, q)
	}
	if len(qs) == 0 {
		qs = e.measuredWaveforms()
	}
	if len(qs) == 0 {
		return nil, &InputError{Message: "the bench neither plots nor measures a waveform; name the quantities"}
	}
	if err := e.run(qs, nil); err != nil {
		return nil, err
	}
	return e.traces(qs, o.Points)
}

// measuredWaveforms lists the waveforms that the bench plots and compares, and those that its reducers work on.
func (e *evaluation) measuredWaveforms() []netlist.Quantity {
	qs := e.ownQuantities(netlist.Waveform)
	seen := map[string]bool{}
	for _, q := range qs {
		seen[q.Describe().Text] = true
	}
	for _, x := range e.setup.Expected {
		for _, q := range reduced(x.Quantity) {
			if !seen[q.Describe().Text] {
				seen[q.Describe().Text] = true
				qs = append(qs, q)
			}
		}
	}
	return qs
}

// reduced lists the waveforms that reducers within q work on.
func reduced(q netlist.Quantity) []netlist.Quantity {
	var qs []netlist.Quantity
	switch q := q.(type) {
	case *netlist.Reduce:
		return []netlist.Quantity{q.X}
	case *netlist.Apply:
		for _, x := range q.X {
			qs = append(qs, reduced(x)...)
		}
	}
	return qs
}
