package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"
	"gonum.org/v1/gonum/mat"

	"leadline/cmd/leadline/job"
	"leadline/hamiltonian/fcidump"
	"leadline/hamiltonian/prepared"
	"leadline/trial/expansion"
)

func prepareCommand(stderr io.Writer) *cobra.Command {
	var output, expansionFile string
	var integrals, overwrite, quiet bool
	c := &cobra.Command{
		Use:   "prepare JOB.toml -o FILE",
		Short: "Fix the orbitals of a job once, in a file that expansions and records can name",
		Long: "Fix the orbitals of a job once: write its Hamiltonian, packed or as an integral\n" +
			"file, in canonical orbitals of the spin-pure mean field or, where the trial has an\n" +
			"active window, in the orbitals of the window, core first. An integral file given\n" +
			"as it is keeps its orbitals unless there is a window.",
		Args: arguments(1, 1),
		RunE: func(c *cobra.Command, args []string) error {
			if output == "" {
				return usageError{fmt.Errorf("-o FILE is needed")}
			}
			for _, name := range []string{output, expansionFile} {
				if err := mayWrite(name, overwrite); name != "" && err != nil {
					return err
				}
			}
			if expansionFile != "" && filepath.Clean(expansionFile) == filepath.Clean(output) {
				return usageError{fmt.Errorf("-o and --expansion name the same file, %s", output)}
			}
			return prepare(c.Context(), args[0], output, expansionFile, integrals, c.OutOrStdout(), display{out: stderr, quiet: quiet})
		},
	}
	c.Flags().StringVarP(&output, "output", "o", "", "file to write")
	c.Flags().StringVar(&expansionFile, "expansion", "", "also write the job's expansion, for these orbitals, to this file")
	c.Flags().BoolVar(&integrals, "integrals", false, "write an integral file, not the packed form")
	c.Flags().BoolVar(&overwrite, "overwrite", false, "replace files that exist")
	c.Flags().BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

func prepare(ctx context.Context, name, output, expansionFile string, integrals bool, stdout io.Writer, shown display) error {
	in, j, _, err := loadJob(name)
	if err != nil {
		return err
	}
	s, err := newSystem(ctx, j, in, shown.stage)
	if err != nil {
		return err
	}
	s.printWarnings(shown)
	var e *expansion.Expansion
	if j.Trial.Kind != "determinant" && j.Trial.Active != (job.Space{}) {
		g := &guidance{}
		reference, err := g.solveReference(ctx, j, in, s)
		if err != nil {
			return err
		}
		kind := j.Trial.Window
		if kind == "" {
			kind = "natural"
		}
		w, err := newWindow(ctx, j.Trial.Active, kind, s, reference)
		if err != nil {
			return err
		}
		if expansionFile != "" {
			if e, err = w.solve(ctx, s); err != nil {
				return err
			}
			if e, err = alter(e, j); err != nil {
				return err
			}
			e.Columns = nil // the file's own orbitals
		}
		if w.orbitals != nil {
			s.rotate(w.orbitals)
		}
	}
	if expansionFile != "" && e == nil {
		return fmt.Errorf("--expansion needs a trial of kind expansion with an active window")
	}
	err = writeFile(output, func(w io.Writer) error {
		if integrals {
			return fcidump.Write(ctx, w, s.hamiltonian, fcidump.Options{})
		}
		return prepared.Write(w, s.file(j, in))
	})
	if err != nil {
		return err
	}
	written, err := os.Open(output)
	if err != nil {
		return err
	}
	defer written.Close()
	fingerprint, err := prepared.Fingerprint(written)
	if err != nil {
		return err
	}
	if e != nil {
		e.Basis = fingerprint
		if err := writeFile(expansionFile, e.Write); err != nil {
			return err
		}
	}
	h := s.hamiltonian
	_, err = fmt.Fprintf(stdout, "%s: %d orbitals, %d up and %d down electrons, %d factors\nfingerprint %s\n",
		output, h.Orbitals, h.Up, h.Down, h.Factors.Count(), fingerprint)
	return err
}

// file returns the content of a prepared file.
func (s *system) file(j *job.Job, in *inputs) *prepared.File {
	f := &prepared.File{
		Hamiltonian: s.hamiltonian,
		Reference:   &prepared.Reference{Kind: s.start.kind.String(), Energy: s.start.energy},
		Provenance: prepared.Provenance{
			Title: j.Title, Source: j.Hamiltonian.Source, Basis: j.Hamiltonian.Basis, Unit: s.unit,
			FrozenCore: s.frozen + s.frozenBefore, ConstantBeforeFreezing: s.constant,
			FactorTolerance: j.Hamiltonian.FactorTolerance, FactorResidual: s.residual,
			Inputs: in.hashes, Version: version(),
		},
	}
	for spin := range f.Reference.Occupied {
		if s.hamiltonian.Electrons(spin) > 0 {
			f.Reference.Occupied[spin] = mat.DenseCopyOf(s.start.occupied.Re[spin])
		}
	}
	if s.coefficients != nil {
		f.Orbitals = s.coefficients
	}
	return f
}
