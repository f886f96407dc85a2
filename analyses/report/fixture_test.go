package report

import (
	"errors"
	"math"
	"time"

	"poise/analyses"
)

var (
	nan     = math.NaN()
	inf     = math.Inf(1)
	errHalt = errors.New("the integration stopped at 1 ms\nat the node out")
)

// everyVerdict is a report with every kind of outcome.
func everyVerdict() *analyses.Report {
	quiet := analyses.BenchResult{
		Name: "quiet", Title: "at rest", Line: 30, Status: analyses.Pass, Elapsed: 10 * time.Millisecond, Points: 1,
		Expectations: []analyses.ExpectationResult{
			{Line: 31, Column: 3, Text: "volts(out) within 3.8V..5.2V", Status: analyses.Pass, Value: 4.49, Low: 3.8, High: 5.2, Margin: 0.69, Unit: "V"},
			{Line: 32, Text: "Q1.region = forward", Status: analyses.Pass, Value: nan, Low: nan, High: nan, Margin: nan, Word: "forward", Want: "forward"},
		},
	}
	hum := analyses.BenchResult{
		Name: "hum", Title: "mains on the body", Line: 40, Status: analyses.Fail, Elapsed: 1500 * time.Millisecond, Points: 12,
		Expectations: []analyses.ExpectationResult{
			{Line: 41, Label: "headroom", Text: "volts(out) <= 5V", Status: analyses.Fail, Value: 5.25, Low: -inf, High: 5, Margin: -0.25, Unit: "V",
				At: []analyses.Coordinate{{Name: "temperature", Value: 333.15, Unit: "K"}, {Name: "time", Value: 0.731, Unit: "s"}}},
			{Line: 42, Text: "cmrr at 50Hz >= 70dB", Status: analyses.Fail, Value: 1000, Low: 3162.2776601683795, High: inf, Margin: -10, Ratio: true,
				At: []analyses.Coordinate{{Name: "frequency", Value: 50, Unit: "Hz"}}},
			{Line: 43, Text: "Q1.region = forward", Status: analyses.Fail, Value: nan, Low: nan, High: nan, Margin: nan, Word: "saturated", Want: "forward",
				At: []analyses.Coordinate{{Name: "time", Value: 2e-3, Unit: "s"}}},
			{Line: 44, Text: "crosses(volts(out), 5V, 2) <= 1s", Status: analyses.Error, Err: errHalt, Value: nan, Low: -inf, High: 1, Margin: nan, Unit: "s"},
			{Line: 45, Text: "rms(volts(out)) >= 1mV", Status: analyses.Pass, Value: 2e-3, Low: 1e-3, High: inf, Margin: 1e-3, Unit: "V"},
			{Line: 46, Text: "pp(volts(out)) < 1V", Status: analyses.Skipped, Value: nan, Low: -inf, High: 1, Margin: nan, Unit: "V"},
		},
	}
	burst := analyses.BenchResult{
		Name: "burst", Line: 50, Status: analyses.Error, Err: errHalt, Points: 1,
		Expectations: []analyses.ExpectationResult{
			{Line: 51, Text: "peak(volts(out)) <= 9V", Status: analyses.Error, Err: errHalt, Value: nan, Low: nan, High: nan, Margin: nan, Unit: "V"},
		},
	}
	return &analyses.Report{
		Files: []analyses.FileResult{
			{File: "electrode.poise", Design: "electrode", Title: "An electrode's amplifier", Cautions: []string{"patient"}, Benches: []analyses.BenchResult{quiet, hum, burst}},
			{File: "broken.poise", Err: errors.New("no such file")},
			{File: "held.poise", Design: "held", Benches: []analyses.BenchResult{quiet}},
		},
		Totals:     analyses.Totals{Pass: 5, Fail: 3, Error: 2, Skipped: 1},
		Incomplete: true,
	}
}
