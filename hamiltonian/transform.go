package hamiltonian

import (
	"fmt"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian/linalg"
)

// Rotate returns the Hamiltonian in the orbitals that are the columns of c,
// M×M′ with orthonormal columns, M′ ≤ M: h′ = cᵀhc, L′ = cᵀLc. With M′ < M the
// orbitals left out are dropped, empty. The electron numbers stay.
// Cost: 2·ng·M·M′·(M+M′) flops.
func (h *Hamiltonian) Rotate(c *mat.Dense) *Hamiltonian {
	rows, m := c.Dims()
	if rows != h.Orbitals {
		panic("hamiltonian: orbital matrix has the wrong number of rows")
	}
	out := &Hamiltonian{
		Sector:   Sector{Orbitals: m, Up: h.Up, Down: h.Down},
		Constant: h.Constant,
		Factors: &Factors{
			Sign:          append([]float64(nil), h.Factors.Sign...),
			Antisymmetric: h.Factors.Antisymmetric,
		},
	}
	for spin := range 2 {
		if spin == Down && h.OneBody[Down] == h.OneBody[Up] {
			out.OneBody[Down] = out.OneBody[Up]
		} else {
			out.OneBody[spin] = rotateSymmetric(h.OneBody[spin], c)
		}
		if spin == Down && h.Factors.SpinFree() {
			out.Factors.Packed[Down] = out.Factors.Packed[Up]
		} else {
			out.Factors.Packed[spin] = rotateFactors(h.Factors, spin, c)
		}
	}
	return out
}

func rotateSymmetric(s *mat.SymDense, c *mat.Dense) *mat.SymDense {
	_, m := c.Dims()
	var half, full mat.Dense
	half.Mul(s, c)
	full.Mul(c.T(), &half)
	out := mat.NewSymDense(m, nil)
	for p := range m {
		for q := p; q < m; q++ {
			out.SetSym(p, q, 0.5*(full.At(p, q)+full.At(q, p)))
		}
	}
	return out
}

func rotateFactors(f *Factors, spin int, c *mat.Dense) []float64 {
	n, m := c.Dims()
	raw := c.RawMatrix()
	packed := make([]float64, f.Count()*Pairs(m))
	l := mat.NewDense(n, n, nil)
	half, full := make([]float64, n*m), make([]float64, m*m)
	for g := range f.Count() {
		f.Unpack(l, g, spin)
		linalg.Gemm(false, false, n, m, n, 1, l.RawMatrix().Data, n, raw.Data, raw.Stride, 0, half, m)
		linalg.Gemm(true, false, m, m, n, 1, raw.Data, raw.Stride, half, m, 0, full, m)
		row := packed[g*Pairs(m) : (g+1)*Pairs(m)]
		for p := range m {
			copy(row[p*(p+1)/2:], full[p*m:p*m+p+1])
		}
	}
	return packed
}

// FreezeCore returns the Hamiltonian of the orbitals after the first n, which
// stay doubly occupied and are folded into constant and one-body part:
//
//	E_c′  = E_c + Σ_σ Σ_i h^σ_ii + ½ Σ_g s_g [T_g² − Σ_σ tr_c(L^{gσ} L^{gσ})]
//	h′^σ  = h^σ + Σ_g s_g [T_g L^{gσ} − (L^{gσ} P L^{gσ})],   T_g = Σ_σ tr_c L^{gσ}
//
// with P the projector on the core and tr_c the trace over its block. The
// factors lose the core's rows and columns.
func (h *Hamiltonian) FreezeCore(n int) (*Hamiltonian, error) {
	if n < 0 || n > h.Up || n > h.Down {
		return nil, fmt.Errorf("frozen core of %d orbitals, expected 0 to %d (each holds an up and a down electron)", n, min(h.Up, h.Down))
	}
	if n == 0 {
		return h, nil
	}
	if h.Up+h.Down == 2*n {
		return nil, fmt.Errorf("frozen core of %d orbitals leaves no electron to correlate", n)
	}
	m := h.Orbitals - n
	f := h.Factors
	out := &Hamiltonian{
		Sector:   Sector{Orbitals: m, Up: h.Up - n, Down: h.Down - n},
		Constant: h.Constant,
		Factors:  &Factors{Sign: append([]float64(nil), f.Sign...), Antisymmetric: f.Antisymmetric},
	}
	trace := make([]float64, f.Count())
	for spin := range 2 {
		for i := range n {
			out.Constant += h.OneBody[spin].At(i, i)
			for g := range trace {
				trace[g] += f.Row(g, spin)[Pair(i, i)] * max(0, f.Parity(g))
			}
		}
	}
	for g, s := range f.Sign {
		out.Constant += 0.5 * s * trace[g] * trace[g]
	}
	l := mat.NewDense(h.Orbitals, h.Orbitals, nil)
	var square, exchange mat.Dense
	for spin := range 2 {
		one := mat.NewSymDense(m, nil)
		for p := range m {
			for q := p; q < m; q++ {
				one.SetSym(p, q, h.OneBody[spin].At(n+p, n+q))
			}
		}
		packed := make([]float64, f.Count()*Pairs(m))
		for g, s := range f.Sign {
			f.Unpack(l, g, spin)
			core := l.Slice(0, n, 0, n)
			square.Mul(core, core)
			out.Constant -= 0.5 * s * mat.Trace(&square)
			exchange.Mul(l.Slice(n, h.Orbitals, 0, n), l.Slice(0, n, n, h.Orbitals))
			direct := trace[g] * max(0, f.Parity(g))
			for p := range m {
				for q := range p + 1 {
					one.SetSym(p, q, one.At(p, q)+s*(direct*l.At(n+p, n+q)-exchange.At(p, q)))
					packed[g*Pairs(m)+Pair(p, q)] = l.At(n+p, n+q)
				}
			}
		}
		out.OneBody[spin], out.Factors.Packed[spin] = one, packed
	}
	if h.SpinFree() {
		out.OneBody[Down], out.Factors.Packed[Down] = out.OneBody[Up], out.Factors.Packed[Up]
	}
	return out, nil
}
