package devices

import (
	"fmt"
	"math"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/mna"
)

// Tests of the places where one formula of a model takes over from another.

// A value and its slope on both sides of a seam differ by what they change over the distance between the sides, and by rounding.
const (
	// seamReach is how far from a seam the sides are taken, beside the voltage over which the model changes there.
	seamReach = 1e-7
	// seamError allows for the second derivative, which may jump: it changes a slope by about seamReach of itself, a value, once its slope is
	// taken off, by the square of that. Rounding of the voltage moves both by 1e-16/seamReach of that.
	seamSlope = 10 * seamReach
	seamValue = 1e-12
)

// seam checks f, which returns a value and its derivative, across a seam at x; the model changes over the given width there.
func seam(t *testing.T, name string, x, width float64, f func(float64) (value, slope float64)) {
	t.Helper()
	h := seamReach * width
	low, high := x-h, x+h
	v1, s1 := f(low)
	v2, s2 := f(high)
	size := max(math.Abs(v1), math.Abs(v2), math.Abs(s1)*width, math.Abs(s2)*width)
	jump := v2 - v1 - (s1+s2)/2*(high-low)
	if !(math.Abs(jump) <= seamValue*size) {
		t.Errorf("%s: the value jumps by %g of %g at %g", name, jump, size, x)
	}
	if bend := (s2 - s1) * width; !(math.Abs(bend) <= seamSlope*size) {
		t.Errorf("%s: the slope times the width jumps by %g of %g at %g", name, bend, size, x)
	}
}

func TestSeamOfTheDepletionCharge(t *testing.T) {
	for _, c := range []struct{ cap, phi, grade, fcap float64 }{
		{11e-12, 0.72, 0.36, 0.5}, {4e-12, 0.6, 0.34, 0.5}, {1e-12, 1.1, 0.5, 0.31}, {3e-15, 0.45, 0.12, 0.93}, {2e-9, 0.83, 0.99, 0.07}, {1, 9.7, 1. / 3, 0},
	} {
		d := newDepletion(c.cap, c.phi, c.grade, c.fcap)
		name := fmt.Sprintf("%+v", c)
		seam(t, name+", charge", c.fcap*c.phi, c.phi*(1-c.fcap), d.at)
		seam(t, name+", capacitance", c.fcap*c.phi, c.phi*(1-c.fcap), func(v float64) (float64, float64) {
			_, slope := d.at(v)
			room := 1 - min(v, c.fcap*c.phi)/c.phi
			return slope, c.cap * c.grade / c.phi * math.Pow(room, -c.grade-1)
		})
	}
}

func TestSeamOfTheExponential(t *testing.T) {
	for _, c := range []struct{ is, nVt float64 }{{6.7e-15, 0.02586}, {1e-30, 0.0331}, {1e-68, 0.0066}, {0.9, 0.11}} {
		x := newExponential(c.is, c.nVt)
		seam(t, fmt.Sprint("linear above ", c), x.limit*c.nVt, c.nVt, x.at)
		// Far below, the current is -is to the last bit, and its slope less than any number that could be added to it.
		below, _ := x.at((leastExponent - 1e-9) * c.nVt)
		above, slope := x.at((leastExponent + 1e-9) * c.nVt)
		assert.Equal(t, below, above)
		assert.Less(t, slope, 1e-300)
	}
}

func TestSeamOfGuards(t *testing.T) {
	for _, floor := range []float64{earlyFloor, kneeFloor, 0.3} {
		seam(t, fmt.Sprint("guard at ", floor), floor, floor, func(x float64) (float64, float64) { return guard(x, floor) })
		for _, x := range []float64{-1e9, -1, 0} {
			v, slope := guard(x, floor)
			assert.Positive(t, v)
			assert.Positive(t, slope)
		}
	}
}

// seamTransistors are unlike each other in everything that matters to a seam.
func seamTransistors(t *testing.T) []*bipolar {
	var all []*bipolar
	for _, c := range []struct {
		family string
		change map[string]float64
		at     Place
	}{
		{"npn", nil, room},
		{"pnp", map[string]float64{"earlyF": 31, "earlyR": 6, "kneeF": 3e-3, "emF": 1.04, "emR": 1.09}, Place{Temperature: 263, Warmer: 11, Area: 3.7}},
		// Saturation currents beyond the knee and tauFcurr, absurd but allowed, reach the guards.
		{"npn", map[string]float64{"Is": 2e-3, "kneeF": 1.7e-3, "kneeR": 4e-3, "tauFcurr": 1e-3, "earlyF": 9}, Place{Temperature: 304, Area: 0.4}},
	} {
		v := fullNPN()
		for name, x := range c.change {
			v[name] = x
		}
		all = append(all, made(t, c.family, v, c.at).(*bipolar))
	}
	return all
}

// transistorSeam checks everything of a transistor along the line (v1, v2) = (a1, a2) + s (b1, b2) at s = 0.
func transistorSeam(t *testing.T, name string, q *bipolar, a1, a2, b1, b2, width float64) {
	quantities := []struct {
		name string
		f    func(c *core, v2 float64) (value, by1, by2 float64)
	}{
		{"transport current", func(c *core, _ float64) (float64, float64, float64) { return c.it, c.it1, c.it2 }},
		{"base current", func(c *core, _ float64) (float64, float64, float64) { return c.be + c.bc, c.be1, c.bc2 }},
		{"base resistance", func(c *core, _ float64) (float64, float64, float64) { return q.resistance(c) }},
		{"forward charge", func(c *core, v2 float64) (float64, float64, float64) { return q.diffusion(c, v2) }},
	}
	for _, k := range quantities {
		seam(t, name+", "+k.name, 0, width, func(s float64) (float64, float64) {
			var c core
			q.at(&c, a1+s*b1, a2+s*b2)
			value, by1, by2 := k.f(&c, a2+s*b2)
			return value, by1*b1 + by2*b2
		})
	}
}

// TestSeamsOfTheTransistor crosses the seams of its core.
func TestSeamsOfTheTransistor(t *testing.T) {
	for k, q := range seamTransistors(t) {
		name := fmt.Sprintf("transistor %d", k)
		v1 := 0.9 * q.forward.knee
		if v1 < 0 {
			v1 = 0.02
		}
		// Deep in saturation the Early effect is held back, in two directions.
		v2 := (1 - earlyFloor - v1*q.invEarlyR) / q.invEarlyF
		transistorSeam(t, name+", Early forward", q, v1, v2, 1, 0.7, q.forward.nVt)
		v1 = (1 - earlyFloor + 3*q.invEarlyF) / q.invEarlyR
		transistorSeam(t, name+", Early reverse", q, v1, -3, 1, -0.4, q.forward.nVt)
		transistorSeam(t, name+", forward exponential", q, exponentLimit*q.forward.nVt, -2.3, 1, 0.1, q.forward.nVt)
		transistorSeam(t, name+", reverse exponential", q, 0.11, exponentLimit*q.reverse.nVt, 0.1, 1, q.reverse.nVt)
		transistorSeam(t, name+", leakage exponential", q, exponentLimit*q.leakE.nVt, -0.4, 1, 0.3, q.leakE.nVt)
	}
	// The saturation currents alone take 1 + 4 q2 below its floor, and I_F below half of -tauFcurr.
	q := seamTransistors(t)[2]
	v := q.forward.nVt * math.Log(1+(kneeFloor-1)/(4*q.forward.is*q.invKneeF))
	transistorSeam(t, "knee", q, v, 0, 1, 0, kneeFloor*q.forward.nVt)
	v = q.forward.nVt * math.Log(1-q.tauCurr/2/q.forward.is)
	transistorSeam(t, "tauFcurr", q, v, 0.01, 1, 0.2, 0.1*q.forward.nVt)
}

// TestSeamsOfTheBaseResistance: the form by the base current begins with a series; at zero base current its value goes on, and its slope, by
// the model's own equation, does not.
func TestSeamsOfTheBaseResistance(t *testing.T) {
	for _, b := range []baseResistance{{least: 7, span: 31, invKnee: 1 / 2e-4}, {least: 0.2, span: 900, invKnee: 1 / 3e-7}} {
		// z = smallAngle where u = z (12 + 144 z/pi^2 z)/..., found by halving.
		angle := func(u float64) float64 { return 6 * math.Sqrt(u) / (1 + math.Sqrt(1+144/(math.Pi*math.Pi)*u)) }
		low, high := 0.0, 1.0
		for range 200 {
			if m := (low + high) / 2; angle(m) < smallAngle {
				low = m
			} else {
				high = m
			}
		}
		ib := high / b.invKnee
		// The closed form takes the difference of two numbers of size z that is z^3/3.
		seam(t, fmt.Sprintf("%+v", b), ib, ib, b.ofCurrent)
		before, _ := b.ofCurrent(-1e-30)
		after, _ := b.ofCurrent(1e-30)
		assert.InDelta(t, before, after, 1e-12*before)
		least, _ := b.ofCurrent(1e9)
		assert.InEpsilon(t, b.least, least, 0.05)
	}
}

// TestTheLeastBaseResistanceIsTheLeast: above rB it would make r_bb pass through zero.
func TestTheLeastBaseResistanceIsTheLeast(t *testing.T) {
	f := Families()[0]
	v := f.Defaults()
	v[f.Index("rB")], v[f.Index("rBmin")] = 3, 3.1
	_, err := f.New(v, room)
	var wrong *ParamError
	require.ErrorAs(t, err, &wrong)
	assert.Equal(t, "rBmin", wrong.Param)
	v[f.Index("rBmin")] = 3
	_, err = f.New(v, room)
	require.NoError(t, err)
}

func TestSeamsOfTheDiode(t *testing.T) {
	for _, c := range []struct {
		change map[string]float64
		at     Place
	}{
		{nil, room}, {map[string]float64{"Is": 1e-30, "breakdown": 61, "em": 1.9}, Place{Temperature: 250, Warmer: 3, Area: 12}},
		{map[string]float64{"Is": 1e-6, "breakdown": 0.3, "kneeBreak": 1e-9}, Place{Temperature: 400, Area: 0.1}},
	} {
		v := map[string]float64{"Is": 3e-14, "em": 1.3, "breakdown": 5, "cap": 7e-12, "phi": 0.8, "grad": 0.41, "tau": 3e-9}
		for name, x := range c.change {
			v[name] = x
		}
		d := made(t, "diode", v, c.at).(*diode)
		current := func(v float64) (float64, float64) {
			i, g, _, _ := d.current(v)
			return i, g
		}
		name := fmt.Sprint(c.change)
		seam(t, name+", forward", exponentLimit*d.forward.nVt, d.forward.nVt, current)
		seam(t, name+", deep breakdown", -d.breakVolt-exponentLimit*d.breakdown.nVt, d.breakdown.nVt, current)
		seam(t, name+", breakdown", -d.breakVolt, d.breakdown.nVt, current)
		seam(t, name+", off", 0, d.forward.nVt, current)
	}
}

// TestTemperatureLawsStartAtTheReference: at tref the parameters hold as given, and about it nothing jumps.
func TestTemperatureLawsStartAtTheReference(t *testing.T) {
	v := fullNPN()
	v["expBeta"], v["tref"] = 1.7, 291.3
	at := func(kelvin float64) *bipolar {
		return made(t, "npn", v, Place{Temperature: kelvin - 4, Warmer: 4, Area: 1}).(*bipolar)
	}
	q := at(291.3)
	const rounding = 1e-14
	for _, c := range []struct{ want, got float64 }{
		{v["Is"], q.forward.is}, {v["leakE"], q.leakE.is}, {v["leakC"], q.leakC.is}, {v["betaF"], 1 / q.invBetaF}, {v["betaR"], 1 / q.invBetaR},
		{v["capE"], q.layerE.c}, {v["phiE"], 1 / q.layerE.inverse}, {v["splitC"] * v["capC"], q.layerC.c}, {v["phiS"], 1 / q.layerS.inverse},
		{ThermalVoltage(291.3), q.forward.nVt}, {v["emE"] * ThermalVoltage(291.3), q.leakE.nVt},
	} {
		assert.InEpsilon(t, c.want, c.got, rounding)
	}
	// A quantity bends at the reference by no more than a ten-thousandth of a kelvin bends a smooth law.
	const step = 1e-4 // K
	below, above := at(291.3-step), at(291.3+step)
	for _, f := range []func(*bipolar) float64{
		func(q *bipolar) float64 { return q.forward.is }, func(q *bipolar) float64 { return q.leakC.is }, func(q *bipolar) float64 { return q.invBetaF },
		func(q *bipolar) float64 { return q.layerE.c }, func(q *bipolar) float64 { return q.layerC.inverse },
	} {
		assert.InEpsilon(t, f(q), (f(below)+f(above))/2, 1e-9)
	}
}

// TestLimitedEvaluationIsTheTangent: where a step is shortened, the terms are those at the shorter step, extended linearly to the whole one.
func TestLimitedEvaluationIsTheTangent(t *testing.T) {
	for _, c := range []struct {
		name string
		d    mna.Device
		pins int
		x    []float64
	}{
		{"npn", made(t, "npn", fullNPN(), room), 4, []float64{0, 5, 2.9, 0.1, -1, 4.2, 2.2, 0.4}},
		{"pnp", made(t, "pnp", fullNPN(), room), 4, []float64{0, -0.3, -4.1, 0.2, 1, -0.9, -3.7, -0.6}},
		{"saturated", made(t, "npn", yardstickNPN(), room), 4, []float64{0, 0.1, 3.8, 0, 0, 0.2, 3.3, 0.05}},
		{"diode", made(t, "diode", map[string]float64{"rS": 4, "cap": 7e-12, "tau": 3e-9, "breakdown": 6}, room), 2, []float64{0, 4, 0, 3.1}},
		{"broken down", made(t, "diode", map[string]float64{"rS": 4, "cap": 7e-12, "tau": 3e-9, "breakdown": 6}, room), 2, []float64{0, -14, 0, -12}},
	} {
		b := bind(c.d, c.pins)
		require.Equal(t, b.n, len(c.x), c.name)
		e := b.newEval(c.x)
		e.Limit = true
		b.stamp.Eval(e)
		require.True(t, e.Limited, c.name)
		// The point whose junction voltages are those that were evaluated has its inner nodes elsewhere.
		y := append([]float64(nil), c.x...)
		s, ok := b.stamp.(*bipolarStamp)
		if ok {
			y[s.ei] = y[s.bi] - s.sign*e.Junctions[s.state1]
			y[s.ci] = y[s.bi] - s.sign*e.Junctions[s.state2]
		} else {
			d := b.stamp.(*diodeStamp)
			y[d.k] = y[d.inner] - e.Junctions[d.state]
		}
		f, q, g, cap := b.eval(y)
		for i := 1; i < b.n; i++ {
			wantF, wantQ, sizeF, sizeQ := f[i], q[i], math.Abs(f[i]), math.Abs(q[i])
			for j := 1; j < b.n; j++ {
				d := c.x[j] - y[j]
				wantF, wantQ = wantF+g[i][j]*d, wantQ+cap[i][j]*d
				sizeF, sizeQ = sizeF+math.Abs(g[i][j]*d), sizeQ+math.Abs(cap[i][j]*d)
			}
			// The exponentials of voltages rounded to 1e-16 of 4 V are known to 1e-14.
			assert.InDelta(t, wantF, e.F[i], 1e-12*sizeF, "%s: f of %d", c.name, i)
			if ok && s.layerX.present && (i == int(s.b) || i == int(s.s) || i == int(s.ci)) {
				continue // the layers at the outer base and the substrate are not limited
			}
			assert.InDelta(t, wantQ, e.Q[i], 1e-12*sizeQ, "%s: q of %d", c.name, i)
		}
	}
}

// TestJunctionInTheCold: at -196 degC a junction of 10 fA has a saturation current of far less than 1e-60 A and still carries milliamperes by its law, at
// exponents of more than 150.
func TestJunctionInTheCold(t *testing.T) {
	family := diodeFamily()
	v := family.Defaults()
	v[dIs] = 10e-15
	made, err := newDiode(v, Place{Temperature: 77.15, Area: 1})
	require.NoError(t, err)
	d := made.(*diode).forward
	require.Less(t, d.is, 1e-60)
	for _, amps := range []float64{1e-12, 1e-3, 10} {
		volts := d.nVt * (math.Log(amps) - math.Log(d.is))
		require.Greater(t, volts/d.nVt, 110.0)
		i, g := d.at(volts)
		// An error of the voltage in its last bit is one of the exponent beside it.
		require.InEpsilon(t, amps, i, 1e-13, "%g A", amps)
		require.InEpsilon(t, amps/d.nVt, g, 1e-13, "%g A", amps)
	}
}
