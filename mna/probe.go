package mna

// Probe is a device bound alone, to a small layout of its own: it reads the currents into pins that
// may share a node. It belongs to one goroutine.
type Probe struct {
	stamp Stamp
	eval  Eval
	from  []Unknown // of the system, for each local unknown but ground
	pins  int
	rows  []int32
	cols  []int32
}

// Probe returns a probe of a device. Local unknown i+1 is pin i, then what is inside.
func (s *System) Probe(device int) *Probe {
	d := s.devices[device]
	pins, internals := s.Unknowns(device)
	p := &Probe{from: append(pins, internals...), pins: len(pins)}
	b := &probeBinding{pins: len(pins), next: Unknown(len(pins) + 1), entries: newEntries(0, 1)}
	p.stamp = d.device.Bind(b)
	n := len(p.from) + 1
	p.rows, p.cols = b.rows, b.cols
	p.eval = Eval{
		X: make([]float64, n), F: make([]float64, n), Q: make([]float64, n),
		G: make([]float64, len(b.rows)), C: make([]float64, len(b.rows)),
		Dynamic: true, Drive: 1, Junctions: make([]float64, b.junctions),
	}
	return p
}

// probeBinding is the Binder of a probe: every pin has an unknown of its own.
type probeBinding struct {
	pins int
	next Unknown
	entries
}

func (b *probeBinding) Pin(i int) Unknown { return Unknown(i + 1) }

func (b *probeBinding) Internal(string) Unknown {
	b.next++
	return b.next - 1
}

func (b *probeBinding) Branch(name string) Unknown { return b.Internal(name) }

// Unknowns returns the unknowns of the system that a load reads. They must not be changed.
func (p *Probe) Unknowns() []Unknown { return p.from }

// Load evaluates the device at a solution x of the system and time t in s.
func (p *Probe) Load(x []float64, t float64) {
	for i, u := range p.from {
		p.eval.X[i+1] = x[u]
	}
	e := &p.eval
	e.Time = t
	clear(e.F)
	clear(e.Q)
	clear(e.G)
	clear(e.C)
	p.stamp.Eval(e)
}

// Current returns the resistive current into a pin, in A. The whole current is this and the rate of [Probe.Charge].
func (p *Probe) Current(pin int) float64 { return p.eval.F[pin+1] }

// Charge returns the charge in C whose rate adds to the current into a pin.
func (p *Probe) Charge(pin int) float64 { return p.eval.Q[pin+1] }

// Operating returns the device's operating quantities at the loaded point, nil if it has none.
func (p *Probe) Operating() []Quantity {
	if o, ok := p.stamp.(Operating); ok {
		return o.Operating(&p.eval)
	}
	return nil
}

// Power returns the power in W that the device takes in through its pins at the loaded point; what it stores is not in it.
func (p *Probe) Power() float64 {
	sum := 0.0
	for pin := 1; pin <= p.pins; pin++ {
		sum += p.eval.X[pin] * p.eval.F[pin]
	}
	return sum
}

// Small returns the small-signal current into a pin at the loaded point for the small-signal solution x of the system at
// the angular frequency omega in rad/s.
func (p *Probe) Small(pin int, omega float64, x []complex128) complex128 {
	sum := complex128(0)
	for k, row := range p.rows {
		if int(row) == pin+1 && p.cols[k] > 0 {
			sum += complex(p.eval.G[k], omega*p.eval.C[k]) * x[p.from[p.cols[k]-1]]
		}
	}
	return sum
}
