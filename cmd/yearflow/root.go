package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"

	"github.com/spf13/cobra"

	"yearflow/sim/tables"
)

// version is what run.json and --version say.
const version = "0.1.0"

// The exit status of the program.
const (
	exitDone    = 0 // done
	exitFound   = 1 // the study ran but has low or unsolved steps, or violations with --strict
	exitInput   = 2 // the input is wrong
	exitMachine = 3 // the machine failed: disk, memory

	exitStopped = 130 // stopped by Ctrl-C or a signal, as shells have it
)

// console is where a command writes: results to out, everything else to errs.
type console struct {
	out, errs io.Writer
	status    int // of a command that did its work
}

// watchedWriter remembers the first error of writing, so that a full disk behind
// standard output is told by the exit status.
type watchedWriter struct {
	w   io.Writer
	err error
}

func (w *watchedWriter) Write(p []byte) (int, error) {
	if w.err != nil {
		return 0, w.err
	}
	n, err := w.w.Write(p)
	w.err = err
	return n, err
}

func (c *console) printf(format string, args ...any) { fmt.Fprintf(c.out, format, args...) }

// inputError is an error of the input; machineError one of the machine.
type (
	inputError   struct{ error }
	machineError struct{ error }
)

func (e inputError) Unwrap() error   { return e.error }
func (e machineError) Unwrap() error { return e.error }

func wrongf(format string, args ...any) error { return inputError{fmt.Errorf(format, args...)} }

// run is the program: it returns the exit status.
func run(ctx context.Context, args []string, out, errs io.Writer) int {
	watched := &watchedWriter{w: out}
	out = watched
	c := &console{out: out, errs: errs}
	root := newRoot(c)
	root.SetArgs(args)
	root.SetOut(out)
	root.SetErr(errs)
	err := root.ExecuteContext(ctx)
	if err == nil && watched.err != nil {
		err = machineError{fmt.Errorf("write to standard output: %w", watched.err)}
	}
	switch {
	case err == nil:
		return c.status
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(errs, "stopped: the results of the last whole run are as they were")
		return exitStopped
	}
	var faults tables.Faults
	if errors.As(err, &faults) {
		for _, f := range faults {
			fmt.Fprintln(errs, f.Error())
		}
		fmt.Fprintf(errs, "%s\n", count(len(faults), "error"))
	} else {
		fmt.Fprintln(errs, err)
	}
	var m machineError
	if errors.As(err, &m) {
		return exitMachine
	}
	return exitInput
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

const intro = `yearflow simulates an electric distribution feeder over a year: an unbalanced power
flow at every step, with tap changers and capacitors acting in time order. It leaves
logs, figures and statistics of voltage, losses and device operations.

Three commands to begin with:

  yearflow run                 the demo study, a whole year, into ./results
  yearflow demo my-feeder      writes the demo study into a folder, ready to edit
  yearflow check my-feeder     reads a study and says everything that is wrong or odd

"yearflow help" lists all commands.

Results are estimates for study. Settings, ratings and operating decisions stay with
local codes, the utility's own standards and a licensed engineer.
`

func newRoot(c *console) *cobra.Command {
	root := &cobra.Command{
		Use: "yearflow", Short: "a feeder's year: voltage, losses and device operations", Long: intro,
		Version: version, SilenceErrors: true, SilenceUsage: true,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				near := ""
				if s := cmd.SuggestionsFor(args[0]); len(s) > 0 {
					near = fmt.Sprintf(": did you mean %q?", s[0])
				}
				return wrongf("no command named %q%s (\"yearflow help\" lists them)", args[0], near)
			}
			return nil
		},
		RunE: func(*cobra.Command, []string) error { c.printf("%s", intro); return nil },
	}
	root.SuggestionsMinimumDistance = 2
	root.CompletionOptions.HiddenDefaultCmd = true
	root.SetFlagErrorFunc(flagHint)
	root.SetHelpCommand(helpCommand(c, root))
	root.AddCommand(demoCommand(c), checkCommand(c), solveCommand(c), traceCommand(c), runCommand(c), compareCommand(c), tuneCommand(c), lossesCommand(c), impactCommand(c), hostingCommand(c), linesCommand(c), reportCommand(c))
	return root
}

func helpCommand(c *console, root *cobra.Command) *cobra.Command {
	return &cobra.Command{
		Use: "help [COMMAND]", Short: "what a command does, with an example",
		RunE: func(_ *cobra.Command, args []string) error {
			cmd, rest, err := root.Find(args)
			if err != nil || len(rest) > 0 {
				return wrongf("no command named %q (\"yearflow help\" lists them)", strings.Join(args, " "))
			}
			cmd.InitDefaultHelpFlag()
			cmd.InitDefaultVersionFlag()
			return cmd.Help()
		},
	}
}

// flagHint adds the nearest option to cobra's word on an unknown one.
func flagHint(cmd *cobra.Command, err error) error {
	text := err.Error()
	if _, name, ok := strings.Cut(text, "unknown flag: --"); ok {
		var names []string
		cmd.Flags().VisitAll(func(f *flagOf) { names = append(names, f.Name) })
		if near, ok := tables.Nearest(name, names); ok {
			text += fmt.Sprintf(": did you mean --%s?", near)
		}
	}
	return wrongf("%s (\"%s --help\" lists the options)", text, cmd.CommandPath())
}

// atMostOne is cobra's check with our words.
func atMostOne(what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) > 1 {
			return wrongf("%s takes one %s at most, not %q", cmd.CommandPath(), what, args)
		}
		return nil
	}
}
