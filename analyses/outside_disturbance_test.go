package analyses_test

import (
	"fmt"
	"math"
	"testing"

	"poise/analyses"
)

// onResistor drives a resistor by a waveform and measures it. The node is held, so what is measured is the waveform.
func onResistor(t *testing.T, wave, run string, quantities ...string) []analyses.Value {
	return bench(t, fmt.Sprintf(`
a -- R1 50ohm -- gnd
input i = (a)
bench b {
  drive i signal = %s
  run %s
  expect volts(a) within -9kV..9kV
}
`, wave, run), quantities...)
}

// floats returns the numbers of scalars.
func floats(v []analyses.Value) (out []float64) {
	for _, x := range v {
		out = append(out, real(x.Number))
	}
	return out
}

// root returns where f changes its sign between a and b.
func root(f func(float64) float64, a, b float64) float64 {
	for range 60 { // to the last bit of the range
		if m := (a + b) / 2; (f(m) < 0) == (f(a) < 0) {
			a = m
		} else {
			b = m
		}
	}
	return (a + b) / 2
}

// doubleExponential is peak k (exp(-t/slow) - exp(-t/fast)).
type doubleExponential struct{ k, slow, fast float64 }

func (d doubleExponential) at(t float64) float64 {
	if t <= 0 {
		return 0
	}
	return d.k * (math.Exp(-t/d.slow) - math.Exp(-t/d.fast))
}

func (d doubleExponential) crest() float64 {
	return math.Log(d.slow/d.fast) / (1/d.fast - 1/d.slow)
}

// newDoubleExponential finds that of unit peak with a 10-90 % front and a width at half its peak, by nested bisection.
func newDoubleExponential(front, tail float64) doubleExponential {
	build := func(slow, fast float64) doubleExponential {
		d := doubleExponential{1, slow, fast}
		d.k = 1 / d.at(d.crest())
		return d
	}
	fit := func(slow float64) doubleExponential {
		fast := root(func(fast float64) float64 {
			d := build(slow, fast)
			rise := func(level float64) float64 {
				return root(func(t float64) float64 { return d.at(t) - level }, 0, d.crest())
			}
			return rise(0.9) - rise(0.1) - front
		}, front/1e3, slow*0.9999)
		return build(slow, fast)
	}
	slow := root(func(slow float64) float64 {
		d := fit(slow)
		half := func(t float64) float64 { return d.at(t) - 0.5 }
		return root(half, d.crest(), 50*slow) - root(half, 0, d.crest()) - tail
	}, tail/5, tail*3)
	return fit(slow)
}

// The helper meets the constants that an independent solution of the burst uses (testdata/reference/pair.poise).
func TestDoubleExponential(t *testing.T) {
	d := newDoubleExponential(5e-9, 50e-9)
	const digits = 1e-9 // ten are stated
	relative(t, 1.26977455856, d.k, digits, "factor")
	relative(t, 55.6097010238e-9, d.slow, digits, "slow")
	relative(t, 3.29097434884e-9, d.fast, digits, "fast")
}

// Marks on a pulse of unit slope are read to its error: the accuracy of 1e-4 of the peak, over the slope there.
const markDigits = 2e-3

// IEC 61000-4-5, 2nd edition, table 2: the 1.2/50 us surge is, after IEC 60469-1, of 1 us between 10 and 90 % and 50 us at half the peak, 30 and 20 % of
// tolerance; after IEC 60060-1 its front is 1.67 times that between 30 and 90 %. IEC 61000-4-4, clause 6: the pulse of a burst rises in 5 ns and is 50 ns wide (values from memory).
func TestSurgeAndPulse(t *testing.T) {
	for _, c := range []struct {
		name        string
		front, tail float64
		run         string
	}{{"1.2/50 us", 1e-6, 50e-6, "150us"}, {"5/50 ns", 5e-9, 50e-9, "300ns"}, {"a short one", 1e-6, 4.6e-6, "20us"}} {
		const peak = 2e3
		at := c.front
		w := onResistor(t, fmt.Sprintf("surge(2kV, front: %gs, tail: %gs, at: %gs)", c.front, c.tail, at), c.run,
			"peak(volts(a))", "crosses(volts(a), 0.2kV, 1)", "crosses(volts(a), 1.8kV, 1)", "crosses(volts(a), 1kV, 1)", "crosses(volts(a), 1kV, 2)",
			"crosses(volts(a), 0.6kV, 1)", "volts(a)", "peak(watts(R1))")
		v := floats(w)
		relative(t, peak, v[0], usual, "%s: peak", c.name)
		relative(t, c.front, v[2]-v[1], markDigits, "%s: front", c.name)
		relative(t, c.tail, v[4]-v[3], markDigits, "%s: width", c.name)
		relative(t, peak*peak/50, v[7], 2*usual, "%s: peak power", c.name)
		if c.name == "1.2/50 us" {
			relative(t, 1.2e-6, 1.67*(v[2]-v[5]), 0.3, "front as IEC 60060-1 has it, within its tolerance")
		}
		d := newDoubleExponential(c.front, c.tail)
		follows(t, w[6].Wave, func(t float64) float64 { return peak * d.at(t-at) }, usual, "%s: double exponential", c.name)
	}
}

// IEC 61000-4-4, clause 6 (values from memory): bursts of 15 ms every 300 ms, 75 pulses each at 5 kHz.
func TestBursts(t *testing.T) {
	v := floats(onResistor(t, "bursts(500V, front: 5ns, tail: 50ns, rate: 5kHz, length: 15ms, every: 300ms)", "302ms",
		"crosses(volts(a), 250V, 1)", "crosses(volts(a), 250V, 2)", "crosses(volts(a), 250V, 3)", "crosses(volts(a), 250V, 149)",
		"crosses(volts(a), 250V, 150)", "crosses(volts(a), 250V, 151)", "crosses(volts(a), 250V, 159)", "peak(volts(a))", "trough(volts(a))"))
	const allowed = markDigits * 50e-9
	absolute(t, 50e-9, v[1]-v[0], allowed, "width")
	absolute(t, 200e-6, v[2]-v[0], allowed, "rate")
	absolute(t, 74*200e-6, v[3]-v[0], allowed, "the 75th pulse")
	absolute(t, 50e-9, v[4]-v[3], allowed, "its width")
	absolute(t, 300e-3, v[5]-v[0], allowed, "the second burst")
	absolute(t, 300e-3+4*200e-6, v[6]-v[0], allowed, "its fifth pulse")
	relative(t, 500, v[7], usual, "peak")
	absolute(t, 0, v[8], 500*usual, "no undershoot")
}

// IEC 61000-4-12 (values from memory): the ring wave rings at 100 kHz, and each of its next peaks is 40 to 80 % (the second up to 110 %) of the one before. With 60 % the decay
// is (T/2)/ln(1/0.6).
func TestRingWave(t *testing.T) {
	const f, amplitude = 100e3, 1500.0
	decay := 1 / (2 * f) / math.Log(1/0.6)
	w := onResistor(t, fmt.Sprintf("ringing(1.5kV, 100kHz, decay: %.12gs, at: 3us)", decay), "60us", "volts(a)", "peak(volts(a))", "trough(volts(a))",
		"crosses(volts(a), 0V, 2)", "crosses(volts(a), 0V, 5)")
	v := floats(w)
	omega := 2 * math.Pi * f
	wave := func(t float64) float64 {
		if t -= 3e-6; t < 0 {
			return 0
		}
		return amplitude * math.Exp(-t/decay) * math.Sin(omega*t)
	}
	follows(t, w[0].Wave, wave, usual, "ring wave")
	crest := 3e-6 + math.Atan(omega*decay)/omega
	relative(t, wave(crest), v[1], 2*usual, "first peak")
	relative(t, -0.6*wave(crest), v[2], 2*usual/0.6, "second peak")
	// The error of 1e-4 of the first peak over the slope at a zero, omega times the envelope.
	absolute(t, 1.5/f, v[4]-v[3], 4*usual/(0.3*omega), "three half periods")
}

// IEC 61000-4-6, figure 4 (values from memory): a carrier of 1 V r.m.s., 2.8 V peak to peak, is 5.1 V peak to peak when an 80 % tone of 1 kHz modulates it. Its
// spectrum is the carrier and two sidebands of 40 % (closed form).
func TestModulatedCarrier(t *testing.T) {
	v := floats(onResistor(t, "modulated(1Vrms, 150kHz, tone: 1kHz, depth: 80%)", "2ms", "pp(volts(a))", "peak(volts(a))", "tone(volts(a), 150kHz)",
		"tone(volts(a), 149kHz)", "tone(volts(a), 151kHz)", "rms(volts(a))", "mean(volts(a))", "tone(volts(a), 1kHz)"))
	plain := floats(onResistor(t, "sine(1Vrms, 150kHz)", "0.2ms", "pp(volts(a))"))
	relative(t, 2.8, plain[0], 0.02, "peak to peak as the figure states it")
	relative(t, 2*math.Sqrt2, plain[0], usual, "peak to peak")
	relative(t, 5.1, v[0], 0.01, "modulated, as the figure states it")
	relative(t, 3.6*math.Sqrt2, v[0], usual, "modulated")
	relative(t, 1.8*math.Sqrt2, v[1], usual, "peak")
	// Each component is part of a waveform good to 1e-4 of its peak.
	const allowed = 1.8 * math.Sqrt2 * usual
	absolute(t, math.Sqrt2, v[2], allowed, "carrier")
	absolute(t, 0.4*math.Sqrt2, v[3], allowed, "lower sideband")
	absolute(t, 0.4*math.Sqrt2, v[4], allowed, "upper sideband")
	absolute(t, math.Sqrt(1+0.8*0.8/2), v[5], allowed, "root mean square")
	absolute(t, 0, v[6], allowed, "mean")
	absolute(t, 0, v[7], allowed, "nothing at the tone itself: a linear circuit detects nothing")
}

// Crest factors and Fourier series of the periodic shapes (closed forms; Bronshtein & Semendyayev, Handbook of Mathematics, tables of Fourier series).
func TestPeriodicShapes(t *testing.T) {
	const f = 1e3
	q := []string{"rms(volts(a))", "pp(volts(a))", "mean(volts(a))", "tone(volts(a), 1kHz)", "tone(volts(a), 3kHz)", "tone(volts(a), 2kHz)"}
	const allowed = 2 * usual
	check := func(what string, v []float64, want ...float64) {
		t.Helper()
		for k := range want {
			absolute(t, want[k], v[k], allowed, "%s: %s", what, q[k])
		}
	}
	check("sine", floats(onResistor(t, "sine(2Vpp, 1kHz, phase: 40deg)", "8ms", q...)), 1/math.Sqrt2, 2, 0, 1, 0, 0)
	check("triangle", floats(onResistor(t, "triangle(2Vpp, 1kHz)", "8ms", q...)), 1/math.Sqrt(3), 2, 0, 8/(math.Pi*math.Pi), 8/(9*math.Pi*math.Pi), 0)
	check("triangle by its r.m.s.", floats(onResistor(t, "triangle(1Vrms, 1kHz)", "8ms", q...)), 1, 2*math.Sqrt(3), 0)
	skewed := func(n float64) float64 {
		return math.Abs(2 * math.Sin(n*math.Pi*0.9) / (n * n * math.Pi * math.Pi * 0.9 * 0.1))
	}
	check("skewed", floats(onResistor(t, "triangle(2Vpp, 1kHz, skew: 90%)", "8ms", q...)), 1/math.Sqrt(3), 2, 0, skewed(1), skewed(3), skewed(2))
	// A straight edge of 1/0.8 us takes off a part of (pi n f tau)^2/6 of harmonic n: 1e-5 for the third.
	check("square", floats(onResistor(t, "square(2Vpp, 1kHz, edge: 1us)", "8ms", q...)), math.Sqrt(1-4*1.25e-6*f/3), 2, 0, 4/math.Pi, 4/(3*math.Pi), 0)
	check("square of 25 %", floats(onResistor(t, "square(2Vpp, 1kHz, duty: 25%, edge: 1us)", "8ms", q...)), math.Sqrt(1-4*1.25e-6*f/3), 2, -0.5,
		4/math.Pi*math.Sin(math.Pi/4), 4/(3*math.Pi)*math.Sin(math.Pi/4), 2/math.Pi)
}

// The phase of a tone and of a chirp: closed forms. A chirp from f1 to f2 over T has swept (f1 + f2) T/2 periods.
func TestPhasesOfShapes(t *testing.T) {
	w := onResistor(t, "chirp(1Vpk, from: 1kHz, to: 5kHz, over: 4ms)", "4ms", "volts(a)")
	follows(t, w[0].Wave, func(t float64) float64 { return math.Sin(2 * math.Pi * (1e3*t + 4e3*t*t/(2*4e-3))) }, usual, "chirp")
	v := floats(onResistor(t, "sine(3Vpk, 1kHz, phase: 40deg) + sine(0.5Vpk, 2.7kHz)", "20.3ms from 3.1ms", "tone_phase(volts(a), 1kHz)", "tone(volts(a), 1kHz)"))
	absolute(t, 40*math.Pi/180, v[0], 2*usual, "phase")
	absolute(t, 3, v[1], 3.5*usual, "a tone beside another")
}
