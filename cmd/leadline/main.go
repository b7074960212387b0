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

	"github.com/spf13/cobra"
	"gonum.org/v1/gonum/blas/blas64"
	"leadline/hamiltonian/linalg"
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
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
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
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return usageError{fmt.Errorf("unknown command %q", args[0])}
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
	fmt.Fprintf(stderr, "leadline: %v\n", err)
	return exitFailed
}

// arguments wraps a check of the number of arguments, so that a wrong one
// counts as wrong usage.
func arguments(check cobra.PositionalArgs) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if err := check(cmd, args); err != nil {
			return usageError{err}
		}
		return nil
	}
}
