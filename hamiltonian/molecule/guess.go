package molecule

import (
	"context"
	"fmt"
	"math"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian/basis"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/molecule/integral"
)

// guess fills r.Density with the superposition of spherically averaged atomic
// densities (Almlöf, Faegri and Korsell, J. Comput. Chem. 3, 385 (1982); Van
// Lenthe et al., ibid. 27, 926 (2006)), scaled to the electrons of each spin.
func (r *Result) guess(ctx context.Context, g Geometry, set *basis.Set, cartesian bool) error {
	n, m := r.Orbitals.Dims()
	total := mat.NewSymDense(n, nil)
	atoms := map[int]*mat.SymDense{}
	first := 0
	for _, a := range g {
		if atoms[a.Z] == nil {
			d, err := atomicDensity(ctx, a.Z, set, cartesian)
			if err != nil {
				return fmt.Errorf("first density of %s: %w", basis.Symbol(a.Z), err)
			}
			atoms[a.Z] = d
		}
		d := atoms[a.Z]
		for p := range d.SymmetricDim() {
			for q := range p + 1 {
				total.SetSym(first+p, first+q, d.At(p, q))
			}
		}
		first += d.SymmetricDim()
	}
	// The density operator in the orbitals is XᵀS·D·SX.
	var sx, half, full mat.Dense
	sx.Mul(r.Overlap, r.Orbitals)
	half.Mul(total, &sx)
	full.Mul(sx.T(), &half)
	for spin := range r.Density {
		r.Density[spin] = mat.NewSymDense(m, nil)
		scale := float64(r.Hamiltonian.Electrons(spin)) / mat.Trace(&full)
		for p := range m {
			for q := range p + 1 {
				r.Density[spin].SetSym(p, q, 0.5*scale*(full.At(p, q)+full.At(q, p)))
			}
		}
	}
	return nil
}

// subshells in the order in which electrons fill them (Madelung's rule): n, l.
var subshells = [][2]int{{1, 0}, {2, 0}, {2, 1}, {3, 0}, {3, 1}, {4, 0}, {3, 2}, {4, 1}, {5, 0}, {4, 2}, {5, 1},
	{6, 0}, {4, 3}, {5, 2}, {6, 1}, {7, 0}, {5, 3}, {6, 2}, {7, 1}}

// occupations returns, for every angular momentum, the electrons in each of its
// orbitals from below, spread evenly over the 2l+1 components. Subshells that the
// basis lacks are passed over; electrons may be left over in a basis too small.
func occupations(z int, functions [basis.MaxL + 1]int) (o [basis.MaxL + 1][]float64) {
	left := float64(z)
	for _, s := range subshells {
		n, l := s[0], s[1]
		if left == 0 || len(o[l]) != n-l-1 || functions[l] < n-l {
			continue
		}
		electrons := min(left, float64(2*(2*l+1)))
		left -= electrons
		o[l] = append(o[l], electrons/float64(2*l+1))
	}
	return o
}

// atom is the mean-field problem of one atom whose orbitals have the symmetry of
// the sphere.
type atom struct {
	n           int
	places      [basis.MaxL + 1][]int // first function of each shell, by angular momentum
	core        *mat.SymDense
	factors     *integral.Cholesky
	orthonormal [basis.MaxL + 1]*mat.Dense
	occupations [basis.MaxL + 1][]float64
}

// atomicDensity returns the density of a neutral atom with evenly occupied
// subshells over the basis functions: a restricted mean field, iterated until it
// is good enough for a start.
func atomicDensity(ctx context.Context, z int, set *basis.Set, cartesian bool) (*mat.SymDense, error) {
	g := Geometry{{Z: z}}
	shells, nuclei, err := g.shells(set)
	if err != nil {
		return nil, err
	}
	f := integral.New(shells, false)
	a := &atom{n: f.Count(), core: mat.NewSymDense(f.Count(), nil)}
	a.core.AddSym(f.Kinetic(), f.Attraction(nuclei))
	if a.factors, err = f.Factorise(ctx, 1e-4, nil); err != nil {
		return nil, err
	}
	var functions [basis.MaxL + 1]int
	first := 0
	for _, s := range shells {
		a.places[s.L] = append(a.places[s.L], first)
		functions[s.L]++
		first += 2*s.L + 1
	}
	a.occupations = occupations(z, functions)
	overlap := f.Overlap()
	for l := range a.places {
		if len(a.places[l]) == 0 {
			continue
		}
		if a.orthonormal[l], err = orthonormal(a.average(overlap, l), defaultDependence); err != nil {
			return nil, err
		}
	}
	d, err := a.solve()
	if err != nil || !cartesian {
		return d, err
	}
	return toCartesian(d, shells), nil
}

// average returns the block of angular momentum l, the mean over its components.
func (a *atom) average(full *mat.SymDense, l int) *mat.SymDense {
	out := mat.NewSymDense(len(a.places[l]), nil)
	for i, p := range a.places[l] {
		for j, q := range a.places[l][:i+1] {
			sum := 0.0
			for m := range 2*l + 1 {
				sum += full.At(p+m, q+m)
			}
			out.SetSym(i, j, sum/float64(2*l+1))
		}
	}
	return out
}

// solve iterates with half of the old Fock matrix mixed in; the occupations are
// fixed for every angular momentum, so that this converges.
func (a *atom) solve() (*mat.SymDense, error) {
	const iterations, enough = 40, 1e-4
	fock, density := a.core, mat.NewSymDense(a.n, nil)
	for i := range iterations {
		orbitals, err := a.fill(fock)
		if err != nil {
			return nil, err
		}
		next := mat.NewSymDense(a.n, nil)
		next.SymOuterK(1, orbitals)
		change := 0.0
		for k, v := range next.RawSymmetric().Data {
			change = max(change, math.Abs(v-density.RawSymmetric().Data[k]))
		}
		density = next
		if change < enough {
			break
		}
		mixed := a.fock(orbitals)
		if i > 0 {
			mixed.AddSym(mixed, fock)
			mixed.ScaleSym(0.5, mixed)
		}
		fock = mixed
	}
	return density, nil
}

// fill returns the lowest orbitals of a Fock matrix as columns, multiplied by the
// roots of their occupations.
func (a *atom) fill(fock *mat.SymDense) (*mat.Dense, error) {
	var columns []float64 // orbitals × functions
	for l, occupation := range a.occupations {
		if len(occupation) == 0 {
			continue
		}
		x := a.orthonormal[l]
		block := congruent(a.average(fock, l), x)
		var eigen mat.EigenSym
		if !eigen.Factorize(block, true) {
			return nil, fmt.Errorf("diagonalisation of the Fock matrix did not converge")
		}
		var u, c mat.Dense
		eigen.VectorsTo(&u)
		c.Mul(x, &u)
		_, available := c.Dims()
		for k, n := range occupation[:min(len(occupation), available)] {
			for m := range 2*l + 1 {
				column := make([]float64, a.n)
				for i, p := range a.places[l] {
					column[p+m] = math.Sqrt(n) * c.At(i, k)
				}
				columns = append(columns, column...)
			}
		}
	}
	if len(columns) == 0 {
		return nil, fmt.Errorf("the basis has none of the s to f functions that the atom's electrons fill first")
	}
	return mat.DenseCopyOf(mat.NewDense(len(columns)/a.n, a.n, columns).T()), nil
}

// fock returns h + Σ_g [tr(L D)·L − ½·L D L] for the density W Wᵀ of the orbitals.
func (a *atom) fock(orbitals *mat.Dense) *mat.SymDense {
	n, w := a.n, orbitals.RawMatrix()
	l, half, sum := make([]float64, n*n), make([]float64, n*w.Cols), make([]float64, n*n)
	for b := range a.factors.Blocks() {
		count, unpack := a.factors.Unpack(b)
		for i := range count {
			unpack(l, i)
			linalg.Gemm(false, false, n, w.Cols, n, 1, l, n, w.Data, w.Stride, 0, half, w.Cols)
			linalg.Gemm(false, true, n, n, w.Cols, -0.5, half, w.Cols, half, w.Cols, 1, sum, n)
			floats.AddScaled(sum, floats.Dot(half, w.Data), l)
		}
	}
	out := mat.NewSymDense(n, nil)
	for p := range n {
		for q := range p + 1 {
			out.SetSym(p, q, a.core.At(p, q)+0.5*(sum[p*n+q]+sum[q*n+p]))
		}
	}
	return out
}

// toCartesian writes a density over spherical functions as one over cartesian
// functions.
func toCartesian(d *mat.SymDense, shells []integral.Shell) *mat.SymDense {
	rows, columns := 0, 0
	for _, s := range shells {
		rows, columns = rows+(s.L+1)*(s.L+2)/2, columns+2*s.L+1
	}
	c := mat.NewDense(rows, columns, nil)
	row, column := 0, 0
	for _, s := range shells {
		coefficients := integral.Spherical(s.L)
		for m, spherical := range coefficients {
			for k, v := range spherical {
				c.Set(row+k, column+m, v)
			}
		}
		row, column = row+(s.L+1)*(s.L+2)/2, column+2*s.L+1
	}
	return congruent(d, mat.DenseCopyOf(c.T()))
}
