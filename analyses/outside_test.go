package analyses_test

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/netlist"
)

// The files outside*_test.go check the simulator against sources that nobody of the project wrote: each check names its source beside
// it, and says "value from memory" or "common practice, no source" where that is so. Expected values are computed from the
// published formula alone. What a check measured is logged (go test -v -run ...).

// The constants of the SI (BIPM, The International System of Units, 9th edition, 2019, section 2.2: exact values).
const (
	boltzmann        = 1.380649e-23    // J/K
	elementaryCharge = 1.602176634e-19 // C
)

// thermal is k T/q in V at the temperature of a circuit that sets none, 27 degC.
const thermal = boltzmann * (273.15 + 27) / elementaryCharge

const (
	// closed is the relative difference allowed to a closed form that the circuit meets exactly: Newton's last update is below 1e-9, and what it
	// leaves is the square of that and rounding.
	closed = 1e-9
	// rounded is that for a linear network: rounding alone, of some hundred operations.
	rounded = 1e-12
	// usual is the accuracy of a circuit that sets none: the relative error to expect of a waveform.
	usual = 1e-4
)

// tester is what *testing.T and *rapid.T share.
type tester interface {
	require.TestingT
	Helper()
	Logf(format string, args ...any)
}

// setupOf loads a text and returns its bench b or, if it has none, the circuit as written.
func setupOf(t tester, src string) *netlist.Setup {
	t.Helper()
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte("design d\n" + src)}}, "x.poise")
	require.NoError(t, err, src)
	setup, err := d.Setup()
	if b := d.Bench("b"); b != nil {
		setup, err = b.Setup(nil)
	}
	require.NoError(t, err, src)
	return setup
}

// bench measures quantities in bench b of a text, or in the circuit as written if it has none.
func bench(t tester, src string, quantities ...string) []analyses.Value {
	t.Helper()
	v, err := analyses.Measure(context.Background(), setupOf(t, src), quantities...)
	require.NoError(t, err, src)
	return v
}

// scalars measures real quantities.
func scalars(t tester, src string, quantities ...string) []float64 {
	t.Helper()
	var out []float64
	for _, v := range bench(t, src, quantities...) {
		out = append(out, real(v.Number))
	}
	return out
}

// relative compares with the wanted value in relation to it.
func relative(t tester, want, got, tolerance float64, what string, args ...any) {
	t.Helper()
	absolute(t, want, got, tolerance*math.Abs(want), what, args...)
}

// absolute compares with the wanted value and logs how far off it is.
func absolute(t tester, want, got, tolerance float64, what string, args ...any) {
	t.Helper()
	what = fmt.Sprintf(what, args...)
	d := math.Abs(got - want)
	if !(d <= tolerance) {
		t.Errorf("%s: want %.12g, got %.12g, off by %.2g where %.2g is allowed", what, want, got, d, tolerance)
		return
	}
	t.Logf("%s: %.9g, off by %.1e, allowed %.1e", what, got, d, tolerance)
}

// phasor compares a complex value in relation to the magnitude wanted.
func phasor(t tester, want, got complex128, tolerance float64, what string, args ...any) {
	t.Helper()
	absolute(t, 0, cmplx.Abs(got-want)/cmplx.Abs(want), tolerance, what, args...)
}

// follows compares a waveform with a closed form at times spread unevenly over its window, in relation to the swing of the
// closed form there, largest value less smallest, and returns the largest error found.
func follows(t tester, w *analyses.Waveform, want func(t float64) float64, tolerance float64, what string, args ...any) float64 {
	t.Helper()
	const points = 2111
	from, until := w.Window()
	worst, low, high := 0.0, math.Inf(1), math.Inf(-1)
	for i := range points {
		at := from + (until-from)*math.Pow((float64(i)+0.37)/points, 1.3)
		got, err := w.At(at)
		require.NoError(t, err)
		exact := want(at)
		low, high = min(low, exact), max(high, exact)
		if d := math.Abs(got - exact); !(d <= worst) {
			worst = d
		}
	}
	absolute(t, 0, worst/(high-low), tolerance, what+": largest error over the swing", args...)
	return worst / (high - low)
}

// lambertW returns the w >= 0 with w exp(w) = exp(y), by Halley's iteration on ln w + w = y, which cannot overflow
// (Corless, Gonnet, Hare, Jeffrey & Knuth, On the Lambert W function, Adv. Comput. Math. 5, 1996, section 5, there for w exp(w)).
func lambertW(y float64) float64 {
	w := math.Max(y, math.Exp(math.Min(y, 0)))
	if w < 1e-100 {
		return w // less by w^2
	}
	for range 100 {
		f, slope, bend := math.Log(w)+w-y, 1/w+1, -1/(w*w)
		next := w - 2*f*slope/(2*slope*slope-f*bend)
		if next == w {
			break
		}
		w = next
	}
	return w
}

// The helper meets the values of W printed in many tables: W(1) = 0.567143290409783873, the omega constant, and W(e) = 1.
func TestLambertW(t *testing.T) {
	relative(t, 0.567143290409783873, lambertW(0), 1e-15, "W(1)")
	relative(t, 1, lambertW(1), 1e-15, "W(e)")
	w := lambertW(-3)
	relative(t, math.Exp(-3), w*math.Exp(w), 1e-15, "W(exp(-3))")
}
