package analyses

import (
	"fmt"
	"math"

	"poise/netlist"
)

// verdict is an expectation at one point of the grid.
type verdict struct {
	status Status
	err    error
	value  float64
	low    float64
	high   float64
	margin float64
	word   string
	at     []Coordinate
}

// margin is the distance of v from the nearer limit, positive inside; in dB for a ratio written in dB.
func margin(v float64, l *netlist.Limit, ratio bool) float64 {
	if ratio {
		return math.Min(decibels(v/l.Low), decibels(l.High/v))
	}
	return math.Min(v-l.Low, l.High-v)
}

// decibels returns 20 log10 |x|.
func decibels(x float64) float64 { return 20 * math.Log10(math.Abs(x)) }

// satisfies reports whether v lies inside the limits. NaN does not.
func satisfies(v float64, l *netlist.Limit) bool {
	low := v > l.Low || !l.LowOpen && v == l.Low
	high := v < l.High || !l.HighOpen && v == l.High
	return low && high
}

// verdict computes an expectation.
func (e *evaluation) verdict(x *netlist.Expected) verdict {
	v := verdict{value: math.NaN(), low: x.Limit.Low, high: x.Limit.High, margin: math.NaN()}
	var err error
	switch shape := x.Quantity.Describe().Shape; shape {
	case netlist.Word:
		return e.wordVerdict(x)
	case netlist.Waveform:
		err = e.waveformVerdict(x, &v)
	case netlist.Curve:
		err = e.curveVerdict(x, &v)
	default:
		var n complex128
		n, err = e.number(x.Quantity, nowhere())
		v.value = compared(n, x.Quantity.Describe().Complex)
	}
	if err == nil && math.IsNaN(v.value) {
		err = &InputError{Message: "the result is not a number"}
	}
	if err != nil {
		v.status, v.err = Error, err
		return v
	}
	v.margin = margin(v.value, &x.Limit, x.Limit.Ratio)
	if !satisfies(v.value, &x.Limit) {
		v.status = Fail
	}
	return v
}

func (e *evaluation) wordVerdict(x *netlist.Expected) verdict {
	v := verdict{value: math.NaN(), low: math.NaN(), high: math.NaN(), margin: math.NaN()}
	word, at, err := e.word(x.Quantity, x.Limit.Word)
	if err != nil {
		v.status, v.err = Error, err
		return v
	}
	v.word = word
	if word != x.Limit.Word {
		v.status = Fail
		if !math.IsNaN(at) {
			v.at = []Coordinate{{Name: "time", Value: at, Unit: "s"}}
		}
	}
	return v
}

// waveformVerdict finds the worst point of a waveform: one of its extremes.
func (e *evaluation) waveformVerdict(x *netlist.Expected, v *verdict) error {
	extremes, err := e.extremes(x.Quantity)
	if err != nil {
		return err
	}
	high, highAt := extremes.peak()
	low, lowAt := extremes.trough()
	var at float64
	v.value, at = high, highAt
	if m := margin(low, &x.Limit, x.Limit.Ratio); !(m >= margin(high, &x.Limit, x.Limit.Ratio)) {
		v.value, at = low, lowAt
	}
	v.at = []Coordinate{{Name: "time", Value: at, Unit: "s"}}
	return nil
}

func (e *evaluation) curveVerdict(x *netlist.Expected, v *verdict) error {
	c, err := e.curve(x.Quantity)
	if err != nil {
		return err
	}
	var frequency float64
	frequency, v.value, err = c.worst(func(value float64) float64 { return margin(value, &x.Limit, x.Limit.Ratio) })
	v.at = []Coordinate{{Name: "frequency", Value: frequency, Unit: "Hz"}}
	return err
}

// worse reports whether a should be reported rather than b: an error before a failure before a pass, and of
// the same kind the smaller margin.
func (a *verdict) worse(b *verdict) bool {
	rank := func(s Status) int { return map[Status]int{Error: 3, Fail: 2, Pass: 1, Skipped: 0}[s] }
	if rank(a.status) != rank(b.status) {
		return rank(a.status) > rank(b.status)
	}
	return a.margin < b.margin
}

// showSeconds writes a time for an error message.
func showSeconds(t float64) string { return fmt.Sprintf("%.6g s", t) }
