package meanfield

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// problem is one kind of Hartree–Fock for one Hamiltonian: the energy as a
// function of orbital rotations.
type problem struct {
	h     *hamiltonian.Hamiltonian
	build builder
	kind  Kind
	// sets holds the independent rotations: one for both spins together (RHF,
	// ROHF) or one per spin (UHF).
	sets []rotations
	// size is the number of rotation angles in all sets.
	size int
}

// rotations are the rotations of one orbital matrix that change the energy:
// those between classes of orbitals of different occupation. Orbitals are in
// the order of classes.
type rotations struct {
	spins  []int    // the spins whose orbitals turn
	bounds []int    // class k is orbitals bounds[k] to bounds[k+1]
	pairs  [][2]int // (p, q) with p in a later class than q
}

func newProblem(h *hamiltonian.Hamiltonian, kind Kind) *problem {
	p := &problem{h: h, build: newBuilder(h), kind: kind}
	m := h.Orbitals
	if kind == UHF {
		p.sets = []rotations{
			newRotations([]int{hamiltonian.Up}, []int{0, h.Up, m}),
			newRotations([]int{hamiltonian.Down}, []int{0, h.Down, m}),
		}
	} else {
		p.sets = []rotations{newRotations([]int{hamiltonian.Up, hamiltonian.Down},
			[]int{0, min(h.Up, h.Down), max(h.Up, h.Down), m})}
	}
	for _, s := range p.sets {
		p.size += len(s.pairs)
	}
	return p
}

func newRotations(spins, bounds []int) rotations {
	r := rotations{spins: spins, bounds: bounds}
	for k := range len(bounds) - 1 {
		for p := bounds[k+1]; p < bounds[len(bounds)-1]; p++ {
			for q := bounds[k]; q < bounds[k+1]; q++ {
				r.pairs = append(r.pairs, [2]int{p, q})
			}
		}
	}
	return r
}

// occupation returns 1 for the first N_σ orbitals and 0 for the rest.
func (p *problem) occupation(spin, orbital int) float64 {
	if orbital < p.h.Electrons(spin) {
		return 1
	}
	return 0
}

// point is a determinant with its Fock matrices. Points are not changed once
// made.
type point struct {
	c      [2]*mat.Dense    // all orbitals, M×M; one pointer for RHF and ROHF
	f      [2]*mat.SymDense // Fock matrices in the basis of h
	fmo    [2]*mat.Dense    // Fock matrices in the orbitals c
	energy float64
}

// at computes the energy and Fock matrices of the determinant of the first N_σ
// columns of c.
func (p *problem) at(c [2]*mat.Dense) *point {
	occ := [2]*mat.Dense{leading(c[0], p.h.Up), leading(c[1], p.h.Down)}
	if c[0] == c[1] && p.h.Up == p.h.Down {
		occ[1] = occ[0]
	}
	d := densities(occ)
	pt := &point{c: c, f: addOneBody(p.h, p.build.twoBody(d))}
	pt.energy = determinantEnergy(p.h, d, pt.f)
	pt.fmo = p.transform(pt.f, c)
	return pt
}

// transform returns Cᵀ F C for both spins.
func (p *problem) transform(f [2]*mat.SymDense, c [2]*mat.Dense) [2]*mat.Dense {
	var out [2]*mat.Dense
	for spin := range f {
		if spin == 1 && f[0] == f[1] && c[0] == c[1] {
			out[1] = out[0]
			continue
		}
		var half mat.Dense
		half.Mul(f[spin], c[spin])
		out[spin] = new(mat.Dense)
		out[spin].Mul(c[spin].T(), &half)
	}
	return out
}

// leading returns a copy of the first n columns, or an empty matrix.
func leading(c *mat.Dense, n int) *mat.Dense {
	if n == 0 {
		return &mat.Dense{}
	}
	rows, _ := c.Dims()
	return mat.DenseCopyOf(c.Slice(0, rows, 0, n))
}

// gradient writes the derivatives of the energy by the rotation angles κ_pq of
// C exp(κ): 2 Σ_σ (n_q − n_p) F^σ_pq.
func (p *problem) gradient(pt *point, dst []float64) {
	i := 0
	for _, s := range p.sets {
		for _, pair := range s.pairs {
			sum := 0.0
			for _, spin := range s.spins {
				sum += 2 * (p.occupation(spin, pair[1]) - p.occupation(spin, pair[0])) * pt.fmo[spin].At(pair[0], pair[1])
			}
			dst[i] = sum
			i++
		}
	}
}

// diagonal writes the orbital-energy part of the Hessian's diagonal,
// 2 Σ_σ (n_q − n_p)(F^σ_pp − F^σ_qq).
func (p *problem) diagonal(pt *point, dst []float64) {
	i := 0
	for _, s := range p.sets {
		for _, pair := range s.pairs {
			sum := 0.0
			for _, spin := range s.spins {
				f := pt.fmo[spin]
				sum += 2 * (p.occupation(spin, pair[1]) - p.occupation(spin, pair[0])) * (f.At(pair[0], pair[0]) - f.At(pair[1], pair[1]))
			}
			dst[i] = sum
			i++
		}
	}
}

// antisymmetric returns the rotation generators κ of the sets, by spin, M×M.
func (p *problem) antisymmetric(x []float64) [2]*mat.Dense {
	var out [2]*mat.Dense
	i := 0
	for _, s := range p.sets {
		k := mat.NewDense(p.h.Orbitals, p.h.Orbitals, nil)
		for _, pair := range s.pairs {
			k.Set(pair[0], pair[1], x[i])
			k.Set(pair[1], pair[0], -x[i])
			i++
		}
		for _, spin := range s.spins {
			out[spin] = k
		}
	}
	return out
}

// rotate returns the orbitals C exp(κ).
func (p *problem) rotate(c [2]*mat.Dense, x []float64) [2]*mat.Dense {
	k := p.antisymmetric(x)
	var out [2]*mat.Dense
	for spin := range c {
		if spin == 1 && k[0] == k[1] {
			out[1] = out[0]
			continue
		}
		var u mat.Dense
		u.Exp(k[spin])
		out[spin] = new(mat.Dense)
		out[spin].Mul(c[spin], &u)
	}
	return out
}

// hessian writes the product of the second derivatives of E[C exp(κ)] at κ = 0
// with x. With n the diagonal of occupations, D = n + [κ,n] + ½[κ,[κ,n]] + … in
// the orbitals C, and G[·] the two-body part of the Fock matrix, linear in D:
//
//	(Hκ)_pq = −2 Σ_σ { ½([n,[F,κ]] + [[κ,n],F]) + [n, G[[κ,n]]] }_pq
//
// Cost: about twice that of a Fock matrix.
func (p *problem) hessian(pt *point, x, dst []float64) {
	m := p.h.Orbitals
	kappa := p.antisymmetric(x)
	var d [2]factored
	for spin := range d {
		if spin == 1 && kappa[0] == kappa[1] && p.h.Up == p.h.Down {
			d[1] = d[0]
			continue
		}
		n := p.h.Electrons(spin)
		if n == 0 || n == m {
			continue
		}
		c := pt.c[spin]
		a := mat.DenseCopyOf(c.Slice(0, m, 0, n))
		a.Scale(2, a)
		b := new(mat.Dense)
		b.Mul(c.Slice(0, m, n, m), kappa[spin].Slice(n, m, 0, n))
		d[spin] = factored{a, b}
	}
	response := p.transform(p.build.twoBody(d), pt.c)
	var t [2]*mat.Dense
	for spin := range t {
		k, f := kappa[spin], pt.fmo[spin]
		y := mat.NewDense(m, m, nil)
		y.Apply(func(r, q int, v float64) float64 {
			return v * (p.occupation(spin, q) - p.occupation(spin, r))
		}, k)
		var fk, yf mat.Dense
		fk.Mul(f, k)
		yf.Mul(y, f)
		t[spin] = mat.NewDense(m, m, nil)
		t[spin].Apply(func(r, q int, v float64) float64 {
			dn := p.occupation(spin, r) - p.occupation(spin, q)
			return 0.5*(dn*(fk.At(r, q)+fk.At(q, r))+yf.At(r, q)-yf.At(q, r)) + dn*v
		}, response[spin])
	}
	i := 0
	for _, s := range p.sets {
		for _, pair := range s.pairs {
			sum := 0.0
			for _, spin := range s.spins {
				sum -= 2 * t[spin].At(pair[0], pair[1])
			}
			dst[i] = sum
			i++
		}
	}
}
