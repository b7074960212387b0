package main

import (
	"bytes"
	"compress/gzip"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"leadline/hamiltonian"
	"leadline/hamiltonian/meanfield"
	"leadline/hamiltonian/molecule"
	"leadline/trial/expansion"
	"leadline/trial/measured/record"
)

func inspectCommand(stderr io.Writer) *cobra.Command {
	quiet := false
	c := &cobra.Command{
		Use:   "inspect FILE...",
		Short: "Say what files hold, checked as they would be on use",
		Args:  arguments(1, -1),
		RunE: func(c *cobra.Command, args []string) error {
			refused := 0
			for i, name := range args {
				if i > 0 {
					fmt.Fprintln(c.OutOrStdout())
				}
				var text bytes.Buffer
				err := inspect(c.Context(), name, &text, display{out: stderr, quiet: quiet})
				if _, failed := text.WriteTo(c.OutOrStdout()); failed != nil {
					return failed
				}
				if err != nil {
					if c.Context().Err() != nil {
						return err
					}
					printError(stderr, err)
					refused++
				}
			}
			if refused > 0 {
				return exitError{exitFailed}
			}
			return nil
		},
	}
	c.Flags().BoolVar(&quiet, "quiet", false, "no progress on stderr")
	return c
}

// inspect finds out what a file is by its first bytes.
func inspect(ctx context.Context, name string, out io.Writer, shown display) error {
	info, err := os.Stat(name)
	if err != nil {
		return err
	}
	if info.IsDir() {
		return inspectResults(name, out)
	}
	head, err := firstBytes(name)
	if err != nil {
		return err
	}
	switch {
	case len(head) == 0:
		return fmt.Errorf("%s: is empty", name)
	case strings.HasSuffix(name, ".toml"):
		return inspectJob(ctx, name, out, shown)
	case isRecord(name, head):
		return inspectRecord(name, out)
	case bytes.HasPrefix(head, []byte{0x1f, 0x8b}), bytes.HasPrefix(bytes.TrimSpace(head), []byte("&")):
		return inspectIntegrals(ctx, name, out, shown)
	case bytes.HasPrefix(head, []byte("# expansion")):
		return inspectExpansion(name, out)
	case bytes.HasPrefix(head, []byte("leadline prepared ")):
		return inspectPrepared(ctx, name, out, shown)
	}
	return fmt.Errorf("%s: is none of: integral file, prepared hamiltonian, expansion, record, job file, directory of results", name)
}

func firstBytes(name string) ([]byte, error) {
	file, err := os.Open(name)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	head := make([]byte, 512)
	n, err := io.ReadFull(file, head)
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		err = nil
	}
	return head[:n], err
}

// inspectIntegrals reads an integral file and solves its mean fields.
func inspectIntegrals(ctx context.Context, name string, out io.Writer, shown display) error {
	h, residual, err := readIntegrals(ctx, newInputs(""), name, comparableTolerance, shown.stage)
	if err != nil {
		return err
	}
	fmt.Fprintf(out, "%s: integral file\n", name)
	fmt.Fprintf(out, "  %d orbitals, %d up and %d down electrons, constant energy %s E_h\n", h.Orbitals, h.Up, h.Down, quoted(h.Constant, 0))
	fmt.Fprintf(out, "  %d factors, largest error on a diagonal integral %.1e E_h\n", h.Factors.Count(), residual)
	return inspectMeanField(ctx, h, nil, "hartree", out)
}

// isRecord recognises a measurement record: packed, text, or text in gzip.
func isRecord(name string, head []byte) bool {
	text := bytes.TrimSpace(head)
	if bytes.HasPrefix(head, []byte{0x1f, 0x8b}) {
		file, err := os.Open(name)
		if err != nil {
			return false
		}
		defer file.Close()
		plain, err := gzip.NewReader(file)
		if err != nil {
			return false
		}
		begin := make([]byte, 64)
		n, _ := io.ReadFull(plain, begin)
		text = bytes.TrimSpace(begin[:n])
	}
	return bytes.HasPrefix(text, []byte("OVSHOT1")) || bytes.HasPrefix(text, []byte("{"))
}

// inspectRecord reads a whole record, so that anything wrong with it is found.
func inspectRecord(name string, out io.Writer) error {
	r, err := openRecord(name)
	if err != nil {
		return err
	}
	defer r.close()
	stream, err := r.source()
	if err != nil {
		return err
	}
	h := stream.Header()
	var settings, shots int64
	var s record.Setting
	for err = stream.Next(&s); err == nil; err = stream.Next(&s) {
		settings++
		for _, o := range s.Shots {
			shots += int64(o.Count)
		}
	}
	if err != io.EOF {
		return err
	}
	fmt.Fprintf(out, "%s: %s record, %d qubits, ensemble %s\n", name, h.Kind, h.Qubits, h.Ensemble)
	fmt.Fprintf(out, "  %d up and %d down electrons; %d settings, %d shots\n", h.Up, h.Down, settings, shots)
	fmt.Fprintf(out, "  orbitals of the file with fingerprint %s\n  state: %s\n", h.HamiltonianSHA256, h.Trial)
	return nil
}

// inspectPrepared reads a prepared Hamiltonian and solves its mean fields.
func inspectPrepared(ctx context.Context, name string, out io.Writer, shown display) error {
	p, err := readPrepared(ctx, newInputs(""), name, shown.stage)
	if err != nil {
		return err
	}
	h := p.Hamiltonian
	fmt.Fprintf(out, "%s: prepared hamiltonian %q, fingerprint %s\n", name, p.Provenance.Title, p.Fingerprint)
	fmt.Fprintf(out, "  %d orbitals, %d up and %d down electrons, constant energy %s\n", h.Orbitals, h.Up, h.Down, quoted(h.Constant, 0))
	fmt.Fprintf(out, "  %d factors, largest error on a diagonal integral %.1e; %d frozen orbitals\n", h.Factors.Count(), p.Provenance.FactorResidual, p.Provenance.FrozenCore)
	if !h.SpinFree() {
		return nil // restricted mean fields need factors that act alike on both spins
	}
	return inspectMeanField(ctx, h, nil, p.Provenance.Unit, out)
}

// inspectExpansion reads an expansion and describes it.
func inspectExpansion(name string, out io.Writer) error {
	file, err := os.Open(name)
	if err != nil {
		return err
	}
	defer file.Close()
	e, err := expansion.Read(file, name)
	if err != nil {
		return err
	}
	basis := e.Basis
	if basis == "" {
		basis = "unknown"
	}
	fmt.Fprintf(out, "%s: expansion of %d determinants, norm %.8g\n", name, len(e.Determinants), e.Norm())
	fmt.Fprintf(out, "  %d orbitals, %d core and %d active with %d up and %d down electrons\n", e.Orbitals, e.Core, e.Active, e.Up, e.Down)
	fmt.Fprintf(out, "  orbitals of the file with fingerprint %s\n", basis)
	if e.Origin != "" {
		fmt.Fprintf(out, "  source: %s\n", e.Origin)
	}
	source, err := expansion.New(e)
	if err != nil {
		return fmt.Errorf("%s: %w", name, err)
	}
	fmt.Fprintf(out, "  <S^2> = %.6f\n", source.SpinSquared())
	return nil
}

// inspectMeanField prints energies, spin and orbital energies of the mean fields
// and, of a molecule, the dipole moment.
func inspectMeanField(ctx context.Context, h *hamiltonian.Hamiltonian, m *molecule.Result, unit string, out io.Writer) error {
	if unit == "" {
		unit = "hartree"
	}
	options := meanfield.Options{}
	if m != nil {
		options.Guess = m.Density
	}
	kinds := []meanfield.Kind{meanfield.RHF, meanfield.UHF}
	if h.Up != h.Down {
		kinds[0] = meanfield.ROHF
	}
	for _, kind := range kinds {
		s, err := meanfield.Solve(ctx, h, kind, options)
		if err != nil {
			return fmt.Errorf("%v: %w", kind, err)
		}
		fmt.Fprintf(out, "\n  %-4s energy %s %s, <S^2> = %.4f, %d iterations\n", strings.ToUpper(kind.String()), quoted(s.Energy, 0), symbol(unit), math.Abs(s.SpinSquared), s.Iterations)
		for _, note := range s.Notes {
			fmt.Fprintf(out, "    note: %s\n", note)
		}
		if m != nil {
			d := dipole(m, s)
			size := math.Sqrt(d[0]*d[0] + d[1]*d[1] + d[2]*d[2])
			fmt.Fprintf(out, "    dipole moment (%s, %s, %s) e·bohr about the origin, %.4f debye\n", fixed(d[0]), fixed(d[1]), fixed(d[2]), size*debye)
		}
		printOrbitalEnergies(out, s, symbol(unit))
	}
	return nil
}

// fixed writes a number with five decimals and no negative zero.
func fixed(v float64) string {
	return minus(fmt.Sprintf("%.5f", math.Round(v*1e5)/1e5+0))
}

// debye is e·bohr in debye: CODATA 2018 (Tiesinga et al., Rev. Mod. Phys. 93,
// 025010 (2021)).
const debye = 2.541746473

// dipole returns the dipole moment of a mean field in e·bohr.
func dipole(m *molecule.Result, s *meanfield.Solution) [3]float64 {
	d := m.NuclearDipole
	for spin := range 2 {
		density := s.Density(spin)
		for k := range d {
			for p := range density.SymmetricDim() {
				for q := range density.SymmetricDim() {
					d[k] -= density.At(p, q) * m.Position[k].At(p, q)
				}
			}
		}
	}
	return d
}

func printOrbitalEnergies(out io.Writer, s *meanfield.Solution, unit string) {
	spins := []int{hamiltonian.Up, hamiltonian.Down}
	if s.Kind != meanfield.UHF {
		spins = spins[:1]
	}
	for _, spin := range spins {
		label := ""
		if s.Kind == meanfield.UHF {
			label = [2]string{" up", " down"}[spin]
		}
		fmt.Fprintf(out, "    orbital energies%s, %s (occupied | empty)\n", label, unit)
		occupied := s.Sector.Electrons(spin)
		for i, e := range s.OrbitalEnergies[spin] {
			if i%8 == 0 {
				fmt.Fprintf(out, "     ")
			}
			if i == occupied {
				fmt.Fprintf(out, " |")
			}
			fmt.Fprintf(out, " %10s", minus(fmt.Sprintf("%.5f", e)))
			if i%8 == 7 || i == len(s.OrbitalEnergies[spin])-1 {
				fmt.Fprintln(out)
			}
		}
	}
}

// inspectJob checks a job file and prints the job as resolved; of a molecule also
// its mean fields, all electrons included.
func inspectJob(ctx context.Context, name string, out io.Writer, shown display) error {
	in, j, _, err := loadJob(name)
	if err != nil {
		return err
	}
	// As on use: the Hamiltonian with its core frozen, and every file of the trial.
	tight := *j
	tighten(&tight)
	whole, err := newSystem(ctx, &tight, in, shown.stage)
	if err != nil {
		return err
	}
	for _, file := range j.Files() {
		if _, err := os.Stat(in.path(file.Value.(string))); err != nil {
			return fmt.Errorf("%s: %w", file.Key, err)
		}
	}
	fmt.Fprintf(out, "%s: job, as resolved\n\n", name)
	if err := j.Write(out); err != nil {
		return err
	}
	if j.Hamiltonian.Source != "molecule" {
		h := whole.hamiltonian
		fmt.Fprintf(out, "\n%d orbitals, %d up and %d down electrons, %d factors\n", h.Orbitals, h.Up, h.Down, h.Factors.Count())
		return inspectMeanField(ctx, whole.spinFree, nil, whole.unit, out)
	}
	s := &system{unit: "hartree"}
	if err := s.fromMolecule(ctx, &tight, in, shown.stage); err != nil {
		return err
	}
	h := s.hamiltonian
	fmt.Fprintf(out, "\nmolecule: %d orbitals, %d up and %d down electrons, nuclear repulsion %s E_h\n", h.Orbitals, h.Up, h.Down, quoted(h.Constant, 0))
	fmt.Fprintf(out, "  %d factors, largest error on a diagonal integral %.1e E_h\n", h.Factors.Count(), s.residual)
	for _, w := range s.warnings {
		fmt.Fprintf(out, "  %-8s %s: %s\n", w.Level, w.Check, w.Text)
	}
	return inspectMeanField(ctx, h, s.molecule, s.unit, out)
}

// inspectResults prints the summary of a directory of results.
func inspectResults(dir string, out io.Writer) error {
	text, err := os.ReadFile(filepath.Join(dir, summaryFile))
	if err != nil {
		return fmt.Errorf("%s: holds no %s: is it a directory of results?", dir, summaryFile)
	}
	var s summary
	if err := json.Unmarshal(text, &s); err != nil {
		return fmt.Errorf("%s: %w", filepath.Join(dir, summaryFile), err)
	}
	fmt.Fprintf(out, "%s: results of %q, %s\n", dir, s.Title, s.Status)
	if s.Energy != nil && s.Error != nil {
		fmt.Fprintf(out, "  energy %s %s (one standard error, statistics only)\n", quoted(*s.Energy, *s.Error), symbol(s.Unit))
	}
	for _, w := range s.Warnings {
		fmt.Fprintf(out, "  %-8s %s: %s\n", w.Level, w.Check, w.Text)
	}
	return nil
}
