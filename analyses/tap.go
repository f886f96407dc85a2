package analyses

import (
	"fmt"
	"slices"

	"poise/mna"
	"poise/netlist"
)

// A tap reads one circuit quantity off solution vectors. Taps hold probes of their own
// and so belong to one goroutine.
type tap interface {
	// rest returns the quantity at a quiescent solution.
	rest(x []float64) (float64, error)
	// sample fills out with the quantity at the four samples of a step of length h.
	sample(s *stepSamples, out []float64) error
	// cubic reports whether the quantity is a cubic within a step, as the integrator's own unknowns are.
	cubic() bool
}

// stepSamples holds the solution at the four samples of one step.
type stepSamples struct {
	x [samplesPerStep][]float64
	t [samplesPerStep]float64 // s
	h float64                 // s, from the first to the last sample
}

// rate turns four samples of y into those of dy/dt: the slopes of their cubic.
func (s *stepSamples) rate(y *[samplesPerStep]float64) (rate [samplesPerStep]float64) {
	c := newCubic(y[:])
	for k := range rate {
		rate[k] = c.slope(float64(k)/(samplesPerStep-1)) / s.h
	}
	return rate
}

// tapOf returns a tap for one of the elementary quantities.
func (m *model) tapOf(q netlist.Quantity) (tap, error) {
	switch q := q.(type) {
	case *netlist.Volts:
		return m.voltsTap(q.Plus, q.Minus)
	case *netlist.Amps:
		return m.ampsTap(q)
	case *netlist.Watts:
		return m.wattsTap(q.Element)
	case *netlist.Operating:
		return m.operatingTap(q)
	}
	return nil, fmt.Errorf("%T is not read off a solution", q)
}

// voltsTap reads a voltage.
type voltsTap struct {
	plus, minus mna.Unknown
	free        bool // neither node is held by a signal
}

func (m *model) voltsTap(plus, minus string) (tap, error) {
	p, err := m.unknown(plus)
	if err != nil {
		return nil, err
	}
	n, err := m.unknown(minus)
	if err != nil {
		return nil, err
	}
	free := func(u mna.Unknown) bool { return u == mna.Ground || int(u) > m.system.Held() }
	return voltsTap{p, n, free(p) && free(n)}, nil
}

func (v voltsTap) rest(x []float64) (float64, error) { return x[v.plus] - x[v.minus], nil }

func (v voltsTap) cubic() bool { return v.free }

func (v voltsTap) sample(s *stepSamples, out []float64) error {
	for k := range out {
		out[k] = s.x[k][v.plus] - s.x[k][v.minus]
	}
	return nil
}

// currentTap reads a sum of pin currents.
type currentTap struct {
	sign   float64
	probes []*mna.Probe
	pins   []int
}

func (m *model) currentTap(sign float64, pins ...pinOfDevice) *currentTap {
	c := &currentTap{sign: sign}
	for _, p := range pins {
		c.probes = append(c.probes, m.system.Probe(p.device))
		c.pins = append(c.pins, p.pin)
	}
	return c
}

// ampsTap finds the pins whose currents make up q.
func (m *model) ampsTap(q *netlist.Amps) (tap, error) {
	sign, pins, err := m.currentPins(q)
	if err != nil {
		return nil, err
	}
	return m.currentTap(sign, pins...), nil
}

// currentPins returns the pins whose currents into their devices, times sign, make up q.
func (m *model) currentPins(q *netlist.Amps) (sign float64, pins []pinOfDevice, err error) {
	if q.Rail {
		i, ok := m.rail[q.Element]
		if !ok {
			return 0, nil, &InputError{Message: "there is no rail " + q.Element}
		}
		return 1, m.fed[m.circuit.Rails[i].Node], nil
	}
	i, ok := m.element[q.Element]
	if !ok {
		return 0, nil, &InputError{Message: "there is no part " + q.Element}
	}
	e := &m.circuit.Elements[i]
	if node, sense := holds(e); node > 0 {
		return -sense, m.fed[node], nil
	}
	pin := 0
	if q.Pin != "" {
		if pin = slices.Index(e.Pins, q.Pin); pin < 0 {
			return 0, nil, &InputError{Message: q.Element + " has no pin " + q.Pin}
		}
	}
	return 1, []pinOfDevice{{m.device[i], pin}}, nil
}

func (c *currentTap) rest(x []float64) (float64, error) {
	sum := 0.0
	for i, p := range c.probes {
		p.Load(x, 0)
		sum += p.Current(c.pins[i])
	}
	return c.sign * sum, nil
}

func (c *currentTap) cubic() bool { return false }

func (c *currentTap) sample(s *stepSamples, out []float64) error {
	clear(out)
	for i, p := range c.probes {
		var charge [samplesPerStep]float64
		for k := range out {
			p.Load(s.x[k], s.t[k])
			out[k] += c.sign * p.Current(c.pins[i])
			charge[k] = p.Charge(c.pins[i])
		}
		for k, rate := range s.rate(&charge) {
			out[k] += c.sign * rate
		}
	}
	return nil
}

// wattsTap reads the power that a part takes in: the sum over its pins of voltage times current.
type wattsTap struct {
	volts  []mna.Unknown
	amps   []*currentTap
	buffer [samplesPerStep]float64
}

func (m *model) wattsTap(element string) (tap, error) {
	i, ok := m.element[element]
	if !ok {
		return nil, &InputError{Message: "there is no part " + element}
	}
	e := &m.circuit.Elements[i]
	w := &wattsTap{}
	if node, _ := holds(e); node > 0 {
		w.volts = []mna.Unknown{m.system.Unknown(node)}
		w.amps = []*currentTap{m.currentTap(-1, m.fed[node]...)}
		return w, nil
	}
	for pin, node := range e.Nodes {
		w.volts = append(w.volts, m.system.Unknown(node))
		w.amps = append(w.amps, m.currentTap(1, pinOfDevice{m.device[i], pin}))
	}
	return w, nil
}

func (w *wattsTap) cubic() bool { return false }

func (w *wattsTap) rest(x []float64) (float64, error) {
	sum := 0.0
	for i, u := range w.volts {
		amps, err := w.amps[i].rest(x)
		if err != nil {
			return 0, err
		}
		sum += x[u] * amps
	}
	return sum, nil
}

func (w *wattsTap) sample(s *stepSamples, out []float64) error {
	clear(out)
	for i, u := range w.volts {
		if err := w.amps[i].sample(s, w.buffer[:]); err != nil {
			return err
		}
		for k := range out {
			out[k] += s.x[k][u] * w.buffer[k]
		}
	}
	return nil
}

// operatingTap reads a device's operating quantity.
type operatingTap struct {
	probe *mna.Probe
	name  string
	full  string
}

func (m *model) operatingTap(q *netlist.Operating) (*operatingTap, error) {
	i, ok := m.element[q.Element]
	if !ok || m.device[i] == held {
		return nil, &InputError{Message: "there is no device " + q.Element}
	}
	return &operatingTap{m.system.Probe(m.device[i]), q.Name, q.Element + "." + q.Name}, nil
}

func (o *operatingTap) read(x []float64, t float64) (mna.Quantity, error) {
	o.probe.Load(x, t)
	for _, q := range o.probe.Operating() {
		if q.Name == o.name {
			return q, nil
		}
	}
	return mna.Quantity{}, &InputError{Message: "there is no operating quantity " + o.full}
}

func (o *operatingTap) cubic() bool { return false }

func (o *operatingTap) rest(x []float64) (float64, error) {
	q, err := o.read(x, 0)
	return q.Value, err
}

func (o *operatingTap) sample(s *stepSamples, out []float64) error {
	for k := range out {
		q, err := o.read(s.x[k], s.t[k])
		if err != nil {
			return err
		}
		out[k] = q.Value
	}
	return nil
}
