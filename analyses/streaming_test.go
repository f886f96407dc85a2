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
