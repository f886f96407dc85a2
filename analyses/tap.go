package analyses

import (
	"fmt"
	"math"
	"slices"

	"poise/mna"
	"poise/netlist"
)

// A tap reads one circuit quantity off solution vectors. What it reads of a point it holds in a slot, until the slots of a
// piece's four points make the samples of the piece. Taps hold probes of their own and so belong to one goroutine.
type tap interface {
	// rest returns the quantity at a quiescent solution.
	rest(x []float64) (float64, error)
	// needs returns the unknowns that load reads.
	needs() []mna.Unknown
	// load reads a point, the solution x at t seconds, into a slot.
	load(slot int, x []float64, t float64) error
	// read fills out with the quantity at four equally spaced points over h seconds, which have been loaded. It returns how
	// far rounding may put them off.
	read(at slots, h float64, out *samples) (noise float64)
}

// noiseShare is the rounding of a quantity beside the terms that it is the sum of: a few operations on each.
const noiseShare = 16 * 0x1p-52

// slotted holds a number for every slot.
type slotted [allSlots]float64

func (s *slotted) read(at slots) (y samples) {
	for k, slot := range at {
		y[k] = s[slot]
	}
	return y
}

// largest returns the largest magnitude in four slots.
func (s *slotted) largest(at slots) float64 {
	return max(math.Abs(s[at[0]]), math.Abs(s[at[1]]), math.Abs(s[at[2]]), math.Abs(s[at[3]]))
}

// rate returns the slope of the cubic through four slots over h seconds.
func (s *slotted) rate(at slots, h float64) (rate samples) {
	y := s.read(at)
	c := newCubic(y[:])
	for k := range rate {
		rate[k] = c.slope(float64(k)/(samplesPerStep-1)) / h
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
	volts       slotted
	gross       slotted // of both nodes
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
	return &voltsTap{plus: p, minus: n}, nil
}

func (v *voltsTap) rest(x []float64) (float64, error) { return x[v.plus] - x[v.minus], nil }

func (v *voltsTap) needs() []mna.Unknown { return []mna.Unknown{v.plus, v.minus} }

func (v *voltsTap) load(slot int, x []float64, _ float64) error {
	v.volts[slot] = x[v.plus] - x[v.minus]
	v.gross[slot] = math.Abs(x[v.plus]) + math.Abs(x[v.minus])
	return nil
}

func (v *voltsTap) read(at slots, _ float64, out *samples) float64 {
	*out = v.volts.read(at)
	return noiseShare * v.gross.largest(at)
}

// currentTap reads a sum of pin currents.
type currentTap struct {
	sign   float64
	probes []*mna.Probe
	pins   []int
	amps   slotted // the resistive part
	charge slotted // C, whose rate is the rest
	// Of the magnitudes of what is added up.
	grossAmps, grossCharge slotted
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

func (c *currentTap) needs() (list []mna.Unknown) {
	for _, p := range c.probes {
		list = append(list, p.Unknowns()...)
	}
	return list
}

func (c *currentTap) load(slot int, x []float64, t float64) error {
	amps, charge, grossAmps, grossCharge := 0.0, 0.0, 0.0, 0.0
	for i, p := range c.probes {
		p.Load(x, t)
		a, q := p.Current(c.pins[i]), p.Charge(c.pins[i])
		amps, grossAmps = amps+a, grossAmps+math.Abs(a)
		charge, grossCharge = charge+q, grossCharge+math.Abs(q)
	}
	c.amps[slot], c.charge[slot] = c.sign*amps, c.sign*charge
	c.grossAmps[slot], c.grossCharge[slot] = grossAmps, grossCharge
	return nil
}

func (c *currentTap) read(at slots, h float64, out *samples) float64 {
	*out = c.amps.read(at)
	for k, rate := range c.charge.rate(at, h) {
		out[k] += rate
	}
	return noiseShare * (c.grossAmps.largest(at) + c.grossCharge.largest(at)/h)
}

// wattsTap reads the power that a part takes in: the sum over its pins of voltage times current.
type wattsTap struct {
	pins  []mna.Unknown
	amps  []*currentTap
	volts []slotted
}

func (m *model) wattsTap(element string) (tap, error) {
	i, ok := m.element[element]
	if !ok {
		return nil, &InputError{Message: "there is no part " + element}
	}
	e := &m.circuit.Elements[i]
	w := &wattsTap{}
	if node, _ := holds(e); node > 0 {
		w.add(m.system.Unknown(node), m.currentTap(-1, m.fed[node]...))
		return w, nil
	}
	for pin, node := range e.Nodes {
		w.add(m.system.Unknown(node), m.currentTap(1, pinOfDevice{m.device[i], pin}))
	}
	return w, nil
}

func (w *wattsTap) add(pin mna.Unknown, amps *currentTap) {
	w.pins, w.amps, w.volts = append(w.pins, pin), append(w.amps, amps), append(w.volts, slotted{})
}

func (w *wattsTap) rest(x []float64) (float64, error) {
	sum := 0.0
	for i, u := range w.pins {
		amps, err := w.amps[i].rest(x)
		if err != nil {
			return 0, err
		}
		sum += x[u] * amps
	}
	return sum, nil
}

func (w *wattsTap) needs() []mna.Unknown {
	list := slices.Clone(w.pins)
	for _, a := range w.amps {
		list = append(list, a.needs()...)
	}
	return list
}

func (w *wattsTap) load(slot int, x []float64, t float64) error {
	for i, u := range w.pins {
		w.volts[i][slot] = x[u]
		if err := w.amps[i].load(slot, x, t); err != nil {
			return err
		}
	}
	return nil
}

func (w *wattsTap) read(at slots, h float64, out *samples) float64 {
	*out = samples{}
	var amps samples
	noise := 0.0
	for i := range w.pins {
		noise += w.volts[i].largest(at) * w.amps[i].read(at, h, &amps)
		for k, slot := range at {
			out[k] += w.volts[i][slot] * amps[k]
		}
		noise += noiseShare * w.volts[i].largest(at) * max(math.Abs(amps[0]), math.Abs(amps[1]), math.Abs(amps[2]), math.Abs(amps[3]))
	}
	return noise
}

// operatingTap reads a device's operating quantity.
type operatingTap struct {
	probe *mna.Probe
	name  string
	full  string
	value slotted
}

func (m *model) operatingTap(q *netlist.Operating) (*operatingTap, error) {
	i, ok := m.element[q.Element]
	if !ok || m.device[i] == held {
		return nil, &InputError{Message: "there is no device " + q.Element}
	}
	return &operatingTap{probe: m.system.Probe(m.device[i]), name: q.Name, full: q.Element + "." + q.Name}, nil
}

// at reads the quantity at the solution x at t seconds.
func (o *operatingTap) at(x []float64, t float64) (mna.Quantity, error) {
	o.probe.Load(x, t)
	for _, q := range o.probe.Operating() {
		if q.Name == o.name {
			return q, nil
		}
	}
	return mna.Quantity{}, &InputError{Message: "there is no operating quantity " + o.full}
}

func (o *operatingTap) rest(x []float64) (float64, error) {
	q, err := o.at(x, 0)
	return q.Value, err
}

func (o *operatingTap) needs() []mna.Unknown { return o.probe.Unknowns() }

func (o *operatingTap) load(slot int, x []float64, t float64) error {
	q, err := o.at(x, t)
	o.value[slot] = q.Value
	return err
}

func (o *operatingTap) read(at slots, _ float64, out *samples) float64 {
	*out = o.value.read(at)
	return noiseShare * o.value.largest(at)
}
