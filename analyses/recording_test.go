package analyses

import (
	"errors"
	"os"
	"testing"

	"github.com/stretchr/testify/require"

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
