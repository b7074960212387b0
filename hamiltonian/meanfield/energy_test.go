package meanfield

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/internal/fock"
)

// general returns an invented Hamiltonian with factors of both signs and both
// parities, spin-resolved if asked for.
func general(sector hamiltonian.Sector, symmetric, antisymmetric int, resolved bool, seed uint64) *hamiltonian.Hamiltonian {
	random := rand.New(rand.NewPCG(seed, 7))
	m := sector.Orbitals
	h := &hamiltonian.Hamiltonian{Sector: sector, Constant: 0.7}
	one := func() *mat.SymDense {
		s := mat.NewSymDense(m, nil)
		for p := range m {
			for q := range p + 1 {
				s.SetSym(p, q, 0.5*random.NormFloat64())
			}
			s.SetSym(p, p, float64(p)-2)
		}
		return s
	}
	h.OneBody[0] = one()
	h.OneBody[1] = h.OneBody[0]
	h.Factors = hamiltonian.NewFactors(m, symmetric+antisymmetric)
	h.Factors.Antisymmetric = antisymmetric
	if resolved {
		h.OneBody[1] = one()
		h.Factors.Packed[1] = make([]float64, len(h.Factors.Packed[0]))
	}
	for g := range h.Factors.Count() {
		if g%3 == 1 {
			h.Factors.Sign[g] = -1
		}
		for spin := range 2 {
			if spin == 1 && !resolved {
				break
			}
			row := h.Factors.Row(g, spin)
			for p := range m {
				for q := range p + 1 {
					row[hamiltonian.Pair(p, q)] = 0.4 * random.NormFloat64()
					if p == q && g >= symmetric {
						row[hamiltonian.Pair(p, q)] = 0
					}
				}
			}
		}
	}
	return h
}

// orthonormal returns a random M×n matrix with orthonormal columns.
func orthonormal(m, n int, random *rand.Rand) *mat.Dense {
	a := mat.NewDense(m, m, nil)
	for i := range m {
		for j := range m {
			a.Set(i, j, random.NormFloat64())
		}
	}
	var qr mat.QR
	qr.Factorize(a)
	var q mat.Dense
	qr.QTo(&q)
	return leading(&q, n)
}

// bruteForce returns ⟨H⟩ and ⟨S²⟩ of a determinant from matrices over all
// determinants of the sector; its amplitudes are minors of the orbitals.
func bruteForce(h *hamiltonian.Hamiltonian, occupied [2]*mat.Dense) (energy, spin float64) {
	space := fock.New(h.Sector)
	state := mat.NewVecDense(space.Dim(), nil)
	for i := range space.Dim() {
		amplitude := 1.0
		for sigma := range 2 {
			n := h.Electrons(sigma)
			if n == 0 {
				continue
			}
			minor, row := mat.NewDense(n, n, nil), 0
			for p := range h.Orbitals {
				if space.Occupied(i, sigma, p) == 1 {
					minor.SetRow(row, occupied[sigma].RawRowView(p))
					row++
				}
			}
			amplitude *= mat.Det(minor)
		}
		state.SetVec(i, amplitude)
	}
	// S² = S_z(S_z+1) + S₋S₊ = S_z(S_z+1) + N_down − Σ_pq c†_p↑ c†_q↓ c_p↓ c_q↑.
	exchange := mat.NewDense(space.Dim(), space.Dim(), nil)
	space.TwoBody(exchange, hamiltonian.Up, hamiltonian.Down, func(p, q, r, s int) float64 {
		if p == s && q == r {
			return 2
		}
		return 0
	})
	z := 0.5 * float64(h.Up-h.Down)
	return mat.Inner(state, space.Normal(h), state), z*(z+1) + float64(h.Down) - mat.Inner(state, exchange, state)
}

func TestEnergyAgainstFockSpace(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 3))
	for _, sector := range []hamiltonian.Sector{{Orbitals: 3, Up: 2, Down: 1}, {Orbitals: 3, Up: 1, Down: 2}, {Orbitals: 3, Up: 2, Down: 0}, {Orbitals: 3, Up: 0, Down: 3}, {Orbitals: 3, Up: 2, Down: 2}} {
		for _, resolved := range []bool{false, true} {
			h := general(sector, 3, 3, resolved, 11)
			occupied := [2]*mat.Dense{orthonormal(3, sector.Up, random), orthonormal(3, sector.Down, random)}
			energy, spin := bruteForce(h, occupied)
			if e := Energy(h, occupied); math.Abs(e-energy) > 1e-12 {
				t.Errorf("%+v resolved %v: energy %.14f, expected %.14f", sector, resolved, e, energy)
			}
			if s := SpinSquared(occupied); math.Abs(s-spin) > 1e-12 {
				t.Errorf("%+v: <S^2> %.14f, expected %.14f", sector, s, spin)
			}
		}
	}
}

// Fock matrices of densities that belong to no determinant are derivatives of
// the energy, which is quadratic in the density: a central difference is exact.
func TestFockIsDerivative(t *testing.T) {
	h := general(hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}, 40, 30, true, 5) // several factors to a part
	random := rand.New(rand.NewPCG(8, 8))
	symmetric := func() *mat.SymDense {
		s := mat.NewSymDense(5, nil)
		for p := range 5 {
			for q := range p + 1 {
				s.SetSym(p, q, random.NormFloat64())
			}
		}
		return s
	}
	d := [2]*mat.SymDense{symmetric(), symmetric()}
	// The energy written out in factors.
	energy := func(d [2]*mat.SymDense) float64 {
		e := h.Constant
		for g, s := range h.Factors.Sign {
			rho := 0.0
			for spin := range 2 {
				l, ld, ldld := mat.NewDense(5, 5, nil), new(mat.Dense), new(mat.Dense)
				h.Factors.Unpack(l, g, spin)
				ld.Mul(l, d[spin])
				ldld.Mul(ld, ld)
				rho += mat.Trace(ld)
				e -= 0.5 * s * mat.Trace(ldld)
			}
			e += 0.5 * s * rho * rho
		}
		for spin := range 2 {
			var hd mat.Dense
			hd.Mul(h.OneBody[spin], d[spin])
			e += mat.Trace(&hd)
		}
		return e
	}
	f := Fock(h, d)
	for spin := range 2 {
		for p := range 5 {
			for q := range p + 1 {
				shifted := func(by float64) float64 {
					x := d
					x[spin] = mat.NewSymDense(5, nil)
					x[spin].CopySym(d[spin])
					x[spin].SetSym(p, q, x[spin].At(p, q)+by)
					return energy(x)
				}
				want := 0.5 * (shifted(1) - shifted(-1))
				got := f[spin].At(p, q)
				if p != q {
					got *= 2
				}
				if math.Abs(got-want) > 1e-11 {
					t.Errorf("spin %d (%d,%d): %.12f, expected %.12f", spin, p, q, got, want)
				}
			}
		}
	}
}

// Gradient and Hessian of the orbital rotations against differences of the
// energy, at points that are not stationary.
func TestDerivativesAgainstDifferences(t *testing.T) {
	for _, c := range []struct {
		kind     Kind
		up, down int
		resolved bool
	}{{RHF, 2, 2, false}, {ROHF, 3, 1, false}, {ROHF, 1, 3, false}, {ROHF, 2, 0, false}, {UHF, 3, 1, false}, {UHF, 2, 2, true}, {UHF, 0, 2, true}} {
		h := general(hamiltonian.Sector{Orbitals: 5, Up: c.up, Down: c.down}, 4, 2, c.resolved, 21)
		p := newProblem(h, c.kind)
		random := rand.New(rand.NewPCG(4, uint64(c.up)))
		orbitals := [2]*mat.Dense{orthonormal(5, 5, random), orthonormal(5, 5, random)}
		if c.kind != UHF {
			orbitals[1] = orbitals[0]
		}
		pt := p.at(orbitals)
		g, hx := make([]float64, p.size), make([]float64, p.size)
		p.gradient(pt, g)
		energy := func(x, y []float64, a, b float64) float64 {
			sum := make([]float64, p.size)
			floats.AddScaled(sum, a, x)
			floats.AddScaled(sum, b, y)
			return p.at(p.rotate(orbitals, sum)).energy
		}
		const step, short = 1e-3, 1e-4
		unit := func(i int) []float64 {
			x := make([]float64, p.size)
			x[i] = 1
			return x
		}
		for i := range p.size {
			x := unit(i)
			// Fourth-order difference.
			want := (8*(energy(x, x, step, 0)-energy(x, x, -step, 0)) - (energy(x, x, 2*step, 0) - energy(x, x, -2*step, 0))) / (12 * step)
			if math.Abs(g[i]-want) > 1e-9 {
				t.Errorf("%v: gradient %d is %.10f, expected %.10f", c, i, g[i], want)
			}
			p.hessian(pt, x, hx)
			for j := range p.size {
				y := unit(j)
				want := (energy(x, y, short, short) - energy(x, y, short, -short) - energy(x, y, -short, short) + energy(x, y, -short, -short)) / (4 * short * short)
				if math.Abs(hx[j]-want) > 5e-6 {
					t.Errorf("%v: Hessian (%d,%d) is %.7f, expected %.7f", c, i, j, hx[j], want)
				}
			}
		}
	}
}
