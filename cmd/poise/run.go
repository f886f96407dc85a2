package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"runtime/debug"

	"github.com/spf13/cobra"

	"poise/analyses"
	"poise/netlist"
)

// Exit codes. Over several files 2 wins over 3, and 3 over 1.
const (
	exitHeld        = 0
	exitFailed      = 1   // an expectation did not hold
	exitInput       = 2   // the input or the call is wrong
	exitUnsolved    = 3   // an analysis could not be completed
	exitInterrupted = 130 // stopped by a signal
)

// exit is an error that only carries an exit code: what there was to say has been said.
type exit int

func (e exit) Error() string { return fmt.Sprintf("exit code %d", int(e)) }

// run executes the command and returns its exit code.
func run(ctx context.Context, args []string, s streams) int {
	root := newRoot(s)
	root.SetArgs(args)
	err := root.ExecuteContext(ctx)
	var code exit
	switch {
	case err == nil:
		return exitHeld
	case errors.As(err, &code):
		return int(code)
	case ctx.Err() != nil:
		fmt.Fprintln(s.err, "poise: interrupted")
		return exitInterrupted
	}
	fmt.Fprintf(s.err, "poise: %s\n", err)
	return codeOf(err)
}

// codeOf tells what was asked wrongly from what could not be solved.
func codeOf(err error) int {
	var unsolved *unsolvedError
	if errors.As(err, &unsolved) {
		return exitUnsolved
	}
	return exitInput
}

// unsolvedError marks an error of an analysis.
type unsolvedError struct{ err error }

func (e *unsolvedError) Error() string { return e.err.Error() }
func (e *unsolvedError) Unwrap() error { return e.err }

// solving marks an error as one of solving, unless it is about the input.
func solving(err error) error {
	var input *analyses.InputError
	var diagnostic *netlist.Diagnostic
	if err == nil || errors.As(err, &input) || errors.As(err, &diagnostic) || errors.Is(err, context.Canceled) {
		return err
	}
	return &unsolvedError{err}
}

// version is the module's version as the build knows it.
func version() string {
	if info, ok := debug.ReadBuildInfo(); ok && info.Main.Version != "" {
		return info.Main.Version
	}
	return "(devel)"
}

func newRoot(s streams) *cobra.Command {
	root := &cobra.Command{
		Use:   "poise",
		Short: "prove a differential front end before it is built",
		Long: `Poise simulates differential front ends: the first amplifier behind a weak, high-impedance, floating source.

One .poise file holds the circuit, the ways it is disturbed and what is expected of it;
'poise check' runs every expectation and answers: it holds or it fails, by how much, and where.

Exit codes: 0 everything held, 1 an expectation failed, 2 the input or the call is wrong,
3 an analysis could not be completed, 130 interrupted.`,
		Example:       "  poise check amplifier.poise\n  poise bias amplifier.poise\n  poise run amplifier.poise hum --plot hum.svg > hum.csv",
		SilenceUsage:  true,
		SilenceErrors: true,
		Version:       version(),
	}
	root.SetIn(s.in)
	root.SetOut(s.out)
	root.SetErr(s.err)
	root.AddCommand(checkCommand(s), biasCommand(s), responseCommand(s), runCommand(s), formatCommand(s), partsCommand(s))
	return root
}

// writeAll writes to w through f and reports its error.
func writeAll(w io.Writer, f func(io.Writer) error) error {
	if err := f(w); err != nil {
		return fmt.Errorf("writing the result: %w", err)
	}
	return nil
}
