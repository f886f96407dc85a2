package analyses_test

import (
	"context"
	"fmt"
	"math"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/devices"
	"poise/netlist"
)

// bench loads a text and measures quantities in its bench b.
func bench(t *testing.T, src string, quantities ...string) []analyses.Value {
	t.Helper()
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte("design d\n" + src)}}, "x.poise")
	require.NoError(t, err)
	setup, err := d.Setup()
	if d.Bench("b") != nil {
		setup, err = d.Bench("b").Setup(nil)
	}
	require.NoError(t, err)
	v, err := analyses.Measure(context.Background(), setup, quantities...)
	require.NoError(t, err)
	return v
}

// closed is the relative difference allowed to a closed form that the circuit meets exactly: rounding, and Newton's last update.
const closed = 1e-8

func relative(t *testing.T, want, got, tolerance float64, what string) {
	t.Helper()
	if d := math.Abs(got/want - 1); !(d <= tolerance) {
		t.Errorf("%s: want %.9g, got %.9g, off by %.2g of it", what, want, got, d)
	}
}

var thermal = devices.ThermalVoltage(devices.ReferenceTemperature)

// Gray, Hurst, Lewis & Meyer, Analysis and Design of Analog Integrated Circuits, section 3.5.1: the transfer of the
// emitter-coupled pair, I_c1 - I_c2 = alpha I_EE tanh(V_id/2V_T).
func TestTanhLawOfThePair(t *testing.T) {
	for _, drive := range []float64{-90e-3, -20e-3, 3e-3, 47e-3, 120e-3} {
		v := bench(t, fmt.Sprintf(`
part p = npn { Is = 1fA, betaF = 200, betaR = 1 }
rail vp = 5V
Q1 = p(b: a, c: vp, e: e)
Q2 = p(b: b, c: vp, e: e)
e -- I1 1mA -- gnd
input i = (a, b)
bench b {
  drive i differential = %gV
  expect volts(vp) >= 1V
}
`, drive), "amps(Q1.c) - amps(Q2.c)")
		// The reverse saturation current, 1 fA in 1 mA, is what the law leaves out.
		relative(t, 200.0/201*1e-3*math.Tanh(drive/(2*thermal)), v[0].Float(), closed, "tanh law")
	}
}

// The pair at 0.25 mA a side with 300 ohm in each emitter, 22 kohm tail and 24 kohm load: gain near 30, common-mode gain near -0.54 by hand and
// about -0.53 measured, rejection just under 35 dB; the intrinsic emitter resistance is 100 ohm at 0.25 mA (common practice, no source).
func TestDegeneratedPairOfTheTrade(t *testing.T) {
	v := bench(t, `
part p = npn { Is = 8fA, betaF = 300, earlyF = 100V }
rail vp = 12V
rail vn = -12V
Q1 = p(b: a, c: vp, e: e1)
Q2 = p(b: b, c: out, e: e2)
e1 -- R1 300ohm -- t -- R2 300ohm -- e2
t -- R3 22kohm -- vn
vp -- R4 24kohm -- out
input i = (a, b)
output o = (out)
`, "dm_gain at 10Hz", "real(cm_gain at 10Hz)", "cmrr at 10Hz", "Q2.re")
	assert.InDelta(t, 30, v[0].Float(), 1.5)
	assert.InDelta(t, -0.53, real(v[1].Number), 0.015)
	assert.InDelta(t, 35, 20*math.Log10(v[2].Float()), 0.7)
	assert.Less(t, 20*math.Log10(v[2].Float()), 35.3)
	assert.InDelta(t, 100, v[3].Float(), 5)
}

// Gray, Hurst, Lewis & Meyer, section 4.2.2: the simple mirror copies 1/(1 + 2/beta_F) of its input (no Early effect, so equal v_ce).
func TestMirrorError(t *testing.T) {
	v := bench(t, `
part p = npn { Is = 1fA, betaF = 80, betaR = 1e6 }
rail vp = 5V
vp -- I1 1mA -- in
Q1 = p(b: in, c: in, e: gnd)
Q2 = p(b: in, c: out, e: gnd)
vp -- R1 1kohm -- out
`, "amps(Q2.c)")
	relative(t, 1e-3/(1+2.0/80), v[0].Float(), 1e-7, "mirror")
}

// Corless, Gonnet, Hare, Jeffrey & Knuth, On the Lambert W function, Adv. Comput. Math. 5, 1996: the source of Widlar (1965),
// V_T ln(I_1/I_2) = I_2 R, has I_2 = (V_T/R) W(I_1 R/V_T).
func TestWidlarSource(t *testing.T) {
	v := bench(t, `
part p = npn { Is = 1fA, betaF = 1e9, betaR = 1e9 }
rail vp = 5V
vp -- I1 1mA -- in
Q1 = p(b: in, c: in, e: gnd)
Q2 = p(b: in, c: vp, e: e2)
e2 -- R1 10kohm -- gnd
`, "amps(R1)")
	x := 1e-3 * 10e3 / thermal
	w := math.Log(x)
	for range 50 {
		w -= (w*math.Exp(w) - x) / (math.Exp(w) * (w + 1))
	}
	// -1 in the exponential law is 1 fA in some ten microamperes.
	relative(t, thermal/10e3*w, v[0].Float(), 1e-7, "Widlar source")
}

// Gray, Hurst, Lewis & Meyer, section 3.5.6: V_OS = V_T (dR/R + dI_S/I_S) to first order.
func TestOffsetOfThePair(t *testing.T) {
	v := bench(t, `
part p = npn { Is = 1fA, betaF = 1e6 }
part q = p { Is = 1.004fA }
rail vp = 5V
Q1 = p(b: a, c: c1, e: e)
Q2 = q(b: b, c: c2, e: e)
vp -- R1 10kohm -- c1
vp -- R2 10.03kohm -- c2
e -- I1 200uA -- gnd
input i = (a, b)
output o = (c1, c2)
`, "offset")
	want := thermal * (math.Log(10.03/10) + math.Log(1.004))
	relative(t, want, v[0].Float(), 1e-4, "offset") // I_C/beta and the like are left out
}

// Series of tanh: HD3 = (V/V_T)^2/48 for small drive (Gray, Hurst, Lewis & Meyer, problem of chapter 3; value from memory).
func TestThirdHarmonicOfThePair(t *testing.T) {
	const peak = 5e-3
	v := bench(t, `
set accuracy = 1e-6
part p = npn { Is = 1fA, betaF = 1e6 }
rail vp = 5V
Q1 = p(b: a, c: c1, e: e)
Q2 = p(b: b, c: c2, e: e)
vp -- R1 10kohm -- c1
vp -- R2 10kohm -- c2
e -- I1 200uA -- gnd
input i = (a, b)
bench b {
  drive i differential = sine(5mVpk, 1kHz)
  run 10ms
  expect volts(c1) >= 0V
}
`, "tone(volts(c1, c2), 3kHz) / tone(volts(c1, c2), 1kHz)")
	u := peak / (2 * thermal)
	// tanh u = u - u^3/3 + 2u^5/15: third harmonic (u^3/12 - u^5/24) over fundamental (u - u^3/4 + u^5/12).
	want := (u*u/12 - math.Pow(u, 4)/24) / (1 - u*u/4 + math.Pow(u, 4)/12)
	relative(t, math.Pow(peak/thermal, 2)/48, want, 0.02, "the small-drive formula")
	relative(t, want, v[0].Float(), 1e-3, "third harmonic")
}

// Abramowitz & Stegun 9.6: the mean of exp(x sin) is I_0(x), so a junction under a sine carries I_S (I_0(V/V_T) - 1) in the mean.
func TestMeanCurrentOfAJunctionUnderASine(t *testing.T) {
	const peak = 80e-3
	v := bench(t, `
part j = diode { Is = 1nA }
a -- D1 j -- gnd
input i = (a)
bench b {
  drive i signal = sine(80mVpk, 1kHz)
  run 10ms
  expect volts(a) <= 1V
}
`, "mean(amps(D1))")
	x, term, bessel := peak/thermal, 1.0, 1.0
	for k := 1.0; k < 60; k++ {
		term *= x * x / (4 * k * k)
		bessel += term
	}
	relative(t, 1e-9*(bessel-1), v[0].Float(), 1e-3, "rectified current") // ten times the default accuracy: the mean is a fifth of the peak
}

// Zverev, Handbook of Filter Synthesis, 1967: Butterworth, n = 3, equal terminations: 1, 2, 1; magnitude 1/sqrt(1 + w^6).
func TestButterworthLadder(t *testing.T) {
	v := bench(t, `
let w = 2 * pi * 10kHz
a -- R1 1kohm -- x -- L1 (2 * 1kohm / w) -- y
x -- C1 (1 / (1kohm * w)) -- gnd
y -- C2 (1 / (1kohm * w)) -- gnd
y -- R2 1kohm -- gnd
input i = (a)
output o = (y)
`, "abs(dm_gain at 1kHz)", "abs(dm_gain at 10kHz)", "abs(dm_gain at 30kHz)", "bandwidth", "group_delay at 1Hz")
	for k, ratio := range []float64{0.1, 1, 3} {
		relative(t, 0.5/math.Sqrt(1+math.Pow(ratio, 6)), v[k].Float(), closed, "Butterworth")
	}
	relative(t, 10e3, v[3].Float(), 1e-4, "corner")
	relative(t, 2/(2*math.Pi*10e3), v[4].Float(), 1e-6, "delay at low frequency: the sum of 1/(2 sin) terms is 2/w0")
}

// Closed forms: a resistor ladder that goes on for ever looks like the golden ratio; the cube between opposite corners is 5/6, across
// a face 3/4, along an edge 7/12 of an edge's resistance.
func TestResistorNetworks(t *testing.T) {
	src := "x -- I1 -1A -- gnd\n"
	node := "x"
	for i := range 30 {
		src += fmt.Sprintf("%s -- S%d 1ohm -- n%d -- P%d 1ohm -- gnd\n", node, i, i, i)
		node = fmt.Sprintf("n%d", i)
	}
	relative(t, (1+math.Sqrt(5))/2, bench(t, src, "volts(x)")[0].Float(), closed, "ladder")
	for corner, want := range map[int]float64{7: 5.0 / 6, 3: 3.0 / 4, 1: 7.0 / 12} {
		cube := fmt.Sprintf("n%d -- I1 -1A -- gnd\n", corner)
		name := func(i int) string {
			if i == 0 {
				return "gnd"
			}
			return fmt.Sprintf("n%d", i)
		}
		for i := range 8 {
			for bit := 1; bit < 8; bit *= 2 {
				if i&bit == 0 {
					cube += fmt.Sprintf("%s -- R%d_%d 1ohm -- %s\n", name(i), i, bit, name(i|bit))
				}
			}
		}
		relative(t, want, bench(t, cube, fmt.Sprintf("volts(n%d)", corner))[0].Float(), closed, "cube")
	}
}

// Closed form: a series RLC circuit switched on cold.
func TestStepOfAnRLC(t *testing.T) {
	v := bench(t, `
rail vp = 1V
vp -- R1 20ohm -- x -- L1 10mH -- y -- C1 1uF -- gnd
bench b {
  run 2ms cold
  expect volts(y) >= -1V
}
`, "volts(y)")
	a, w0 := 20/(2*10e-3), 1/math.Sqrt(10e-3*1e-6)
	w := math.Sqrt(w0*w0 - a*a)
	for _, at := range []float64{37e-6, 211e-6, 700e-6, 1.93e-3} {
		got, err := v[0].Wave.At(at)
		require.NoError(t, err)
		want := 1 - math.Exp(-a*at)*(math.Cos(w*at)+a/w*math.Sin(w*at))
		assert.InDelta(t, want, got, 2e-4, "default accuracy 1e-4 of a swing of nearly 2 V")
	}
}

// IEC 60601-2-25: the common-mode test network (values from memory): 10 V behind 100 pF at the joined leads, 51 kohm beside
// 47 nF in one lead. Against the hand formula for an amplifier of 10 Mohm to earth at each lead.
func TestElectrocardiographNetwork(t *testing.T) {
	v := bench(t, `
src -- Cmains 100pF -- joined
joined -- Cearth 100pF -- gnd
joined -- Rskin 51kohm -- p
joined -- Cskin 47nF -- p
p -- Rp 10Mohm -- gnd
joined -- Rn 10Mohm -- gnd
input mains = (src)
output lead = (p, joined)
`, "dm_gain at 50Hz")
	s := complex(0, 2*math.Pi*50)
	skin := 1 / (1/51e3 + s*47e-9)
	joined := s * 100e-12 / (s*200e-12 + 1/10e6 + 1/(10e6+skin))
	want := joined * (10e6/(10e6+skin) - 1)
	assert.InDelta(t, real(want), real(v[0].Number), 1e-12)
	assert.InDelta(t, imag(want), imag(v[0].Number), 1e-12)
}

// IEC 61000-4-5 and -4-4 describe pulses by their front and their width at half the peak.
func TestShapesOfDisturbances(t *testing.T) {
	for _, c := range []struct {
		front, tail string
		f, w        float64
	}{{"0.96us", "50us", 0.96e-6, 50e-6}, {"5ns", "50ns", 5e-9, 50e-9}} {
		v := bench(t, fmt.Sprintf(`
a -- R1 50ohm -- gnd
input i = (a)
bench b {
  drive i signal = surge(2V, front: %s, tail: %s, at: 1us)
  run 150us
  expect volts(a) <= 3V
}
`, c.front, c.tail), "peak(volts(a))", "crosses(volts(a), 0.2V, 1)", "crosses(volts(a), 1.8V, 1)", "crosses(volts(a), 1V, 1)", "crosses(volts(a), 1V, 2)")
		relative(t, 2, v[0].Float(), 2e-4, "peak")
		relative(t, c.f, v[2].Float()-v[1].Float(), 2e-3, "front")
		relative(t, c.w, v[4].Float()-v[3].Float(), 1e-3, "width")
	}
}

// Tellegen, A general network theorem, Philips Res. Rep. 7, 1952: the powers of all parts sum to zero.
func TestPowersSumToZero(t *testing.T) {
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte("design d\n" + `
part p = npn { Is = 8fA, betaF = 300, earlyF = 100V, rB = 30ohm }
part j = diode { Is = 1fA }
rail vp = 12V
vp -- R1 47kohm -- b -- R2 10kohm -- gnd
Q1 = p(b: b, c: c, e: e)
vp -- R3 4.7kohm -- c
e -- R4 1kohm -- k -- D1 j -- gnd
`)}}, "x.poise")
	require.NoError(t, err)
	c, err := d.Circuit()
	require.NoError(t, err)
	b, err := analyses.Bias(context.Background(), c)
	require.NoError(t, err)
	setup, err := d.Setup()
	require.NoError(t, err)
	v, err := analyses.Measure(context.Background(), setup, "watts(R1) + watts(R2) + watts(R3) + watts(R4) + watts(D1) + watts(Q1)")
	require.NoError(t, err)
	relative(t, b.Power, v[0].Float(), closed, "power")
}

// A base-emitter junction drops 0.6 to 0.7 V and moves about -2 mV/K (common practice, no source).
func TestJunctionVoltageAndItsDrift(t *testing.T) {
	at := func(celsius int) float64 {
		return bench(t, fmt.Sprintf(`
set temperature = %ddegC
part p = npn { Is = 8fA, betaF = 300 }
gnd -- I1 100uA -- x
Q1 = p(b: x, c: x, e: gnd)
`, celsius), "volts(x)")[0].Float()
	}
	assert.InDelta(t, 0.62, at(27), 0.05)
	assert.InDelta(t, -2e-3, (at(37)-at(17))/20, 0.3e-3)
}

// TestLateTrainOfPulses runs a train that begins later than the run: closed form, an RC that charges and discharges completely.
func TestLateTrainOfPulses(t *testing.T) {
	v := bench(t, `
a -- R1 1kohm -- x -- C1 1nF -- gnd
input i = (a)
bench b {
  drive i signal = pulse(-60mV, 60mV, at: 100us, width: 500us, edge: 1us, every: 1ms)
  run 3ms
  expect volts(x) <= 1V
}
`, "value(volts(x), at: 90us)", "value(volts(x), at: 590us)", "value(volts(x), at: 2.09ms)", "crosses(volts(x), 0V, 5)")
	// 1e-4 of a swing of 120 mV is the accuracy asked for.
	const allowed = 12e-6
	assert.InDelta(t, -60e-3, v[0].Float(), allowed)
	assert.InDelta(t, 60e-3, v[1].Float(), allowed)
	assert.InDelta(t, -60e-3, v[2].Float(), allowed)
	// The ramp lasts T = 1 us/0.8; behind one pole the output stands at V1 at its end and goes on as an exponential of 1 us to 60 mV.
	const tau, ramp = 1e-6, 1.25e-6
	slope := 120e-3 / ramp
	v1 := -60e-3 + slope*(ramp-tau*(1-math.Exp(-ramp/tau)))
	want := 2.1e-3 + ramp + tau*math.Log((60e-3-v1)/60e-3)
	assert.InDelta(t, want, v[3].Float(), allowed/(60e-3/tau), "the error of the level over the slope there")
}
