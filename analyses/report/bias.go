package report

import (
	"fmt"
	"io"
	"text/tabwriter"

	"poise/analyses"
	"poise/mna"
	"poise/netlist/unit"
)

// Bias writes the quiescent state of a circuit: nodes, rails, inputs, transistors, parts.
func Bias(w io.Writer, b *analyses.BiasResult) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	p := func(format string, args ...any) { fmt.Fprintf(t, format, args...) }
	volts := func(v float64) string { return unit.Show(v, unit.Voltage) }
	amps := func(v float64) string { return unit.Show(v, unit.Current) }
	watts := func(v float64) string { return unit.Show(v, unit.Power) }
	fmt.Fprintf(w, "at rest, %s degC; found by %s in %d iterations\n", unit.Trim(b.Temperature-unit.ZeroCelsius, unit.ShownDigits), b.Rung, b.Iterations)
	p("\nnode\tvoltage\t\n")
	for _, n := range b.Nodes {
		p("%s\t%s\t\n", n.Name, volts(n.Volts))
	}
	if len(b.Rails)+len(b.Sources) > 0 {
		p("\nrail or source\tvoltage\tdelivers\tpower\t\n")
		for _, s := range append(append([]analyses.SourceState(nil), b.Rails...), b.Sources...) {
			p("%s\t%s\t%s\t%s\t\n", s.Name, volts(s.Volts), amps(s.Amps), watts(s.Watts))
		}
		p("all together\t\t\t%s\t\n", watts(b.Power))
	}
	if len(b.Inputs) > 0 {
		p("\ninput\tnode\tvoltage\tinto the circuit\t\n")
		for _, in := range b.Inputs {
			for _, pin := range in.Pins {
				p("%s\t%s\t%s\t%s\t\n", in.Name, pin.Node, volts(pin.Volts), amps(pin.Amps))
			}
		}
	}
	if len(b.Parts) > 0 {
		p("\npart\tvoltage\tcurrent\tpower\t\n")
		for _, x := range b.Parts {
			p("%s\t%s\t%s\t%s\t\n", x.Name, volts(x.Volts), amps(x.Amps), watts(x.Watts))
		}
	}
	if err := t.Flush(); err != nil {
		return err
	}
	return deviceTables(w, b.Devices)
}

// deviceTables writes a table for the devices of each family, one device a column.
func deviceTables(w io.Writer, devices []analyses.DeviceState) error {
	const columns = 6 // devices beside each other
	byFamily := map[string][]analyses.DeviceState{}
	var families []string
	for _, d := range devices {
		if byFamily[d.Family] == nil {
			families = append(families, d.Family)
		}
		byFamily[d.Family] = append(byFamily[d.Family], d)
	}
	for _, f := range families {
		list := byFamily[f]
		for len(list) > 0 {
			n := min(columns, len(list))
			if err := deviceTable(w, f, list[:n]); err != nil {
				return err
			}
			list = list[n:]
		}
	}
	return nil
}

func deviceTable(w io.Writer, family string, list []analyses.DeviceState) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(t, "\n%s\t", family)
	for _, d := range list {
		fmt.Fprintf(t, "%s\t", d.Name)
	}
	fmt.Fprintf(t, "\npart\t")
	for _, d := range list {
		fmt.Fprintf(t, "%s\t", d.Part)
	}
	fmt.Fprintln(t)
	for i, q := range list[0].Quantities {
		fmt.Fprintf(t, "%s\t", q.Name)
		for _, d := range list {
			fmt.Fprintf(t, "%s\t", quantity(d.Quantities[i]))
		}
		fmt.Fprintln(t)
	}
	return t.Flush()
}

func quantity(q mna.Quantity) string {
	if q.Word != "" {
		return q.Word
	}
	return show(q.Value, q.Unit, false)
}
