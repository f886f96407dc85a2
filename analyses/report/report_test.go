package report

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"maps"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
	"pgregory.net/rapid"

	"poise/analyses"
	"poise/mna"
)

var update = flag.Bool("update", false, "rewrite the golden texts")

// golden compares what write writes with a file.
func golden(t *testing.T, name string, write func(w io.Writer) error) {
	t.Helper()
	var got bytes.Buffer
	require.NoError(t, write(&got))
	path := filepath.Join("testdata", name)
	if *update {
		require.NoError(t, os.WriteFile(path, got.Bytes(), 0o644))
	}
	want, err := os.ReadFile(path)
	require.NoError(t, err)
	assert.Equal(t, string(want), got.String())
}

func TestTextOfEveryVerdict(t *testing.T) {
	for name, v := range map[string]Verbosity{"quiet.txt": Quiet, "normal.txt": Normal, "verbose.txt": Verbose} {
		golden(t, name, func(w io.Writer) error { return Text(w, everyVerdict(), TextOptions{Verbosity: v}) })
	}
}

// TestColourAddsNothingButColour: what is marked by colour says the same in words.
func TestColourAddsNothingButColour(t *testing.T) {
	var plain, coloured bytes.Buffer
	require.NoError(t, Text(&plain, everyVerdict(), TextOptions{Verbosity: Verbose}))
	require.NoError(t, Text(&coloured, everyVerdict(), TextOptions{Verbosity: Verbose, Color: true}))
	s := coloured.String()
	for _, code := range []string{"\x1b[32m", "\x1b[1;31m", "\x1b[1;35m", "\x1b[33m", "\x1b[0m"} {
		assert.Contains(t, s, code)
		s = strings.ReplaceAll(s, code, "")
	}
	assert.Equal(t, plain.String(), s)
}

func TestReportOfNothing(t *testing.T) {
	var b bytes.Buffer
	require.NoError(t, Text(&b, &analyses.Report{}, TextOptions{}))
	assert.Equal(t, "0 passed, 0 failed, 0 skipped\n", b.String())
	b.Reset()
	require.NoError(t, JSON(&b, &analyses.Report{}, Meta{}))
	assert.JSONEq(t, `{"schema": 1, "version": "", "files": [], "totals": {"pass": 0, "fail": 0, "error": 0, "skipped": 0}}`, b.String())
}

func TestJSONOfEveryVerdict(t *testing.T) {
	golden(t, "report.json", func(w io.Writer) error { return JSON(w, everyVerdict(), Meta{Version: "v0.0.0"}) })
}

// TestJSONSchema looks for the fields that the first version of the schema promises, in every expectation, whatever became of it.
func TestJSONSchema(t *testing.T) {
	var b bytes.Buffer
	require.NoError(t, JSON(&b, everyVerdict(), Meta{}))
	var r map[string]any
	require.NoError(t, json.Unmarshal(b.Bytes(), &r))
	has := func(x any, fields ...string) map[string]any {
		m, ok := x.(map[string]any)
		require.True(t, ok)
		for _, f := range fields {
			require.Contains(t, m, f)
		}
		return m
	}
	has(r, "schema", "files", "totals")
	assert.Equal(t, 1.0, r["schema"])
	has(r["totals"], "pass", "fail", "error")
	seen := map[string]int{}
	for _, f := range r["files"].([]any) {
		for _, b := range has(f, "file", "design", "benches")["benches"].([]any) {
			for _, e := range has(b, "name", "status", "seconds", "expectations")["expectations"].([]any) {
				x := has(e, "line", "text", "status", "value", "unit", "shown", "low", "high", "margin", "at")
				_, isObject := x["at"].(map[string]any)
				assert.True(t, isObject, "a place is an object, also where there is none")
				seen[x["status"].(string)]++
			}
		}
	}
	assert.Equal(t, map[string]int{"pass": 5, "fail": 3, "error": 2, "skipped": 1}, seen)
}

// TestNumbersOfJSON: what JSON has no word for is null, everything else comes back to the last bit.
func TestNumbersOfJSON(t *testing.T) {
	for _, v := range []float64{nan, inf, -inf} {
		b, err := json.Marshal(number(v))
		require.NoError(t, err)
		assert.Equal(t, "null", string(b))
	}
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64().Draw(t, "v")
		b, err := json.Marshal(number(v))
		require.NoError(t, err)
		var back *float64
		require.NoError(t, json.Unmarshal(b, &back))
		if math.IsNaN(v) || math.IsInf(v, 0) {
			require.Nil(t, back)
			return
		}
		require.Equal(t, v, *back)
	})
}

// TestJSONOfAnyReport: whatever the numbers and texts are, the report is JSON and keeps them.
func TestJSONOfAnyReport(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		text, label := rapid.String().Draw(t, "text"), rapid.String().Draw(t, "label")
		x := analyses.ExpectationResult{
			Text: text, Label: label, Status: analyses.Status(rapid.IntRange(0, 3).Draw(t, "status")),
			Value: rapid.Float64().Draw(t, "value"), Low: rapid.Float64().Draw(t, "low"), High: rapid.Float64().Draw(t, "high"), Margin: rapid.Float64().Draw(t, "margin"),
			Unit: rapid.SampledFrom([]string{"", "V", "ohm", "V/s", "nonsense"}).Draw(t, "unit"), Ratio: rapid.Bool().Draw(t, "ratio"),
			At: []analyses.Coordinate{{Name: "time", Value: rapid.Float64().Draw(t, "time"), Unit: "s"}},
		}
		r := &analyses.Report{Files: []analyses.FileResult{{Benches: []analyses.BenchResult{{Expectations: []analyses.ExpectationResult{x}}}}}}
		var b bytes.Buffer
		require.NoError(t, JSON(&b, r, Meta{}))
		var back struct {
			Files []struct {
				Benches []struct {
					Expectations []struct {
						Text, Label, Status string
						Value               *float64
					}
				}
			}
		}
		require.NoError(t, json.Unmarshal(b.Bytes(), &back))
		got := back.Files[0].Benches[0].Expectations[0]
		require.Equal(t, []string{strings.ToValidUTF8(text, "\ufffd"), strings.ToValidUTF8(label, "\ufffd"), x.Status.String()}, []string{got.Text, got.Label, got.Status})
		require.Equal(t, math.IsNaN(x.Value) || math.IsInf(x.Value, 0), got.Value == nil)
		require.NoError(t, Text(io.Discard, r, TextOptions{Verbosity: Verbose}))
	})
}

// wave is a plot with names that a table must quote.
func wave() *analyses.PlotResult {
	return &analyses.PlotResult{
		X: analyses.Axis{Name: "time", Unit: "s", Values: []float64{0, 1e-3, 2e-3}},
		Traces: []analyses.Trace{
			{Name: "volts(a, b)", Unit: "V", Values: []float64{0.1, nan, -inf}},
			{Name: `a "quoted" name`, Values: []float64{1.0 / 3, 1e-300, 123456789012345}},
		},
	}
}

func TestTableOfAWaveform(t *testing.T) {
	var b bytes.Buffer
	require.NoError(t, CSV(&b, wave()))
	assert.Equal(t, `time [s],"volts(a, b) [V]","a ""quoted"" name"
0,0.1,0.333333333333
0.001,NaN,1e-300
0.002,-Inf,1.23456789012e+14
`, b.String())
}

func TestTableOfAComplexCurve(t *testing.T) {
	p := &analyses.PlotResult{
		X:      analyses.Axis{Name: "frequency", Unit: "Hz", Log: true, Values: []float64{50}},
		Traces: []analyses.Trace{{Name: "dm_impedance", Unit: "ohm", Values: []float64{5}, Phase: []float64{-math.Pi / 2}}, {Name: "cmrr", Values: []float64{10}}},
	}
	var b bytes.Buffer
	require.NoError(t, CSV(&b, p))
	assert.Equal(t, "frequency [Hz],abs(dm_impedance) [ohm],phase(dm_impedance) [deg],cmrr\n50,5,-90,10\n", b.String())
}

// TestTablesComeBack: a table has as many fields in every row, and its names and numbers are those that went in, to twelve digits.
func TestTablesComeBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(0, 4).Draw(t, "rows")
		values := func(name string) []float64 { return rapid.SliceOfN(rapid.Float64(), n, n).Draw(t, name) }
		p := &analyses.PlotResult{X: analyses.Axis{Name: "time", Unit: "s", Values: values("x")}}
		for range rapid.IntRange(0, 3).Draw(t, "traces") {
			name := strings.ReplaceAll(rapid.String().Draw(t, "name"), "\r", "")
			p.Traces = append(p.Traces, analyses.Trace{Name: name, Unit: "V", Values: values("y")})
		}
		var b bytes.Buffer
		require.NoError(t, CSV(&b, p))
		rows, err := csv.NewReader(&b).ReadAll()
		require.NoError(t, err)
		require.Len(t, rows, n+1)
		for k, trace := range append([]analyses.Trace{{Name: "time", Unit: "s", Values: p.X.Values}}, p.Traces...) {
			require.Equal(t, trace.Name+" ["+trace.Unit+"]", rows[0][k])
			for i, want := range trace.Values {
				got, err := strconv.ParseFloat(rows[i+1][k], 64)
				require.NoError(t, err)
				if math.IsNaN(want) {
					require.True(t, math.IsNaN(got))
				} else if got != want && !(math.Abs(got-want) <= 5e-12*math.Abs(want)) {
					t.Fatalf("want %g, got %g", want, got)
				}
			}
		}
	})
}

// limited writes a number of bytes, then fails.
type limited struct{ left int }

var errFull = errors.New("the disk is full")

func (l *limited) Write(b []byte) (int, error) {
	if len(b) > l.left {
		return 0, errFull
	}
	l.left -= len(b)
	return len(b), nil
}

// TestErrorsOfWritingAreReported: wherever writing stops, the caller hears of it.
func TestErrorsOfWritingAreReported(t *testing.T) {
	writers := map[string]func(w io.Writer) error{
		"text": func(w io.Writer) error { return Text(w, everyVerdict(), TextOptions{}) },
		"json": func(w io.Writer) error { return JSON(w, everyVerdict(), Meta{}) },
		"csv":  func(w io.Writer) error { return CSV(w, wave()) },
		"bias": func(w io.Writer) error { return Bias(w, atRest()) },
		"svg":  func(w io.Writer) error { return Plot(w, wave(), "svg") },
	}
	for name, write := range writers {
		for _, left := range []int{0, 60} {
			assert.ErrorIs(t, write(&limited{left: left}), errFull, "%s after %d bytes", name, left)
		}
	}
}

// atRest is a circuit at rest with something of everything.
func atRest() *analyses.BiasResult {
	device := func(name string) analyses.DeviceState {
		return analyses.DeviceState{Name: name, Part: "left", Family: "npn", Quantities: []mna.Quantity{
			{Name: "gm", Value: 4e-3, Unit: "S"}, {Name: "region", Word: "forward"}, {Name: "beta", Value: 213.4},
		}}
	}
	b := &analyses.BiasResult{
		Temperature: 300.15, Rung: "Newton's method", Iterations: 7, Power: 0.0123,
		Nodes:  []analyses.NodeVoltage{{Name: "out", Volts: 4.49}, {Name: "A1.tail", Volts: -0.64}},
		Rails:  []analyses.SourceState{{Name: "vp", Volts: 9, Amps: 1.1e-3, Watts: 9.9e-3}},
		Inputs: []analyses.InputState{{Name: "bridge", Pins: []analyses.PinState{{Node: "bp", Volts: 0, Amps: 1.2e-9}, {Node: "bn", Volts: 0, Amps: -1.2e-9}}}},
		Parts:  []analyses.PartState{{Name: "Rload", Volts: 4.51, Amps: 115.6e-6, Watts: 521.4e-6}},
	}
	for k := range 7 {
		b.Devices = append(b.Devices, device(fmt.Sprint("Q", k+1)))
	}
	return b
}

func TestBiasTables(t *testing.T) {
	golden(t, "bias.txt", func(w io.Writer) error { return Bias(w, atRest()) })
}

func TestPictures(t *testing.T) {
	for format, mark := range map[string]string{"svg": "<svg", "png": "\x89PNG"} {
		var b bytes.Buffer
		require.NoError(t, Plot(&b, wave(), format))
		assert.Contains(t, b.String(), mark)
	}
	assert.ErrorContains(t, Plot(io.Discard, wave(), "bmp"), "svg or png, not bmp")
	assert.NoError(t, Plot(io.Discard, &analyses.PlotResult{}, "svg"), "nothing to draw is an empty picture")
}

// TestThinnedTracesKeepTheirExtremes: of more points than a picture has columns, the lowest and the highest of each column stay.
func TestThinnedTracesKeepTheirExtremes(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const n = 20_000
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			x[i], y[i] = float64(i), math.Sin(float64(i*i))
		}
		spike := rapid.IntRange(0, n-1).Draw(t, "spike")
		y[spike] = rapid.SampledFrom([]float64{-7, 7, nan}).Draw(t, "size")
		points := tracePoints(x, y, 1, 1, false)
		require.LessOrEqual(t, len(points), 2*(plotColumns+1))
		top := 0.0
		for i, p := range points {
			require.False(t, math.IsNaN(p.Y))
			require.True(t, i == 0 || p.X > points[i-1].X, "in order")
			top = math.Max(top, math.Abs(p.Y))
		}
		require.Equal(t, !math.IsNaN(y[spike]), top == 7)
	})
}

func TestCautionsHaveTexts(t *testing.T) {
	for _, word := range slices.Sorted(maps.Keys(cautions)) {
		assert.Contains(t, Caution(word), "it replaces no test")
	}
	assert.Empty(t, Caution("nothing"))
}
