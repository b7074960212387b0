// Command leadline computes ground-state energies of molecules and models by
// phaseless auxiliary-field quantum Monte Carlo.
//
// Progress and warnings go to stderr, results to stdout. Exit codes: 0 result
// obtained; 1 the job could not be done; 2 wrong usage; 3 finished, but the
// result carries a warning of the highest level; 130 interrupted, results so far
// written.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"

	"leadline/hamiltonian/linalg"
	"leadline/trial/measured/record"

	"github.com/spf13/cobra"
	"gonum.org/v1/gonum/blas/blas64"
)

const (
	exitDone        = 0
	exitFailed      = 1
	exitUsage       = 2
	exitDoubtful    = 3
	exitInterrupted = 130
)

func main() {
	blas64.Use(linalg.BLAS())
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	// A second interrupt ends the program at once.
	context.AfterFunc(ctx, stop)
	os.Exit(command(ctx, os.Args[1:], os.Stdout, os.Stderr))
}

// usageError marks an error in how the command was called.
type usageError struct{ error }

// exitError carries an exit code other than 1; its text, if any, was printed.
type exitError struct{ code int }

func (e exitError) Error() string { return fmt.Sprintf("exit code %d", e.code) }

// command runs one command line and returns its exit code.
func command(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	root := &cobra.Command{
		Use:   "leadline",
		Short: "Ground-state energies by auxiliary-field quantum Monte Carlo, with an honest error bar",
		Long: "Leadline computes ground-state energies of molecules and models by phaseless\n" +
			"auxiliary-field quantum Monte Carlo. Start with: leadline run",
		SilenceErrors: true,
		SilenceUsage:  true,
		Version:       version(),
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return unknownCommand(cmd, args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SuggestionsMinimumDistance = 2
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return usageError{err} })
	root.AddCommand(runCommand(stderr), prepareCommand(stderr), exactCommand(stderr), surveyCommand(stderr), measureCommand(stderr), inspectCommand(stderr), initCommand(stderr))
	root.CompletionOptions.HiddenDefaultCmd = true

	err := root.ExecuteContext(ctx)
	var exit exitError
	var usage usageError
	switch {
	case err == nil:
		return exitDone
	case errors.As(err, &exit):
		return exit.code
	case errors.As(err, &usage):
		fmt.Fprintf(stderr, "leadline: %v\n", err)
		fmt.Fprintln(stderr, "try: leadline --help")
		return exitUsage
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(stderr, "leadline: interrupted before any result")
		return exitInterrupted
	}
	printError(stderr, err)
	return exitFailed
}

// printError prints one error; that of a record begins with its code.
func printError(stderr io.Writer, err error) {
	if record.CodeOf(err) != "" {
		fmt.Fprintln(stderr, err)
		return
	}
	fmt.Fprintf(stderr, "leadline: %v\n", err)
}

// unknownCommand is the error for a command that does not exist, with the
// nearest one that does.
func unknownCommand(parent *cobra.Command, name string) error {
	text := fmt.Sprintf("unknown command %q", name)
	if near := parent.SuggestionsFor(name); len(near) > 0 {
		text += fmt.Sprintf("; did you mean %s?", near[0])
	}
	return usageError{errors.New(text)}
}

// arguments accepts from least to most arguments; most < 0 is no bound.
func arguments(least, most int) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if n := len(args); n < least || (most >= 0 && n > most) {
			return usageError{fmt.Errorf("%d arguments after %q, expected: %s", n, cmd.CommandPath(), cmd.UseLine())}
		}
		return nil
	}
}
