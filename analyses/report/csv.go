package report

import (
	"encoding/csv"
	"io"
	"math"
	"strconv"

	"poise/analyses"
)

// CSV writes curves or waveforms as a table: the time or frequency, then a column for each trace, and for a complex one its magnitude and its
// phase in deg. Units stand in the head.
func CSV(w io.Writer, p *analyses.PlotResult) error {
	c := csv.NewWriter(w)
	head := []string{title(p.X.Name, p.X.Unit)}
	for _, t := range p.Traces {
		if t.Phase == nil {
			head = append(head, title(t.Name, t.Unit))
			continue
		}
		head = append(head, title("abs("+t.Name+")", t.Unit), title("phase("+t.Name+")", "deg"))
	}
	if err := c.Write(head); err != nil {
		return err
	}
	row := make([]string, 0, len(head))
	for i, x := range p.X.Values {
		row = append(row[:0], format(x))
		for _, t := range p.Traces {
			row = append(row, format(t.Values[i]))
			if t.Phase != nil {
				row = append(row, format(t.Phase[i]*180/math.Pi))
			}
		}
		if err := c.Write(row); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}

func title(name, unit string) string {
	if unit == "" {
		return name
	}
	return name + " [" + unit + "]"
}

// format writes a number with the digits that a waveform can have.
func format(v float64) string { return strconv.FormatFloat(v, 'g', 12, 64) }
