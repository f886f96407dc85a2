package devices

import (
	"math"

	"poise/mna"
)

// TemperatureFactor returns 1 + tc1 (t - t0) + tc2 (t - t0)^2 with t0 the reference temperature, tc1 in 1/K, tc2 in 1/K^2
// and t in K: what a value at the reference is multiplied by.
func TemperatureFactor(tc1, tc2, t float64) float64 {
	d := t - ReferenceTemperature
	return 1 + d*(tc1+d*tc2)
}

// conductance is a resistor.
type conductance struct{ siemens float64 }

// NewResistor returns a resistor of ohms; its current is positive from pin 0 to pin 1.
func NewResistor(ohms float64) mna.Device { return conductance{1 / ohms} }

type conductanceStamp struct {
	g      float64
	a, b   mna.Unknown
	square square
}

// square holds the four slots of a conductance or capacitance between two unknowns.
type square struct{ aa, ab, ba, bb mna.Slot }

func newSquare(b mna.Binder, p, n mna.Unknown) square {
	return square{b.Slot(p, p), b.Slot(p, n), b.Slot(n, p), b.Slot(n, n)}
}

// add adds a conductance or capacitance g to m.
func (s *square) add(m []float64, g float64) {
	m[s.aa] += g
	m[s.ab] -= g
	m[s.ba] -= g
	m[s.bb] += g
}

func (c conductance) Bind(b mna.Binder) mna.Stamp {
	p, n := b.Pin(0), b.Pin(1)
	return &conductanceStamp{c.siemens, p, n, newSquare(b, p, n)}
}

func (s *conductanceStamp) Eval(e *mna.Eval) {
	i := s.g * (e.X[s.a] - e.X[s.b])
	e.F[s.a] += i
	e.F[s.b] -= i
	s.square.add(e.G, s.g)
}

type capacitance struct{ farads, start float64 }

// NewCapacitor returns a capacitor of farads. A cold run starts with start volts across it, NaN meaning none given: 0.
func NewCapacitor(farads, start float64) mna.Device { return capacitance{farads, orZero(start)} }

func orZero(x float64) float64 {
	if math.IsNaN(x) {
		return 0
	}
	return x
}

type capacitanceStamp struct {
	c, start float64
	a, b     mna.Unknown
	square   square
}

func (c capacitance) Bind(b mna.Binder) mna.Stamp {
	p, n := b.Pin(0), b.Pin(1)
	return &capacitanceStamp{c.farads, c.start, p, n, newSquare(b, p, n)}
}

func (s *capacitanceStamp) Eval(e *mna.Eval) {
	if !e.Dynamic {
		return
	}
	v := e.X[s.a] - e.X[s.b]
	if e.Cold {
		v = s.start
	}
	e.Q[s.a] += s.c * v
	e.Q[s.b] -= s.c * v
	s.square.add(e.C, s.c)
}

type inductance struct{ henries, start float64 }

// NewInductor returns an inductor of henries with an unknown current from pin 0 to pin 1. A cold run starts with start
// amperes in it, NaN meaning none given: 0.
func NewInductor(henries, start float64) mna.Device { return inductance{henries, orZero(start)} }

// branch is an unknown current from a to b.
type branch struct {
	a, b, i        mna.Unknown
	ai, bi, ia, ib mna.Slot
}

func newBranch(b mna.Binder, name string) branch {
	p, n := b.Pin(0), b.Pin(1)
	i := b.Branch(name)
	return branch{p, n, i, b.Slot(p, i), b.Slot(n, i), b.Slot(i, p), b.Slot(i, n)}
}

// eval adds the current to its nodes and v(a) - v(b) to its equation.
func (s *branch) eval(e *mna.Eval) {
	i := e.X[s.i]
	e.F[s.a] += i
	e.F[s.b] -= i
	e.F[s.i] += e.X[s.a] - e.X[s.b]
	e.G[s.ai]++
	e.G[s.bi]--
	e.G[s.ia]++
	e.G[s.ib]--
}

type inductanceStamp struct {
	branch
	l, start float64
	ii       mna.Slot
}

func (l inductance) Bind(b mna.Binder) mna.Stamp {
	s := &inductanceStamp{branch: newBranch(b, "current"), l: l.henries, start: l.start}
	s.ii = b.Slot(s.i, s.i)
	return s
}

func (s *inductanceStamp) Eval(e *mna.Eval) {
	s.eval(e)
	if !e.Dynamic {
		return
	}
	i := e.X[s.i]
	if e.Cold {
		i = s.start
	}
	e.Q[s.i] -= s.l * i
	e.C[s.ii] -= s.l
}

type voltageSource struct{ signal mna.Signal }

// NewVoltageSource returns an ideal source whose pin 0 is signal volts above pin 1, with an unknown current from pin 0
// through the source to pin 1.
func NewVoltageSource(signal mna.Signal) mna.Device { return voltageSource{signal} }

type voltageStamp struct {
	branch
	signal mna.Signal
}

func (v voltageSource) Bind(b mna.Binder) mna.Stamp {
	return &voltageStamp{newBranch(b, "current"), v.signal}
}

func (s *voltageStamp) Signal() mna.Signal { return s.signal }

func (s *voltageStamp) Eval(e *mna.Eval) {
	s.eval(e)
	e.F[s.i] -= e.Drive * s.signal.At(e.Time)
}

type currentSource struct{ signal mna.Signal }

// NewCurrentSource returns an ideal source that drives signal amperes through itself from pin 0 to pin 1.
func NewCurrentSource(signal mna.Signal) mna.Device { return currentSource{signal} }

type currentStamp struct {
	a, b   mna.Unknown
	signal mna.Signal
}

func (c currentSource) Bind(b mna.Binder) mna.Stamp {
	return &currentStamp{b.Pin(0), b.Pin(1), c.signal}
}

func (s *currentStamp) Signal() mna.Signal { return s.signal }

func (s *currentStamp) Eval(e *mna.Eval) {
	i := e.Drive * s.signal.At(e.Time)
	e.F[s.a] += i
	e.F[s.b] -= i
}
