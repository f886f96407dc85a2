package devices

import (
	"fmt"
	"math"

	"poise/mna"
)

// Signals that decay.

const (
	// negligible is the number of time constants after which an exponential is 2e-9 of what it was, below any accuracy that a
	// waveform is computed to; after vanished it is below the last bit.
	negligible = 20
	vanished   = 40
	// decayOrder is such that steps in proportion to exp(u/(3 tau)) all have the same share of the error that a method of second order makes on
	// exp(-u/tau): in proportion to the third power of the step and to what is left.
	decayOrder = 3
)

// decayScale is the scale of exp(-u/tau), which begins at u = 0 and has no other features: tau at first, then longer as less is left. A step
// cannot miss anything in it that is not already there at its beginning, so that the scale needs only to guide an integrator into the decay; from
// then on the integrator's own control of its errors may take steps as long as the rest allows.
func decayScale(u, tau float64) float64 {
	if u > negligible*tau {
		return inf
	}
	return tau * exp(u/(decayOrder*tau))
}

// Ringing is peak exp(-(t - at)/decay) sin(2 pi frequency (t - at)) from at on, 0 before.
type Ringing struct {
	Peak      float64 // V or A
	Frequency float64 // Hz
	Decay     float64 // s
	Start     float64 // s, `at` in the language
}

// New checks the numbers and returns the signal.
func (r Ringing) New() (mna.Signal, error) {
	if err := positive("frequency", r.Frequency, "Hz"); err != nil {
		return nil, err
	}
	if err := positive("decay", r.Decay, "s"); err != nil {
		return nil, err
	}
	return r, notNegative("at", r.Start)
}

// At returns the value at t in s.
func (r Ringing) At(t float64) float64 {
	u := t - r.Start
	if u <= 0 {
		return 0
	}
	return r.Peak * exp(-u/r.Decay) * math.Sin(2*math.Pi*r.Frequency*u)
}

// Corner returns the start.
func (r Ringing) Corner(t float64) float64 { return cornerAt(r.Start, t) }

// Scale returns the period or the decay, the shorter, until nothing worth a step is left. It does not grow while the ringing dies down: steps
// of a period and more would see the same phase again and again, and take it for silence.
func (r Ringing) Scale(t float64) float64 {
	if t < r.Start || t-r.Start > negligible*r.Decay {
		return inf
	}
	return min(1/r.Frequency, r.Decay)
}

// Surge is a double exponential with its peak, the 10-90 % time of its front and the width at half its peak: the shape that
// IEC 61000-4-4 and IEC 61000-4-5 give their disturbances.
type Surge struct {
	Peak  float64 // V or A
	Front float64 // s, 10 % to 90 % of the rise
	Tail  float64 // s, width at half the peak
	Start float64 // s, `at` in the language
}

// New finds the two time constants and returns the signal.
func (s Surge) New() (mna.Signal, error) {
	d, err := newDoubleExponential(s.Front, s.Tail)
	if err != nil {
		return nil, err
	}
	return &surge{d, s.Peak, s.Start}, notNegative("at", s.Start)
}

// doubleExponential is factor (exp(-u/fall) - exp(-u/rise)), of peak 1.
type doubleExponential struct{ factor, fall, rise float64 }

// leastRatio is the least tail for a front of 1: below it no double exponential has that shape (the limit is that
// of equal time constants, u exp(-u): front 0.7312, width 2.4464... hence 3.346).
const leastRatio = 3.4

func newDoubleExponential(front, tail float64) (doubleExponential, error) {
	if err := positive("front", front, "s"); err != nil {
		return doubleExponential{}, err
	}
	if err := positive("tail", tail, "s"); err != nil {
		return doubleExponential{}, err
	}
	if tail < leastRatio*front {
		return doubleExponential{}, &SignalError{"tail", fmt.Sprintf("at least %g times the front: no double exponential is shorter", leastRatio)}
	}
	// With rise = share * fall the ratio of width to front falls as share grows towards 1.
	ratio := func(share float64) float64 {
		f, w := shapeOf(share)
		return w/f - tail/front
	}
	low, high := 1e-12, 1-1e-6
	for range 200 {
		m := math.Sqrt(low * high)
		if high-low < 0.5 && high/low < 4 {
			m = (low + high) / 2
		}
		if m == low || m == high {
			break
		}
		if ratio(m) > 0 {
			low = m
		} else {
			high = m
		}
	}
	share := high
	f, _ := shapeOf(share)
	fall := front / f
	d := doubleExponential{factor: 1, fall: fall, rise: share * fall}
	d.factor = 1 / d.at(d.peakTime())
	return d, nil
}

// peakTime is where the slope is zero.
func (d *doubleExponential) peakTime() float64 {
	return d.fall * d.rise / (d.fall - d.rise) * math.Log(d.fall/d.rise)
}

func (d *doubleExponential) at(u float64) float64 {
	if u <= 0 {
		return 0
	}
	return d.factor * (exp(-u/d.fall) - exp(-u/d.rise))
}

// shapeOf returns the 10-90 % front and the width at half the peak of exp(-u) - exp(-u/share).
func shapeOf(share float64) (front, width float64) {
	d := doubleExponential{factor: 1, fall: 1, rise: share}
	top := d.peakTime()
	d.factor = 1 / d.at(top)
	cross := func(level, a, b float64) float64 {
		rising := d.at(a) < level
		for range 200 {
			m := a + (b-a)/2
			if m == a || m == b {
				break
			}
			if (d.at(m) < level) == rising {
				a = m
			} else {
				b = m
			}
		}
		return b
	}
	end := top + 2 + 10*share
	front = cross(0.9, 0, top) - cross(0.1, 0, top)
	width = cross(0.5, top, end) - cross(0.5, 0, top)
	return front, width
}

type surge struct {
	shape       doubleExponential
	peak, start float64
}

func (s *surge) At(t float64) float64     { return s.peak * s.shape.at(t-s.start) }
func (s *surge) Corner(t float64) float64 { return cornerAt(s.start, t) }
func (s *surge) Scale(t float64) float64  { return s.shape.scale(t - s.start) }

// scale is the time in which the pulse changes at u after its start: that of the front or of the tail, whichever is shorter.
func (d *doubleExponential) scale(u float64) float64 {
	if u < 0 {
		return inf
	}
	return min(decayScale(u, d.rise), decayScale(u, d.fall))
}

// Bursts is repeated double exponentials in packets: in every period Every, pulses at Rate for Length (IEC 61000-4-4).
type Bursts struct {
	Peak        float64 // V or A
	Front, Tail float64 // s, of each pulse: 10-90 % time and width at half the peak
	Rate        float64 // Hz, of the pulses in a packet
	Length      float64 // s, of a packet
	Every       float64 // s, from packet to packet
}

// New checks the numbers and returns the signal. Pulses overlap: each goes on under the next.
func (b Bursts) New() (mna.Signal, error) {
	d, err := newDoubleExponential(b.Front, b.Tail)
	if err != nil {
		return nil, err
	}
	if err := positive("rate", b.Rate, "Hz"); err != nil {
		return nil, err
	}
	if err := positive("length", b.Length, "s"); err != nil {
		return nil, err
	}
	if !(b.Every >= b.Length && b.Every < inf) {
		return nil, &SignalError{"every", "a time of at least the length of a packet"}
	}
	return &bursts{d, b, max(1, int(math.Ceil(b.Length*b.Rate*(1-1e-12))))}, nil
}

type bursts struct {
	shape doubleExponential
	b     Bursts
	count int // pulses in a packet
}

// packet returns the number of the packet at t and the time since it began.
func (b *bursts) packet(t float64) (n, since float64) {
	n = math.Floor(t / b.b.Every)
	since = t - n*b.b.Every
	return n, max(0, since)
}

func (b *bursts) At(t float64) float64 {
	if t < 0 {
		return 0
	}
	_, since := b.packet(t)
	v := 0.0
	last := min(b.count-1, int(since*b.b.Rate))
	for k := last; k >= 0; k-- {
		u := since - float64(k)/b.b.Rate
		if u > vanished*b.shape.fall {
			break
		}
		v += b.shape.at(u)
	}
	return b.b.Peak * v
}

func (b *bursts) Corner(t float64) float64 {
	if t < 0 {
		return 0
	}
	n, since := b.packet(t)
	k := math.Floor(since*b.b.Rate) + 1
	for ; k < float64(b.count); k++ {
		if c := n*b.b.Every + k/b.b.Rate; c > t {
			return c
		}
	}
	for n++; ; n++ {
		if c := n * b.b.Every; c > t {
			return c
		}
	}
}

// Scale is that of the youngest pulse. At its start, which is a corner, rounding must not take it for the one before.
func (b *bursts) Scale(t float64) float64 {
	t = max(0, t)
	_, since := b.packet(t + cornerRounding*(t+b.b.Every))
	k := min(float64(b.count-1), math.Floor(since*b.b.Rate))
	return b.shape.scale(max(0, since-k/b.b.Rate))
}
