package devices

import (
	"math"

	"poise/mna"
)

// Indexes of the diode's parameters.
const (
	dIs = iota
	dEm
	dRS
	dBreakdown
	dKneeBreak
	dCap
	dPhi
	dGrad
	dFcap
	dTau
	dBandgap
	dExpIs
	dFlickerK
	dFlickerA
	dTref
)

var inf = math.Inf(1)

func diodeFamily() Family {
	return Family{
		Name: "diode", Title: "Junction diode", Source: "Shockley, Bell Syst. Tech. J. 28, 1949; Massobrio & Antognetti, Semiconductor Device Modeling, 1993",
		Pins: []Pin{{Name: "a", Meaning: "anode"}, {Name: "k", Meaning: "cathode"}},
		Params: []Param{
			dIs:        {Name: "Is", Symbol: "I_S", Meaning: "saturation current", Unit: "A", Default: 1e-14, MinOpen: true, Max: 1},
			dEm:        {Name: "em", Symbol: "n", Meaning: "emission coefficient", Default: 1, Min: 0.1, Max: 20},
			dRS:        {Name: "rS", Symbol: "r_S", Meaning: "series resistance", Unit: "ohm", Max: inf, MaxOpen: true},
			dBreakdown: {Name: "breakdown", Symbol: "V_BR", Meaning: "reverse breakdown voltage, positive", Unit: "V", Default: inf, MinOpen: true, Max: inf},
			dKneeBreak: {Name: "kneeBreak", Symbol: "I_BR", Meaning: "current at the breakdown voltage", Unit: "A", Default: 1e-3, MinOpen: true, Max: inf, MaxOpen: true},
			dCap:       {Name: "cap", Symbol: "C_J", Meaning: "depletion capacitance at 0 V", Unit: "F", Max: inf, MaxOpen: true},
			dPhi:       {Name: "phi", Symbol: "phi", Meaning: "built-in potential", Unit: "V", Default: 1, MinOpen: true, Max: 10},
			dGrad:      {Name: "grad", Symbol: "m", Meaning: "grading", Default: 0.5, Max: 1, MaxOpen: true},
			dFcap:      {Name: "fcap", Symbol: "F_C", Meaning: "the depletion capacitance goes linear above fcap phi", Default: 0.5, Max: 1, MaxOpen: true},
			dTau:       {Name: "tau", Symbol: "tau", Meaning: "transit time", Unit: "s", Max: inf, MaxOpen: true},
			dBandgap:   {Name: "bandgap", Symbol: "E_g", Meaning: "band gap in eV for the temperature law of Is", Default: 1.11, MinOpen: true, Max: 10},
			dExpIs:     {Name: "expIs", Symbol: "", Meaning: "temperature exponent of Is", Default: 3, Min: -20, Max: 20},
			dFlickerK:  {Name: "flickerK", Symbol: "K_F", Meaning: "flicker-noise coefficient", Max: inf, MaxOpen: true},
			dFlickerA:  {Name: "flickerA", Symbol: "A_F", Meaning: "flicker-noise exponent", Default: 1, MinOpen: true, Max: 10},
			dTref:      {Name: "tref", Symbol: "T_0", Meaning: "temperature at which the parameters hold", Unit: "degC", Default: ReferenceTemperature, MinOpen: true, Max: 2000},
		},
		Operating: []OperatingQuantity{
			{Name: "i", Meaning: "current from anode to cathode", Unit: "A"},
			{Name: "v", Meaning: "voltage from anode to cathode", Unit: "V"},
			{Name: "gd", Meaning: "conductance of the junction", Unit: "S"},
			{Name: "cd", Meaning: "capacitance of the junction", Unit: "F"},
			{Name: "region", Meaning: "what the junction does", Words: []string{"off", "forward", "breakdown"}},
		},
		New: newDiode,
	}
}

// diode is a junction at one temperature.
type diode struct {
	forward   exponential
	breakVolt float64 // V, +Inf for none
	breakdown exponential
	series    float64 // S, 0 for none
	layer     depletion
	tau       float64
}

func newDiode(v []float64, at Place) (mna.Device, error) {
	h := newThermal(at.Temperature+at.Warmer, v[dTref])
	is := at.Area * v[dIs] * h.saturation(v[dExpIs]/v[dEm], v[dBandgap]/v[dEm])
	if phi := h.potential(v[dPhi]); !(phi > 0) {
		return nil, &ParamError{Param: "phi", Value: v[dPhi], Want: "a built-in potential that is still positive at the device's temperature"}
	}
	d := &diode{
		forward:   newExponential(is, v[dEm]*h.vt),
		breakVolt: v[dBreakdown],
		layer:     h.depletion(v[dCap], v[dPhi], v[dGrad], v[dFcap], at.Area),
		tau:       v[dTau],
	}
	d.breakdown = newExponential(at.Area*v[dKneeBreak], h.vt)
	if v[dRS] > 0 {
		d.series = at.Area / v[dRS]
	}
	return d, nil
}

type diodeStamp struct {
	*diode
	a, k, inner mna.Unknown
	outer       square
	junction    square
	state       int
}

func (d *diode) Bind(b mna.Binder) mna.Stamp {
	s := &diodeStamp{diode: d, a: b.Pin(0), k: b.Pin(1), state: b.Junction()}
	s.inner = s.a
	if d.series > 0 {
		s.inner = b.Internal("inside")
		s.outer = newSquare(b, s.a, s.inner)
	}
	s.junction = newSquare(b, s.inner, s.k)
	return s
}

// current returns the junction's current and conductance, and its forward part alone.
func (d *diode) current(v float64) (i, g, forward, slope float64) {
	forward, slope = d.forward.at(v)
	i, g = forward, slope
	if d.breakVolt < inf {
		x, y := d.breakdown.exp(-(v + d.breakVolt))
		i -= d.breakdown.is * x
		g += d.breakdown.gain * y
	}
	return i, g, forward, slope
}

// limit shortens the junction's steps, in breakdown with the voltage reversed.
func (d *diode) limit(v, last float64) (float64, bool) {
	if d.breakVolt < inf && v < -d.breakVolt {
		u, limited := d.breakdown.shorten(-(v + d.breakVolt), -(last + d.breakVolt))
		return -u - d.breakVolt, limited
	}
	return d.forward.shorten(v, last)
}

func (s *diodeStamp) Eval(e *mna.Eval) {
	if s.series > 0 {
		i := s.series * (e.X[s.a] - e.X[s.inner])
		e.F[s.a] += i
		e.F[s.inner] -= i
		s.outer.add(e.G, s.series)
	}
	v := e.X[s.inner] - e.X[s.k]
	u := v
	if e.Limit {
		var limited bool
		u, limited = s.limit(v, e.Junctions[s.state])
		e.Limited = e.Limited || limited
	}
	e.Junctions[s.state] = u
	i, g, forward, slope := s.current(u)
	i += g * (v - u)
	e.F[s.inner] += i
	e.F[s.k] -= i
	s.junction.add(e.G, g)
	if e.Dynamic {
		q, c := s.layer.at(u)
		q += s.tau * forward
		c += s.tau * slope
		q += c * (v - u)
		e.Q[s.inner] += q
		e.Q[s.k] -= q
		s.junction.add(e.C, c)
	}
}

func (s *diodeStamp) Operating(e *mna.Eval) []mna.Quantity {
	v := e.X[s.inner] - e.X[s.k]
	_, g, _, slope := s.current(v)
	_, c := s.layer.at(v)
	region := "off"
	switch {
	case v < -s.breakVolt:
		region = "breakdown"
	case v > regionShare*s.forward.knee:
		region = "forward"
	}
	return []mna.Quantity{
		{Name: "i", Unit: "A", Value: e.F[s.a]},
		{Name: "v", Unit: "V", Value: e.X[s.a] - e.X[s.k]},
		{Name: "gd", Unit: "S", Value: g},
		{Name: "cd", Unit: "F", Value: c + s.tau*slope},
		{Name: "region", Word: region},
	}
}

// regionShare is the share of the knee voltage at which a junction counts as conducting.
const regionShare = 0.6
