package analyses_test

import (
	"bufio"
	"context"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/netlist"
)

// reference reads the independent solution of a bench of the pair (see testdata/reference/README.md).
func reference(t *testing.T, bench string) (times, volts []float64) {
	f, err := os.Open("../testdata/reference/pair-golden.txt")
	require.NoError(t, err)
	defer f.Close()
	for s := bufio.NewScanner(f); s.Scan(); {
		var name string
		var at, v float64
		_, err := fmt.Sscan(s.Text(), &name, &at, &v)
		require.NoError(t, err)
		if name == bench {
			times, volts = append(times, at), append(volts, v)
		}
	}
	require.NotEmpty(t, times)
	return times, volts
}

// pair loads the reference pair with an accuracy in place of the default.
func pair(t *testing.T, accuracy float64) *netlist.Design {
	src, err := os.ReadFile("../testdata/reference/pair.poise")
	require.NoError(t, err)
	text := strings.Replace(string(src), "\nrail vp", fmt.Sprintf("\nset accuracy = %g\nrail vp", accuracy), 1)
	d, err := netlist.Load(fstest.MapFS{"pair.poise": {Data: []byte(text)}}, "pair.poise")
	require.NoError(t, err)
	return d
}

// measure computes scalars of the circuit as written.
func measure(t *testing.T, d *netlist.Design, quantities ...string) []complex128 {
	s, err := d.Setup()
	require.NoError(t, err)
	values, err := analyses.Measure(context.Background(), s, quantities...)
	require.NoError(t, err)
	var out []complex128
	for _, v := range values {
		out = append(out, v.Number)
	}
	return out
}

// The reference states its values to these digits.
const (
	biasDigits     = 1e-11 // V
	responseDigits = 1e-9
	ratioDigits    = 2e-9 // of a ratio stated in dB to eight decimals
)

func TestPairAgainstIndependentSolution(t *testing.T) {
	d := pair(t, 1e-4)
	v := measure(t, d, "volts(out)", "volts(tail)", "dm_gain at 50Hz", "cm_gain at 50Hz", "cmrr at 50Hz", "cmrr at 10kHz", "cmrr at 1MHz")
	assert.InDelta(t, 4.53088782944, real(v[0]), biasDigits)
	assert.InDelta(t, -0.639805861831, real(v[1]), biasDigits)
	assert.InDelta(t, 38.7443694, real(v[2]), 5e-8, "stated to seven decimals")
	assert.InDelta(t, -0.0017045606, imag(v[2]), responseDigits)
	assert.InDelta(t, -0.5251119394, real(v[3]), responseDigits)
	assert.InDelta(t, 0.0001643715, imag(v[3]), responseDigits)
	for i, dB := range []float64{37.35913366, 37.34761686, 23.25549265} {
		want := math.Pow(10, dB/20)
		assert.InDelta(t, 1, real(v[4+i])/want, ratioDigits)
	}
}

func TestPairRunsAgainstIndependentSolution(t *testing.T) {
	swing := map[string]float64{"hum": 1.819916, "carrier": 1.563575, "burst": 6.2914}
	for _, c := range []struct {
		bench      string
		accuracies []float64
	}{{"hum", []float64{1e-3, 1e-4, 1e-5}}, {"burst", []float64{1e-3, 1e-4, 1e-5}}, {"carrier", []float64{1e-3}}} {
		times, volts := reference(t, c.bench)
		for _, accuracy := range c.accuracies {
			d := pair(t, accuracy)
			s, err := d.Bench(c.bench).Setup(nil)
			require.NoError(t, err)
			w, err := analyses.Measure(context.Background(), s, "volts(out)")
			require.NoError(t, err)
			worst := 0.0
			for i, at := range times {
				v, err := w[0].Wave.At(at)
				require.NoError(t, err)
				worst = math.Max(worst, math.Abs(v-volts[i]))
			}
			share := worst / swing[c.bench]
			t.Logf("%s at accuracy %g: error %.2e of the swing", c.bench, accuracy, share)
			// The accuracy is what a user may expect of a waveform.
			assert.LessOrEqual(t, share, accuracy, "%s", c.bench)
		}
	}
}
