package devices

import (
	"math"
	"sort"

	"poise/mna"
)

// Edge10to90 is the share of a straight transition's whole length that its 10-90 % time is.
const Edge10to90 = 0.8

const (
	defaultEdge      = 1e-9 // s, 10-90 %
	edgePeriodShare  = 1e-3 // of the period, which a default edge does not exceed
	linearPieceScale = 4    // a straight piece is crossed in a few steps at least
)

// DefaultEdge returns the 10-90 % time of an edge that is not given: 1 ns, at most a thousandth of the period (0: no period).
func DefaultEdge(period float64) float64 {
	if period > 0 {
		return min(defaultEdge, edgePeriodShare*period)
	}
	return defaultEdge
}

// linear is a signal through points, straight between them, before the first and after the last constant or
// repeating with a period.
type linear struct {
	t, v   []float64
	period float64 // s, 0: once
	start  float64 // s, when the first period begins; before it the value is that of time 0 of the period
	offset float64 // s, place within the period at start
}

// newLinear checks that times ascend.
func newLinear(t, v []float64, period, start, offset float64) (mna.Signal, error) {
	for i := 1; i < len(t); i++ {
		if !(t[i] > t[i-1]) {
			return nil, &SignalError{"points", "times that ascend"}
		}
	}
	return &linear{t, v, period, start, offset}, nil
}

// local returns the time within the points and the time at which the current period began.
func (l *linear) local(t float64) (u, base float64) {
	if l.period == 0 {
		return t - l.start, l.start
	}
	s := max(0, t-l.start) + l.offset
	n := math.Floor(s / l.period)
	return max(0, s-n*l.period), l.start - l.offset + n*l.period
}

func (l *linear) At(t float64) float64 {
	u, _ := l.local(t)
	i := sort.SearchFloat64s(l.t, u)
	switch {
	case i == 0:
		return l.v[0]
	case i == len(l.t):
		return l.v[len(l.v)-1]
	}
	share := (u - l.t[i-1]) / (l.t[i] - l.t[i-1])
	return l.v[i-1] + share*(l.v[i]-l.v[i-1])
}

func (l *linear) Corner(t float64) float64 {
	if l.period > 0 && t < l.start {
		return l.start
	}
	u, base := l.local(t)
	// A corner just met must not be met again one rounding later.
	least := t + cornerRounding*(math.Abs(t)+l.period)
	for range 3 {
		for i := sort.SearchFloat64s(l.t, u-cornerRounding*l.period); i < len(l.t); i++ {
			if c := base + l.t[i]; c > least {
				return c
			}
		}
		if l.period == 0 {
			return inf
		}
		base += l.period
		u = 0
	}
	return inf
}

// cornerRounding is the share of a time within which two corners are one: a few roundings of sums of periods.
const cornerRounding = 1e-14

// Scale returns a few times the length of the straight piece that begins at t or holds it: nothing changes within it, and it is not
// to be stepped over. It is the whole length, not what is left of it, so that steps do not shrink towards the next corner.
func (l *linear) Scale(t float64) float64 {
	if l.period > 0 && t < l.start {
		return inf
	}
	c := l.Corner(t)
	if math.IsInf(c, 1) {
		return inf
	}
	u, _ := l.local(t + (c-t)/2)
	i := sort.Search(len(l.t), func(i int) bool { return l.t[i] > u })
	if i == 0 || i == len(l.t) || l.v[i] == l.v[i-1] {
		return inf
	}
	return linearPieceScale * (l.t[i] - l.t[i-1])
}

// Points is a signal through points, straight between them and constant outside.
type Points struct {
	Times  []float64 // s, ascending
	Values []float64 // V or A
	Repeat bool      // from the last point on to the first again
}

// New checks the numbers and returns the signal.
func (p Points) New() (mna.Signal, error) {
	if len(p.Times) == 0 || len(p.Times) != len(p.Values) {
		return nil, &SignalError{"points", "pairs of a time and a value"}
	}
	if !p.Repeat {
		return newLinear(p.Times, p.Values, 0, 0, 0)
	}
	if len(p.Times) < 2 {
		return nil, &SignalError{"points", "at least two of them to repeat"}
	}
	t := make([]float64, len(p.Times))
	for i := range t {
		t[i] = p.Times[i] - p.Times[0]
	}
	last := len(t) - 1
	if p.Values[last] != p.Values[0] {
		return nil, &SignalError{"points", "a last value equal to the first to repeat without a jump"}
	}
	return newLinear(t, p.Values, t[last], max(0, p.Times[0]), 0)
}

// Step is one straight transition that begins at Start.
type Step struct {
	From, To float64 // V or A
	Start    float64 // s, `at` in the language
	Edge     float64 // s, 10-90 %; 0: DefaultEdge
}

// New checks the numbers and returns the signal.
func (s Step) New() (mna.Signal, error) {
	if err := notNegative("at", s.Start); err != nil {
		return nil, err
	}
	edge, err := edgeOf(s.Edge, 0)
	if err != nil {
		return nil, err
	}
	return newLinear([]float64{s.Start, s.Start + edge}, []float64{s.From, s.To}, 0, 0, 0)
}

// edgeOf returns the whole length of a transition of the given 10-90 % time.
func edgeOf(edge, period float64) (float64, error) {
	if edge == 0 {
		edge = DefaultEdge(period)
	}
	return edge / Edge10to90, positive("edge", edge, "s")
}

// Ramp goes from one value to another over a time.
type Ramp struct {
	From, To float64 // V or A
	Start    float64 // s, `at` in the language
	Over     float64 // s, the whole transition
}

// New checks the numbers and returns the signal.
func (r Ramp) New() (mna.Signal, error) {
	if err := notNegative("at", r.Start); err != nil {
		return nil, err
	}
	if err := positive("over", r.Over, "s"); err != nil {
		return nil, err
	}
	return newLinear([]float64{r.Start, r.Start + r.Over}, []float64{r.From, r.To}, 0, 0, 0)
}

// Pulse is one pulse or, with Every, a train of them. Both edges begin where At and At + Width say.
type Pulse struct {
	Low, High float64 // V or A
	Start     float64 // s, `at` in the language
	Width     float64 // s, from the beginning of the first edge to the beginning of the second
	Edge      float64 // s, 10-90 %; 0: DefaultEdge
	Every     float64 // s, from pulse to pulse; 0: one pulse
}

// New checks the numbers and returns the signal.
func (p Pulse) New() (mna.Signal, error) {
	if err := notNegative("at", p.Start); err != nil {
		return nil, err
	}
	if err := positive("width", p.Width, "s"); err != nil {
		return nil, err
	}
	edge, err := edgeOf(p.Edge, p.Every)
	if err != nil {
		return nil, err
	}
	if !(p.Width >= edge) {
		return nil, &SignalError{"width", "at least the length of an edge"}
	}
	times := []float64{0, edge, p.Width, p.Width + edge}
	values := []float64{p.Low, p.High, p.High, p.Low}
	if p.Width == edge {
		times, values = []float64{0, edge, 2 * edge}, []float64{p.Low, p.High, p.Low}
	}
	if p.Every == 0 {
		for i := range times {
			times[i] += p.Start
		}
		return newLinear(times, values, 0, 0, 0)
	}
	if !(p.Every > p.Width+edge && p.Every < inf) {
		return nil, &SignalError{"every", "longer than the pulse with both its edges"}
	}
	return newLinear(append(times, p.Every), append(values, p.Low), p.Every, p.Start, 0)
}

// Triangle is at zero rising at phase 0; it rises for the share Skew of a period and falls for the rest.
type Triangle struct {
	Peak      float64 // V or A
	Frequency float64 // Hz
	Phase     float64 // rad
	Skew      float64 // 0 to 1 exclusive
}

// New checks the numbers and returns the signal.
func (w Triangle) New() (mna.Signal, error) {
	if err := positive("frequency", w.Frequency, "Hz"); err != nil {
		return nil, err
	}
	if !(w.Skew > 0 && w.Skew < 1) {
		return nil, &SignalError{"skew", "a share between 0 % and 100 %, neither included"}
	}
	period := 1 / w.Frequency
	rise := w.Skew * period
	times := []float64{0, rise / 2, period - rise/2, period}
	values := []float64{0, w.Peak, -w.Peak, 0}
	return newLinear(times, values, period, 0, phaseTime(w.Phase, period))
}

// phaseTime is the time within a period that a phase stands for.
func phaseTime(phase, period float64) float64 {
	turns := phase / (2 * math.Pi)
	return (turns - math.Floor(turns)) * period
}

// Square is at the start of its high part at phase 0; it is above its middle for the share Duty of a period: the high part ends, and the
// falling edge begins, an edge's length before that share is over, and the rising edge ends with the period.
type Square struct {
	Peak      float64 // V or A: it goes from -Peak to Peak
	Frequency float64 // Hz
	Phase     float64 // rad
	Duty      float64 // 0 to 1 exclusive
	Edge      float64 // s, 10-90 %; 0: DefaultEdge
}

// New checks the numbers and returns the signal.
func (w Square) New() (mna.Signal, error) {
	if err := positive("frequency", w.Frequency, "Hz"); err != nil {
		return nil, err
	}
	if !(w.Duty > 0 && w.Duty < 1) {
		return nil, &SignalError{"duty", "a share between 0 % and 100 %, neither included"}
	}
	period := 1 / w.Frequency
	edge, err := edgeOf(w.Edge, period)
	if err != nil {
		return nil, err
	}
	high := w.Duty * period
	if !(edge < high && edge < period-high) {
		return nil, &SignalError{"edge", "shorter than the high and the low part"}
	}
	times := []float64{0, high - edge, high, period - edge, period}
	values := []float64{w.Peak, w.Peak, -w.Peak, -w.Peak, w.Peak}
	return newLinear(times, values, period, 0, phaseTime(w.Phase, period))
}
