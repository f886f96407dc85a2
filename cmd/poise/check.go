package main

import (
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"errors"

	"github.com/spf13/cobra"

	"poise/analyses"
	"poise/analyses/report"
	"poise/netlist"
)

// checkFlags are what `poise check` can be told.
type checkFlags struct {
	format, color   string
	reports         []string
	benches         []string
	quiet, verbose  bool
	failFast, empty bool
	workers         int
	root            string
}

func checkCommand(s streams) *cobra.Command {
	f := &checkFlags{}
	c := &cobra.Command{
		Use:   "check [paths]",
		Short: "run every expectation of files or folders",
		Long: `Check runs every bench of the files given, and of all .poise files below the folders given (default: this folder).
The result goes to standard output, what is wrong with the input to standard error.`,
		Example: "  poise check\n  poise check amplifier.poise --bench hum -v\n  poise check designs/... --format json\n  poise check --report json=out/check.json",
		RunE:    func(cmd *cobra.Command, args []string) error { return f.run(cmd, args, s) },
	}
	flags := c.Flags()
	flags.StringVar(&f.format, "format", "text", "format of standard output: text or json")
	flags.StringArrayVar(&f.reports, "report", nil, "also write a report, KIND=PATH; KIND is text or json (repeatable)")
	flags.StringArrayVar(&f.benches, "bench", nil, "only this bench (repeatable)")
	flags.BoolVarP(&f.quiet, "quiet", "q", false, "show only what fails and the totals")
	flags.BoolVarP(&f.verbose, "verbose", "v", false, "show every expectation")
	flags.StringVar(&f.color, "color", "auto", "auto, always or never; NO_COLOR means never")
	flags.BoolVar(&f.failFast, "fail-fast", false, "stop after the first expectation that does not hold")
	flags.BoolVar(&f.empty, "allow-empty", false, "do not object if there is nothing to check")
	flags.IntVar(&f.workers, "workers", 0, "benches computed at once (0: as many as there are processors)")
	flags.StringVar(&f.root, "root", "", "folder that files brought in by use may lie in (default: this folder)")
	complete(c, "format", "text", "json")
	complete(c, "color", "auto", "always", "never")
	return c
}

// complete offers values for a flag in the shell.
func complete(c *cobra.Command, flag string, values ...string) {
	if err := c.RegisterFlagCompletionFunc(flag, cobra.FixedCompletions(values, cobra.ShellCompDirectiveNoFileComp)); err != nil {
		panic(err) // the flag has just been defined
	}
}

// oneOf checks a flag's value.
func oneOf(flag, value string, values ...string) error {
	for _, v := range values {
		if v == value {
			return nil
		}
	}
	return fmt.Errorf("--%s %s: want %s", flag, value, strings.Join(values, ", "))
}

func (f *checkFlags) run(cmd *cobra.Command, args []string, s streams) error {
	if err := errors.Join(oneOf("format", f.format, "text", "json"), oneOf("color", f.color, "auto", "always", "never")); err != nil {
		return err
	}
	for _, r := range f.reports {
		kind, path, ok := strings.Cut(r, "=")
		if !ok || path == "" {
			return fmt.Errorf("--report %s: want KIND=PATH", r)
		}
		if err := oneOf("report", kind, "text", "json"); err != nil {
			return err
		}
	}
	files, err := find(args)
	if err != nil {
		return err
	}
	var jobs []analyses.Job
	for _, file := range files {
		d, err := load(file, f.root)
		jobs = append(jobs, analyses.Job{File: file, Design: d, Err: err})
		f.messages(s, file, d, err)
	}
	p := newProgress(s)
	r := analyses.Check(cmd.Context(), jobs, analyses.Options{Workers: f.workers, Benches: f.benches, FailFast: f.failFast, Progress: p.show})
	p.clear()
	if err := f.write(r, s); err != nil {
		return err
	}
	if code := f.code(r, cmd, s); code != exitHeld {
		return exit(code)
	}
	return nil
}

// messages writes what the loader has to say.
func (f *checkFlags) messages(s streams, file string, d *netlist.Design, err error) {
	if err != nil {
		report.Problem(s.err, file, err)
		return
	}
	if f.quiet {
		return
	}
	for _, w := range d.Warnings {
		report.Diagnostic(s.err, w)
	}
}

func (f *checkFlags) write(r *analyses.Report, s streams) error {
	o := report.TextOptions{Color: f.color == "always" || f.color == "auto" && s.terminal && !s.noColor}
	switch {
	case f.quiet:
		o.Verbosity = report.Quiet
	case f.verbose:
		o.Verbosity = report.Verbose
	}
	writers := map[string]func(io.Writer) error{
		"text": func(w io.Writer) error { return report.Text(w, r, report.TextOptions{Verbosity: o.Verbosity}) },
		"json": func(w io.Writer) error { return report.JSON(w, r, report.Meta{Version: version()}) },
	}
	for _, x := range f.reports {
		kind, path, _ := strings.Cut(x, "=")
		if err := create(path, func(file *os.File) error { return writers[kind](file) }); err != nil {
			return fmt.Errorf("--report %s: %w", x, err)
		}
	}
	if f.format == "text" {
		return writeAll(s.out, func(w io.Writer) error { return report.Text(w, r, o) })
	}
	return writeAll(s.out, writers[f.format])
}

// code is the exit code of a report.
func (f *checkFlags) code(r *analyses.Report, cmd *cobra.Command, s streams) int {
	var diagnostic *netlist.Diagnostic
	input, unsolved, failed := false, false, false
	for _, file := range r.Files {
		input = input || file.Err != nil
		for _, b := range file.Benches {
			for _, err := range benchErrors(&b) {
				if errors.As(err, &diagnostic) {
					input = true
				} else {
					unsolved = true
				}
			}
			failed = failed || b.Status == analyses.Fail
		}
	}
	t := r.Totals
	if t.Pass+t.Fail+t.Error+t.Skipped == 0 && !f.empty && !input {
		fmt.Fprintln(s.err, "poise: there is nothing to check: no expectation was found (--allow-empty accepts that)")
		input = true
	}
	switch {
	case cmd.Context().Err() != nil:
		return exitInterrupted
	case input:
		return exitInput
	case unsolved:
		return exitUnsolved
	case failed:
		return exitFailed
	}
	return exitHeld
}

func benchErrors(b *analyses.BenchResult) []error {
	var errs []error
	if b.Err != nil {
		errs = append(errs, b.Err)
	}
	for _, x := range b.Expectations {
		if x.Err != nil {
			errs = append(errs, x.Err)
		}
	}
	return errs
}

// progress is a line on a terminal that tells how far a long check has come.
type progress struct {
	s       streams
	started time.Time
	shown   bool
}

func newProgress(s streams) *progress { return &progress{s: s, started: time.Now()} }

// progressAfter is how long a check must last before it tells of its progress.
const progressAfter = time.Second

func (p *progress) show(x analyses.Progress) {
	if !p.s.errTerminal || time.Since(p.started) < progressAfter {
		return
	}
	p.shown = true
	fmt.Fprintf(p.s.err, "\r\x1b[K%d of %d  %s %s", x.Done, x.Total, x.File, x.Bench)
	if x.Until > 0 {
		fmt.Fprintf(p.s.err, "  %.0f %%", 100*x.Time/x.Until)
	}
}

func (p *progress) clear() {
	if p.shown {
		fmt.Fprint(p.s.err, "\r\x1b[K")
	}
}
