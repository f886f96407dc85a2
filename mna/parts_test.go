package mna

import (
	"context"
	"math"
	"testing"

	"github.com/stretchr/testify/require"
)

// Small devices of the tests' own, so that the package is tested without the families that are built on it.

type resistor float64 // ohm

type twoPin struct {
	a, b           Unknown
	aa, ab, ba, bb Slot
}

func bindTwo(b Binder) twoPin {
	p, n := b.Pin(0), b.Pin(1)
	return twoPin{p, n, b.Slot(p, p), b.Slot(p, n), b.Slot(n, p), b.Slot(n, n)}
}

func (s *twoPin) volts(e *Eval) float64 { return e.X[s.a] - e.X[s.b] }

func (s *twoPin) current(e *Eval, i, g float64) { s.add(e.F, e.G, i, g) }

func (s *twoPin) charge(e *Eval, q, c float64) { s.add(e.Q, e.C, q, c) }

func (s *twoPin) add(values, slopes []float64, v, g float64) {
	values[s.a] += v
	values[s.b] -= v
	slopes[s.aa] += g
	slopes[s.ab] -= g
	slopes[s.ba] -= g
	slopes[s.bb] += g
}

type resistorStamp struct {
	twoPin
	g float64
}

func (r resistor) Bind(b Binder) Stamp { return &resistorStamp{bindTwo(b), 1 / float64(r)} }
func (s *resistorStamp) Eval(e *Eval)  { s.current(e, s.g*s.volts(e), s.g) }

type capacitor struct{ farads, start float64 }

type capacitorStamp struct {
	twoPin
	capacitor
}

func (c capacitor) Bind(b Binder) Stamp { return &capacitorStamp{bindTwo(b), c} }

func (s *capacitorStamp) Eval(e *Eval) {
	if !e.Dynamic {
		return
	}
	v := s.volts(e)
	if e.Cold {
		v = s.start
	}
	s.charge(e, s.farads*v, s.farads)
}

// wire is an unknown current from a to b.
type wire struct {
	a, b, i            Unknown
	ai, bi, ia, ib, ii Slot
}

func bindWire(b Binder) wire {
	p, n := b.Pin(0), b.Pin(1)
	i := b.Branch("current")
	return wire{p, n, i, b.Slot(p, i), b.Slot(n, i), b.Slot(i, p), b.Slot(i, n), b.Slot(i, i)}
}

func (s *wire) eval(e *Eval) {
	e.F[s.a] += e.X[s.i]
	e.F[s.b] -= e.X[s.i]
	e.F[s.i] += e.X[s.a] - e.X[s.b]
	e.G[s.ai]++
	e.G[s.bi]--
	e.G[s.ia]++
	e.G[s.ib]--
}

type inductor struct{ henries, start float64 }

type inductorStamp struct {
	wire
	inductor
}

func (l inductor) Bind(b Binder) Stamp { return &inductorStamp{bindWire(b), l} }

func (s *inductorStamp) Eval(e *Eval) {
	s.eval(e)
	if !e.Dynamic {
		return
	}
	i := e.X[s.i]
	if e.Cold {
		i = s.start
	}
	e.Q[s.i] -= s.henries * i
	e.C[s.ii] -= s.henries
}

type voltage struct{ signal Signal }

type voltageStamp struct {
	wire
	signal Signal
}

func (v voltage) Bind(b Binder) Stamp           { return &voltageStamp{bindWire(b), v.signal} }
func (s *voltageStamp) Signal() Signal          { return s.signal }
func (s *voltageStamp) Eval(e *Eval)            { s.eval(e); e.F[s.i] -= e.Drive * s.signal.At(e.Time) }
func (v current) Bind(b Binder) Stamp           { return &currentStamp{b.Pin(0), b.Pin(1), v.signal} }
func (s *currentStamp) Signal() Signal          { return s.signal }
func (s *currentStamp) value(t float64) float64 { return s.signal.At(t) }

type current struct{ signal Signal }

type currentStamp struct {
	a, b   Unknown
	signal Signal
}

func (s *currentStamp) Eval(e *Eval) {
	i := e.Drive * s.value(e.Time)
	e.F[s.a] += i
	e.F[s.b] -= i
}

// exponentialLimit is the exponent beyond which the test junctions go on linearly.
const exponentialLimit = 80

func boundedExp(x float64) (value, slope float64) {
	if x > exponentialLimit {
		slope = math.Exp(exponentialLimit)
		return slope * (1 + x - exponentialLimit), slope
	}
	value = math.Exp(x)
	return value, value
}

// limited moves a junction voltage of emission voltage vt up by no more than a current that grows linearly with it would.
func limited(v, last, is, vt float64) float64 {
	knee := vt * math.Log(vt/(math.Sqrt2*is))
	if base := math.Max(last, knee); v > base+2*vt {
		return base + vt*(2+math.Log1p((v-base)/vt-2))
	}
	return v
}

// junction is an exponential junction with a transit-time charge.
type junction struct{ is, vt, tau float64 }

type junctionStamp struct {
	twoPin
	junction
	memory int
}

func (d junction) Bind(b Binder) Stamp { return &junctionStamp{bindTwo(b), d, b.Junction()} }

// at evaluates the junction current at X, linearly extended from where the step is limited to.
func (d junction) at(e *Eval, memory int, v float64) (i, g float64) {
	at := v
	if e.Limit {
		at = limited(v, e.Junctions[memory], d.is, d.vt)
		e.Limited = e.Limited || at != v
	}
	e.Junctions[memory] = at
	value, slope := boundedExp(at / d.vt)
	g = d.is / d.vt * slope
	return d.is*(value-1) + g*(v-at), g
}

func (s *junctionStamp) Eval(e *Eval) {
	i, g := s.at(e, s.memory, s.volts(e))
	s.current(e, i, g)
	if e.Dynamic {
		s.charge(e, s.tau*i, s.tau*g)
	}
}

// npn is a transistor after Ebers & Moll (Large-signal behavior of junction transistors, Proc. IRE 42, 1954); pins c b e.
type npn struct{ is, vt, betaF, betaR, tau float64 }

type npnStamp struct {
	npn
	c, b, e Unknown
	slot    [3][3]Slot // rows and columns c b e
	memory  [2]int
}

func (d npn) Bind(b Binder) Stamp {
	s := &npnStamp{npn: d, c: b.Pin(0), b: b.Pin(1), e: b.Pin(2), memory: [2]int{b.Junction(), b.Junction()}}
	pins := [3]Unknown{s.c, s.b, s.e}
	for i, row := range pins {
		for j, col := range pins {
			s.slot[i][j] = b.Slot(row, col)
		}
	}
	return s
}

func (s *npnStamp) Eval(e *Eval) {
	half := junction{is: s.is, vt: s.vt}
	f, gf := half.at(e, s.memory[0], e.X[s.b]-e.X[s.e])
	r, gr := half.at(e, s.memory[1], e.X[s.b]-e.X[s.c])
	ic, ib := f-r*(1+1/s.betaR), f/s.betaF+r/s.betaR
	e.F[s.c] += ic
	e.F[s.b] += ib
	e.F[s.e] -= ic + ib
	// Derivatives by v(b,e) and v(b,c).
	cf, cr, bf, br := gf, -gr*(1+1/s.betaR), gf/s.betaF, gr/s.betaR
	for i, row := range [3][2]float64{{cf, cr}, {bf, br}, {-cf - bf, -cr - br}} {
		e.G[s.slot[i][1]] += row[0] + row[1]
		e.G[s.slot[i][2]] -= row[0]
		e.G[s.slot[i][0]] -= row[1]
	}
	if e.Dynamic {
		e.Q[s.b] += s.tau * f
		e.Q[s.e] -= s.tau * f
		e.C[s.slot[1][1]] += s.tau * gf
		e.C[s.slot[1][2]] -= s.tau * gf
		e.C[s.slot[2][1]] -= s.tau * gf
		e.C[s.slot[2][2]] += s.tau * gf
	}
}

// law is any system of equations between nodes: pin i gets the current f[i](x, t) and the charge q[i](x).
type law struct {
	pins int
	// f fills the currents and their derivatives df[row][col].
	f func(t float64, x, f []float64, df [][]float64)
	// q does the same for charges; nil: q = x, which makes x' = -f.
	q func(x, q []float64, dq [][]float64)
}

type lawStamp struct {
	law
	pin  []Unknown
	slot [][]Slot
	x, y []float64
	d    [][]float64
}

func (l law) Bind(b Binder) Stamp {
	s := &lawStamp{law: l, x: make([]float64, l.pins), y: make([]float64, l.pins)}
	for i := range l.pins {
		s.pin = append(s.pin, b.Pin(i))
	}
	for i := range l.pins {
		s.slot = append(s.slot, nil)
		s.d = append(s.d, make([]float64, l.pins))
		for j := range l.pins {
			s.slot[i] = append(s.slot[i], b.Slot(s.pin[i], s.pin[j]))
		}
	}
	return s
}

func (s *lawStamp) Eval(e *Eval) {
	for i, u := range s.pin {
		s.x[i] = e.X[u]
	}
	s.clear()
	s.f(e.Time, s.x, s.y, s.d)
	s.add(e.F, e.G)
	if !e.Dynamic {
		return
	}
	s.clear()
	if s.q != nil {
		s.q(s.x, s.y, s.d)
	} else {
		for i, v := range s.x {
			s.y[i], s.d[i][i] = v, 1
		}
	}
	s.add(e.Q, e.C)
}

func (s *lawStamp) clear() {
	clear(s.y)
	for _, row := range s.d {
		clear(row)
	}
}

func (s *lawStamp) add(values, slopes []float64) {
	for i, u := range s.pin {
		values[u] += s.y[i]
		for j, slot := range s.slot[i] {
			slopes[slot] += s.d[i][j]
		}
	}
}

// Signals.

type level float64

func (c level) At(float64) float64     { return float64(c) }
func (c level) Corner(float64) float64 { return math.Inf(1) }
func (c level) Scale(float64) float64  { return math.Inf(1) }

type sine struct{ peak, frequency float64 }

func (s sine) At(t float64) float64     { return s.peak * math.Sin(2*math.Pi*s.frequency*t) }
func (s sine) Corner(t float64) float64 { return math.Inf(1) }
func (s sine) Scale(float64) float64    { return 1 / s.frequency }

// jump goes from one value to another at a time, in no time.
type jump struct{ from, to, at float64 }

func (j jump) At(t float64) float64 {
	if t < j.at {
		return j.from
	}
	return j.to
}

func (j jump) Corner(t float64) float64 {
	if t < j.at {
		return j.at
	}
	return math.Inf(1)
}

func (j jump) Scale(float64) float64 { return math.Inf(1) }

// slope is a straight transition between two times.
type slope struct{ from, to, start, end float64 }

func (r slope) At(t float64) float64 {
	u := math.Max(0, math.Min(1, (t-r.start)/(r.end-r.start)))
	return r.from + u*(r.to-r.from)
}

func (r slope) Corner(t float64) float64 {
	for _, c := range []float64{r.start, r.end} {
		if t < c {
			return c
		}
	}
	return math.Inf(1)
}

func (r slope) Scale(t float64) float64 {
	if t < r.start || t >= r.end {
		return math.Inf(1)
	}
	return r.end - r.start
}

// net builds circuits by node names.
type net struct {
	t testing.TB
	*Builder
	node map[string]int
	sys  *System
}

func newNet(t testing.TB) *net {
	return &net{t, NewBuilder(), map[string]int{"gnd": 0}, nil}
}

func (n *net) at(name string) int {
	if _, ok := n.node[name]; !ok {
		n.node[name] = n.Node(name)
	}
	return n.node[name]
}

func (n *net) hold(node string, s Signal) { require.NoError(n.t, n.Hold(n.at(node), s)) }

func (n *net) add(name string, d Device, nodes ...string) int {
	var numbers []int
	for _, node := range nodes {
		numbers = append(numbers, n.at(node))
	}
	return n.Add(name, d, numbers...)
}

func (n *net) build() *System {
	s, err := n.Build()
	require.NoError(n.t, err)
	n.sys = s
	return s
}

func (n *net) u(node string) Unknown { return n.sys.Unknown(n.node[node]) }

func (n *net) bias() *Bias {
	b, err := n.build().Bias(context.Background(), BiasOptions{})
	require.NoError(n.t, err)
	return b
}

// near fails unless got is within tolerance of want; NaN fails.
func near(t testing.TB, want, got, tolerance float64, what ...any) {
	t.Helper()
	if d := math.Abs(got - want); !(d <= tolerance) {
		require.Failf(t, "not near", "%v: want %.15g, got %.15g, off by %.3g, allowed %.3g", what, want, got, d, tolerance)
	}
}

// pair is a long-tailed pair of simple transistors with unequal halves and cable capacitances.
func pair(t testing.TB, common Signal) *net {
	n := newNet(t)
	n.hold("vp", level(9))
	n.hold("vn", level(-9))
	n.hold("sp", common)
	n.hold("sn", common)
	left := npn{6.7e-15, 0.02587, 410, 4, 0.4e-9}
	right := npn{6.8e-15, 0.02587, 394, 4, 0.4e-9}
	n.add("Rlead1", resistor(175), "sp", "bp")
	n.add("Rlead2", resistor(185), "sn", "bn")
	n.add("Rbase1", resistor(38), "bp", "b1")
	n.add("Rbase2", resistor(38), "bn", "b2")
	n.add("Ccab1", capacitor{220e-12, 0}, "bp", "gnd")
	n.add("Ccab2", capacitor{260e-12, 0}, "bn", "gnd")
	n.add("Ccb1", capacitor{4e-12, 0}, "b1", "c1")
	n.add("Ccb2", capacitor{4e-12, 0}, "b2", "out")
	n.add("Rc1", resistor(1.5), "vp", "c1")
	n.add("Q1", left, "c1", "b1", "x1")
	n.add("Q2", right, "out", "b2", "x2")
	n.add("rE1", resistor(0.4), "x1", "e1")
	n.add("rE2", resistor(0.4), "x2", "e2")
	n.add("Re1", resistor(270), "e1", "tail")
	n.add("Re2", resistor(270.54), "e2", "tail")
	n.add("Rload", resistor(39e3), "vp", "out")
	n.add("Rtail", resistor(36e3), "tail", "vn")
	n.add("Cout", capacitor{5e-12, 0}, "out", "o2")
	n.add("Rout", resistor(1e5), "o2", "gnd")
	return n
}
