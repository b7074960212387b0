package main

import (
	"context"
	"fmt"
	"io"
	"math"

	"github.com/spf13/cobra"

	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
)

// exactResult is what leadline exact --json prints.
type exactResult struct {
	ExactEnergy  float64      `json:"exact_energy"`
	States       []exactState `json:"states"`
	Determinants int          `json:"determinants"`
	Unit         string       `json:"unit"`

	ground *exact.State
	space  *exact.Space
}

type exactState struct {
	Energy      float64 `json:"energy"`
	SpinSquared float64 `json:"spin_squared"`
}

func exactCommand(stderr io.Writer) *cobra.Command {
	var states int
	var spin float64
	var asJSON, quiet bool
	c := &cobra.Command{
		Use:   "exact JOB.toml",
		Short: "Full CI in the job's orbital space, where it fits in memory",
		Args:  arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			if states < 1 {
				return usageError{fmt.Errorf("--states is %d, expected at least 1", states)}
			}
			var only *float64
			if c.Flags().Changed("spin") {
				if spin < 0 || spin*2 != math.Trunc(spin*2) {
					return usageError{fmt.Errorf("--spin is %g, expected a multiple of one half", spin)}
				}
				only = &spin
			}
			in, j, _, err := loadJob(args[0])
			if err != nil {
				return err
			}
			shown := display{out: stderr, quiet: quiet}
			tighten(j)
			s, err := newSystem(c.Context(), j, in, shown.stage)
			if err != nil {
				return err
			}
			s.printWarnings(shown)
			result, err := s.exact(c.Context(), states, only, false, shown)
			if err != nil {
				return err
			}
			if asJSON {
				return encode(c.OutOrStdout(), result)
			}
			return result.print(c.OutOrStdout(), j.Title)
		},
	}
	c.Flags().IntVar(&states, "states", 1, "number of states, the lowest ones")
	c.Flags().Float64Var(&spin, "spin", 0, "only states of this total spin S")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	c.Flags().BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

// exact solves the whole orbital space, for the total spin given or, with kept,
// for the one that the projection keeps. It says beforehand what it needs.
func (s *system) exact(ctx context.Context, states int, spin *float64, kept bool, shown display) (*exactResult, error) {
	h := s.hamiltonian
	determinants, bytes := exact.Estimate(h.Sector, states)
	need := fmt.Sprintf("full CI of %d orbitals, %d up and %d down electrons", h.Orbitals, h.Up, h.Down)
	if h.Orbitals > 64 {
		return nil, fmt.Errorf("full CI in %d orbitals, expected at most 64", h.Orbitals)
	}
	if determinants == math.MaxInt || bytes == math.MaxInt64 {
		return nil, fmt.Errorf("%s: far too many determinants", need)
	}
	if err := checkMemory(bytes, fmt.Sprintf("%s (%d determinants)", need, determinants)); err != nil {
		return nil, err
	}
	if kept {
		spin = keptSpin(h)
	}
	say := func(format string, args ...any) {
		if !shown.quiet {
			fmt.Fprintf(shown.out, format+"\n", args...)
		}
	}
	say("%s: %d determinants, %s of memory", need, determinants, bytesText(bytes))
	converged := false
	result, err := exact.Solve(ctx, h, exact.Options{
		States: states, Spin: spin, MemoryLimit: math.MaxInt64,
		Progress: func(iteration int, residual float64) {
			switch {
			case converged:
			case residual < 1e-7:
				converged = true
				say("  iteration %d: residual %.1e; now looking for missed states", iteration, residual)
			case iteration%5 == 0:
				say("  iteration %d: residual %.1e", iteration, residual)
			}
		},
	})
	if err != nil {
		return nil, err
	}
	out := &exactResult{Determinants: determinants, Unit: s.unit}
	for _, state := range result.States {
		out.States = append(out.States, exactState{state.Energy, state.SpinSquared})
	}
	out.ExactEnergy = out.States[0].Energy
	out.ground, out.space = &result.States[0], result.Space
	return out, nil
}

// keptSpin returns the total spin that the projection keeps, nil where the
// Hamiltonian does not conserve spin.
func keptSpin(h *hamiltonian.Hamiltonian) *float64 {
	if !exact.CommutesWithSpin(h) {
		return nil
	}
	spin := 0.5 * math.Abs(float64(h.Up-h.Down))
	return &spin
}

// tighten asks for factors as exact as numbers allow, for energies that are to be
// compared with others.
func tighten(j *job.Job) {
	j.Hamiltonian.FactorTolerance = min(j.Hamiltonian.FactorTolerance, comparableTolerance)
}

func (r *exactResult) print(w io.Writer, title string) error {
	unit := symbol(r.Unit)
	if _, err := fmt.Fprintf(w, "%s\n\n  full CI, %d determinants\n", title, r.Determinants); err != nil {
		return err
	}
	for i, state := range r.States {
		difference := ""
		if i > 0 {
			difference = fmt.Sprintf(", %s %s above the first", quoted(state.Energy-r.States[0].Energy, 0), unit)
		}
		if _, err := fmt.Fprintf(w, "  state %-3d energy %s %s, <S^2> = %.4f%s\n", i+1, quoted(state.Energy, 0), unit, math.Abs(state.SpinSquared), difference); err != nil {
			return err
		}
	}
	return nil
}
