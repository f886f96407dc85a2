package devices

import (
	"math"

	"poise/mna"
)

// Indexes of the bipolar transistor's parameters.
const (
	bIs = iota
	bBetaF
	bBetaR
	bEmF
	bEmR
	bEarlyF
	bEarlyR
	bKneeF
	bKneeR
	bLeakE
	bEmE
	bLeakC
	bEmC
	bRB
	bRBmin
	bRBknee
	bRE
	bRC
	bCapE
	bPhiE
	bGradE
	bCapC
	bPhiC
	bGradC
	bSplitC
	bCapS
	bPhiS
	bGradS
	bFcap
	bTauF
	bTauR
	bTauFbias
	bTauFvolt
	bTauFcurr
	bBandgap
	bExpIs
	bExpBeta
	bFlickerK
	bFlickerA
	bTref
)

var nan = math.NaN()

func bipolarParams() []Param {
	return []Param{
		bIs:       {Name: "Is", Symbol: "I_S", Meaning: "transport saturation current", Unit: "A", Default: 1e-16, MinOpen: true, Max: 1},
		bBetaF:    {Name: "betaF", Symbol: "beta_F", Meaning: "ideal maximum forward current gain", Default: 100, MinOpen: true, Max: inf},
		bBetaR:    {Name: "betaR", Symbol: "beta_R", Meaning: "ideal maximum reverse current gain", Default: 1, MinOpen: true, Max: inf},
		bEmF:      {Name: "emF", Symbol: "n_F", Meaning: "forward emission coefficient", Default: 1, Min: 0.1, Max: 20},
		bEmR:      {Name: "emR", Symbol: "n_R", Meaning: "reverse emission coefficient", Default: 1, Min: 0.1, Max: 20},
		bEarlyF:   {Name: "earlyF", Symbol: "V_AF", Meaning: "forward Early voltage", Unit: "V", Default: inf, MinOpen: true, Max: inf},
		bEarlyR:   {Name: "earlyR", Symbol: "V_AR", Meaning: "reverse Early voltage", Unit: "V", Default: inf, MinOpen: true, Max: inf},
		bKneeF:    {Name: "kneeF", Symbol: "I_KF", Meaning: "forward high-injection knee current", Unit: "A", Default: inf, MinOpen: true, Max: inf},
		bKneeR:    {Name: "kneeR", Symbol: "I_KR", Meaning: "reverse high-injection knee current", Unit: "A", Default: inf, MinOpen: true, Max: inf},
		bLeakE:    {Name: "leakE", Symbol: "I_SE", Meaning: "base-emitter leakage saturation current", Unit: "A", Max: 1},
		bEmE:      {Name: "emE", Symbol: "n_E", Meaning: "base-emitter leakage emission coefficient", Default: 1.5, Min: 0.1, Max: 20},
		bLeakC:    {Name: "leakC", Symbol: "I_SC", Meaning: "base-collector leakage saturation current", Unit: "A", Max: 1},
		bEmC:      {Name: "emC", Symbol: "n_C", Meaning: "base-collector leakage emission coefficient", Default: 2, Min: 0.1, Max: 20},
		bRB:       {Name: "rB", Symbol: "r_B", Meaning: "base resistance at zero bias", Unit: "ohm", Max: inf, MaxOpen: true},
		bRBmin:    {Name: "rBmin", Symbol: "r_BM", Meaning: "least base resistance, at high current", Unit: "ohm", Default: nan, Derived: "rB", Max: inf, MaxOpen: true},
		bRBknee:   {Name: "rBknee", Symbol: "I_RB", Meaning: "base current at which the base resistance has fallen half-way", Unit: "A", Default: nan, Derived: "follows q_b", MinOpen: true, Max: inf},
		bRE:       {Name: "rE", Symbol: "r_E", Meaning: "emitter resistance", Unit: "ohm", Max: inf, MaxOpen: true},
		bRC:       {Name: "rC", Symbol: "r_C", Meaning: "collector resistance", Unit: "ohm", Max: inf, MaxOpen: true},
		bCapE:     {Name: "capE", Symbol: "C_JE", Meaning: "base-emitter depletion capacitance at 0 V", Unit: "F", Max: inf, MaxOpen: true},
		bPhiE:     {Name: "phiE", Symbol: "phi_E", Meaning: "base-emitter built-in potential", Unit: "V", Default: 0.75, MinOpen: true, Max: 10},
		bGradE:    {Name: "gradE", Symbol: "m_E", Meaning: "base-emitter grading", Default: 0.33, Max: 1, MaxOpen: true},
		bCapC:     {Name: "capC", Symbol: "C_JC", Meaning: "base-collector depletion capacitance at 0 V", Unit: "F", Max: inf, MaxOpen: true},
		bPhiC:     {Name: "phiC", Symbol: "phi_C", Meaning: "base-collector built-in potential", Unit: "V", Default: 0.75, MinOpen: true, Max: 10},
		bGradC:    {Name: "gradC", Symbol: "m_C", Meaning: "base-collector grading", Default: 0.33, Max: 1, MaxOpen: true},
		bSplitC:   {Name: "splitC", Symbol: "", Meaning: "share of capC at the internal base", Default: 1, Max: 1},
		bCapS:     {Name: "capS", Symbol: "C_JS", Meaning: "collector-substrate depletion capacitance at 0 V", Unit: "F", Max: inf, MaxOpen: true},
		bPhiS:     {Name: "phiS", Symbol: "phi_S", Meaning: "collector-substrate built-in potential", Unit: "V", Default: 0.75, MinOpen: true, Max: 10},
		bGradS:    {Name: "gradS", Symbol: "m_S", Meaning: "collector-substrate grading", Max: 1, MaxOpen: true},
		bFcap:     {Name: "fcap", Symbol: "F_C", Meaning: "depletion capacitances go linear above fcap phi", Default: 0.5, Max: 1, MaxOpen: true},
		bTauF:     {Name: "tauF", Symbol: "tau_F", Meaning: "ideal forward transit time", Unit: "s", Max: inf, MaxOpen: true},
		bTauR:     {Name: "tauR", Symbol: "tau_R", Meaning: "ideal reverse transit time", Unit: "s", Max: inf, MaxOpen: true},
		bTauFbias: {Name: "tauFbias", Symbol: "", Meaning: "coefficient of the increase of tauF with current", Max: inf, MaxOpen: true},
		bTauFvolt: {Name: "tauFvolt", Symbol: "", Meaning: "voltage that describes the dependence of tauF on v_bc", Unit: "V", Default: inf, MinOpen: true, Max: inf},
		bTauFcurr: {Name: "tauFcurr", Symbol: "", Meaning: "current that describes the dependence of tauF on current", Unit: "A", Max: inf, MaxOpen: true},
		bBandgap:  {Name: "bandgap", Symbol: "E_g", Meaning: "band gap in eV for the temperature law of Is", Default: 1.11, MinOpen: true, Max: 10},
		bExpIs:    {Name: "expIs", Symbol: "", Meaning: "temperature exponent of Is", Default: 3, Min: -20, Max: 20},
		bExpBeta:  {Name: "expBeta", Symbol: "", Meaning: "temperature exponent of betaF and betaR", Min: -20, Max: 20},
		bFlickerK: {Name: "flickerK", Symbol: "K_F", Meaning: "flicker-noise coefficient", Max: inf, MaxOpen: true},
		bFlickerA: {Name: "flickerA", Symbol: "A_F", Meaning: "flicker-noise exponent", Default: 1, MinOpen: true, Max: 10},
		bTref:     {Name: "tref", Symbol: "T_0", Meaning: "temperature at which the parameters hold", Unit: "degC", Default: ReferenceTemperature, MinOpen: true, Max: 2000},
	}
}

func bipolarFamily(name, title string, polarity float64) Family {
	return Family{
		Name: name, Title: title,
		Source: "Gummel & Poon, Bell Syst. Tech. J. 49, 1970; Getreu, Modeling the Bipolar Transistor, 1976; Massobrio & Antognetti, Semiconductor Device Modeling, 1993",
		Pins: []Pin{
			{Name: "c", Meaning: "collector"}, {Name: "b", Meaning: "base"}, {Name: "e", Meaning: "emitter"},
			{Name: "s", Meaning: "substrate", Optional: true, Joins: "gnd", Insulated: true},
		},
		Params: bipolarParams(),
		Operating: []OperatingQuantity{
			{Name: "ic", Meaning: "current into the collector", Unit: "A"},
			{Name: "ib", Meaning: "current into the base", Unit: "A"},
			{Name: "ie", Meaning: "current into the emitter", Unit: "A"},
			{Name: "vbe", Meaning: "voltage from base to emitter", Unit: "V"},
			{Name: "vce", Meaning: "voltage from collector to emitter", Unit: "V"},
			{Name: "vbc", Meaning: "voltage from base to collector", Unit: "V"},
			{Name: "beta", Meaning: "ic/ib"},
			{Name: "gm", Meaning: "transconductance dI_C/dv1 at constant v_ce", Unit: "S"},
			{Name: "ro", Meaning: "output resistance 1/(dI_C/dv_ce) at constant v1", Unit: "ohm"},
			{Name: "rpi", Meaning: "input resistance 1/(dI_B/dv1) at constant v_ce", Unit: "ohm"},
			{Name: "re", Meaning: "intrinsic emitter resistance 1/(dI_E/dv1)", Unit: "ohm"},
			{Name: "cpi", Meaning: "base-emitter capacitance", Unit: "F"},
			{Name: "cmu", Meaning: "base-collector capacitance", Unit: "F"},
			{Name: "ft", Meaning: "transition frequency gm/(2 pi (cpi + cmu))", Unit: "Hz"},
			{Name: "region", Meaning: "state of the junctions", Words: []string{"off", "active", "saturated", "reverse"}},
		},
		New: func(v []float64, at Place) (mna.Device, error) { return newBipolar(v, at, polarity) },
	}
}

// bipolar is a transistor at one temperature. Voltages and currents are those of an npn; sign turns them into a pnp's.
type bipolar struct {
	sign                         float64
	forward, reverse             exponential
	leakE, leakC                 exponential
	invBetaF, invBetaR           float64
	invEarlyF, invEarlyR         float64 // 1/V
	invKneeF, invKneeR           float64 // 1/A
	knees                        bool    // one of them at least is not 0
	base                         baseResistance
	gE, gC                       float64 // S, 0 for none
	layerE, layerC, layerX       depletion
	layerS                       depletion
	tauF, tauR                   float64
	tauBias, tauCurr, invTauVolt float64
}

func newBipolar(v []float64, at Place, sign float64) (mna.Device, error) {
	h := newThermal(at.Temperature+at.Warmer, v[bTref])
	for _, k := range []int{bPhiE, bPhiC, bPhiS} {
		if phi := h.potential(v[k]); !(phi > 0) {
			return nil, &ParamError{Param: bipolarParams()[k].Name, Value: v[k], Want: "a built-in potential that is still positive at the device's temperature"}
		}
	}
	if v[bRBmin] > v[bRB] {
		return nil, &ParamError{Param: "rBmin", Value: v[bRBmin], Want: "at most rB"}
	}
	grow := h.saturation(v[bExpIs], v[bBandgap])
	gain := math.Pow(h.ratio, v[bExpBeta])
	a := at.Area
	q := &bipolar{
		sign:     sign,
		forward:  newExponential(a*v[bIs]*grow, v[bEmF]*h.vt),
		reverse:  newExponential(a*v[bIs]*grow, v[bEmR]*h.vt),
		leakE:    newExponential(a*v[bLeakE]*math.Pow(grow, 1/v[bEmE])/gain, v[bEmE]*h.vt),
		leakC:    newExponential(a*v[bLeakC]*math.Pow(grow, 1/v[bEmC])/gain, v[bEmC]*h.vt),
		invBetaF: 1 / (v[bBetaF] * gain), invBetaR: 1 / (v[bBetaR] * gain),
		invEarlyF: 1 / v[bEarlyF], invEarlyR: 1 / v[bEarlyR],
		invKneeF: 1 / (a * v[bKneeF]), invKneeR: 1 / (a * v[bKneeR]),
		base:   newBaseResistance(v, a),
		layerE: h.depletion(v[bCapE], v[bPhiE], v[bGradE], v[bFcap], a),
		layerC: h.depletion(v[bSplitC]*v[bCapC], v[bPhiC], v[bGradC], v[bFcap], a),
		layerX: h.depletion((1-v[bSplitC])*v[bCapC], v[bPhiC], v[bGradC], v[bFcap], a),
		layerS: h.depletion(v[bCapS], v[bPhiS], v[bGradS], v[bFcap], a),
		tauF:   v[bTauF], tauR: v[bTauR], tauBias: v[bTauFbias], tauCurr: a * v[bTauFcurr], invTauVolt: 1 / (1.44 * v[bTauFvolt]),
	}
	q.knees = q.invKneeF > 0 || q.invKneeR > 0
	if v[bRE] > 0 {
		q.gE = a / v[bRE]
	}
	if v[bRC] > 0 {
		q.gC = a / v[bRC]
	}
	return q, nil
}

// baseResistance is r_bb as a function of q_b or of the base current.
type baseResistance struct {
	least, span float64 // ohm
	invKnee     float64 // 1/A, 0: follows q_b
	present     bool
	varies      bool
	conductance float64 // S, if it does not vary
}

func newBaseResistance(v []float64, area float64) baseResistance {
	least := v[bRBmin]
	if math.IsNaN(least) {
		least = v[bRB]
	}
	b := baseResistance{least: least / area, span: (v[bRB] - least) / area, present: v[bRB] > 0 || least > 0}
	b.varies, b.conductance = b.span != 0, 1/b.least
	if k := v[bRBknee]; b.varies && !math.IsNaN(k) && !math.IsInf(k, 0) {
		b.invKnee = 1 / (area * k)
	}
	return b
}

// smallAngle is where the closed form of the base resistance loses digits to cancellation and its series is exact.
// With C = cot z the form (tan z - z)/(z tan^2 z) is C/z - C^2 = C/z + C' + 1, of which the cotangent's series leaves
// 1/3 - 4 z^2/45 - 4 z^4/315 - 8 z^6/4725 - 4 z^8/18711 - ...; what follows is 2e-5 z^10.
const smallAngle = 0.1

// ofCurrent returns the resistance and its derivative by the base current.
func (b *baseResistance) ofCurrent(ib float64) (r, slope float64) {
	u := ib * b.invKnee
	if !(u > 0) {
		return b.least + b.span, 0
	}
	const a = 144 / (math.Pi * math.Pi)
	s := math.Sqrt(1 + a*u)
	root := math.Sqrt(u)
	z := 6 * root / (1 + s)
	dz := 3/(root*(1+s)) - 3*root*a/(s*(1+s)*(1+s))
	var h, dh float64
	if z < smallAngle {
		z2 := z * z
		h = 1./3 - z2*(4./45+z2*(4./315+z2*(8./4725+z2*(4./18711))))
		dh = -z * (8./45 + z2*(16./315+z2*(48./4725+z2*(32./18711))))
	} else {
		t := math.Tan(z)
		t2 := t * t
		h = (t - z) / (z * t2)
		dh = (z*t2*t2 - (t-z)*(t2+2*z*t*(1+t2))) / (z * z * t2 * t2)
	}
	return b.least + 3*b.span*h, 3 * b.span * dh * dz * b.invKnee
}

// core is the intrinsic transistor at its junction voltages: values and derivatives by v1 and v2.
type core struct {
	fi, fg, ri, rg float64 // I_F by v1, I_R by v2
	share          float64 // 1/q_b
	l1, l2         float64 // 1/V, derivatives of ln q_b

	it, it1, it2 float64 // transport current
	bc, bc2      float64 // part of the base current that comes from the collector
	be, be1      float64 // part that goes to the emitter
}

// guard keeps x from reaching zero: below floor it is floor^2/(2 floor - x), with the same value and slope there.
func guard(x, floor float64) (value, slope float64) {
	if x >= floor {
		return x, 1
	}
	value = floor * floor / (2*floor - x)
	return value, value * value / (floor * floor)
}

const (
	earlyFloor = 0.05 // of 1 - v2/earlyF - v1/earlyR: far in saturation or reverse
	kneeFloor  = 1e-3 // of 1 + 4 q2, which only saturation currents beyond the knee could bring below
)

// at evaluates the intrinsic transistor into c.
func (q *bipolar) at(c *core, v1, v2 float64) {
	c.fi, c.fg = q.forward.at(v1)
	c.ri, c.rg = q.reverse.at(v2)
	li, lg := q.leakE.at(v1)
	mi, mg := q.leakC.at(v2)
	c.be, c.be1 = c.fi*q.invBetaF+li, c.fg*q.invBetaF+lg
	c.bc, c.bc2 = c.ri*q.invBetaR+mi, c.rg*q.invBetaR+mg

	q.modulate(c, v1, v2)
	c.it = (c.fi - c.ri) * c.share
	c.it1 = c.fg*c.share - c.it*c.l1
	c.it2 = -c.rg*c.share - c.it*c.l2
}

// modulate sets what the base charge q_b = (1 + sqrt(1 + 4 q2))/(2 (1 - v2/earlyF - v1/earlyR)) does.
func (q *bipolar) modulate(c *core, v1, v2 float64) {
	room, slope := guard(1-v2*q.invEarlyF-v1*q.invEarlyR, earlyFloor)
	early := slope / room
	c.share = room
	c.l1, c.l2 = early*q.invEarlyR, early*q.invEarlyF
	if !q.knees {
		return
	}
	s, ds := guard(1+4*(c.fi*q.invKneeF+c.ri*q.invKneeR), kneeFloor)
	root := math.Sqrt(s)
	c.share = 2 * room / (1 + root)
	high := 2 * ds / (root + s) // the derivative of ln q_b by q2
	c.l1 += high * c.fg * q.invKneeF
	c.l2 += high * c.rg * q.invKneeR
}

// resistance returns the base resistance and its derivatives by v1 and v2.
func (q *bipolar) resistance(c *core) (r, r1, r2 float64) {
	b := &q.base
	if b.invKnee > 0 {
		r, slope := b.ofCurrent(c.be + c.bc)
		return r, slope * c.be1, slope * c.bc2
	}
	k := b.span * c.share
	return b.least + k, -k * c.l1, -k * c.l2
}

// diffusion returns the forward charge tau I_F/q_b and its derivatives.
func (q *bipolar) diffusion(c *core, v2 float64) (charge, d1, d2 float64) {
	if q.tauF == 0 {
		return 0, 0, 0
	}
	k := q.tauF * c.share
	charge = k * c.fi
	d1 = k*c.fg - charge*c.l1
	d2 = -charge * c.l2
	if q.tauBias == 0 {
		return charge, d1, d2
	}
	tau, t1, t2 := q.slowing(c, v2)
	return charge * tau, d1*tau + charge*t1, d2*tau + charge*t2
}

// slowing returns tau/tauF, which rises with the current and with v2, and its derivatives.
func (q *bipolar) slowing(c *core, v2 float64) (tau, t1, t2 float64) {
	share, slope := 1.0, 0.0
	if q.tauCurr > 0 {
		// I_F is never below -Is; the guard keeps the pole at -tauFcurr away if a part has Is beyond it.
		sum, ds := guard(c.fi+q.tauCurr, q.tauCurr/2)
		share = c.fi / sum
		slope = (1 - share*ds) / sum * c.fg
	}
	x, dx := 1.0, 0.0
	if q.invTauVolt > 0 {
		x, dx = expLinear(v2 * q.invTauVolt)
	}
	k := q.tauBias * share
	return 1 + k*share*x, 2 * k * slope * x, k * share * dx * q.invTauVolt
}
