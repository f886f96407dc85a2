package devices

import "math"

// exponentLimit is the exponent above which an exponential goes on linearly, with its value and slope there.
const exponentLimit = 80

// A junction's goes on to this current at least: in the cold, saturation currents are so small that an exponent of 80 is still nothing.
const (
	linearCurrent = 1e6 // A
	exponentMost  = 700
)

var greatestExp = math.Exp(exponentLimit)

// expLinear returns exp(x), continued linearly above exponentLimit, and its derivative.
func expLinear(x float64) (value, slope float64) { return continued(x, exponentLimit, greatestExp) }

// continued returns exp(x), continued linearly above limit, where it is top, and its derivative.
func continued(x, limit, top float64) (value, slope float64) {
	if x > limit {
		return top * (1 + x - limit), top
	}
	value = exp(x)
	return value, value
}

// exponential is a current i = is (exp(v/nVt) - 1).
type exponential struct {
	is      float64 // A
	nVt     float64 // V
	inverse float64 // 1/V
	gain    float64 // is/nVt, S
	knee    float64 // V, where the current's curvature makes Newton's method overshoot
	limit   float64 // exponent above which it is linear
	top     float64 // exp(limit)
}

func newExponential(is, nVt float64) exponential {
	knee := nVt * math.Log(nVt/(math.Sqrt2*is))
	limit := min(max(exponentLimit, math.Log(linearCurrent/is)), exponentMost)
	return exponential{is: is, nVt: nVt, inverse: 1 / nVt, gain: is / nVt, knee: knee, limit: limit, top: math.Exp(limit)}
}

// at returns the current in A and its slope in S at v volts.
func (x *exponential) at(v float64) (i, g float64) {
	if x.is == 0 {
		return 0, 0
	}
	value, slope := x.exp(v)
	return x.is * (value - 1), x.gain * slope
}

// exp returns exp(v/nVt), continued linearly, and its derivative by the exponent.
func (x *exponential) exp(v float64) (value, slope float64) {
	return continued(v*x.inverse, x.limit, x.top)
}

// The lengths, in units of nVt, of the steps up and down that a junction may always take.
const (
	freeUp   = 2.0
	freeDown = 0.5
)

// shorten moves the evaluation of a junction from v, where Newton's method asks for it, to where the exponential carries the current that the
// junction linearised at the last voltage carries at v: v' = last + nVt ln(1 + (v - last)/nVt), as if the iteration were on the current. (Iterating on
// whichever of current and voltage changes less: Calahan, Computer-Aided Network Design, 1972, ch. 4; from memory.) On the way up
// it goes at least to the knee, below which no current is worth an iteration; on the way down it stops at rest first, since a
// reversed junction has no conductance to tell where it came from.
func (x *exponential) shorten(v, last float64) (float64, bool) {
	u := (v - last) * x.inverse
	switch {
	case u > freeUp && v > x.knee:
		return max(last+x.nVt*math.Log1p(u), x.knee), true
	case !(u < -freeDown && last > max(x.knee, 0)/2):
		return v, false
	case u > -1:
		return max(last+x.nVt*math.Log1p(u), 0), true
	case v < 0:
		return 0, true
	}
	return v, false
}

// depletion is the charge of a junction's depletion layer.
type depletion struct {
	c       float64 // F at 0 V
	inverse float64 // 1/V, of the built-in potential
	grade   float64
	span    float64 // V: of the charge below the knee
	tangent tangent // above the knee; everywhere if the capacitance is constant or there is none
	present bool
}

// tangent is a charge whose capacitance grows linearly above a voltage.
type tangent struct {
	knee          float64 // V, from which on it holds
	origin        float64 // V, at which it has the following
	charge        float64 // C
	cap           float64 // F
	halfCapGrowth float64 // F/V
}

func newDepletion(c, phi, grade, fcap float64) depletion {
	d := depletion{c: c, inverse: 1 / phi, grade: grade, span: phi / (1 - grade), present: c != 0}
	if c == 0 || grade == 0 {
		d.tangent = tangent{knee: -inf, cap: c}
		return d
	}
	knee := fcap * phi
	q, slope := d.below(knee)
	d.tangent = tangent{knee: knee, origin: knee, charge: q, cap: slope, halfCapGrowth: slope * grade / (phi * (1 - fcap)) / 2}
	return d
}

// below returns charge and capacitance below the knee: both from one power, c (1 - v/phi)^-grade.
func (d *depletion) below(v float64) (q, c float64) {
	room := 1 - v*d.inverse
	if d.grade == 0.5 {
		c = d.c / math.Sqrt(room)
	} else {
		c = d.c * exp(-d.grade*logOf(room))
	}
	return d.span * (d.c - c*room), c
}

// at returns the charge in C and the capacitance in F at v volts.
func (d *depletion) at(v float64) (q, c float64) {
	if v < d.tangent.knee {
		return d.below(v)
	}
	return d.tangent.at(v)
}

func (t *tangent) at(v float64) (q, c float64) {
	x := v - t.origin
	return t.charge + x*(t.cap+x*t.halfCapGrowth), t.cap + 2*x*t.halfCapGrowth
}

// thermal holds the temperatures of a device and the laws that scale its parameters.
type thermal struct {
	t, t0 float64 // K: the device's own, and that at which its parameters hold
	vt    float64 // V at t
	ratio float64 // t/t0
}

func newThermal(t, t0 float64) thermal {
	return thermal{t: t, t0: t0, vt: ThermalVoltage(t), ratio: t / t0}
}

// saturation scales a saturation current: r^exponent exp(gap (r-1)/V_T), with the gap in V.
func (h thermal) saturation(exponent, gap float64) float64 {
	return math.Pow(h.ratio, exponent) * math.Exp(gap*(h.ratio-1)/h.vt)
}

// gap is the band gap of silicon in V: Varshni's form, constants after Thurmond, J. Electrochem. Soc. 122, 1975.
func gap(t float64) float64 { return 1.16 - 7.02e-4*t*t/(t+1108) }

// potential scales a built-in potential.
func (h thermal) potential(phi float64) float64 {
	return phi*h.ratio - 3*h.vt*math.Log(h.ratio) - gap(h.t0)*h.ratio + gap(h.t)
}

// capacitance scales a depletion capacitance of grading m and built-in potential phi.
func (h thermal) capacitance(c, m, phi float64) float64 {
	return c * (1 + m*(4e-4*(h.t-h.t0)-(h.potential(phi)-phi)/phi))
}

// depletion makes a scaled depletion layer, a times as large.
func (h thermal) depletion(c, phi, m, fcap, a float64) depletion {
	return newDepletion(a*h.capacitance(c, m, phi), h.potential(phi), m, fcap)
}
