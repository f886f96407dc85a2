package netlist

import (
	"bytes"
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"path"
	"strconv"
	"strings"

	"poise/devices"
	"poise/netlist/syntax"
	"poise/netlist/unit"
)

// samplesCall is what samples(...) says.
type samplesCall struct {
	file   *syntax.String
	column int
	repeat bool
	unit   value // of the column: V or A
}

// samples evaluates samples("file.csv", column: n, repeat: 1): the first column of the file is the time in s, column n (2 if not written)
// the value in V, or in what `unit: 1mA` says. With repeat: 1 the file is a period.
func (e *elaborator) samples(s *scope, x *syntax.Call) (w signal, ok bool) {
	c := samplesCall{column: 2, unit: value{SI: 1, Dimension: unit.Voltage}}
	ok = true
	for i, a := range x.Args {
		ok = e.samplesArg(s, i, a, &c) && ok
	}
	if !ok {
		return w, false
	}
	if c.file == nil {
		return w, e.fail(CodeArguments, x.Place(), "samples needs the name of a file in quotes")
	}
	data, ok := e.readSamples(c.file, c.column)
	if !ok {
		return w, false
	}
	values := data.values
	if c.unit.SI != 1 {
		values = make([]float64, len(data.values))
		for i, v := range data.values {
			values[i] = v * c.unit.SI
		}
	}
	w.dimension = c.unit.Dimension
	var err error
	if w.signal, err = (devices.Points{Times: data.times, Values: values, Repeat: c.repeat}).New(); err != nil {
		return w, e.fail(CodeFile, c.file.Place(), "%s: %s", c.file.Value, err)
	}
	return w, true
}

func (e *elaborator) samplesArg(s *scope, i int, a syntax.Arg, c *samplesCall) bool {
	if a.Name == nil {
		text, isText := a.Value.(*syntax.String)
		if i != 0 || !isText {
			return e.fail(CodeArguments, a.Place(), "samples takes the name of a file in quotes, and column:, repeat:, unit:")
		}
		c.file = text
		return true
	}
	switch a.Name.Name {
	case "column":
		const most = 1000
		n, ok := e.whole(s, a.Value, "the column (the first holds the times)", 2, most)
		c.column = int(n)
		return ok
	case "repeat":
		n, ok := e.whole(s, a.Value, "repeat", 0, 1)
		c.repeat = n == 1
		return ok
	case "unit":
		v, ok := e.single(s, a.Value)
		if ok && v.Dimension != unit.Voltage && v.Dimension != unit.Current {
			return e.fail(CodeDimension, a.Value.Place(), "the unit of samples is %s, want V or A", v.Dimension.Noun())
		}
		c.unit = v
		return ok
	}
	return e.fail(CodeArguments, a.Name.Place(), "samples takes no argument called %s", a.Name.Name)
}

// samplesKey tells the columns of files apart.
type samplesKey struct {
	file   string
	column int
}

// samplesFile is two columns of a file.
type samplesFile struct{ times, values []float64 }

// readSamples reads two columns of a file beside the one that names it, once a load.
func (e *elaborator) readSamples(file *syntax.String, column int) (samplesFile, bool) {
	key := samplesKey{path.Join(path.Dir(strings.TrimPrefix(file.File, "./")), file.Value), column}
	if data, known := e.program.samples[key]; known {
		return data, true
	}
	var fsys fs.FS = e.program.fsys
	if e.program.inLibrary(file.File) {
		fsys = library
	}
	if path.IsAbs(file.Value) || !fs.ValidPath(key.file) || strings.ContainsAny(file.Value, `\:`) {
		return samplesFile{}, e.fail(CodeFile, file.Place(), "%s lies outside the folder that files may be read from", file.Value)
	}
	text, err := e.program.read(fsys, key.file)
	if err != nil {
		return samplesFile{}, e.fail(fileCode(err), file.Place(), "%s: %s", file.Value, reason(err))
	}
	data, err := parseSamples(text, column, e.program.limits.Samples)
	switch {
	case errors.As(err, &tooManySamples{}):
		return data, e.fail(CodeLimit, file.Place(), "%s: %s", file.Value, err)
	case err != nil:
		return data, e.fail(CodeFile, file.Place(), "%s: %s", file.Value, err)
	}
	if e.learning {
		e.program.samples[key] = data
	}
	return data, true
}

// tooManySamples is the error of a file over the limit.
type tooManySamples struct{ most int }

func (e tooManySamples) Error() string {
	return fmt.Sprintf("more than the %d samples that are read", e.most)
}

// parseSamples reads the first and another column of a text. The first row may hold titles; # begins a comment.
func parseSamples(text []byte, column, most int) (data samplesFile, err error) {
	r := csv.NewReader(bytes.NewReader(text))
	r.Comment, r.TrimLeadingSpace, r.FieldsPerRecord, r.ReuseRecord = '#', true, -1, true
	for first := true; ; first = false {
		row, err := r.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return data, err
		}
		line, _ := r.FieldPos(0)
		if len(row) < column {
			return data, fmt.Errorf("line %d has no column %d", line, column)
		}
		t, err1 := strconv.ParseFloat(strings.TrimSpace(row[0]), 64)
		v, err2 := strconv.ParseFloat(strings.TrimSpace(row[column-1]), 64)
		if first && err1 != nil {
			continue
		}
		if err := data.add(t, v, errors.Join(err1, err2), line); err != nil {
			return data, err
		}
		if len(data.times) > most {
			return data, tooManySamples{most}
		}
	}
	if len(data.times) < 2 {
		return data, errors.New("the file holds fewer than two samples")
	}
	return data, nil
}

// add appends a sample.
func (d *samplesFile) add(t, v float64, err error, line int) error {
	if err != nil || math.IsNaN(t+v) || math.IsInf(t, 0) || math.IsInf(v, 0) {
		return fmt.Errorf("line %d is not a time and a value", line)
	}
	if n := len(d.times); n > 0 && !(t > d.times[n-1]) {
		return fmt.Errorf("the times do not ascend in line %d", line)
	}
	d.times, d.values = append(d.times, t), append(d.values, v)
	return nil
}
