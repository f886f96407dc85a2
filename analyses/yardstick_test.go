package analyses

import (
	"bufio"
	"context"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/mna"
	"poise/netlist"
)

// yardBench is a bench of the pair with an independent solution (testdata/reference/README.md).
type yardBench struct {
	model *model
	o     mna.TransientOptions
	out   mna.Unknown
	times []float64 // s
	volts []float64 // V
	swing float64   // V
}

func newYardBench(t testing.TB, name string, accuracy float64) *yardBench {
	src, err := os.ReadFile("../testdata/reference/pair.poise")
	require.NoError(t, err)
	text := strings.Replace(string(src), "\nrail vp", fmt.Sprintf("\nset accuracy = %g\nrail vp", accuracy), 1)
	d, err := netlist.Load(fstest.MapFS{"pair.poise": {Data: []byte(text)}}, "pair.poise")
	require.NoError(t, err)
	s, err := d.Bench(name).Setup(nil)
	require.NoError(t, err)
	e, err := newEvaluation(context.Background(), s, nil)
	require.NoError(t, err)
	y := &yardBench{model: e.model, o: mna.TransientOptions{Until: s.Run.Until, Accuracy: accuracy}}
	y.o.Start, err = e.quiescent()
	require.NoError(t, err)
	y.out = e.model.system.Unknown(e.model.node["out"])
	y.read(t, name)
	return y
}

func (y *yardBench) read(t testing.TB, bench string) {
	f, err := os.Open("../testdata/reference/pair-golden.txt")
	require.NoError(t, err)
	defer f.Close()
	low, high := math.Inf(1), math.Inf(-1)
	for s := bufio.NewScanner(f); s.Scan(); {
		var name string
		var at, v float64
		_, err := fmt.Sscan(s.Text(), &name, &at, &v)
		require.NoError(t, err)
		if name == bench {
			y.times, y.volts = append(y.times, at), append(y.volts, v)
			low, high = min(low, v), max(high, v)
		}
	}
	y.swing = map[string]float64{"hum": 1.819916, "carrier": 1.563575, "burst": 6.2914}[bench]
}

// run integrates and returns the largest error at the times of the reference, beside the swing.
func (y *yardBench) run(t testing.TB) (float64, *mna.TransientStats) {
	worst, next := 0.0, 0
	x := make([]float64, y.model.system.Size())
	stats, err := y.model.system.Transient(context.Background(), y.o, func(step *mna.Step) error {
		for next < len(y.times) && y.times[next] <= step.T1 {
			step.At(y.times[next], x)
			d := math.Abs(x[y.out] - y.volts[next])
			if !(d <= worst) {
				worst = d
			}
			next++
		}
		return nil
	})
	require.NoError(t, err)
	require.Equal(t, len(y.times), next)
	return worst / y.swing, stats
}

// TestYardstick holds the error to the accuracy asked for and the evaluations of the whole circuit, which do not depend on the machine, to what the method is
// chosen for.
func TestYardstick(t *testing.T) {
	for _, c := range []struct {
		bench  string
		finest float64
		most   int // evaluations at the default accuracy
	}{{"hum", 1e-6, 1300}, {"burst", 1e-6, 270}, {"carrier", 1e-6, 66_000}} {
		last := math.Inf(1)
		for _, accuracy := range []float64{1e-3, 1e-4, 1e-5, 1e-6} {
			if accuracy < c.finest || testing.Short() && c.bench == "carrier" {
				continue
			}
			y := newYardBench(t, c.bench, accuracy)
			worst, stats := y.run(t)
			t.Logf("%-8s %.0e: error %.2e of the swing, %d evaluations, %d solves, %d steps, %d refused", c.bench, accuracy, worst,
				stats.Work.Evaluations, stats.Work.Solves, stats.Steps, stats.Rejected)
			require.LessOrEqual(t, worst, accuracy, "%s at accuracy %g", c.bench, accuracy)
			require.Less(t, worst, last/2, "%s at accuracy %g", c.bench, accuracy)
			last = worst
			if accuracy == 1e-4 {
				require.LessOrEqual(t, stats.Work.Evaluations, c.most, c.bench)
			}
		}
	}
}

func BenchmarkYardstick(b *testing.B) {
	for _, bench := range []string{"hum", "carrier", "burst"} {
		b.Run(bench, func(b *testing.B) {
			y := newYardBench(b, bench, 1e-4)
			evaluations := 0
			for b.Loop() {
				stats, err := y.model.system.Transient(context.Background(), y.o, func(*mna.Step) error { return nil })
				if err != nil {
					b.Fatal(err)
				}
				evaluations = stats.Work.Evaluations
			}
			b.ReportMetric(float64(evaluations), "evaluations/op")
		})
	}
}
