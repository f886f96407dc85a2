package analyses

import (
	"context"
	"fmt"
	"os"
	"regexp"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/netlist"
)

// TestEveryMetricAndReducerIsComputed compares the language's catalogue with what is computed.
func TestEveryMetricAndReducerIsComputed(t *testing.T) {
	for _, m := range netlist.Metrics() {
		_, response := responseMetrics[m.Name]
		_, search := searchMetrics[m.Name]
		_, bias := biasMetrics[m.Name]
		assert.True(t, response || search || bias, m.Name)
	}
	for _, r := range netlist.Reducers() {
		assert.Contains(t, reducers, r.Name)
	}
}

// TestReferenceExamplesHold runs the benches of the language reference.
func TestReferenceExamplesHold(t *testing.T) {
	data, err := os.ReadFile("../netlist/LANGUAGE.md")
	require.NoError(t, err)
	for _, m := range regexp.MustCompile("(?s)```poise\n(.*?)```").FindAllStringSubmatch(string(data), -1) {
		d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(m[1])}}, "x.poise")
		require.NoError(t, err)
		r := Check(context.Background(), []Job{{File: "x.poise", Design: d}}, Options{Plots: true})
		for _, b := range r.Files[0].Benches {
			require.NoError(t, b.Err, b.Name)
			for _, x := range b.Expectations {
				assert.Equal(t, Pass, x.Status, "%s: %s is %g (%v)", b.Name, x.Text, x.Value, x.Err)
			}
		}
	}
}

// TestCheckDoesNotDependOnTheNumberOfWorkers compares reports to the last bit.
func TestCheckDoesNotDependOnTheNumberOfWorkers(t *testing.T) {
	d, err := netlist.Load(os.DirFS("../testdata/examples"), "refraction.poise")
	require.NoError(t, err)
	check := func(workers int) *Report {
		r := Check(context.Background(), []Job{{File: "refraction.poise", Design: d}}, Options{Workers: workers})
		for i := range r.Files[0].Benches {
			r.Files[0].Benches[i].Elapsed = 0
		}
		return r
	}
	assert.Equal(t, fmt.Sprintf("%+v", check(1)), fmt.Sprintf("%+v", check(3)), "written out, since a NaN is not equal to itself")
}

// TestCancelledCheckSaysWhatItSkipped stops before the start.
func TestCancelledCheckSaysWhatItSkipped(t *testing.T) {
	d, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	require.NoError(t, err)
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	r := Check(ctx, []Job{{File: "mooring.poise", Design: d}}, Options{})
	assert.True(t, r.Incomplete)
	assert.Equal(t, 8, r.Totals.Skipped)
}

// BenchmarkCheckMooring is a whole check of a one-channel front end.
func BenchmarkCheckMooring(b *testing.B) {
	d, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	require.NoError(b, err)
	for b.Loop() {
		if r := Check(context.Background(), []Job{{File: "mooring.poise", Design: d}}, Options{Workers: 1}); r.Totals.Pass != 8 {
			b.Fatal("not everything held")
		}
	}
}

// BenchmarkLoadAndBias reads a one-channel file and finds its operating point.
func BenchmarkLoadAndBias(b *testing.B) {
	for b.Loop() {
		d, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
		if err != nil {
			b.Fatal(err)
		}
		c, err := d.Circuit()
		if err != nil {
			b.Fatal(err)
		}
		if _, err := Bias(context.Background(), c); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkResponse is one frequency of both modes.
func BenchmarkResponse(b *testing.B) {
	d, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	require.NoError(b, err)
	s, err := d.Setup()
	require.NoError(b, err)
	e, err := newEvaluation(context.Background(), s, nil)
	require.NoError(b, err)
	r, err := e.responder()
	require.NoError(b, err)
	f := 1.0
	for b.Loop() {
		f *= 1.0000001
		require.NoError(b, r.at(f))
		if _, err := rejection(r, &netlist.Metric{Name: "cmrr"}); err != nil {
			b.Fatal(err)
		}
	}
}
