package trialtest

import (
	"math/bits"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
)

// fock is the sector of a tiny Fock space: every pair of occupation masks, with
// |D⟩ = Π_up c† Π_down c†|0⟩, orbitals ascending left to right.
type fock struct {
	sector hamiltonian.Sector
	masks  [][2]uint
	index  map[[2]uint]int
}

func newFock(s hamiltonian.Sector) *fock {
	f := &fock{sector: s, index: map[[2]uint]int{}}
	for up := uint(0); up < 1<<s.Orbitals; up++ {
		if bits.OnesCount(up) != s.Up {
			continue
		}
		for down := uint(0); down < 1<<s.Orbitals; down++ {
			if bits.OnesCount(down) == s.Down {
				f.index[[2]uint{up, down}] = len(f.masks)
				f.masks = append(f.masks, [2]uint{up, down})
			}
		}
	}
	return f
}

func occupied(mask uint) (list []int) {
	for ; mask != 0; mask &= mask - 1 {
		list = append(list, bits.TrailingZeros(mask))
	}
	return list
}

// bra returns ⟨Ψ_T|D⟩ for every determinant D.
func (f *fock) bra(source trial.Source) []complex128 {
	w := trial.NewWalkers(f.sector, false, len(f.masks))
	for d, pair := range f.masks {
		for spin, mask := range pair {
			for j, p := range occupied(mask) {
				w.Set(d, spin, p, j, 1)
			}
		}
	}
	out := make([]complex128, len(f.masks))
	for d, o := range overlaps(source, w) {
		if !o.Zero() {
			out[d] = o.Value()
		}
	}
	return out
}

// expand returns ⟨D|φ⟩ for every determinant D.
func (f *fock) expand(w trial.Walkers, i int) []complex128 {
	out := make([]complex128, len(f.masks))
	for d, pair := range f.masks {
		out[d] = 1
		for spin, mask := range pair {
			rows := occupied(mask)
			minor := make([][]complex128, len(rows))
			for k, p := range rows {
				minor[k] = make([]complex128, len(rows))
				for j := range rows {
					minor[k][j] = w.At(i, spin, p, j)
				}
			}
			out[d] *= determinant(minor)
		}
	}
	return out
}

// determinant expands along the first row.
func determinant(a [][]complex128) complex128 {
	if len(a) == 0 {
		return 1
	}
	var sum complex128
	sign := complex128(1)
	for j := range a {
		var minor [][]complex128
		for _, row := range a[1:] {
			minor = append(minor, append(append([]complex128(nil), row[:j]...), row[j+1:]...))
		}
		sum += sign * a[0][j] * determinant(minor)
		sign = -sign
	}
	return sum
}

// move returns c†_p c_q |x⟩ for one spin.
func (f *fock) move(x []complex128, spin, p, q int) []complex128 {
	out := make([]complex128, len(x))
	for d, pair := range f.masks {
		mask := pair[spin]
		if mask>>q&1 == 0 {
			continue
		}
		sign := bits.OnesCount(mask & (1<<q - 1))
		mask &^= 1 << q
		if mask>>p&1 == 1 {
			continue
		}
		sign += bits.OnesCount(mask & (1<<p - 1))
		mask |= 1 << p
		pair[spin] = mask
		v := x[d]
		if sign%2 == 1 {
			v = -v
		}
		out[f.index[pair]] += v
	}
	return out
}

// oneBody returns Σ_σ Σ_pq A^σ_pq c†_pσ c_qσ |x⟩.
func (f *fock) oneBody(x []complex128, a [2]mat.Matrix) []complex128 {
	out := make([]complex128, len(x))
	for spin := range 2 {
		for p := range f.sector.Orbitals {
			for q := range f.sector.Orbitals {
				if v := a[spin].At(p, q); v != 0 {
					for d, y := range f.move(x, spin, p, q) {
						out[d] += complex(v, 0) * y
					}
				}
			}
		}
	}
	return out
}

// apply returns H|x⟩ from the form: E_c + h + ½ Σ_g s_g (v_g v_g − (L_gL_g)).
func (f *fock) apply(h *hamiltonian.Hamiltonian, x []complex128) []complex128 {
	out := f.oneBody(x, [2]mat.Matrix{h.OneBody[0], h.OneBody[1]})
	for d := range x {
		out[d] += complex(h.Constant, 0) * x[d]
	}
	m := f.sector.Orbitals
	for g, sign := range h.Factors.Sign {
		var l, square [2]mat.Matrix
		for spin := range 2 {
			dense, product := mat.NewDense(m, m, nil), mat.NewDense(m, m, nil)
			h.Factors.Unpack(dense, g, spin)
			product.Mul(dense, dense)
			l[spin], square[spin] = dense, product
		}
		twice, self := f.oneBody(f.oneBody(x, l), l), f.oneBody(x, square)
		for d := range out {
			out[d] += complex(0.5*sign, 0) * (twice[d] - self[d])
		}
	}
	return out
}

// spinSquared returns ⟨x|S²|x⟩ with S² = S_z(S_z+1) + N_down − Σ_pq ⟨c†_p↓c_q↓ c†_q↑c_p↑⟩.
func (f *fock) spinSquared(x []complex128) complex128 {
	sz := 0.5 * float64(f.sector.Up-f.sector.Down)
	sum := complex(sz*(sz+1)+float64(f.sector.Down), 0) * inner(x, x)
	for p := range f.sector.Orbitals {
		for q := range f.sector.Orbitals {
			sum -= inner(x, f.move(f.move(x, hamiltonian.Up, q, p), hamiltonian.Down, p, q))
		}
	}
	return sum
}
