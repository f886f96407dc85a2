package analyses_test

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/netlist"
)

// solution is what the scripts of testdata/reference write (see README.md there).
type solution struct {
	Nodes       map[string]float64
	Delivered   map[string]float64
	BiasCurrent *float64 `json:"bias_current"`
	OffsetAmps  *float64 `json:"offset_current"`
	Transistors map[string]map[string]float64
	Response    []map[string]json.RawMessage
	Hum         wave
	Square      wave
	Time        []float64
	Benches     map[string]wave
	Bias        map[string]solution
	Steps       map[string]map[string][]float64
}

type wave struct {
	Swing       float64
	Time, Value []float64
}

// independent reads a solution and its circuit, with an accuracy and a temperature if they are not zero.
func independent(t *testing.T, name string) (s solution, raw map[string]json.RawMessage) {
	text, err := os.ReadFile("../testdata/reference/" + name + ".json")
	require.NoError(t, err)
	require.NoError(t, json.Unmarshal(text, &s))
	require.NoError(t, json.Unmarshal(text, &raw))
	return s, raw
}

// written loads the circuit of a solution with settings.
func written(t *testing.T, name string, settings ...string) *netlist.Design {
	src, err := os.ReadFile("../testdata/reference/" + name + ".poise")
	require.NoError(t, err)
	text := string(src) + "\n" + strings.Join(settings, "\n") + "\n"
	d, err := netlist.Load(fstest.MapFS{"x.poise": {Data: []byte(text)}}, "x.poise")
	require.NoError(t, err)
	return d
}

// ask measures one quantity in a bench, or in the circuit as written if it is "".
func ask(t *testing.T, d *netlist.Design, bench, quantity string) analyses.Value {
	s, err := d.Setup()
	if bench != "" {
		s, err = d.Bench(bench).Setup(nil)
	}
	require.NoError(t, err)
	v, err := analyses.Measure(context.Background(), s, quantity)
	require.NoError(t, err, quantity)
	return v[0]
}

// The tolerances of the independent solutions: 1e-8 for the bias and 1e-6 for the response, far above their own errors.
const (
	biasDigits8     = 1e-8
	responseDigits6 = 1e-6
)

// tally finds the largest deviation of many, and names it.
type tally struct {
	worst float64
	where string
	count int
}

func (y *tally) add(t *testing.T, want, got, scale, tolerance float64, what string) {
	t.Helper()
	y.count++
	d := math.Abs(got-want) / scale
	if want == got {
		d = 0
	}
	if !(d <= y.worst) {
		y.worst, y.where = d, what
	}
	if !(d <= tolerance) {
		t.Errorf("%s: want %.15g, got %.15g, off by %.2g where %.2g is allowed", what, want, got, d, tolerance)
	}
}

func (y *tally) report(t *testing.T, what string) {
	t.Helper()
	t.Logf("%s: %d values, the worst off by %.1e (%s)", what, y.count, y.worst, y.where)
}

// biasAgainst compares every node, delivered current and operating quantity of a solution.
func biasAgainst(t *testing.T, name string, s solution, settings ...string) {
	d := written(t, name, settings...)
	y := &tally{}
	compare := func(want float64, quantity string, floor float64) {
		v := ask(t, d, "", quantity)
		y.add(t, want, real(v.Number), math.Max(math.Abs(want), floor), biasDigits8, name+" "+quantity)
	}
	c, err := d.Circuit()
	require.NoError(t, err)
	for _, node := range c.Nodes {
		if want, ok := s.Nodes[node]; ok {
			compare(want, "volts("+node+")", 1e-9) // V; in a held node 0 is exact
		}
	}
	for _, rail := range c.Rails {
		if want, ok := s.Delivered[rail.Name]; ok {
			compare(want, "amps("+rail.Name+")", 1e-15)
		}
	}
	if s.BiasCurrent != nil {
		compare(*s.BiasCurrent, "bias_current", 1e-15)
		compare(*s.OffsetAmps, "offset_current", math.Abs(*s.BiasCurrent)) // a difference of two such currents
	}
	for q, quantities := range s.Transistors {
		for symbol, want := range quantities {
			switch symbol {
			case "v1", "v2", "qb", "rbb", "cx", "cpi_at_constant_vce": // not operating quantities of the language
			case "cmu", "ft":
				// Both count the share of the capacitance at the external base, cx: see TestTransitionFrequency.
				cmu := quantities["cmu"] + quantities["cx"]
				compare(map[string]float64{"cmu": cmu, "ft": quantities["gm"] / (2 * math.Pi * (quantities["cpi"] + cmu))}[symbol], q+"."+symbol, 0)
			default:
				compare(want, q+"."+symbol, 0)
			}
		}
	}
	y.report(t, name+" bias "+strings.Join(settings, " "))
}

func TestBiasOfWholeCircuits(t *testing.T) {
	for _, name := range []string{"pair", "mooring", "rectifier"} {
		s, _ := independent(t, name)
		biasAgainst(t, name, s)
	}
	s, _ := independent(t, "two_stage")
	require.Len(t, s.Bias, 3)
	for kelvin, at := range s.Bias {
		biasAgainst(t, "two_stage", at, fmt.Sprintf("set temperature = %sK", kelvin))
	}
}

// metricsOf maps the words of the solutions to quantities.
var metricsOf = map[string]string{
	"dm_gain": "dm_gain", "cm_gain": "cm_gain", "cmrr": "cmrr", "cm_to_dm": "cm_to_dm", "dm_to_cm": "dm_to_cm", "dm_impedance": "dm_impedance",
	"cm_impedance": "cm_impedance", "out_impedance": "out_impedance", "gain": "gain(drive_in.signal, volts(out))", "gain_from_vcc": "gain(vcc, volts(out))",
}

// responseAgainst compares all metrics of a list of frequencies.
func responseAgainst(t *testing.T, name string, list []map[string]json.RawMessage, settings ...string) {
	d := written(t, name, settings...)
	y := &tally{}
	compare := func(raw json.RawMessage, quantity string, frequency float64) {
		v := ask(t, d, "", fmt.Sprintf("%s at %gHz", quantity, frequency))
		var pair [2]float64
		if json.Unmarshal(raw, &pair) != nil {
			require.NoError(t, json.Unmarshal(raw, &pair[0]))
		}
		want := complex(pair[0], pair[1])
		scale := math.Hypot(pair[0], pair[1])
		what := fmt.Sprintf("%s %s at %g Hz", name, quantity, frequency)
		y.add(t, real(want), real(v.Number), scale, responseDigits6, what)
		y.add(t, imag(want), imag(v.Number), scale, responseDigits6, what+" (imaginary part)")
	}
	for _, entry := range list {
		var frequency float64
		require.NoError(t, json.Unmarshal(entry["frequency"], &frequency))
		if frequency == 0 {
			continue // a frequency of the language is positive
		}
		for word, raw := range entry {
			if quantity, ok := metricsOf[word]; ok {
				compare(raw, quantity, frequency)
			}
			if form, ok := map[string]string{"psrr": "psrr(%s)", "gain_from_rail": "gain(%s, volts(out))"}[word]; ok {
				var rails map[string]json.RawMessage
				require.NoError(t, json.Unmarshal(raw, &rails))
				for rail, value := range rails {
					compare(value, fmt.Sprintf(form, rail), frequency)
				}
			}
		}
	}
	y.report(t, name+" response "+strings.Join(settings, " "))
	require.Greater(t, y.count, 10)
}

func TestResponseOfWholeCircuits(t *testing.T) {
	for _, name := range []string{"pair", "mooring", "geophone"} {
		s, _ := independent(t, name)
		responseAgainst(t, name, s.Response)
	}
	_, raw := independent(t, "two_stage")
	for _, kelvin := range []string{"263.15", "300.15", "333.15"} {
		var list []map[string]json.RawMessage
		require.NoError(t, json.Unmarshal(raw["response at "+kelvin+" K"], &list))
		responseAgainst(t, "two_stage", list, "set temperature = "+kelvin+"K")
	}
}

// runAgainst compares a run with an independent solution at each accuracy: it must be met in relation to the swing.
func runAgainst(t *testing.T, name, bench, quantity string, want wave, accuracies []float64) {
	var shares []float64
	for _, accuracy := range accuracies {
		d := written(t, name, fmt.Sprintf("set accuracy = %g", accuracy))
		w := ask(t, d, bench, quantity).Wave
		worst := 0.0
		for i, at := range want.Time {
			got, err := w.At(at)
			require.NoError(t, err)
			if e := math.Abs(got - want.Value[i]); !(e <= worst) {
				worst = e
			}
		}
		share := worst / want.Swing
		shares = append(shares, share)
		t.Logf("%s, bench %s at accuracy %g: error %.2e of the swing, %d steps", name, bench, accuracy, share, len(w.Times())-1)
		if !(share <= accuracy) {
			t.Errorf("%s, bench %s, %s: error %.2g of the swing at accuracy %g", name, bench, quantity, share, accuracy)
		}
	}
	// A setting that matters makes the error follow it, to a factor of five over the whole range.
	last := len(accuracies) - 1
	if asked, got := accuracies[last]/accuracies[0], shares[last]/shares[0]; !(got <= 5*asked) {
		t.Errorf("%s, bench %s: the accuracy asked for falls by %.2g, the error by %.2g", name, bench, asked, got)
	}
}

func TestRunsOfWholeCircuits(t *testing.T) {
	golden, err := os.ReadFile("../testdata/reference/pair-golden.txt")
	require.NoError(t, err)
	benches := map[string]wave{"hum": {Swing: 1.819916}, "carrier": {Swing: 1.563575}, "burst": {Swing: 6.291400}}
	for line := range strings.Lines(string(golden)) {
		var bench string
		var at, v float64
		_, err := fmt.Sscan(line, &bench, &at, &v)
		require.NoError(t, err)
		b := benches[bench]
		b.Time, b.Value = append(b.Time, at), append(b.Value, v)
		benches[bench] = b
	}
	for bench, want := range benches {
		list := accuracies
		if bench == "carrier" {
			list = accuracies[:2] // 2000 periods
		}
		runAgainst(t, "pair", bench, "volts(out)", want, list)
	}
	s, _ := independent(t, "mooring")
	runAgainst(t, "mooring", "hum", "volts(out)", s.Hum, accuracies)
	s, _ = independent(t, "two_stage")
	runAgainst(t, "two_stage", "square", "volts(out)", s.Square, accuracies)
	s, _ = independent(t, "rectifier")
	for bench, want := range s.Benches {
		want.Time = s.Time
		runAgainst(t, "rectifier", bench, "volts(out)", want, accuracies)
	}
}

// The coil's waveforms, in either mode, driven by a step; its circuit has the bench of the differential one.
func TestRunsOfTheCoil(t *testing.T) {
	s, _ := independent(t, "geophone")
	require.Len(t, s.Steps, 2)
	for mode, waves := range s.Steps {
		bench := "step"
		setting := ""
		if mode == "common" {
			bench, setting = "step_common", "bench step_common {\n  drive coil common = step(0V, 20mV, at: 0.4ms, edge: 100us)\n  run 4ms\n  expect volts(a) <= 1V\n}\n"
		}
		for quantity, values := range waves {
			if quantity == "coil current" {
				quantity = "amps(Lcoil)"
			}
			low, high := math.Inf(1), math.Inf(-1)
			for _, v := range values {
				low, high = min(low, v), max(high, v)
			}
			for _, accuracy := range accuracies {
				d := written(t, "geophone", setting, fmt.Sprintf("set accuracy = %g", accuracy))
				w := ask(t, d, bench, quantity).Wave
				worst := 0.0
				for i, at := range s.Time {
					got, err := w.At(at)
					require.NoError(t, err)
					worst = math.Max(worst, math.Abs(got-values[i]))
				}
				share := worst / (high - low)
				t.Logf("geophone, %s, %s at accuracy %g: error %.2e of the swing", mode, quantity, accuracy, share)
				if !(share <= accuracy) {
					t.Errorf("geophone, %s, %s: error %.2g of the swing at accuracy %g", mode, quantity, share, accuracy)
				}
			}
		}
	}
}
