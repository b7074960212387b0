package molecule

import (
	"context"
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/molecule/integral"
)

// Options of [Build]. The zero value stands for a neutral singlet and the
// defaults.
type Options struct {
	Charge   int
	Unpaired int // N_up − N_down
	// Cartesian takes cartesian d, f, g … functions in place of spherical ones, as
	// the 6-31G families were published with.
	Cartesian bool
	// Tolerance is the largest error that the factorisation leaves on any diagonal
	// repulsion integral over the functions of the basis, hartree. Default 1e-6.
	Tolerance float64
	// Dependence is the eigenvalue of the overlap matrix of normalised functions
	// below which its eigenvector is removed. Default 1e-7.
	Dependence float64
	// Progress, if not nil, is told from time to time how much of the
	// factorisation is done. It is called from the goroutine that called Build.
	Progress func(done, total int64)
}

const (
	defaultTolerance  = 1e-6
	defaultDependence = 1e-7
)

// Warning is a doubt about a number.
type Warning struct {
	Check  string  // what was checked, one word
	Text   string  // one sentence
	Figure float64 // the number behind it
}

// Result is the Hamiltonian of a molecule and what goes with it. The caller owns
// all of it.
type Result struct {
	// Hamiltonian has spin-free, symmetric factors of sign +1 in the orthonormal
	// orbitals; its constant is the nuclear repulsion.
	Hamiltonian *hamiltonian.Hamiltonian
	// Orbitals is X, functions × orbitals: the orthonormal orbitals as combinations
	// of the basis functions, XᵀSX = 1.
	Orbitals *mat.Dense
	// Overlap is S of the basis functions.
	Overlap *mat.SymDense
	// Position holds the matrices of x, y and z in the orthonormal orbitals, bohr,
	// about the origin. The dipole moment of densities D in e·bohr is
	// NuclearDipole − Σ_σ tr(D^σ Position).
	Position      [3]*mat.SymDense
	NuclearDipole [3]float64
	// Density is a first density of each spin in the orthonormal orbitals: that of
	// the separate atoms, with the right number of electrons.
	Density [2]*mat.SymDense
	// Residual is the largest error that the factorisation left on any diagonal
	// integral over basis functions, hartree; see [integral.Cholesky]. Integrals
	// over orthonormal orbitals mix functions with large coefficients of both signs
	// where the basis is nearly dependent, and may be off by more; energies are
	// usually off by less than a few times Residual.
	Residual float64
	// Quartets is the number of quartets of shell pairs evaluated.
	Quartets int64
	Warnings []Warning
}

// Build computes the Hamiltonian of a molecule. The orbitals are S^{−1/2} applied
// to the basis functions (Löwdin, J. Chem. Phys. 18, 365 (1950)); near linear
// dependence, the eigenvectors of S above the threshold of the options, divided
// by the root of their eigenvalues (canonical orthogonalisation: Löwdin, Adv.
// Phys. 5, 1 (1956)).
//
// Costs for n functions and g factors: integrals as package integral states, n²·g²
// flops for the factorisation, 4·n³·g for the passage to orbitals, memory n²·g
// numbers. On two cores with AVX-512, tolerance 1e-5: water cc-pVTZ (58 functions,
// 353 factors) in 0.2 s, benzene cc-pVDZ (114, 705) in about 1 s and 240 MB. Time
// grows as n^2 to n^2.5 between 50 and 200 functions (chains of hydrogen atoms,
// cc-pVDZ), as n^4 in the end. The work uses GOMAXPROCS goroutines; the result does
// not depend on their number.
func Build(ctx context.Context, g Geometry, set *basis.Set, o Options) (*Result, error) {
	if o.Tolerance == 0 {
		o.Tolerance = defaultTolerance
	}
	if o.Dependence == 0 {
		o.Dependence = defaultDependence
	}
	if !(o.Tolerance > 0) || !(o.Dependence > 0) {
		panic("molecule: tolerance or dependence threshold is not positive")
	}
	if err := g.Validate(); err != nil {
		return nil, err
	}
	up, down, err := g.Electrons(o.Charge, o.Unpaired)
	if err != nil {
		return nil, err
	}
	shells, nuclei, err := g.shells(set)
	if err != nil {
		return nil, err
	}
	f := integral.New(shells, o.Cartesian)
	r := &Result{Overlap: f.Overlap(), NuclearDipole: g.NuclearDipole()}
	removed, err := r.orthogonalise(o.Dependence)
	if err != nil {
		return nil, err
	}
	_, m := r.Orbitals.Dims()
	sector := hamiltonian.Sector{Orbitals: m, Up: up, Down: down}
	if err := sector.Validate(); err != nil {
		return nil, fmt.Errorf("basis %s is too small: %w", set.Name, err)
	}
	if removed > 0 {
		r.Warnings = append(r.Warnings, Warning{
			Check:  "dependence",
			Text:   fmt.Sprintf("the basis is nearly linearly dependent: %d of %d functions removed (overlap eigenvalues below %.0e)", removed, f.Count(), o.Dependence),
			Figure: float64(removed),
		})
	}
	core := mat.NewSymDense(f.Count(), nil)
	core.AddSym(f.Kinetic(), f.Attraction(nuclei))
	one := congruent(core, r.Orbitals)
	for axis, d := range f.Dipole() {
		r.Position[axis] = congruent(d, r.Orbitals)
	}
	cholesky, err := f.Factorise(ctx, o.Tolerance, o.Progress)
	if err != nil {
		return nil, err
	}
	r.Residual, r.Quartets = cholesky.Residual, cholesky.Quartets
	factors := r.factors(cholesky)
	r.Hamiltonian = &hamiltonian.Hamiltonian{
		Sector:   sector,
		Constant: g.NuclearRepulsion(),
		OneBody:  [2]*mat.SymDense{one, one},
		Factors:  factors,
	}
	if err := r.guess(ctx, g, set, o.Cartesian); err != nil {
		return nil, err
	}
	return r, r.Hamiltonian.Validate()
}

// shells places the basis on the atoms.
func (g Geometry) shells(set *basis.Set) ([]integral.Shell, []integral.Nucleus, error) {
	var shells []integral.Shell
	var nuclei []integral.Nucleus
	for i, a := range g {
		list, err := set.Shells(a.Z)
		if err != nil {
			return nil, nil, fmt.Errorf("atom %d: %w", i+1, err)
		}
		for _, s := range list {
			shells = append(shells, integral.Shell{Center: a.Position, L: s.L, Exponents: s.Exponents, Coefficients: s.Coefficients})
		}
		nuclei = append(nuclei, integral.Nucleus{Charge: float64(a.Z), Position: a.Position})
	}
	return shells, nuclei, nil
}

// congruent returns XᵀAX.
func congruent(a *mat.SymDense, x *mat.Dense) *mat.SymDense {
	var half, full mat.Dense
	half.Mul(a, x)
	full.Mul(x.T(), &half)
	m, _ := full.Dims()
	out := mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			out.SetSym(p, q, 0.5*(full.At(p, q)+full.At(q, p)))
		}
	}
	return out
}

// factors takes the factors to the orbitals, block by block, and frees them.
func (r *Result) factors(c *integral.Cholesky) *hamiltonian.Factors {
	n, m := r.Orbitals.Dims()
	x := r.Orbitals.RawMatrix()
	packed := linalg.Pack(false, n, m, x.Data, x.Stride)
	out := hamiltonian.NewFactors(m, c.Count())
	at := 0
	for b := range c.Blocks() {
		count, unpack := c.Unpack(b)
		parallel(count, func() func(int) {
			full, half, square := make([]float64, n*n), make([]float64, n*m), make([]float64, m*m)
			return func(i int) {
				unpack(full, i)
				packed.Mul(n, 1, full, n, 0, half, m)
				linalg.Gemm(true, false, m, m, n, 1, x.Data, x.Stride, half, m, 0, square, m)
				row := out.Row(at+i, hamiltonian.Up)
				for p := range m {
					copy(row[hamiltonian.Pair(p, 0):], square[p*m:p*m+p+1])
				}
			}
		})
		c.Release(b)
		at += count
	}
	return out
}
