package report

import (
	"encoding/json"
	"io"
	"math"

	"poise/analyses"
)

// Meta is what a JSON report says about itself.
type Meta struct {
	Version string // of the program that made it
}

// number is a float64 that is null where JSON has no word for it.
type number float64

func (n number) MarshalJSON() ([]byte, error) {
	if v := float64(n); math.IsNaN(v) || math.IsInf(v, 0) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(n))
}

type jsonReport struct {
	Schema     int        `json:"schema"`
	Version    string     `json:"version"`
	Incomplete bool       `json:"incomplete,omitempty"`
	Files      []jsonFile `json:"files"`
	Totals     jsonTotals `json:"totals"`
}

type jsonTotals struct {
	Pass    int `json:"pass"`
	Fail    int `json:"fail"`
	Error   int `json:"error"`
	Skipped int `json:"skipped"`
}

type jsonFile struct {
	File     string      `json:"file"`
	Design   string      `json:"design"`
	Title    string      `json:"title,omitempty"`
	Cautions []string    `json:"cautions,omitempty"`
	Error    string      `json:"error,omitempty"`
	Benches  []jsonBench `json:"benches"`
}

type jsonBench struct {
	Name         string            `json:"name"`
	Title        string            `json:"title,omitempty"`
	Status       string            `json:"status"`
	Seconds      number            `json:"seconds"`
	Error        string            `json:"error,omitempty"`
	Expectations []jsonExpectation `json:"expectations"`
}

type jsonExpectation struct {
	Line   int               `json:"line"`
	Label  string            `json:"label,omitempty"`
	Text   string            `json:"text"`
	Status string            `json:"status"`
	Value  number            `json:"value"`
	Word   string            `json:"word,omitempty"`
	Unit   string            `json:"unit"`
	Shown  string            `json:"shown"`
	Low    number            `json:"low"`
	High   number            `json:"high"`
	Margin number            `json:"margin"`
	Error  string            `json:"error,omitempty"`
	At     map[string]number `json:"at"`
}

// schema is the version of the JSON report.
const schema = 1

// JSON writes the report of a check as data. Values are in SI units; NaN and infinities are null; margins of ratios written in dB are in dB.
func JSON(w io.Writer, r *analyses.Report, m Meta) error {
	out := jsonReport{Schema: schema, Version: m.Version, Incomplete: r.Incomplete, Files: []jsonFile{},
		Totals: jsonTotals{r.Totals.Pass, r.Totals.Fail, r.Totals.Error, r.Totals.Skipped}}
	for _, f := range r.Files {
		file := jsonFile{File: f.File, Design: f.Design, Title: f.Title, Cautions: f.Cautions, Error: message(f.Err), Benches: []jsonBench{}}
		for _, b := range f.Benches {
			bench := jsonBench{Name: b.Name, Title: b.Title, Status: b.Status.String(), Seconds: number(b.Elapsed.Seconds()), Error: message(b.Err), Expectations: []jsonExpectation{}}
			for i := range b.Expectations {
				bench.Expectations = append(bench.Expectations, jsonOf(&b.Expectations[i]))
			}
			file.Benches = append(file.Benches, bench)
		}
		out.Files = append(out.Files, file)
	}
	e := json.NewEncoder(w)
	e.SetEscapeHTML(false)
	e.SetIndent("", "  ")
	return e.Encode(out)
}

func message(err error) string {
	if err == nil {
		return ""
	}
	return err.Error()
}

func jsonOf(x *analyses.ExpectationResult) jsonExpectation {
	e := jsonExpectation{
		Line: x.Line, Label: x.Label, Text: x.Text, Status: x.Status.String(), Value: number(x.Value), Word: x.Word, Unit: x.Unit,
		Low: number(x.Low), High: number(x.High), Margin: number(x.Margin), Error: message(x.Err), At: map[string]number{},
	}
	if x.Status == analyses.Pass || x.Status == analyses.Fail {
		e.Shown = Shown(x)
	}
	for _, c := range x.At {
		e.At[c.Name] = number(c.Value)
	}
	return e
}
