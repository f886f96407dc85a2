package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"
)

// accuracies at which transients are compared with closed forms.
var accuracies = []float64{1e-3, 1e-4, 1e-5, 1e-6}

// transient runs a text at each accuracy and compares quantities with closed forms.
func transient(t *testing.T, name, src string, want map[string]func(t float64) float64) {
	t.Helper()
	transientWithin(t, 1, name, src, want)
}

// transientWithin allows errors of some accuracies.
func transientWithin(t *testing.T, accuraciesOff float64, name, src string, want map[string]func(t float64) float64) {
	t.Helper()
	for _, accuracy := range accuracies {
		setting := fmt.Sprintf("set accuracy = %g\n", accuracy)
		for quantity, f := range want {
			v := bench(t, setting+src, quantity)
			follows(t, v[0].Wave, f, accuraciesOff*accuracy, "%s, %s at accuracy %g", name, quantity, accuracy)
		}
	}
}

// Closed form: an RC circuit that charges from a state, V + (V_0 - V) exp(-t/RC), and the current it takes.
func TestChargeOfAnRC(t *testing.T) {
	const tau = 2.2e3 * 470e-9
	transient(t, "RC", `
rail vp = 5V
vp -- R1 2.2kohm -- x -- C1 470nF start -1.5V -- gnd
bench b {
  run 6ms cold
  expect volts(x) <= 5V
}
`, map[string]func(float64) float64{
		"volts(x)":            func(t float64) float64 { return 5 - 6.5*math.Exp(-t/tau) },
		"amps(R1) * 2.2kohm":  func(t float64) float64 { return 6.5 * math.Exp(-t/tau) },
		"amps(C1) * 2.2kohm":  func(t float64) float64 { return 6.5 * math.Exp(-t/tau) },
		"watts(R1) / 6.5A":    func(t float64) float64 { return 6.5 / 2.2e3 * math.Exp(-2*t/tau) },
		"volts(vp, x) + 1.5V": func(t float64) float64 { return 1.5 + 6.5*math.Exp(-t/tau) },
	})
}

// Closed form: a relay's coil whose current decays through a resistor while its supply stays on.
func TestDecayOfAnRL(t *testing.T) {
	const tau = 30e-3 / (12.0 + 47)
	transient(t, "RL", `
rail vp = 3V
vp -- R1 12ohm -- _ -- L1 30mH start 0.4A -- x -- R2 47ohm -- gnd
bench b {
  run 4ms cold
  expect volts(x) <= 50V
}
`, map[string]func(float64) float64{
		"volts(x)":         func(t float64) float64 { return 47 * (3.0/59 + (0.4-3.0/59)*math.Exp(-t/tau)) },
		"amps(L1) * 47ohm": func(t float64) float64 { return 47 * (3.0/59 + (0.4-3.0/59)*math.Exp(-t/tau)) },
	})
}

// series returns the voltage on the capacitor of a series RLC circuit on a supply, and its current, from a state: the roots of s^2 + (R/L) s + 1/LC by the
// quadratic formula, double where they coincide (Desoer & Kuh, Basic Circuit Theory, 1969, chapter 5).
func series(r, l, c, supply, v0, i0 float64) (volts, amps func(t float64) float64) {
	a := r / (2 * l)
	root := cmplx.Sqrt(complex(a*a-1/(l*c), 0))
	u0, du0 := complex(v0-supply, 0), complex(i0/c, 0)
	s := complex(-a, 0)
	if cmplx.Abs(root) < 1e-9*a {
		slope := du0 - s*u0
		return func(t float64) float64 { return supply + real((u0+slope*complex(t, 0))*cmplx.Exp(s*complex(t, 0))) },
			func(t float64) float64 {
				return c * real((du0+s*slope*complex(t, 0))*cmplx.Exp(s*complex(t, 0)))
			}
	}
	s1, s2 := s+root, s-root
	k1 := (du0 - s2*u0) / (s1 - s2)
	k2 := u0 - k1
	return func(t float64) float64 {
			return supply + real(k1*cmplx.Exp(s1*complex(t, 0))+k2*cmplx.Exp(s2*complex(t, 0)))
		}, func(t float64) float64 {
			return c * real(k1*s1*cmplx.Exp(s1*complex(t, 0))+k2*s2*cmplx.Exp(s2*complex(t, 0)))
		}
}

// Closed forms of a series RLC circuit: ringing for long, underdamped, critically damped, overdamped with 10^4 between its time constants.
func TestSeriesRLC(t *testing.T) {
	const l, c, supply, v0, i0 = 10e-3, 1e-6, 1.0, -0.7, 2e-3
	for _, r := range []float64{4, 60, 200, 500, 10e3} {
		volts, amps := series(r, l, c, supply, v0, i0)
		run := 2e-3
		if r > 1e3 {
			run = 30e-3
		}
		transientWithin(t, 1, fmt.Sprintf("R = %g", r), fmt.Sprintf(`
rail vp = 1V
vp -- R1 %gohm -- x -- L1 10mH start 2mA -- y -- C1 1uF start -0.7V -- gnd
bench b {
  run %gs cold
  expect volts(y) >= -9V
}
`, r, run), map[string]func(float64) float64{
			"volts(y)":          volts,
			"amps(L1) * 100ohm": func(t float64) float64 { return 100 * amps(t) },
		})
	}
}

// The words of a step response: an RC rises in ln 9 time constants and settles to a distance v of its step in ln(V/v); an RLC overshoots by
// exp(-pi z/sqrt(1 - z^2)) (closed forms; the words and the states between which they are taken, after IEEE Std 181).
func TestWordsOfAStepResponse(t *testing.T) {
	src := func(run int) string {
		return fmt.Sprintf(`
a -- R1 1kohm -- x -- C1 1uF -- gnd
input i = (a)
bench b {
  drive i signal = step(0V, 2V, at: 3ms)
  run %dms
  expect volts(x) <= 3V
}
`, run)
	}
	v := scalars(t, src(33), "settles(volts(x), within: 30mV)", "crosses(volts(x), 1V, 1)", "slew(volts(x))", "drift(volts(x))", "outside(volts(x), 0.3V..1.9V)")
	rise := scalars(t, src(500), "rise(volts(x))")[0]
	// A time read off a slope dv/dt = v/tau at a level is off by the error of the level over the slope: 2e-4 V over 0.1 V a time constant at worst.
	const tau = 1e-3
	// A state of IEEE 181 is the mean of a cell of a histogram, here of 1 % to either side: the tail of the exponential in it pulls it down by 1 % of
	// tau/0.5 s, which the slope at 90 % makes ten times that in tau.
	absolute(t, math.Log(9)*tau, rise, 2*usual*2/0.2*tau+10*0.01*tau*tau/0.5, "rise of an RC")
	absolute(t, 3e-3+math.Log(2/0.03)*tau, v[0], 2*usual*2/0.03*tau, "settling of an RC")
	absolute(t, 3e-3+math.Ln2*tau, v[1], usual*2/1*tau, "half time of an RC")
	relative(t, 2/tau, v[2], 0.01, "slew of an RC: a derivative is an order less accurate")
	absolute(t, 2-2*(0.3-(1-math.Exp(-0.3)))/3.3, v[3], 4*usual, "drift: mean of the last 3.3 ms less that of the first")
	absolute(t, 3e-3+math.Log(2/1.7)*tau+30e-3-math.Log(20)*tau, v[4], usual*2*tau*(1/1.7+1/0.1), "time outside")

	const l, c, r = 10e-3, 1e-6, 60.0
	z := r / 2 * math.Sqrt(c/l)
	w := scalars(t, `
a -- R1 60ohm -- _ -- L1 10mH -- y -- C1 1uF -- gnd
input i = (a)
bench b {
  drive i signal = step(-1V, 2V, at: 0.5ms, edge: 1ns)
  run 6ms
  expect volts(y) <= 9V
}
`, "overshoot(volts(y))", "peak(volts(y))", "trough(volts(y))")
	over := math.Exp(-math.Pi * z / math.Sqrt(1-z*z))
	absolute(t, over, w[0], 3*usual, "overshoot, as a share of the step")
	absolute(t, 2+3*over, w[1], 3*usual, "crest")
	absolute(t, -1, w[2], 3*usual, "where it began")
}

// Closed form: an RC behind a sine that begins at a moment, and behind a ramp.
func TestRCBehindWaveforms(t *testing.T) {
	const tau, w, at = 100e-6, 2 * math.Pi * 3e3, 0.13e-3
	transient(t, "sine", `
a -- R1 1kohm -- x -- C1 100nF -- gnd
input i = (a)
bench b {
  drive i signal = sine(2Vpk, 3kHz, delay: 0.13ms)
  run 2ms
  expect volts(x) <= 5V
}
`, map[string]func(float64) float64{"volts(x)": func(t float64) float64 {
		if t -= at; t < 0 {
			return 0
		}
		return 2 / (1 + w*w*tau*tau) * (math.Sin(w*t) - w*tau*math.Cos(w*t) + w*tau*math.Exp(-t/tau))
	}})
	ramp := func(t float64) float64 { // of 1 V/s from 0, behind the RC
		if t < 0 {
			return 0
		}
		return t - tau*(1-math.Exp(-t/tau))
	}
	transient(t, "ramp", `
a -- R1 1kohm -- x -- C1 100nF -- gnd
input i = (a)
bench b {
  drive i signal = ramp(1V, -2V, at: 0.2ms, over: 0.5ms)
  run 2ms
  expect volts(x) <= 5V
}
`, map[string]func(float64) float64{"volts(x)": func(t float64) float64 {
		return 1 - 3/0.5e-3*(ramp(t-0.2e-3)-ramp(t-0.7e-3))
	}})
}

// Carslaw & Jaeger, Conduction of Heat in Solids, 2nd edition, 1959, section 3.3, for the voltage of an open RC line behind a step (from memory):
// 1 - (4/pi) sum (-1)^k/(2k+1) exp(-((2k+1) pi/2)^2 t/RC).
func TestStepOnALine(t *testing.T) {
	const sections, rc = 60, 10e3 * 10e-9
	// A line of n sections has its slowest time constants off by pi^2/48n^2: 6e-5 here; the waveform moves by less than that, of 1 V.
	const sectioned = math.Pi * math.Pi / (48 * sections * sections)
	src := "a"
	for k := range sections {
		src += fmt.Sprintf(" -- R%da %.17gohm -- m%d -- C%d %.17gF -- gnd\n", k, 10e3/(2*sections), k, k, 10e-9/sections)
		src += fmt.Sprintf("m%d -- R%db %.17gohm -- n%d\nn%d", k, k, 10e3/(2*sections), k, k)
	}
	src = src[:len(src)-len(fmt.Sprintf("n%d", sections-1))] + fmt.Sprintf(`output o = (n%d)
rail a = 1V
bench b {
  run 0.3ms cold
  expect volts(a) <= 2V
}
`, sections-1)
	v := bench(t, src, fmt.Sprintf("volts(n%d)", sections-1))
	follows(t, v[0].Wave, func(t float64) float64 {
		sum := 1.0
		for k := 400; k >= 0; k-- {
			odd := float64(2*k + 1)
			sum -= 4 / math.Pi * math.Pow(-1, float64(k)) / odd * math.Exp(-odd*odd*math.Pi*math.Pi/4*math.Max(t, 1e-9)/rc)
		}
		return sum
	}, usual+sectioned, "RC line")
}
