package analyses_test

import (
	"fmt"
	"math"
	"math/cmplx"
	"testing"

	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"
)

// half is one half of a pair: its source resistance, stray, load and transistor.
type half struct{ source, stray, load, emitter, is, beta float64 }

// drawHalf draws a half near the usual.
func drawHalf(t *rapid.T, name string) half {
	near := func(middle float64) float64 {
		return middle * rapid.Float64Range(0.9, 1.1).Draw(t, name)
	}
	return half{near(1e3), near(100e-12), near(22e3), near(220), near(5e-15), near(200)}
}

// pairOf writes a pair of two halves, on a resistive tail. Inputs and outputs are named by their leads: a, c1 and b, c2.
func pairOf(first, second half, input, output string) string {
	src := "rail vp = 9V\nrail vn = -9V\nt -- Rt 33kohm -- vn\nt -- Ct 5pF -- gnd\n"
	for k, h := range []half{first, second} {
		lead := string("ab"[k])
		k++
		src += fmt.Sprintf(`
part p%[1]d = npn { Is = %[2]gA, betaF = %[3]g, earlyF = 60V, rB = 50ohm, capE = 8pF, capC = 3pF, tauF = 300ps }
%[4]s -- Rs%[1]d %[5]gohm -- b%[1]d -- Cs%[1]d %[6]gF -- gnd
Q%[1]d = p%[1]d(b: b%[1]d, c: c%[1]d, e: e%[1]d)
e%[1]d -- Re%[1]d %[7]gohm -- t
vp -- Rc%[1]d %[8]gohm -- c%[1]d
`, k, h.is, h.beta, lead, h.source, h.stray, h.emitter, h.load)
	}
	return src + fmt.Sprintf("input i = %s\noutput o = %s\n", input, output)
}

// metricsAt are the complex metrics of a pair with one output node.
func metricsAt(f float64) []string {
	var out []string
	for _, m := range []string{"dm_gain", "cm_gain", "cmrr", "dm_impedance", "cm_impedance", "out_impedance", "psrr(vp)", "gain(vn, volts(o1))"} {
		out = append(out, fmt.Sprintf("%s at %.17gHz", m, f))
	}
	out = out[:7]
	return append(out, "bias_current", "volts(c1)", "volts(c2)", "amps(vp)")
}

// The two leads of a symmetric pair, exchanged, change the sign of dm_gain and nothing else.
func TestExchangedLeads(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		h, f := drawHalf(t, "half"), frequency(t)
		straight := bench(t, pairOf(h, h, "(a, b)", "(c2)"), metricsAt(f)...)
		crossed := bench(t, pairOf(h, h, "(b, a)", "(c2)"), metricsAt(f)...)
		for k := range straight {
			want := straight[k].Number
			if k == 0 {
				want = -want
			}
			phasor(t, want, crossed[k].Number, closed, "%s", straight[k].Text)
		}
	})
}

// A pair of unlike halves, seen in a mirror (the halves exchanged, the leads staying): gain and rejections as before, everything that turns common mode into difference reversed.
func TestMirroredPair(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g, h, f := drawHalf(t, "first"), drawHalf(t, "second"), frequency(t)
		ask := []string{"cm_to_dm", "dm_to_cm", "dm_gain", "cmrr", "dm_impedance", "cm_impedance", "out_impedance"}
		for k := range ask {
			ask[k] = fmt.Sprintf("%s at %.17gHz", ask[k], f)
		}
		ask = append(ask, "offset", "offset_current", "bias_current", "amps(vn)")
		reversed := map[int]bool{0: true, 1: true, 7: true, 8: true}
		straight := bench(t, pairOf(g, h, "(a, b)", "(c1, c2)"), ask...)
		mirrored := bench(t, pairOf(h, g, "(a, b)", "(c1, c2)"), ask...)
		for k := range ask {
			want := straight[k].Number
			if reversed[k] {
				want = -want
			}
			scale := cmplx.Abs(want)
			if k < 2 || k >= 7 { // differences of the halves: some digits less
				scale = math.Max(scale, []float64{2, 2, 7: 1, 1e-6, 1e-6, 1e-3}[k])
			}
			absolute(t, 0, cmplx.Abs(mirrored[k].Number-want)/scale, 2*closed, "%s", ask[k])
		}
	})
}

// The response at a frequency near zero is the derivative of the bias, by Richardson's extrapolation of differences (Richardson & Gaunt, 1927).
func TestResponseIsTheDerivativeOfTheBias(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		src := pairOf(drawHalf(t, "first"), drawHalf(t, "second"), "(a, b)", "(c1, c2)")
		for _, mode := range []string{"differential", "common"} {
			at := func(volts float64) float64 {
				return scalars(t, src+fmt.Sprintf("bench b {\n  drive i %s = %.17gV\n  expect volts(c1) <= 1kV\n}\n", mode, volts), "volts(c1, c2)")[0]
			}
			difference := func(h float64) float64 { return (at(h) - at(-h)) / (2 * h) }
			const h = 8e-3 // V
			d1, d2, d3 := difference(h), difference(h/2), difference(h/4)
			e1, e2 := (4*d2-d1)/3, (4*d3-d2)/3
			want := (16*e2 - e1) / 15
			metric := map[string]string{"differential": "dm_gain", "common": "cm_gain"}[mode]
			got := bench(t, src, metric+" at 1mHz")[0].Number
			// Rounding of 1e-13 V over steps of 2 mV; the capacitances' part is in quadrature, 1e-9.
			absolute(t, want, real(got), 2e-9+2e-7*math.Abs(want), "derivative, %s", mode)
		}
	})
}

// A small signal in a run is what the response says, in magnitude and phase, while it rides on volts of bias.
func TestSmallSignalInARun(t *testing.T) {
	g, h := half{1e3, 100e-12, 22e3, 220, 5e-15, 200}, half{1.05e3, 90e-12, 22e3, 220, 5.2e-15, 190}
	src := pairOf(g, h, "(a, b)", "(c2)")
	for _, c := range []struct {
		mode, metric string
		f            float64
	}{{"differential", "dm_gain", 20e3}, {"differential", "dm_gain", 900e3}, {"common", "cm_gain", 300e3}} {
		want := bench(t, src, fmt.Sprintf("%s at %gHz", c.metric, c.f))[0].Number
		for _, peak := range []float64{1e-3, 1e-5} {
			for _, accuracy := range accuracies[1:] {
				v := scalars(t, src+fmt.Sprintf(`
set accuracy = %g
bench b {
  drive i %s = sine(%gVpk, %gHz)
  run %gs from %gs
  expect volts(c1) <= 1kV
}
`, accuracy, c.mode, peak, c.f, 25/c.f, 10/c.f), fmt.Sprintf("tone(volts(c2), %gHz)", c.f), fmt.Sprintf("tone_phase(volts(c2), %gHz)", c.f))
				got := cmplx.Rect(v[0]/peak, v[1])
				// The third power of the drive, of which half the degenerated part is at a junction, takes off below (1 mV/4 V_T)^2/16.
				phasor(t, want, got, accuracy+1e-5, "%s at %g Hz, %g V, accuracy %g", c.metric, c.f, peak, accuracy)
			}
		}
	}
	require.NotEmpty(t, src)
}
