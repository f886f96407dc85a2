package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// besselI0 returns I_0(x) by its power series (Abramowitz & Stegun, Handbook of Mathematical Functions, 1964, 9.6.12).
func besselI0(x float64) float64 {
	sum, term := 1.0, 1.0
	for k := 1.0; term > 1e-17*sum; k++ {
		term *= x * x / (4 * k * k)
		sum += term
	}
	return sum
}

// Abramowitz & Stegun, table 9.8: I_0(1) = 1.2660658778, I_0(5) = 27.2398718236 (values from memory).
func TestBesselFunction(t *testing.T) {
	relative(t, 1.2660658778, besselI0(1), 1e-10, "I_0(1)")
	relative(t, 27.2398718236, besselI0(5), 1e-10, "I_0(5)")
}

// Abramowitz & Stegun 9.6.16: the mean of exp(x sin) is I_0(x), so a junction under a sine carries I_S (I_0(V/V_T) - 1) in the mean.
func TestMeanCurrentOfAJunctionUnderASine(t *testing.T) {
	for _, accuracy := range []float64{1e-3, usual, 1e-5} {
		for _, x := range []float64{0.5, 1, 3, 6} {
			v := bench(t, fmt.Sprintf(`
set accuracy = %g
let VT = k_B * temperature / q_e
part j = diode { Is = 1nA }
a -- D1 j -- gnd
input i = (a)
bench b {
  drive i signal = sine(%g * VT, 1kHz)
  run 4ms
  expect volts(a) <= 1V
}
`, accuracy, x), "mean(amps(D1))", "amps(D1)", "volts(a)")
			swing := math.Exp(x) - math.Exp(-x)
			absolute(t, besselI0(x)-1, real(v[0].Number)/1e-9, accuracy*swing, "mean over I_S at V/V_T = %g, accuracy %g", x, accuracy)
			drive := func(t float64) float64 { return x * math.Sin(2*math.Pi*1e3*t) }
			follows(t, v[1].Wave, func(t float64) float64 { return 1e-9 * math.Expm1(drive(t)) }, accuracy,
				"current at V/V_T = %g, accuracy %g", x, accuracy)
			follows(t, v[2].Wave, func(t float64) float64 { return thermal * drive(t) }, accuracy, "voltage driven, accuracy %g", accuracy)
		}
	}
}

// The same law makes a transistor that carries a constant mean current detect a carrier: its emitter, at rest for the carrier, moves by
// V_T ln I_0(V/V_T) (Clarke & Hess, Communication Circuits: Analysis and Design, 1971, chapter 4; from memory). This is how a front end rectifies
// radio frequencies.
func TestRectificationOfACarrier(t *testing.T) {
	const (
		tau           = 2.2e-6 * thermal / 1e-3 // s, of the emitter near its final state
		start, window = 500e-6, 200e-6          // s
		// The emitter's ripple, 4e-3 V_T in quadrature with the drive, counts by its square.
		ripple = 1e-5
	)
	i0 := besselI0(60e-3 / thermal)
	want := thermal * math.Log(i0)
	// C du/dt = I (exp(u/V_T) - 1) has exp(-u/V_T) - 1 decay exponentially.
	want -= thermal * (1 - 1/i0) * math.Exp(-start/tau) * tau / window * (1 - math.Exp(-window/tau))
	for _, accuracy := range []float64{1e-4, 1e-5} {
		v := scalars(t, fmt.Sprintf(`
set accuracy = %g
part p = npn { Is = 1fA, betaF = 1e6 }
rail vp = 5V
Q1 = p(b: a, c: vp, e: e)
e -- I1 1mA -- gnd
e -- C1 2.2uF -- gnd
input i = (a)
bench b {
  drive i signal = sine(60mVpk, 1MHz)
  run 700us from 500us
  expect volts(e) within -1V..0V
}
`, accuracy), "mean(volts(e)) - quiescent(volts(e))")
		// The swing of the emitter over the whole run is what it is shifted by.
		relative(t, want, v[0], accuracy+ripple, "shift of the emitter, accuracy %g", accuracy)
	}
}

// The intrinsic emitter resistance is V_T/I_E: 100 ohm at 0.25 mA at room temperature (common practice, no source), seen from
// the emitter and as an operating quantity.
func TestIntrinsicEmitterResistance(t *testing.T) {
	v := scalars(t, `
part p = npn { Is = 5fA, betaF = 250 }
rail vp = 5V
Q1 = p(b: gnd, c: vp, e: e)
e -- I1 0.25mA -- gnd
output o = (e)
`, "Q1.re", "out_impedance at 1kHz", "volts(e)")
	relative(t, 100, v[0], 0.04, "rule of thumb, which takes 25 mV")
	relative(t, thermal/0.25e-3, v[0], closed, "V_T/I_E")
	relative(t, thermal/0.25e-3, v[1], closed, "seen from outside")
	relative(t, -thermal*math.Log(250.0/251*0.25e-3/5e-15), v[2], closed, "V_BE = V_T ln(I_C/I_S)")
}

// A base-emitter junction drops 0.6 to 0.7 V at small currents and moves about -2 mV/K (common practice, no source); with I_S ~ T^3 exp(-E_g/kT)
// exactly (V_BE - E_g - 3 V_T)/T (Gray, Hurst, Lewis & Meyer, section 4.4, on band-gap references).
func TestJunctionVoltageAndItsDrift(t *testing.T) {
	const gap = 1.11 // V, the default
	at := func(celsius, milliamps float64) float64 {
		return scalars(t, fmt.Sprintf(`
set temperature = %gdegC
part p = npn { Is = 8fA, betaF = 300 }
gnd -- I1 %gmA -- x
Q1 = p(b: x, c: x, e: gnd)
`, celsius, milliamps), "volts(x)")[0]
	}
	for _, milliamps := range []float64{0.1, 0.3, 1} {
		v := at(27, milliamps)
		absolute(t, 0.65, v, 0.05, "0.6 to 0.7 V at %g mA", milliamps)
		drift := (at(27.5, milliamps) - at(26.5, milliamps)) / 1
		absolute(t, -2e-3, drift, 0.3e-3, "about -2 mV/K at %g mA", milliamps)
		// The third derivative, 3 V_T/T^3 K/V, makes 1e-9 V/K of the difference; rounding of 1e-9 V in the bias as much.
		absolute(t, (v-gap-3*thermal)/300.15, drift, 3e-9, "drift at %g mA", milliamps)
	}
}

// A diode in series with a resistor: I = (V_T/R) W((I_S R/V_T) exp((V + I_S R)/V_T)) - I_S (Corless et al., 1996, section 2, from memory; Banwell & Jayakumar,
// Electronics Letters 36, 2000), with its series resistance and emission coefficient.
func TestDiodeBehindAResistor(t *testing.T) {
	const is, em, rs = 2e-12, 1.7, 3.0
	for _, volts := range []float64{-20, -0.01, 0.02, 0.4, 0.9, 12, 400} {
		v := scalars(t, fmt.Sprintf(`
part j = diode { Is = 2pA, em = 1.7, rS = 3ohm }
rail vp = %gV
vp -- R1 470ohm -- a -- D1 j -- gnd
`, volts), "amps(R1)")
		r, vt := 470+rs, em*thermal
		want := vt/r*lambertW(math.Log(is*r/vt)+(volts+is*r)/vt) - is
		// Where the current is small it is the difference of two voltages: some ulp of the supply over R.
		absolute(t, want, v[0], closed*math.Abs(want)+1e-16*math.Abs(volts)/r+1e-18, "amperes at %g V", volts)
	}
}

// Gray, Hurst, Lewis & Meyer, section 1.4.8: the short-circuit current gain falls as f_T/f, with f_T = g_m/(2 pi (C_pi + C_mu)), where C_mu is all the capacitance between
// base and collector, in whichever way the base resistance splits it.
func TestTransitionFrequency(t *testing.T) {
	v := bench(t, `
part p = npn { Is = 1fA, betaF = 1e4, rB = 20ohm, capE = 6pF, gradE = 0.4, capC = 9pF, splitC = 0.35, tauF = 0.2ns }
rail vp = 4V
Q1 = p(b: b, c: vp, e: gnd)
input i = (b) current
bench b {
  drive i signal = 100nA
  expect volts(b) <= 1V
}
`, "Q1.ft", "gain(i.signal, amps(Q1.c)) at 4MHz", "Q1.gm")
	// At 4 MHz the gain, some 70, is far below beta (5e-5 in quadrature) and the feedforward far below gm; base resistance and capacitance
	// make a part of 2 pi f rB C, 6e-3, in quadrature, too.
	absolute(t, 4e6*cmplx.Abs(v[1].Number), real(v[0].Number), 1e-3*real(v[0].Number), "transition frequency")
}
