package devices

import (
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
