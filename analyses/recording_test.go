package analyses

import (
	"errors"
	"math"
	"os"
	"slices"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/devices"
	"poise/mna"
	"poise/netlist"
)

var errEnough = errors.New("enough")

// atAStep runs a bench of the reference pair with what is to be measured and kept for a while, then calls f with the recording and the step last taken.
func atAStep(t testing.TB, bench string, kept, measured []string, f func(r *recording, step *mna.Step)) {
	design, err := netlist.Load(os.DirFS("../testdata/reference"), "pair.poise")
	require.NoError(t, err)
	setup, err := design.Bench(bench).Setup(nil)
	require.NoError(t, err)
	e, err := newEvaluation(t.Context(), setup, nil)
	require.NoError(t, err)
	x, err := e.quiescent()
	require.NoError(t, err)
	r := newRecording(e.model, window{0, setup.Run.Until}, setup.Circuit.Accuracy)
	for _, q := range quantities(t, setup, kept...) {
		require.NoError(t, e.keep(r, q))
	}
	for _, q := range quantities(t, setup, measured...) {
		require.NoError(t, e.follow(r, q))
	}
	const steps = 1000
	n := 0
	_, err = e.model.system.Transient(t.Context(), mna.TransientOptions{Until: setup.Run.Until, Start: x}, func(step *mna.Step) error {
		if n++; n < steps {
			return r.add(step)
		}
		f(r, step)
		return errEnough
	})
	require.ErrorIs(t, err, errEnough)
}

func TestALookAtAStepAllocatesNothing(t *testing.T) {
	for _, measured := range []string{
		"volts(out)", "rms(volts(bp) - volts(bn))", "mean(2*abs(volts(sp)))", "tone(amps(Q1.c), 50Hz)", "slew(watts(Q2))", "crosses(volts(sp), 0V, 2000000000)",
		"outside(max(volts(out), volts(sp)), -1V..1V)", "drift(amps(vp)^2)", "value(volts(sp) * dm_gain at 50Hz, at: 3ms)",
	} {
		atAStep(t, "hum", nil, []string{measured}, func(r *recording, step *mna.Step) {
			require.Zero(t, testing.AllocsPerRun(100, func() {
				if err := r.add(step); err != nil {
					panic(err)
				}
			}), measured)
		})
	}
}

// TestStepsAreCutFinelyEnough: with steps of a tenth of a period, what is no cubic is cut until it is one.
func TestStepsAreCutFinelyEnough(t *testing.T) {
	const frequency, amplitude, ohms = 5e3, 1.0, 1e3
	for _, accuracy := range []float64{1e-2, 1e-4} {
		s := filtered(t, 100)
		s.Run.Step, s.Run.Until, s.Circuit.Accuracy = 0.1/frequency, 10/frequency, accuracy
		v, err := Measure(t.Context(), s, "volts(in)", "volts(in, out)", "amps(R1)", "watts(R1)", "volts(out)", "volts(in)*volts(in)*volts(in)*volts(in)/1V*1/1V*1/1V")
		require.NoError(t, err)
		// The error of a cubic, u (u - 1/3) (u - 2/3) (u - 1), is 7 % larger at its peak than where the recording looks, and a little more as
		// the fourth derivative changes within the piece.
		allowed := 1.1 * allowance(accuracy, -amplitude, amplitude)
		looked := 0
		for p := range v[0].Wave.pieces() {
			for k := range 9 {
				at := p.time(float64(k) / 8)
				var values [6]float64
				for i := range v {
					values[i], err = v[i].Wave.At(at)
					require.NoError(t, err)
				}
				in := amplitude * math.Sin(2*math.Pi*frequency*at)
				near(t, in, values[0], allowed, at)
				near(t, values[1]/ohms, values[2], allowed/ohms, at)
				near(t, values[1]*values[1]/ohms, values[3], 2*allowed/ohms, at)
				near(t, values[0]-values[1], values[4], 2*allowed, at)
				near(t, math.Pow(in, 4), values[5], allowed/2, at)
				looked++
			}
		}
		require.Less(t, looked, 9*50*64)
	}
}

// jump is a signal that has two values.
type jump struct{ from, to, at float64 }

func (j jump) At(t float64) float64 {
	if t < j.at {
		return j.from
	}
	return j.to
}

func (j jump) Corner(t float64) float64 {
	if t < j.at {
		return j.at
	}
	return math.Inf(1)
}

func (j jump) Scale(float64) float64 { return math.Inf(1) }

// TestADeviceIsReadBeforeItsJump: the step that ends at a jump sees nothing of it, in the current of the device that jumps either.
func TestADeviceIsReadBeforeItsJump(t *testing.T) {
	s := filtered(t, 100)
	i := slices.IndexFunc(s.Circuit.Elements, func(e netlist.Element) bool { return e.Name == "C1" })
	s.Circuit.Elements[i].Device = devices.NewCurrentSource(jump{1e-3, -2e-3, 37e-6})
	v, err := Measure(t.Context(), s, "amps(C1)", "peak(amps(C1))", "trough(amps(C1))", "crosses(amps(C1), 0A, 1)", "slew(amps(C1))")
	require.NoError(t, err)
	require.Equal(t, []float64{1e-3, -2e-3, 37e-6, 0}, []float64{v[1].Float(), v[2].Float(), v[3].Float(), v[4].Float()})
	for p := range v[0].Wave.pieces() {
		want := 1e-3
		if p.t0 >= 37e-6 {
			want = -2e-3
		}
		require.Equal(t, samples{want, want, want, want}, p.y)
	}
}

// TestHalvingEnds: of a quantity that no cubic fits anywhere, a step is cut into 64 pieces at most.
func TestHalvingEnds(t *testing.T) {
	atAStep(t, "hum", []string{"amps(Q1.c)"}, nil, func(r *recording, step *mna.Step) {
		r.accuracy = 0
		before := len(r.knots)
		require.NoError(t, r.add(step))
		require.Equal(t, mostHalvings+1, len(r.knots)-before)
		require.True(t, slices.IsSorted(r.knots[before-1:]))
		require.Equal(t, step.T1, r.knots[len(r.knots)-1])
	})
}

// TestRoundingIsNotCut: the difference of two equal voltages, or the current of a capacitor at rest, is rounding, which no cubic fits; neither does
// one fit what is not a number.
func TestRoundingIsNotCut(t *testing.T) {
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(`design balanced "Two dividers of one ratio"
input source = (in)
output load = (a, b)
in -- R1 1kohm -- a -- R2 2kohm -- gnd
in -- R3 3kohm -- b -- R4 6kohm -- gnd
a -- C1 3nF -- gnd
b -- C2 1nF -- gnd
in -- R5 7kohm -- c -- C3 10uF -- gnd
bench sine {
  drive source signal = sine(1V, 5kHz) + 2V
  run 1ms
}
bench still {
  drive source signal = 2V
  run 1ms
}
`)}}, "x.poise")
	require.NoError(t, err)
	for _, c := range []struct{ bench, rounding, smooth string }{{"sine", "volts(a, b)", "volts(a)"}, {"still", "amps(C3)", "volts(c)"}, {"still", "watts(C3)", "volts(c)"},
		{"sine", "2*abs(volts(a) - volts(b))", "volts(a)"}, {"sine", "sqrt(volts(a)/1V - 9)", "volts(a)"}} {
		s, err := d.Bench(c.bench).Setup(nil)
		require.NoError(t, err)
		pieces := func(text string) int {
			v, err := Measure(t.Context(), s, text)
			require.NoError(t, err)
			return v[0].Wave.steps()
		}
		require.LessOrEqual(t, pieces(c.rounding), 2*pieces(c.smooth), c.rounding)
	}
}

// TestKinksAreNotSwungOver: what is cut off at a level has no peak above it, a magnitude is nowhere below zero, and neither is steeper than what it is made of.
func TestKinksAreNotSwungOver(t *testing.T) {
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(edges)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("edge").Setup(nil)
	require.NoError(t, err)
	v, err := Measure(t.Context(), s, "peak(min(volts(in), 0.1V))", "trough(abs(volts(in) - 0.3V))", "slew(abs(volts(in) - 0.3V))", "slew(min(volts(in), 0.1V))", "max(volts(in), 0.25V)")
	require.NoError(t, err)
	require.Equal(t, 0.1, v[0].Float())
	require.GreaterOrEqual(t, v[1].Float(), 0.0)
	// A step of an edge is 0.125 V at most, a line at its kink a 1536th of that, and the bottom in its middle at worst.
	require.LessOrEqual(t, v[1].Float(), 0.125/1536/2)
	// From 10 % to 90 % of 1 V in 1 us.
	near(t, 0.8e6, v[2].Float(), 1e-6*0.8e6)
	near(t, 0.8e6, v[3].Float(), 1e-6*0.8e6)
	trough, _ := v[4].Wave.Trough()
	require.Equal(t, 0.25, trough)
}

func TestLinesOfAPiece(t *testing.T) {
	var p, line piece
	for _, t1 := range []float64{4, math.Nextafter(1, 2), 1 + 0x1p-51} {
		p.set(1, t1, &samples{0, 3, -3, 9})
		end := p.t0
		for k := range samplesPerStep - 1 {
			if p.line(k, &line) {
				require.Equal(t, end, line.t0)
				require.Equal(t, [2]float64{p.y[k], p.y[k+1]}, [2]float64{line.y[0], line.y[3]})
				near(t, (p.y[k]+p.y[k+1])/2, line.c.at(0.5), 1e-15)
				end = line.t1
			}
		}
		require.Equal(t, t1, end)
	}
}

// BenchmarkRecording looks at one step of a run again and again: for a waveform that is kept, for its extremes, for three reducers.
func BenchmarkRecording(b *testing.B) {
	for bench, frequency := range map[string]string{"hum": "50Hz", "carrier": "1MHz"} {
		for _, text := range []string{"volts(out)", "volts(sp)", "amps(Q1.c)"} {
			for name, c := range map[string]struct{ kept, measured []string }{
				"kept":     {kept: []string{text}},
				"extremes": {measured: []string{text}},
				"three":    {measured: []string{text, "rms(" + text + ")", "tone(" + text + ", " + frequency + ")"}},
			} {
				b.Run(bench+"/"+text+"/"+name, func(b *testing.B) {
					b.ReportAllocs()
					atAStep(b, bench, c.kept, c.measured, func(r *recording, step *mna.Step) {
						for b.Loop() {
							if err := r.add(step); err != nil {
								b.Fatal(err)
							}
						}
					})
				})
			}
		}
	}
}
