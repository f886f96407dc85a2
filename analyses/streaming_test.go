package analyses

import (
	"fmt"
	"runtime"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/netlist"
)

// filtered is a carrier behind a resistor and a capacitor, whose steps a bench bounds.
func filtered(t testing.TB, steps int) *netlist.Setup {
	const step = 1e-6
	text := fmt.Sprintf(`design filtered "A carrier behind an RC"
input source = (in)
output load = (out)
in -- R1 1kohm -- out -- C1 10nF -- gnd
bench carrier {
  drive source signal = sine(1V, 5kHz)
  run %gs step %gs
}
`, step*float64(steps), step)
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(text)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("carrier").Setup(nil)
	require.NoError(t, err)
	return s
}

// quantities resolves texts in a set-up.
func quantities(t testing.TB, s *netlist.Setup, texts ...string) []netlist.Quantity {
	var qs []netlist.Quantity
	for _, text := range texts {
		q, err := s.Quantity(text)
		require.NoError(t, err)
		qs = append(qs, q)
	}
	return qs
}

// heap is the most memory in use, in bytes, at every hundredth of a run: by what is alive, or by all that the runtime holds for it.
type heap struct {
	next float64
	most uint64
}

func (h *heap) watch(alive bool) func(time, until float64) {
	return func(time, until float64) {
		if time < h.next*until {
			return
		}
		h.next += 0.01
		var m runtime.MemStats
		if alive {
			runtime.GC()
			runtime.ReadMemStats(&m)
			h.most = max(h.most, m.HeapAlloc)
			return
		}
		runtime.ReadMemStats(&m)
		h.most = max(h.most, m.HeapInuse)
	}
}

// threeReducers read a run without keeping it.
var threeReducers = []string{"rms(volts(out))", "peak(volts(in) - volts(out))", "tone(volts(out), 5kHz)"}

// runWatched integrates a set-up with reducers and returns the most memory in use on the way, in bytes.
func runWatched(t testing.TB, s *netlist.Setup, alive bool, texts ...string) uint64 {
	h := heap{}
	e, err := newEvaluation(t.Context(), s, nil)
	require.NoError(t, err)
	e.progress = h.watch(alive)
	require.NoError(t, e.run(nil, quantities(t, s, texts...)))
	return h.most
}

// heapGrowth is the number of bytes by which the live heap may differ between two runs: what the runtime itself and the
// tables of the test need. A tenth of a byte a step would show.
const heapGrowth = 16 << 10

func TestReducersNeedNoRoom(t *testing.T) {
	for _, texts := range [][]string{
		threeReducers,
		{"trough(volts(out))", "pp(volts(out))", "mean(volts(out))", "value(volts(out), at: 1ms)", "tone_phase(volts(out), 5kHz)", "slew(volts(out))",
			"crosses(volts(out), 0V, 3)", "outside(volts(out), -1V..0.1V)", "drift(volts(out))", "volts(out)", "mean(amps(R1))", "rms(watts(C1))"},
	} {
		short := runWatched(t, filtered(t, 20_000), true, texts...)
		long := runWatched(t, filtered(t, 200_000), true, texts...)
		t.Logf("%d and %d bytes in use", short, long)
		require.LessOrEqual(t, long, short+heapGrowth)
	}
}

// TestOutlinesFollowTheShape: what reducers need that know the levels of a waveform only in the end does not grow with the steps within a period, but with
// the periods.
func TestOutlinesFollowTheShape(t *testing.T) {
	const steps, period = 400_000, 200 // steps
	s := filtered(t, steps)
	qs := quantities(t, s, "overshoot(volts(out))")
	e, err := newEvaluation(t.Context(), s, nil)
	require.NoError(t, err)
	require.NoError(t, e.run(nil, qs))
	o := e.record.readings[qs[0]].accumulator.(*outline)
	t.Logf("%d pieces of %d steps", len(o.slack), steps)
	require.Less(t, len(o.slack), outlineLimit)
}

// BenchmarkTenMillionSteps reports the most memory in use beside the time for a step.
func BenchmarkTenMillionSteps(b *testing.B) {
	const steps = 10_000_000
	s := filtered(b, steps)
	for b.Loop() {
		b.ReportMetric(float64(runWatched(b, s, false, threeReducers...))/1e6, "peak-MB")
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/steps, "ns/step")
}

// everyReducer writes all reducers of the catalogue for a waveform of an edge.
func everyReducer(x string) []string {
	var texts []string
	for _, r := range netlist.Reducers() {
		text := r.Name + "(" + x
		for _, a := range r.Args {
			if a.Named {
				text += ", " + a.Name + ": "
			} else {
				text += ", "
			}
			text += map[string]string{"at": "1.77ms", "frequency": "2kHz", "within": "50mV", "level": "0.2V", "n": "2", "range": "-0.1V..0.3V"}[a.Name]
		}
		texts = append(texts, text+")")
	}
	return texts
}

const edges = `design edges "Edges at a resonance and a diode"
part d = diode { Is = 1fA, tau = 5ns, cap = 4pF }
input source = (in)
output load = (out)
in -- R1 1kohm -- m -- L1 1mH -- out -- C1 10nF -- gnd
out -- R2 10kohm -- gnd
out -- R3 1kohm -- k
D1 = d(a: k, k: gnd)
bench edge {
  drive source signal = pulse(0V, 1V, at: 0.1ms, width: 0.5ms, edge: 1us, every: 1ms)
  run 3ms from 0.2ms
}
`

// TestStreamsAgreeWithWaveforms: a reducer is the same, to the last bit, whether the pieces pass it by or the waveform is kept and read
// afterwards.
func TestStreamsAgreeWithWaveforms(t *testing.T) {
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(edges)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("edge").Setup(nil)
	require.NoError(t, err)
	for _, x := range []string{
		"volts(out)", "volts(in, out)", "1kohm*amps(R1)", "volts(out) * dm_gain at 1kHz", "2*abs(volts(out) - volts(in))", "min(volts(m), volts(in), 0.1V)", "1kohm*watts(L1)/1V",
		"volts(out) - quiescent(volts(out))",
	} {
		kept, measured := quantities(t, s, x), quantities(t, s, append(everyReducer(x), "value("+x+", at: 1.1ms)", "settles("+x+", within: 5mV)", "crosses("+x+", 0.2V, 1)")...)
		e, err := newEvaluation(t.Context(), s, nil)
		require.NoError(t, err)
		require.NoError(t, e.run(kept, append(measured, kept...)))
		w, err := e.waveform(kept[0])
		require.NoError(t, err)
		for _, q := range measured {
			r := q.(*netlist.Reduce)
			require.NotNil(t, e.record.readings[q], "%s is not accumulated", r.Text)
			reduce := reducers[r.Name]
			want, wantErr := reduce.of(w, r.Numbers)
			got, err := e.number(q, nowhere())
			require.Equal(t, wantErr, err, r.Text)
			if err == nil {
				require.Equal(t, complex(want, 0), got, r.Text)
			}
		}
		worst, err := e.extremes(kept[0])
		require.NoError(t, err)
		require.Equal(t, accumulated(w, newExtremes()), worst, x)
	}
}

// TestReducersWithinReducers: the inner one must be known before the outer one can begin.
func TestReducersWithinReducers(t *testing.T) {
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(edges)}}, "x.poise")
	require.NoError(t, err)
	s, err := d.Bench("edge").Setup(nil)
	require.NoError(t, err)
	v, err := Measure(t.Context(), s, "rms(volts(out) - mean(volts(out)))", "rms(volts(out))", "mean(volts(out))", "volts(out) - mean(volts(out))", "peak(volts(out) - mean(volts(out)))")
	require.NoError(t, err)
	rms, mean := v[1].Float(), v[2].Float()
	near(t, rms*rms-mean*mean, v[0].Float()*v[0].Float(), 1e-12)
	peak, _ := v[3].Wave.Peak()
	require.Equal(t, peak, v[4].Float())
	near(t, 0, v[3].Wave.Mean(), 1e-12)
}

// TestWhatCannotBeComputedIsAnErrorOfItsOwn: a scalar within a waveform that has no value leaves the other expectations alone.
func TestWhatCannotBeComputedIsAnErrorOfItsOwn(t *testing.T) {
	s := filtered(t, 100)
	volts := quantities(t, s, "volts(out)")[0]
	info := func(s netlist.Shape) netlist.Info { return netlist.Info{Text: "x", Shape: s} }
	product := &netlist.Apply{Info: info(netlist.Waveform), Op: "*", X: []netlist.Quantity{volts, &netlist.Metric{Info: info(netlist.Scalar), Name: "nonesuch"}}}
	odd := &netlist.Apply{Info: info(netlist.Waveform), Op: "nonesuch", X: []netlist.Quantity{volts}}
	s.Expected = []netlist.Expected{
		{Quantity: product}, {Quantity: &netlist.Reduce{Info: info(netlist.Scalar), Name: "mean", X: product}},
		{Quantity: odd}, {Quantity: &netlist.Reduce{Info: info(netlist.Scalar), Name: "nonesuch", X: volts}},
		{Quantity: quantities(t, s, "sqrt(volts(out)/1V - 5)")[0]}, {Quantity: volts, Limit: netlist.Limit{Low: -2, High: 2}},
	}
	e, err := newEvaluation(t.Context(), s, nil)
	require.NoError(t, err)
	require.NoError(t, e.run(nil, expectedQuantities(s)))
	for i, want := range []string{
		"the metric nonesuch cannot be computed", "the metric nonesuch cannot be computed", "the operation nonesuch cannot be computed",
		"the reducer nonesuch cannot be computed", "the result is not a number", "",
	} {
		v := e.verdict(&s.Expected[i])
		if want == "" {
			require.NoError(t, v.err)
			require.Equal(t, Pass, v.status)
			continue
		}
		require.ErrorContains(t, v.err, want)
		require.Equal(t, Error, v.status)
	}
}

// TestWhatWasNotAskedForIsNotThere: quantities that the run was not told of are an error, not a value at rest.
func TestWhatWasNotAskedForIsNotThere(t *testing.T) {
	s := filtered(t, 100)
	qs := quantities(t, s, "volts(out)", "mean(volts(out))", "volts(in)")
	e, err := newEvaluation(t.Context(), s, nil)
	require.NoError(t, err)
	_, err = e.waveform(qs[0])
	require.ErrorContains(t, err, "needs a run")
	_, err = e.number(qs[1], nowhere())
	require.ErrorContains(t, err, "needs a run")
	require.NoError(t, e.run(nil, qs[2:]))
	for _, q := range qs[:2] {
		_, err = e.extremes(q)
		require.ErrorContains(t, err, "volts(out) was not recorded")
	}
	_, err = e.waveform(qs[2])
	require.ErrorContains(t, err, "volts(in) was not recorded", "its extremes are known, nothing else")
}
