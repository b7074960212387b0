package main

import (
	"context"
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/afqmc"
	"leadline/cmd/leadline/job"
	"leadline/hamiltonian"
	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/hubbard"
	"leadline/hamiltonian/meanfield"
	"leadline/hamiltonian/molecule"
	"leadline/hamiltonian/pairing"
	"leadline/trial"
)

// system is what a job solves: the Hamiltonian and its mean field.
type system struct {
	hamiltonian *hamiltonian.Hamiltonian
	// spinFree is the same operator with factors that act alike on both spins,
	// which restricted mean fields need.
	spinFree *hamiltonian.Hamiltonian
	unit     string
	constant float64 // before freezing
	frozen   int
	// frozenBefore counts orbitals already folded in by a prepared file.
	frozenBefore int
	// basisFile is the file that fixes the orbitals, empty where none does.
	basisFile string
	residual  float64 // left by the factorisation on any diagonal integral
	start     *start
	guess     [2]*mat.SymDense
	molecule  *molecule.Result
	// coefficients holds the orbitals as combinations of a molecule's basis
	// functions, functions×M; nil for other sources.
	coefficients *mat.Dense
	warnings     []afqmc.Warning
}

// start is the spin-pure determinant (RHF or ROHF) that walkers start from.
type start struct {
	kind        meanfield.Kind
	energy      float64
	spinSquared float64
	occupied    trial.Orbitals
	// orbitals holds all orbitals, M×M, or is nil where only the occupied ones
	// are known.
	orbitals *mat.Dense
	// external is the Hessian's lowest eigenvalue towards UHF, zero where it is not
	// known.
	external float64
}

// progressFunc starts a display of one stage; the function that it returns is
// told how much is done and, with done = total, that the stage has ended.
type progressFunc func(stage string, total int64) func(done int64)

// newSystem builds the Hamiltonian of a job, freezes its core and solves the
// spin-pure mean field.
func newSystem(ctx context.Context, j *job.Job, in *inputs, progress progressFunc) (*system, error) {
	s := &system{unit: "hartree"}
	var err error
	switch j.Hamiltonian.Source {
	case "integrals":
		err = s.fromIntegrals(ctx, j, in, progress)
	case "molecule":
		err = s.fromMolecule(ctx, j, in, progress)
	case "prepared":
		err = s.fromPrepared(ctx, j, in, progress)
	case "hubbard":
		err = s.fromHubbard(j)
	case "pairing":
		err = s.fromPairing(j)
	}
	if err != nil {
		return nil, err
	}
	if s.spinFree == nil {
		s.spinFree = s.hamiltonian
	}
	if j.Hamiltonian.Source != "prepared" {
		s.constant = s.hamiltonian.Constant
	}
	options := meanfield.Options{Guess: s.guess}
	if s.frozen > 0 {
		var whole *meanfield.Solution
		s.hamiltonian, whole, err = meanfield.FrozenCore(ctx, s.hamiltonian, s.frozen, options)
		if err != nil {
			return nil, fmt.Errorf("%s: hamiltonian.frozen_core: %w", j.Where("hamiltonian.frozen_core"), err)
		}
		if s.coefficients != nil {
			m := s.hamiltonian.Orbitals + s.frozen
			s.coefficients = product(s.coefficients, whole.Orbitals[hamiltonian.Up].Slice(0, m, s.frozen, m))
		}
		s.spinFree = s.hamiltonian
		s.start, options = nil, meanfield.Options{}
	}
	kind := meanfield.RHF
	if s.hamiltonian.Up != s.hamiltonian.Down {
		kind = meanfield.ROHF
	}
	if s.start != nil {
		return s, nil // read with the Hamiltonian
	}
	solution, err := meanfield.Solve(ctx, s.spinFree, kind, options)
	if err != nil {
		return nil, fmt.Errorf("%v: %w", kind, err)
	}
	s.start = &start{
		kind:        kind,
		energy:      solution.Energy,
		spinSquared: solution.SpinSquared,
		occupied:    occupied(solution),
		orbitals:    solution.Orbitals[hamiltonian.Up],
		external:    solution.External,
	}
	if s.molecule != nil {
		s.rotate(s.start.orbitals)
	}
	return s, nil
}

// rotate turns everything into the orbitals that are the columns of c, M×M.
func (s *system) rotate(c *mat.Dense) {
	one := s.spinFree == s.hamiltonian
	s.hamiltonian = s.hamiltonian.Rotate(c)
	if one {
		s.spinFree = s.hamiltonian
	} else {
		s.spinFree = s.spinFree.Rotate(c)
	}
	turn := func(m *mat.Dense) *mat.Dense {
		if m == nil || m.IsEmpty() {
			return m
		}
		return product(c.T(), m)
	}
	o := &s.start.occupied
	same := o.Re[hamiltonian.Up] == o.Re[hamiltonian.Down]
	if o.Re[hamiltonian.Up] = turn(o.Re[hamiltonian.Up]); same {
		o.Re[hamiltonian.Down] = o.Re[hamiltonian.Up]
	} else {
		o.Re[hamiltonian.Down] = turn(o.Re[hamiltonian.Down])
	}
	s.start.orbitals = turn(s.start.orbitals)
	if s.coefficients != nil {
		s.coefficients = product(s.coefficients, c)
	}
}

func product(a, b mat.Matrix) *mat.Dense {
	var out mat.Dense
	out.Mul(a, b)
	return &out
}

// printWarnings shows what the Hamiltonian is to be doubted for.
func (s *system) printWarnings(shown display) {
	for _, w := range s.warnings {
		fmt.Fprintf(shown.out, "%s %s: %s\n", w.Level, w.Check, w.Text)
	}
}

// fingerprint returns the hash of the file that fixes the orbitals, empty where
// none does.
func (s *system) fingerprint(in *inputs) string { return in.hashes[s.basisFile] }

func (s *system) fromHubbard(j *job.Job) error {
	m := hubbard.Model{
		Sites:     j.Hamiltonian.Sites,
		Periodic:  j.Hamiltonian.Periodic,
		Hopping:   j.Hamiltonian.Hopping,
		Repulsion: j.Hamiltonian.Repulsion,
		Up:        j.Hamiltonian.Up,
		Down:      j.Hamiltonian.Down,
	}
	m.Decomposition = hubbard.Charge
	var err error
	if s.spinFree, err = m.Hamiltonian(); err != nil {
		return err
	}
	s.hamiltonian, s.unit = s.spinFree, "hopping"
	if j.Hamiltonian.Decomposition == "spin" {
		m.Decomposition = hubbard.Spin
		s.hamiltonian, err = m.Hamiltonian()
	}
	return err
}

func (s *system) fromPairing(j *job.Job) (err error) {
	m := pairing.Model{
		Levels:   j.Hamiltonian.Levels,
		Spacing:  j.Hamiltonian.Spacing,
		Coupling: j.Hamiltonian.Coupling,
		Pairs:    j.Hamiltonian.Pairs,
	}
	s.unit = "level spacing"
	s.hamiltonian, err = m.Hamiltonian()
	return err
}

func (s *system) fromIntegrals(ctx context.Context, j *job.Job, in *inputs, progress progressFunc) error {
	var err error
	if s.hamiltonian, s.residual, err = readIntegrals(ctx, in, j.Hamiltonian.File, j.Hamiltonian.FactorTolerance, progress); err != nil {
		return fmt.Errorf("hamiltonian.file: %w", err)
	}
	if s.frozen = int(j.Hamiltonian.FrozenCore); s.frozen == 0 {
		s.basisFile = j.Hamiltonian.File
	}
	return nil
}

// fromPrepared reads a prepared Hamiltonian, whose reference is the start.
func (s *system) fromPrepared(ctx context.Context, j *job.Job, in *inputs, progress progressFunc) error {
	name := j.Hamiltonian.File
	p, err := readPrepared(ctx, in, name, progress)
	if err != nil {
		return fmt.Errorf("hamiltonian.file: %w", err)
	}
	s.hamiltonian, s.residual = p.Hamiltonian, p.Provenance.FactorResidual
	s.constant = p.Hamiltonian.Constant
	if p.Provenance.FrozenCore > 0 {
		s.constant = p.Provenance.ConstantBeforeFreezing
	}
	if p.Provenance.Unit != "" {
		s.unit = p.Provenance.Unit
	}
	s.frozenBefore = p.Provenance.FrozenCore
	if s.frozen = int(j.Hamiltonian.FrozenCore); s.frozen == 0 {
		s.basisFile = name
	}
	if r := p.Reference; r != nil {
		kind := map[string]meanfield.Kind{"rhf": meanfield.RHF, "rohf": meanfield.ROHF}
		if k, ok := kind[r.Kind]; ok {
			s.start = &start{kind: k, energy: r.Energy, spinSquared: meanfield.SpinSquared(r.Occupied),
				occupied: trial.RealOrbitals(r.Occupied[hamiltonian.Up], r.Occupied[hamiltonian.Down])}
			if k == meanfield.RHF {
				s.start.occupied.Re[hamiltonian.Down] = s.start.occupied.Re[hamiltonian.Up]
			}
		}
	}
	return nil
}

func (s *system) fromMolecule(ctx context.Context, j *job.Job, in *inputs, progress progressFunc) error {
	geometry, err := readGeometry(j, in)
	if err != nil {
		return err
	}
	set, err := readBasis(j, in)
	if err != nil {
		return err
	}
	var tell func(int64)
	s.molecule, err = molecule.Build(ctx, geometry, set, molecule.Options{
		Charge:    j.Hamiltonian.Charge,
		Unpaired:  j.Hamiltonian.Unpaired,
		Cartesian: j.Hamiltonian.Cartesian,
		Tolerance: j.Hamiltonian.FactorTolerance,
		Progress: func(done, total int64) {
			if tell == nil {
				tell = progress("integrals", total)
			}
			tell(done)
		},
	})
	if err != nil {
		return fmt.Errorf("%s: %w", j.Where("hamiltonian"), err)
	}
	s.hamiltonian, s.residual, s.guess = s.molecule.Hamiltonian, s.molecule.Residual, s.molecule.Density
	s.coefficients = s.molecule.Orbitals
	for _, w := range s.molecule.Warnings {
		s.warnings = append(s.warnings, afqmc.Warning{Check: w.Check, Level: afqmc.Caution, Text: w.Text, Figure: w.Figure})
	}
	s.frozen = int(j.Hamiltonian.FrozenCore)
	if j.Hamiltonian.FrozenCore == job.AutoCore {
		// An ion may have fewer electrons than its atoms' cores.
		up, down := s.hamiltonian.Up, s.hamiltonian.Down
		s.frozen = min(geometry.CoreOrbitals(), up, down)
		if s.frozen > 0 && 2*s.frozen == up+down {
			s.frozen--
		}
	}
	return nil
}

func readGeometry(j *job.Job, in *inputs) (molecule.Geometry, error) {
	if j.Hamiltonian.XYZ != "" {
		file, _, err := in.open(j.Hamiltonian.XYZ)
		if err != nil {
			return nil, err
		}
		defer file.Close()
		return molecule.ReadXYZ(file, in.path(j.Hamiltonian.XYZ))
	}
	unit := molecule.Bohr
	if j.Hamiltonian.Unit == "angstrom" {
		unit = molecule.Angstrom
	}
	var g molecule.Geometry
	for i, a := range j.Hamiltonian.Atoms {
		atom, err := molecule.NewAtom(a.Symbol, a.X, unit)
		if err != nil {
			return nil, fmt.Errorf("%s: hamiltonian.atoms: atom %d: %w", j.Where(fmt.Sprintf("hamiltonian.atoms[%d]", i)), i+1, err)
		}
		g = append(g, atom)
	}
	return g, nil
}

func readBasis(j *job.Job, in *inputs) (*basis.Set, error) {
	if j.Hamiltonian.BasisFile == "" {
		set, err := basis.Named(j.Hamiltonian.Basis)
		if err != nil {
			return nil, fmt.Errorf("%s: hamiltonian.basis: %w", j.Where("hamiltonian.basis"), err)
		}
		return set, nil
	}
	file, _, err := in.open(j.Hamiltonian.BasisFile)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	set, err := basis.Read(file, in.path(j.Hamiltonian.BasisFile))
	if err != nil || j.Hamiltonian.Basis == "" {
		return set, err
	}
	below, err := basis.Named(j.Hamiltonian.Basis)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", j.Where("hamiltonian.basis"), err)
	}
	return set.Over(below), nil
}
