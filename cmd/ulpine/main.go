// Command ulpine runs mixed-precision training experiments with every
// multiplication, addition and store emulated at the precision a plan asks for,
// and says which arms stay within the plan's margin of the FP32 baseline.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime/debug"
	"strings"
	"syscall"

	"github.com/spf13/cobra"

	"ulpine/experiments"
)

// Exit codes.
const (
	exitOK          = 0
	exitFailed      = 1 // something went wrong on the machine's side
	exitBadInput    = 2 // a plan, a file or an argument is wrong
	exitVerdict     = 3 // verdicts --require-within and some arm is not
	exitInterrupted = 130
)

// exitError carries an exit code with an error.
type exitError struct {
	code int
	err  error
}

func (e *exitError) Error() string { return e.err.Error() }
func (e *exitError) Unwrap() error { return e.err }

// badInput marks an error as the input's fault: exit code 2.
func badInput(err error) error {
	if err == nil {
		return nil
	}
	return &exitError{exitBadInput, err}
}

func main() { os.Exit(execute(os.Args[1:], os.Stdin, os.Stdout, os.Stderr)) }

// execute runs one command line and returns its exit code. A panic becomes one
// line and an exit code: nobody should see a Go stack trace unless they ask for
// it with ULPINE_TRACE=1.
func execute(args []string, in io.Reader, out, errw io.Writer) (code int) {
	defer func() {
		if p := recover(); p != nil {
			fmt.Fprintf(errw, "ulpine: a defect in ulpine itself: %v (set ULPINE_TRACE=1 to see where, and report it)\n", p)
			if os.Getenv("ULPINE_TRACE") != "" {
				fmt.Fprintf(errw, "%s", debug.Stack())
			}
			code = exitFailed
		}
	}()
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	root := newRoot()
	root.SetArgs(args)
	root.SetIn(in)
	root.SetOut(out)
	root.SetErr(errw)
	err := root.ExecuteContext(ctx)
	if err == nil {
		return exitOK
	}
	if text := err.Error(); text != "" {
		for line := range strings.Lines(text) {
			fmt.Fprintln(errw, "ulpine:", strings.TrimRight(line, "\n"))
		}
	}
	var coded *exitError
	switch {
	case errors.As(err, &coded):
		return coded.code
	case errors.Is(err, context.Canceled):
		return exitInterrupted
	}
	return exitFailed
}

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "ulpine",
		Short: "How few bits are enough: paired mixed-precision training on a CPU",
		Long: `Ulpine trains a network under number formats, roundings and accumulators that a
plan chooses point by point, every operation emulated bit for bit, pairs each
run with an FP32 baseline, and says what stays within the plan's margin.

Start with:  ulpine run experiments/plans/first-look.toml`,
		SilenceUsage:               true,
		SilenceErrors:              true,
		SuggestionsMinimumDistance: 2,
		Version:                    experiments.CodeVersion(),
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return badInput(unknownVerb(cmd, args[0]))
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SetFlagErrorFunc(func(cmd *cobra.Command, err error) error {
		return badInput(fmt.Errorf("%w (see %q)", err, cmd.CommandPath()+" --help"))
	})
	root.SetVersionTemplate("ulpine {{.Version}}\n")
	root.AddCommand(verbs()...)
	root.SetHelpCommand(newHelp())
	return root
}

// newHelp is cobra's help verb, but a word that is no verb is bad input.
func newHelp() *cobra.Command {
	return &cobra.Command{
		Use:   "help [VERB]",
		Short: "Help about any verb",
		RunE: func(cmd *cobra.Command, args []string) error {
			target, rest, err := cmd.Root().Find(args)
			if err != nil || len(rest) > 0 {
				return badInput(unknownVerb(cmd.Root(), strings.Join(args, " ")))
			}
			target.InitDefaultHelpFlag()
			return target.Help()
		},
	}
}

// unknownVerb names the nearest verbs.
func unknownVerb(root *cobra.Command, word string) error {
	near := root.SuggestionsFor(word)
	if len(near) > 0 {
		return fmt.Errorf("unknown verb %q; nearest: %s", word, strings.Join(near, ", "))
	}
	return fmt.Errorf("unknown verb %q; ulpine --help lists them", word)
}

// exactly is cobra.ExactArgs with exit code 2 and the names of what is missing.
func exactly(names ...string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) == len(names) {
			return nil
		}
		if len(args) == 0 && names[0] == "PLAN" {
			return badInput(fmt.Errorf("%s takes PLAN, a TOML file; plans to begin with are in experiments/plans, as in: %s experiments/plans/first-look.toml",
				cmd.CommandPath(), cmd.CommandPath()))
		}
		return badInput(fmt.Errorf("%s takes %s, got %d arguments (see %q)",
			cmd.CommandPath(), strings.Join(names, " "), len(args), cmd.CommandPath()+" --help"))
	}
}
