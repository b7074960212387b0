package meanfield

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Kind says which orbitals up and down electrons may have.
type Kind int

const (
	// RHF has one set of doubly occupied orbitals.
	RHF Kind = iota
	// ROHF has doubly and singly occupied orbitals; RHF where N_up = N_down.
	ROHF
	// UHF has different orbitals for up and down electrons.
	UHF
)

// String returns the kind's lower-case abbreviation: rhf, rohf or uhf.
func (k Kind) String() string {
	switch k {
	case RHF:
		return "rhf"
	case ROHF:
		return "rohf"
	case UHF:
		return "uhf"
	}
	return fmt.Sprintf("Kind(%d)", int(k))
}

// Options of a solution. The zero value stands for the defaults.
type Options struct {
	// MaxIterations bounds the iterations of each start, DIIS and Newton steps
	// together. Default 400.
	MaxIterations int
	// Tolerance is the Euclidean norm of the orbital gradient, in hartree, below
	// which a solution counts as converged. Default 1e-8.
	Tolerance float64
	// Guess is a density per spin, M×M, whose Fock matrix gives one of the
	// starts. A nil down density means that of the up electrons.
	Guess [2]*mat.SymDense
	// Starts is the number of random starts beside the systematic ones. Zero
	// means 12 up to 40 orbitals, 6 up to 80, 3 beyond; a negative number none.
	Starts int
	// Seed of the random starts.
	Seed uint64
}

func (o Options) withDefaults(orbitals int) Options {
	if o.MaxIterations <= 0 {
		o.MaxIterations = 400
	}
	if o.Tolerance <= 0 {
		o.Tolerance = 1e-8
	}
	if o.Starts == 0 {
		switch {
		case orbitals <= 40:
			o.Starts = 12
		case orbitals <= 80:
			o.Starts = 6
		default:
			o.Starts = 3
		}
	}
	return o
}

// Solution is a converged determinant.
type Solution struct {
	Kind   Kind
	Sector hamiltonian.Sector
	// Energy in hartree, constant included.
	Energy float64
	// Orbitals holds all orbitals of each spin as columns, M×M, the occupied ones
	// first, each group in ascending order of energy (ROHF: doubly, singly
	// occupied, empty). One pointer for both spins in RHF and ROHF.
	Orbitals [2]*mat.Dense
	// OrbitalEnergies belong to the columns of Orbitals. In ROHF, where they are
	// a matter of convention, they are eigenvalues of the mean of the up and
	// down Fock matrix within each group.
	OrbitalEnergies [2][]float64
	// SpinSquared is ⟨S²⟩.
	SpinSquared float64
	// Iterations is the number of DIIS and Newton steps from the start that led
	// to this solution; Starts the number of starts made.
	Iterations, Starts int
	// Stable reports that the lowest eigenvalue of the orbital Hessian within
	// this kind is not negative; HessianEigenvalue is that eigenvalue, in
	// hartree (+Inf where there is nothing to rotate).
	Stable            bool
	HessianEigenvalue float64
	// External is the lowest eigenvalue of the Hessian of rotations that make up
	// and down orbitals differ, in hartree: negative where RHF or ROHF is unstable
	// towards UHF; +Inf for UHF.
	External float64
	// GradientNorm is the Euclidean norm of the orbital gradient, in hartree.
	GradientNorm float64
	// Notes are sentences for the user.
	Notes []string
}

// Occupied returns a copy of the occupied orbitals of one spin, M×N; an empty
// matrix when N = 0.
func (s *Solution) Occupied(spin int) *mat.Dense {
	return leading(s.Orbitals[spin], s.Sector.Electrons(spin))
}

// Density returns C Cᵀ of the occupied orbitals of one spin, M×M.
func (s *Solution) Density(spin int) *mat.SymDense {
	d := mat.NewSymDense(s.Sector.Orbitals, nil)
	if occ := s.Occupied(spin); !occ.IsEmpty() {
		d.SymOuterK(1, occ)
	}
	return d
}

// Solve returns the lowest solution found. RHF and ROHF need a Hamiltonian that
// acts alike on both spins. It is an error if no start converges or if the
// context ends.
func Solve(ctx context.Context, h *hamiltonian.Hamiltonian, kind Kind, o Options) (*Solution, error) {
	if err := h.Validate(); err != nil {
		return nil, err
	}
	switch {
	case kind < RHF || kind > UHF:
		panic("meanfield: unknown kind")
	case kind == RHF && h.Up != h.Down:
		return nil, fmt.Errorf("rhf needs as many up as down electrons, found %d and %d: use rohf or uhf", h.Up, h.Down)
	case kind != UHF && !h.SpinFree():
		return nil, fmt.Errorf("%s needs a Hamiltonian that acts alike on both spins: use uhf", kind)
	}
	o = o.withDefaults(h.Orbitals)
	for spin := range o.Guess {
		if g := o.Guess[spin]; g != nil && g.SymmetricDim() != h.Orbitals {
			panic("meanfield: guess of the wrong shape")
		}
	}
	s := &search{ctx: ctx, problem: newProblem(h, kind), o: o}
	if err := s.run(); err != nil {
		return nil, err
	}
	return s.solution()
}

// search goes through the starts and keeps the lowest solution.
type search struct {
	*problem
	ctx    context.Context
	o      Options
	best   *found
	starts int
	norm   float64   // smallest gradient norm of the starts that did not converge
	missed float64   // lowest energy of those
	seen   []float64 // energies of the stationary points met so far
}

// found is a converged minimum.
type found struct {
	pt         *point
	iterations int
	norm       float64
	mode       float64 // lowest eigenvalue of the Hessian
}

// sameEnergy is the difference in hartree below which two solutions count as one;
// the earlier is kept.
const sameEnergy = 1e-9

func (s *search) run() error {
	s.norm, s.missed = math.Inf(1), math.Inf(1)
	for start, err := range s.eachStart() {
		if err != nil {
			return err
		}
		s.starts++
		if err := s.try(start); err != nil {
			return err
		}
	}
	if s.best == nil {
		return fmt.Errorf("%s did not converge from any of %d starts: smallest gradient norm %.1e after up to %d iterations, expected below %.1e",
			s.kind, s.starts, s.norm, s.o.MaxIterations, s.o.Tolerance)
	}
	return nil
}

// try follows one start down to a minimum.
func (s *search) try(c [2]*mat.Dense) error {
	pt, iterations, err := s.diis(s.ctx, s.at(c), s.o.Tolerance, s.o.MaxIterations)
	if err != nil {
		return err
	}
	for {
		var steps int
		pt, steps, err = s.newton(s.ctx, pt, s.o.Tolerance, s.o.MaxIterations-iterations)
		if err != nil {
			return err
		}
		iterations += steps
		norm := s.gradientNorm(pt)
		if !(norm < s.o.Tolerance) {
			s.norm, s.missed = min(s.norm, norm), min(s.missed, pt.energy)
			return nil
		}
		if s.met(pt.energy) {
			return nil
		}
		s.seen = append(s.seen, pt.energy)
		mode, direction, err := s.lowestMode(s.ctx, pt)
		if err != nil {
			return err
		}
		if mode < -unstable {
			if lower := s.downhill(pt, direction); lower != nil {
				pt = lower
				iterations++
				continue
			}
		}
		if s.best == nil || pt.energy < s.best.pt.energy-sameEnergy {
			s.best = &found{pt, iterations, norm, mode}
		}
		return nil
	}
}

// met reports whether a stationary point of this energy was dealt with before:
// the same one, or a copy of it by symmetry, which leads to the same minimum.
func (s *search) met(energy float64) bool {
	for _, e := range s.seen {
		if math.Abs(e-energy) < sameEnergy {
			return true
		}
	}
	return false
}

func (p *problem) gradientNorm(pt *point) float64 {
	g := make([]float64, p.size)
	p.gradient(pt, g)
	return floats.Norm(g, 2)
}

func (s *search) solution() (*Solution, error) {
	pt := s.best.pt
	out := &Solution{
		Kind: s.kind, Sector: s.h.Sector, Energy: pt.energy, Orbitals: pt.c,
		Iterations: s.best.iterations, Starts: s.starts,
		Stable: s.best.mode >= -unstable, HessianEigenvalue: s.best.mode, GradientNorm: s.best.norm,
	}
	for _, set := range s.sets {
		mo := s.effectiveOrbitals(pt, set)
		energies := make([]float64, s.h.Orbitals)
		for i := range energies {
			energies[i] = mo.At(i, i)
		}
		for _, spin := range set.spins {
			out.OrbitalEnergies[spin] = energies
		}
	}
	out.SpinSquared = SpinSquared([2]*mat.Dense{out.Occupied(0), out.Occupied(1)})
	if !out.Stable {
		out.Notes = append(out.Notes, fmt.Sprintf("%s: the orbital Hessian has a negative eigenvalue, %.1e, with no lower point along it", s.kind, s.best.mode))
	}
	if s.missed < pt.energy-sameEnergy {
		out.Notes = append(out.Notes, fmt.Sprintf("%s: a start that did not converge reached %.8f, below the solution kept: a lower one exists", s.kind, s.missed))
	}
	out.External = math.Inf(1)
	if s.kind != UHF {
		outer := newProblem(s.h, UHF)
		mode, _, err := outer.lowestMode(s.ctx, outer.canonical(pt))
		if err != nil {
			return nil, err
		}
		out.External = mode
		if mode < -unstable {
			out.Notes = append(out.Notes, fmt.Sprintf("%s: unstable towards different orbitals for up and down electrons (Hessian eigenvalue %.4f): a lower uhf solution exists", s.kind, mode))
		}
	}
	return out, nil
}
