package main

import (
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"poise/analyses"
	"poise/analyses/report"
	"poise/devices"
	"poise/netlist"
	"poise/netlist/unit"
)

// open loads one file and reports what is wrong with it.
func open(s streams, file, root string) (*netlist.Design, error) {
	d, err := load(file, root)
	if err != nil {
		report.Problem(s.err, file, err)
		return nil, exit(exitInput)
	}
	return d, nil
}

// benchOf finds a bench by name; an empty name is the circuit as written.
func benchOf(d *netlist.Design, name string) (*netlist.Bench, error) {
	if name == "" {
		return nil, nil
	}
	if b := d.Bench(name); b != nil {
		return b, nil
	}
	var names []string
	for _, b := range d.Benches {
		names = append(names, b.Name)
	}
	return nil, fmt.Errorf("%s has no bench called %s; it has %s", d.File, name, strings.Join(names, ", "))
}

func biasCommand(s streams) *cobra.Command {
	var bench, format, root string
	c := &cobra.Command{
		Use:     "bias FILE",
		Short:   "show the quiescent state: nodes, rails, power, every transistor",
		Example: "  poise bias amplifier.poise\n  poise bias amplifier.poise --bench hum --format json",
		Args:    cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := oneOf("format", format, "text", "json"); err != nil {
				return err
			}
			d, err := open(s, args[0], root)
			if err != nil {
				return err
			}
			b, err := benchOf(d, bench)
			if err != nil {
				return err
			}
			r, err := biasOf(cmd, d, b)
			if err != nil {
				return err
			}
			if format == "json" {
				return writeAll(s.out, func(w io.Writer) error {
					e := json.NewEncoder(w)
					e.SetIndent("", "  ")
					return e.Encode(r)
				})
			}
			return writeAll(s.out, func(w io.Writer) error { return report.Bias(w, r) })
		},
	}
	c.Flags().StringVar(&bench, "bench", "", "the set-up of this bench, at the first point of its grid")
	c.Flags().StringVar(&format, "format", "text", "text or json")
	c.Flags().StringVar(&root, "root", "", "folder that files brought in by use may lie in (default: this folder)")
	complete(c, "format", "text", "json")
	return c
}

func biasOf(cmd *cobra.Command, d *netlist.Design, b *netlist.Bench) (*analyses.BiasResult, error) {
	circuit, err := d.Circuit()
	if b != nil {
		var point []float64
		for _, axis := range b.Vary {
			point = append(point, axis.Values[0])
		}
		setup, e := b.Setup(point)
		if e != nil {
			return nil, e
		}
		circuit, err = setup.Circuit, nil
	}
	if err != nil {
		return nil, err
	}
	r, err := analyses.Bias(cmd.Context(), circuit)
	return r, solving(err)
}

// output writes curves as CSV and, if asked for, as a picture.
func output(s streams, results []analyses.PlotResult, picture string) error {
	for i := range results {
		if i > 0 {
			fmt.Fprintln(s.out)
		}
		if err := writeAll(s.out, func(w io.Writer) error { return report.CSV(w, &results[i]) }); err != nil {
			return err
		}
		if picture == "" {
			continue
		}
		kind := strings.TrimPrefix(filepath.Ext(picture), ".")
		name := picture
		if i > 0 {
			name = strings.TrimSuffix(picture, "."+kind) + fmt.Sprintf("-%d.%s", i+1, kind)
		}
		if err := create(name, func(f *os.File) error { return report.Plot(f, &results[i], kind) }); err != nil {
			return fmt.Errorf("--plot %s: %w", name, err)
		}
	}
	return nil
}

// pictureKind checks the ending of --plot.
func pictureKind(picture string) error {
	if kind := filepath.Ext(picture); picture != "" && kind != ".svg" && kind != ".png" {
		return fmt.Errorf("--plot %s: want a file that ends in .svg or .png", picture)
	}
	return nil
}

func responseCommand(s streams) *cobra.Command {
	var over, picture, root string
	var quantities []string
	var perDecade int
	c := &cobra.Command{
		Use:   "response FILE [BENCH]",
		Short: "write curves over frequency as CSV",
		Long: `Response writes the curves that a bench plots or expects, at the first point of its grid, as CSV.
With --quantity it writes those instead; without a bench the circuit as written is taken.`,
		Example: "  poise response amplifier.poise rejects > rejects.csv\n  poise response amplifier.poise --quantity dm_gain --quantity cmrr --over 1Hz..1MHz --plot gain.svg",
		Args:    cobra.RangeArgs(1, 2),
		RunE: func(cmd *cobra.Command, args []string) error {
			o := analyses.CurveOptions{Quantities: quantities, PerDecade: perDecade}
			var err error
			if o.Low, o.High, err = frequencies(over); err != nil {
				return err
			}
			if err := pictureKind(picture); err != nil {
				return err
			}
			d, err := open(s, args[0], root)
			if err != nil {
				return err
			}
			b, err := benchOf(d, append(args, "")[1])
			if err != nil {
				return err
			}
			results, err := analyses.Curves(cmd.Context(), d, b, o)
			if err != nil {
				return solving(err)
			}
			return output(s, results, picture)
		},
	}
	c.Flags().StringVar(&over, "over", "", "range of frequencies, as 1Hz..1MHz")
	c.Flags().StringArrayVar(&quantities, "quantity", nil, "a metric in the language, as dm_gain (repeatable)")
	c.Flags().IntVar(&perDecade, "per-decade", 0, "frequencies a decade (0: 20)")
	c.Flags().StringVar(&picture, "plot", "", "also draw to this .svg or .png file")
	c.Flags().StringVar(&root, "root", "", "folder that files brought in by use may lie in (default: this folder)")
	return c
}

// frequencies reads 1Hz..1MHz.
func frequencies(text string) (low, high float64, err error) {
	if text == "" {
		return 0, 0, nil
	}
	a, b, ok := strings.Cut(text, "..")
	v, err1 := unit.Parse(a)
	w, err2 := unit.Parse(b)
	if !ok || err1 != nil || err2 != nil || v.Dimension != unit.Frequency || w.Dimension != unit.Frequency || !(v.SI > 0 && v.SI < w.SI) {
		return 0, 0, fmt.Errorf("--over %s: want a range of frequencies, as 1Hz..1MHz", text)
	}
	return v.SI, w.SI, nil
}

func runCommand(s streams) *cobra.Command {
	var picture, root string
	var quantities []string
	var points int
	c := &cobra.Command{
		Use:   "run FILE BENCH",
		Short: "integrate a bench and write its waveforms as CSV",
		Long: `Run integrates the run of a bench, at the first point of its grid, and writes the waveforms that it plots and measures as CSV.
With --quantity it writes those instead.`,
		Example: "  poise run amplifier.poise hum --plot hum.png > hum.csv\n  poise run amplifier.poise hum --quantity 'volts(out)' --points 1000",
		Args:    cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := pictureKind(picture); err != nil {
				return err
			}
			if points < 0 || points == 1 {
				return fmt.Errorf("--points %d: want at least 2", points)
			}
			d, err := open(s, args[0], root)
			if err != nil {
				return err
			}
			b, err := benchOf(d, args[1])
			if err != nil {
				return err
			}
			results, err := analyses.Waveforms(cmd.Context(), d, b, analyses.WaveOptions{Quantities: quantities, Points: points})
			if err != nil {
				return solving(err)
			}
			return output(s, results, picture)
		},
	}
	c.Flags().StringArrayVar(&quantities, "quantity", nil, "a quantity in the language, as 'volts(out)' (repeatable)")
	c.Flags().IntVar(&points, "points", 0, "equally spaced times (0: the integrator's own steps)")
	c.Flags().StringVar(&picture, "plot", "", "also draw to this .svg or .png file")
	c.Flags().StringVar(&root, "root", "", "folder that files brought in by use may lie in (default: this folder)")
	return c
}

func formatCommand(s streams) *cobra.Command {
	var write, check bool
	c := &cobra.Command{
		Use:   "format [paths]",
		Short: "write files in the one form that all share",
		Long: `Format writes files to standard output in the common form: it keeps every comment and line break and never changes a meaning.
Without a path it reads standard input.`,
		Example: "  poise format -w designs/...\n  poise format --check\n  poise format < amplifier.poise",
		RunE: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 && !write && !check {
				src, err := io.ReadAll(s.in)
				if err != nil {
					return err
				}
				return formatOne(s, "standard input", string(src), false, false)
			}
			files, err := find(args)
			if err != nil {
				return err
			}
			worst := 0
			for _, f := range files {
				src, err := os.ReadFile(f)
				if err != nil {
					return err
				}
				var code exit
				if err := formatOne(s, f, string(src), write, check); err != nil {
					c, ok := err.(exit)
					if !ok {
						return err
					}
					code = c
				}
				worst = max(worst, int(code))
			}
			if worst > 0 {
				return exit(worst)
			}
			return nil
		},
	}
	c.Flags().BoolVarP(&write, "write", "w", false, "write the files in place")
	c.Flags().BoolVar(&check, "check", false, "name the files that are not in the common form; exit code 1 if there are any")
	return c
}

func formatOne(s streams, name, src string, write, check bool) error {
	out, err := netlist.Format(name, src)
	if err != nil {
		report.Problem(s.err, name, err)
		return exit(exitInput)
	}
	switch {
	case check:
		if out != src {
			fmt.Fprintln(s.out, name)
			return exit(exitFailed)
		}
	case write:
		if out != src {
			return create(name, func(f *os.File) error {
				_, err := f.WriteString(out)
				return err
			})
		}
	default:
		_, err = io.WriteString(s.out, out)
	}
	return err
}

func partsCommand(s streams) *cobra.Command {
	c := &cobra.Command{
		Use:     "parts [FAMILY]",
		Short:   "list the families of devices and their parameters",
		Example: "  poise parts\n  poise parts npn",
		Args:    cobra.MaximumNArgs(1),
		ValidArgsFunction: func(*cobra.Command, []string, string) ([]string, cobra.ShellCompDirective) {
			var names []string
			for _, f := range devices.Families() {
				names = append(names, f.Name)
			}
			return names, cobra.ShellCompDirectiveNoFileComp
		},
		RunE: func(_ *cobra.Command, args []string) error {
			families := devices.Families()
			if len(args) == 0 {
				t := tabwriter.NewWriter(s.out, 0, 0, 2, ' ', 0)
				for _, f := range families {
					fmt.Fprintf(t, "%s\t%s\t%d parameters\n", f.Name, f.Title, len(f.Params))
				}
				return t.Flush()
			}
			for i := range families {
				if families[i].Name == args[0] {
					return familyTable(s.out, &families[i])
				}
			}
			return fmt.Errorf("there is no family called %s; `poise parts` lists them", args[0])
		},
	}
	return c
}

// familyTable prints all that the catalogue knows of a family.
func familyTable(w io.Writer, f *devices.Family) error {
	fmt.Fprintf(w, "%s: %s\nequations: %s\n\n", f.Name, f.Title, f.Source)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "pin\tmeaning")
	for _, p := range f.Pins {
		meaning := p.Meaning
		if p.Optional {
			meaning += ", joined to " + p.Joins + " if not written"
		}
		fmt.Fprintf(t, "%s\t%s\n", p.Name, meaning)
	}
	fmt.Fprintln(t, "\nparameter\tsymbol\tdefault\trange\tmeaning")
	for i := range f.Params {
		p := &f.Params[i]
		u, err := unit.ParseUnit(p.Unit)
		if err != nil {
			return err
		}
		initial := show(p.Default, p.Unit, u.Dimension)
		if p.Derived != "" {
			initial = p.Derived
		}
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\n", p.Name, p.Symbol, initial, rangeOf(p, u.Dimension), p.Meaning)
	}
	fmt.Fprintln(t, "\noperating quantity\tunit\tmeaning")
	for _, o := range f.Operating {
		u := o.Unit
		if len(o.Words) > 0 {
			u = strings.Join(o.Words, ", ")
		}
		fmt.Fprintf(t, "%s\t%s\t%s\n", o.Name, u, o.Meaning)
	}
	return t.Flush()
}

func show(v float64, symbol string, d unit.Dimension) string {
	if symbol == "degC" {
		return unit.Trim(v-unit.ZeroCelsius, unit.ShownDigits) + " degC"
	}
	return unit.Show(v, d)
}

func rangeOf(p *devices.Param, d unit.Dimension) string {
	left, right := "[", "]"
	if p.MinOpen {
		left = "("
	}
	if p.MaxOpen {
		right = ")"
	}
	return left + unit.Trim(p.Min, 4) + ", " + unit.Show(p.Max, d) + right
}
