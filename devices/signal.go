package devices

import (
	"fmt"
	"math"

	"poise/mna"
)

// SignalError says that a waveform's argument makes no sense.
type SignalError struct {
	Argument string // as written in the language
	Want     string
}

func (e *SignalError) Error() string { return e.Argument + ": want " + e.Want }

// constant is a signal that never changes.
type constant float64

// Constant returns a signal of v at all times.
func Constant(v float64) mna.Signal { return constant(v) }

func (c constant) At(float64) float64     { return float64(c) }
func (c constant) Corner(float64) float64 { return inf }
func (c constant) Scale(float64) float64  { return inf }

// sum adds signals.
type sum []mna.Signal

// Sum returns the sum of signals.
func Sum(signals ...mna.Signal) mna.Signal {
	var all sum
	level, levels := 0.0, 0
	for _, s := range signals {
		if c, ok := s.(constant); ok {
			level += float64(c)
			levels++
			continue
		}
		all = append(all, s)
	}
	switch {
	case len(all) == 0:
		return constant(level)
	case level == 0 && len(all) == 1:
		return all[0]
	case level != 0:
		all = append(all, constant(level))
	}
	return all
}

func (s sum) At(t float64) float64 {
	v := 0.0
	for _, x := range s {
		v += x.At(t)
	}
	return v
}

func (s sum) Corner(t float64) float64 {
	c := inf
	for _, x := range s {
		c = min(c, x.Corner(t))
	}
	return c
}

func (s sum) Scale(t float64) float64 {
	c := inf
	for _, x := range s {
		c = min(c, x.Scale(t))
	}
	return c
}

// scaled multiplies a signal by a number.
type scaled struct {
	signal mna.Signal
	factor float64
}

// Scaled returns factor times a signal.
func Scaled(signal mna.Signal, factor float64) mna.Signal {
	if c, ok := signal.(constant); ok {
		return constant(factor * float64(c))
	}
	if factor == 1 {
		return signal
	}
	if factor == 0 {
		return constant(0)
	}
	return scaled{signal, factor}
}

func (s scaled) At(t float64) float64     { return s.factor * s.signal.At(t) }
func (s scaled) Corner(t float64) float64 { return s.signal.Corner(t) }
func (s scaled) Scale(t float64) float64  { return s.signal.Scale(t) }

// Sine is peak sin(2 pi frequency (t - delay) + phase); before delay it holds the value it starts with.
type Sine struct {
	Peak      float64 // V or A
	Frequency float64 // Hz
	Phase     float64 // rad
	Delay     float64 // s
}

// New checks the numbers and returns the signal.
func (s Sine) New() (mna.Signal, error) {
	if err := positive("frequency", s.Frequency, "Hz"); err != nil {
		return nil, err
	}
	return s, notNegative("delay", s.Delay)
}

func positive(name string, v float64, unit string) error {
	if !(v > 0 && v < inf) {
		return &SignalError{name, "a positive value (" + unit + ")"}
	}
	return nil
}

func notNegative(name string, v float64) error {
	if !(v >= 0 && v < inf) {
		return &SignalError{name, "a time of at least 0 s"}
	}
	return nil
}

// At returns the value at t in s.
func (s Sine) At(t float64) float64 {
	return s.Peak * math.Sin(2*math.Pi*s.Frequency*max(0, t-s.Delay)+s.Phase)
}

// Corner returns the delay, where the slope jumps.
func (s Sine) Corner(t float64) float64 { return cornerAt(s.Delay, t) }

func cornerAt(corner, t float64) float64 {
	if corner > 0 && t < corner {
		return corner
	}
	return inf
}

// Scale returns the period.
func (s Sine) Scale(t float64) float64 {
	if t < s.Delay {
		return inf
	}
	return 1 / s.Frequency
}

// Modulated is peak (1 + depth sin(2 pi tone t)) sin(2 pi carrier t).
type Modulated struct {
	Peak    float64 // V or A, of the unmodulated carrier
	Carrier float64 // Hz
	Tone    float64 // Hz
	Depth   float64 // 0 to 1
}

// New checks the numbers and returns the signal.
func (m Modulated) New() (mna.Signal, error) {
	if err := positive("frequency", m.Carrier, "Hz"); err != nil {
		return nil, err
	}
	if err := positive("tone", m.Tone, "Hz"); err != nil {
		return nil, err
	}
	if !(m.Depth >= 0 && m.Depth <= 1) {
		return nil, &SignalError{"depth", "a share from 0 % to 100 %"}
	}
	return m, nil
}

// At returns the value at t in s.
func (m Modulated) At(t float64) float64 {
	return m.Peak * (1 + m.Depth*math.Sin(2*math.Pi*m.Tone*t)) * math.Sin(2*math.Pi*m.Carrier*t)
}

// Corner returns +Inf: there is none.
func (m Modulated) Corner(float64) float64 { return inf }

// Scale returns the carrier's period, or the tone's if that is shorter.
func (m Modulated) Scale(float64) float64 { return 1 / max(m.Carrier, m.Tone) }

// Chirp sweeps a sine linearly from one frequency to another and goes on at the last: peak sin(2 pi (from t + (to - from) t^2/(2 over))).
type Chirp struct {
	Peak     float64 // V or A
	From, To float64 // Hz
	Over     float64 // s
}

// New checks the numbers and returns the signal.
func (c Chirp) New() (mna.Signal, error) {
	for _, x := range []struct {
		name string
		v    float64
	}{{"from", c.From}, {"to", c.To}} {
		if err := positive(x.name, x.v, "Hz"); err != nil {
			return nil, err
		}
	}
	return c, positive("over", c.Over, "s")
}

// At returns the value at t in s.
func (c Chirp) At(t float64) float64 {
	swept := min(t, c.Over)
	cycles := swept*(c.From+(c.To-c.From)*swept/(2*c.Over)) + (t-swept)*c.To
	return c.Peak * math.Sin(2*math.Pi*cycles)
}

// Corner returns the end of the sweep, where the rate of the frequency jumps.
func (c Chirp) Corner(t float64) float64 { return cornerAt(c.Over, t) }

// Scale returns the shortest period at t and soon after.
func (c Chirp) Scale(t float64) float64 {
	now := c.From + (c.To-c.From)*min(1, t/c.Over)
	return 1 / max(now, c.From+(c.To-c.From)*min(1, (t+1/now)/c.Over))
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
	return r.Peak * math.Exp(-u/r.Decay) * math.Sin(2*math.Pi*r.Frequency*u)
}

// Corner returns the start.
func (r Ringing) Corner(t float64) float64 { return cornerAt(r.Start, t) }

// Scale returns the period or the decay, the shorter, until nothing is left of it.
func (r Ringing) Scale(t float64) float64 {
	if t < r.Start || t-r.Start > spent*r.Decay {
		return inf
	}
	return min(1/r.Frequency, r.Decay)
}

// spent is the number of time constants after which an exponential is less than the last bit of what it was.
const spent = 40

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
	d := doubleExponential{1, fall, share * fall}
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
	return d.factor * (math.Exp(-u/d.fall) - math.Exp(-u/d.rise))
}

// shapeOf returns the 10-90 % front and the width at half the peak of exp(-u) - exp(-u/share).
func shapeOf(share float64) (front, width float64) {
	d := doubleExponential{1, 1, share}
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

// scale is the time in which the pulse changes at u after its start.
func (d *doubleExponential) scale(u float64) float64 {
	switch {
	case u < 0 || u > spent*d.fall:
		return inf
	case u < spent*d.rise:
		return d.rise + u/2
	}
	return d.fall
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
		if u > spent*b.shape.fall {
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

func (b *bursts) Scale(t float64) float64 {
	_, since := b.packet(max(0, t))
	k := min(float64(b.count-1), math.Floor(since*b.b.Rate))
	return b.shape.scale(since - k/b.b.Rate)
}
