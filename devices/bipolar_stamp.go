package devices

import (
	"math"

	"poise/mna"
)

// bipolarStamp is a bound transistor. Unknowns: c b e s are the pins, ci bi ei inside the resistances.
type bipolarStamp struct {
	*bipolar
	c, b, e, s, ci, bi, ei mna.Unknown
	state1, state2         int
	collector, emitter     square // rC and rE
	series                 square // rB
	// rows bi, ci, ei by columns bi, ci, ei; row b by bi, ci, ei for the base resistance's derivative
	rows [3][3]mna.Slot
	rowB [3]mna.Slot
	xc   square // b to ci
	sub  square // s to ci
}

func (q *bipolar) Bind(b mna.Binder) mna.Stamp {
	s := &bipolarStamp{bipolar: q, c: b.Pin(0), b: b.Pin(1), e: b.Pin(2), s: b.Pin(3), state1: b.Junction(), state2: b.Junction()}
	s.ci, s.bi, s.ei = s.c, s.b, s.e
	if q.gC > 0 {
		s.ci = b.Internal("collector")
		s.collector = newSquare(b, s.c, s.ci)
	}
	if q.base.present {
		s.bi = b.Internal("base")
		s.series = newSquare(b, s.b, s.bi)
	}
	if q.gE > 0 {
		s.ei = b.Internal("emitter")
		s.emitter = newSquare(b, s.e, s.ei)
	}
	inside := [3]mna.Unknown{s.bi, s.ci, s.ei}
	for i, row := range inside {
		for j, col := range inside {
			s.rows[i][j] = b.Slot(row, col)
		}
		if q.base.present {
			s.rowB[i] = b.Slot(s.b, row)
		}
	}
	if q.layerX.present {
		s.xc = newSquare(b, s.b, s.ci)
	}
	if q.layerS.present {
		s.sub = newSquare(b, s.s, s.ci)
	}
	return s
}

// junctions returns the junction voltages at which to evaluate, limited if e asks for it, and the true ones.
func (s *bipolarStamp) junctions(e *mna.Eval) (u1, u2, v1, v2 float64) {
	v1 = s.sign * (e.X[s.bi] - e.X[s.ei])
	v2 = s.sign * (e.X[s.bi] - e.X[s.ci])
	u1, u2 = v1, v2
	if e.Limit {
		var l1, l2 bool
		u1, l1 = s.forward.shorten(v1, e.Junctions[s.state1])
		u2, l2 = s.reverse.shorten(v2, e.Junctions[s.state2])
		e.Limited = e.Limited || l1 || l2
	}
	e.Junctions[s.state1], e.Junctions[s.state2] = u1, u2
	return u1, u2, v1, v2
}

func (s *bipolarStamp) Eval(e *mna.Eval) {
	u1, u2, v1, v2 := s.junctions(e)
	d1, d2 := v1-u1, v2-u2
	var c core
	s.at(&c, u1, u2)
	base := branched{c.be + c.bc, c.be1, c.bc2}.along(d1, d2)
	collector := branched{c.it - c.bc, c.it1, c.it2 - c.bc2}.along(d1, d2)
	emitter := branched{-c.it - c.be, -c.it1 - c.be1, -c.it2}.along(d1, d2)
	switch {
	case s.base.varies:
		i1, i2 := s.evalBase(e, &c, d1, d2)
		base.by1 -= i1
		base.by2 -= i2
	case s.base.present:
		conduct(e, s.b, s.bi, s.base.conductance, &s.series)
	}
	f, g := e.F, e.G
	s.add(f, g, s.bi, 0, base)
	s.add(f, g, s.ci, 1, collector)
	s.add(f, g, s.ei, 2, emitter)
	if s.gC > 0 {
		conduct(e, s.c, s.ci, s.gC, &s.collector)
	}
	if s.gE > 0 {
		conduct(e, s.e, s.ei, s.gE, &s.emitter)
	}
	if e.Dynamic {
		s.evalCharge(e, &c, u1, u2, d1, d2)
	}
}

// branched is a current or charge that the junction voltages control, with its derivatives by them.
type branched struct{ value, by1, by2 float64 }

// along returns b moved linearly by d1 and d2.
func (b branched) along(d1, d2 float64) branched {
	return branched{b.value + b.by1*d1 + b.by2*d2, b.by1, b.by2}
}

// add adds b to an unknown inside and to row r of rows: db/dv_bi = by1 + by2, db/dv_ei = -by1, db/dv_ci = -by2.
func (s *bipolarStamp) add(values, slopes []float64, to mna.Unknown, r int, b branched) {
	row := &s.rows[r]
	values[to] += s.sign * b.value
	slopes[row[0]] += b.by1 + b.by2
	slopes[row[1]] -= b.by2
	slopes[row[2]] -= b.by1
}

// conduct adds a conductance between two unknowns.
func conduct(e *mna.Eval, a, b mna.Unknown, g float64, at *square) {
	i := g * (e.X[a] - e.X[b])
	e.F[a] += i
	e.F[b] -= i
	at.add(e.G, g)
}

// evalBase adds a base resistance that depends on the junction voltages. It returns the derivatives of its current by them, which the row of
// the internal base still lacks.
func (s *bipolarStamp) evalBase(e *mna.Eval, c *core, d1, d2 float64) (i1, i2 float64) {
	r, r1, r2 := s.resistance(c)
	g := 1 / r
	v := e.X[s.b] - e.X[s.bi]
	k := -v * g * g
	i1, i2 = k*r1, k*r2
	i := g*v + i1*d1 + i2*d2
	e.F[s.b] += i
	e.F[s.bi] -= i
	s.series.add(e.G, g)
	i1, i2 = s.sign*i1, s.sign*i2
	e.G[s.rowB[0]] += i1 + i2
	e.G[s.rowB[1]] -= i2
	e.G[s.rowB[2]] -= i1
	return i1, i2
}

// evalCharge adds the charges.
func (s *bipolarStamp) evalCharge(e *mna.Eval, c *core, u1, u2, d1, d2 float64) {
	qe, ce := s.layerE.at(u1)
	qd, qd1, qd2 := s.diffusion(c, u2)
	qc, cc := s.layerC.at(u2)
	qe += qd
	ce += qd1
	qc += s.tauR * c.ri
	cc += s.tauR * c.rg
	q, m := e.Q, e.C
	s.add(q, m, s.bi, 0, branched{qe + qc, ce, qd2 + cc}.along(d1, d2))
	s.add(q, m, s.ci, 1, branched{-qc, 0, -cc}.along(d1, d2))
	s.add(q, m, s.ei, 2, branched{-qe, -ce, -qd2}.along(d1, d2))
	if s.layerX.present {
		s.store(e, s.b, &s.layerX, &s.xc)
	}
	if s.layerS.present {
		s.store(e, s.s, &s.layerS, &s.sub)
	}
}

// store adds a depletion charge between an unknown and the internal collector.
func (s *bipolarStamp) store(e *mna.Eval, from mna.Unknown, layer *depletion, at *square) {
	q, c := layer.at(s.sign * (e.X[from] - e.X[s.ci]))
	e.Q[from] += s.sign * q
	e.Q[s.ci] -= s.sign * q
	at.add(e.C, c)
}

// Operating returns the quantities that the catalogue lists.
func (s *bipolarStamp) Operating(e *mna.Eval) []mna.Quantity {
	v1 := s.sign * (e.X[s.bi] - e.X[s.ei])
	v2 := s.sign * (e.X[s.bi] - e.X[s.ci])
	var c core
	s.at(&c, v1, v2)
	_, ce := s.layerE.at(v1)
	_, cc := s.layerC.at(v2)
	_, qd1, _ := s.diffusion(&c, v2)
	_, cx := s.layerX.at(s.sign * (e.X[s.b] - e.X[s.ci]))
	// At constant v_ce both junction voltages move together; at constant v1 a rise of v_ce lowers v2.
	gm := c.it1 + c.it2 - c.bc2
	gb := c.be1 + c.bc2
	cpi, cmu := ce+qd1, cc+s.tauR*c.rg+cx
	ic, ib := e.F[s.c], e.F[s.b]
	return []mna.Quantity{
		{Name: "ic", Unit: "A", Value: ic},
		{Name: "ib", Unit: "A", Value: ib},
		{Name: "ie", Unit: "A", Value: e.F[s.e]},
		{Name: "vbe", Unit: "V", Value: e.X[s.b] - e.X[s.e]},
		{Name: "vce", Unit: "V", Value: e.X[s.c] - e.X[s.e]},
		{Name: "vbc", Unit: "V", Value: e.X[s.b] - e.X[s.c]},
		{Name: "beta", Value: ic / ib},
		{Name: "gm", Unit: "S", Value: gm},
		{Name: "ro", Unit: "ohm", Value: 1 / (c.bc2 - c.it2)},
		{Name: "rpi", Unit: "ohm", Value: 1 / gb},
		{Name: "re", Unit: "ohm", Value: 1 / (gm + gb)},
		{Name: "cpi", Unit: "F", Value: cpi},
		{Name: "cmu", Unit: "F", Value: cmu},
		{Name: "ft", Unit: "Hz", Value: gm / (2 * math.Pi * (cpi + cmu))},
		{Name: "region", Word: s.region(v1, v2)},
	}
}

// region names the state of the two junctions.
func (s *bipolarStamp) region(v1, v2 float64) string {
	on1, on2 := v1 > regionShare*s.forward.knee, v2 > regionShare*s.reverse.knee
	switch {
	case on1 && on2:
		return "saturated"
	case on1:
		return "active"
	case on2:
		return "reverse"
	}
	return "off"
}

// Families returns the families of this package, a fresh slice.
func Families() []Family {
	return []Family{
		bipolarFamily("npn", "Bipolar transistor, npn", 1),
		bipolarFamily("pnp", "Bipolar transistor, pnp", -1),
		diodeFamily(),
	}
}
