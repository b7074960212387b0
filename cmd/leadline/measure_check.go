package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/exact"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/check"
	"leadline/trial/measured/collapse"
)

func checkCommand(stderr io.Writer) *cobra.Command {
	var jobName string
	var asJSON, quiet bool
	c := &cobra.Command{
		Use:   "check RECORD",
		Short: "Validate a record and print its figures of merit",
		Args:  arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			return checkRecord(c.Context(), args[0], jobName, asJSON, c.OutOrStdout(), display{out: stderr, quiet: quiet})
		},
	}
	c.Flags().StringVar(&jobName, "job", "", "job whose Hamiltonian the record must belong to")
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	c.Flags().BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

func checkRecord(ctx context.Context, name, jobName string, asJSON bool, stdout io.Writer, shown display) error {
	r, err := openRecord(name)
	if err != nil {
		return err
	}
	defer r.close()
	report, estimate, err := check.Run(ctx, r.source, onThisMachine(collapse.Options{}, "reading "+filepath.Base(name), shown.stage))
	if err != nil {
		return err
	}
	if jobName != "" {
		if err := compareJob(ctx, r, jobName, report, estimate, shown); err != nil {
			return err
		}
	}
	if asJSON {
		err = encode(stdout, report)
	} else {
		err = printReport(stdout, name, report)
	}
	if err == nil && !report.Valid {
		return exitError{exitFailed}
	}
	return err
}

// compareJob compares fingerprint and energy of the record with a job.
func compareJob(ctx context.Context, r *recordFile, jobName string, report *check.Report, estimate *amplitude.Estimate, shown display) error {
	in, j, _, err := loadJob(jobName)
	if err != nil {
		return err
	}
	s, err := newSystem(ctx, j, in, shown.stage)
	if err != nil {
		return err
	}
	header, err := r.header()
	if err != nil {
		return err
	}
	if !report.CompareFingerprint(header, s.fingerprint(in)) {
		report.Valid = false
	}
	m := &measuredTrial{name: r.name, orbitals: s.hamiltonian.Orbitals}
	if err := m.place(header, j.Trial.Active, s.hamiltonian.Sector); err != nil {
		return fmt.Errorf("%s: %w", r.name, err)
	}
	return m.compareEnergy(s.hamiltonian, report, estimate)
}

// compareEnergy compares the energy of an estimate that nothing was done to with
// the one that its record declares.
func (m *measuredTrial) compareEnergy(h *hamiltonian.Hamiltonian, report *check.Report, estimate *amplitude.Estimate) error {
	window, err := windowHamiltonian(h, m)
	if err != nil {
		return err
	}
	operator, err := exact.NewOperator(window)
	if err != nil {
		return err
	}
	report.CompareEnergy(estimate, func(dst, src []complex128) { applyComplex(operator, dst, src) })
	return nil
}

// windowHamiltonian folds the core in and keeps the measured orbitals.
func windowHamiltonian(h *hamiltonian.Hamiltonian, m *measuredTrial) (*hamiltonian.Hamiltonian, error) {
	keep := mat.NewDense(h.Orbitals, m.core+m.active, nil)
	for p := range m.core + m.active {
		keep.Set(p, p, 1)
	}
	if m.columns != nil {
		keep = m.columns
	}
	return h.Rotate(keep).FreezeCore(m.core)
}

// applyComplex applies a real operator to real and imaginary parts.
func applyComplex(o *exact.Operator, dst, src []complex128) {
	part, image := make([]float64, len(src)), make([]float64, len(src))
	for plane := range 2 {
		for i, v := range src {
			if part[i] = real(v); plane == 1 {
				part[i] = imag(v)
			}
		}
		o.Apply(image, part)
		for i, v := range image {
			if plane == 0 {
				dst[i] = complex(v, 0)
			} else {
				dst[i] += complex(0, v)
			}
		}
	}
}

func printReport(w io.Writer, name string, r *check.Report) error {
	var b strings.Builder
	row := r.Row
	if reference, ok := row.(map[string][]int); ok {
		row = fmt.Sprintf("of the determinant %v", reference["occupied"])
	}
	fmt.Fprintf(&b, "%s: record of %d qubits, ensemble %s, row %v\n\n", name, r.Qubits, r.Ensemble, row)
	fmt.Fprintf(&b, "  settings            %d\n  shots               %d\n", r.Settings, r.Shots)
	fmt.Fprintf(&b, "  determinants        %d\n", r.Determinants)
	fmt.Fprintf(&b, "  kappa               %s (1 without noise)\n", quoted(r.Kappa, r.KappaError))
	fmt.Fprintf(&b, "  effective shots     %.4g\n", r.EffectiveShots)
	fmt.Fprintf(&b, "  variance per shot   %.4g, expected %s", r.Variance, quoted(r.VarianceExpected, r.VarianceExpectedError))
	if r.Shots > r.Settings {
		fmt.Fprintf(&b, " with one shot per setting, %.3g here", float64(r.Shots)/float64(r.Settings))
	}
	fmt.Fprintln(&b)
	fmt.Fprintf(&b, "  infidelity          %.3g, before any projection\n", r.Infidelity)
	for _, x := range r.Rejected {
		fmt.Fprintf(&b, "  no contribution     %s of the shots (%s), noiseless %.4g\n", quoted(x.Fraction, x.Error), x.Cause, x.Expected)
	}
	for _, x := range r.Readings {
		fmt.Fprintf(&b, "  read as %-11s kappa %s\n", x.Name, quoted(x.Kappa, x.KappaError))
	}
	if r.TopOverlap != nil {
		fmt.Fprintf(&b, "  with declared       overlap %s\n", quoted(r.TopOverlap.Value, r.TopOverlap.Error))
	}
	if r.Energy != nil {
		fmt.Fprintf(&b, "  energy of the state %s E_h, noise removed", quoted(r.Energy.Value, r.Energy.Error))
		if r.DeclaredEnergy != nil {
			fmt.Fprintf(&b, "; declared %s", quoted(*r.DeclaredEnergy, 0))
		}
		fmt.Fprintln(&b)
	}
	if len(r.Warnings) > 0 {
		fmt.Fprintf(&b, "\n  warnings\n")
		for _, x := range r.Warnings {
			fmt.Fprintf(&b, "    %-8s %s: %s\n", x.Level, x.Check, x.Text)
		}
	}
	if r.Valid {
		fmt.Fprintf(&b, "\n  valid\n")
	} else {
		fmt.Fprintf(&b, "\n  not valid for use\n")
	}
	_, err := io.WriteString(w, b.String())
	return err
}
