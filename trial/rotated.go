package trial

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// Rotated holds the factors of a Hamiltonian half rotated onto a support,
// (S†L^{gσ})_iq, ready for the products that give ⟨v_g⟩ for a batch.
type Rotated struct {
	Support  Support
	Orbitals int
	Count    int // number of factors, ng
	// Summed says that both spins share support and factors, so that their
	// densities are added before the product.
	Summed bool

	h       *hamiltonian.Hamiltonian
	operand *linalg.Packed   // K×ng, or K×2ng with imaginary parts in the right half
	single  *linalg.Packed32 // takes the place of operand in single precision
}

// NewRotated rotates the factors of h. Cost: 2·ng·n·M² flops for each spin.
func NewRotated(h *hamiltonian.Hamiltonian, s Support) *Rotated { return newRotated(h, s, false) }

// newRotated is NewRotated; single keeps the factors in single precision: ⟨v_g⟩
// then has a relative error of about 1e-7.
func newRotated(h *hamiltonian.Hamiltonian, s Support, single bool) *Rotated {
	r := &Rotated{
		Support:  s,
		Orbitals: h.Orbitals,
		Count:    h.Factors.Count(),
		Summed:   h.Factors.SpinFree() && s.Equal(),
		h:        h,
	}
	if r.Count == 0 {
		return r
	}
	spins, length := r.layout()
	planes := 1
	if !s.Real() {
		planes = 2
	}
	all := make([]float64, planes*r.Count*length)
	at := 0
	for spin := range spins {
		n := s.Columns(spin) * r.Orbitals
		for g := range r.Count {
			r.Factor(all[g*length+at:g*length+at+n], g, spin, false)
			if planes == 2 {
				row := all[(r.Count+g)*length+at:]
				r.Factor(row[:n], g, spin, true)
			}
		}
		at += n
	}
	if single {
		half := make([]float32, len(all))
		for i, v := range all {
			half[i] = float32(v)
		}
		r.single = linalg.Pack32(true, length, planes*r.Count, half, length)
		return r
	}
	r.operand = linalg.Pack(true, length, planes*r.Count, all, length)
	return r
}

func (r *Rotated) layout() (spins, length int) {
	spins = 2
	if r.Summed {
		spins = 1
	}
	for spin := range spins {
		length += r.Support.Columns(spin) * r.Orbitals
	}
	return spins, length
}

// DensityLength returns Σ_σ n_σ·M, the length of one row of a density.
func (r *Rotated) DensityLength() int {
	return (r.Support.Columns(hamiltonian.Up) + r.Support.Columns(hamiltonian.Down)) * r.Orbitals
}

// Factor writes the real or imaginary part of S†L^{gσ}, n_σ×M, into dst.
func (r *Rotated) Factor(dst []float64, g, spin int, imaginary bool) {
	n, m := r.Support.Columns(spin), r.Orbitals
	s, scale := r.Support.Re[spin], 1.0
	if imaginary {
		s, scale = r.Support.Im[spin], -1
	}
	if n == 0 {
		return
	}
	if s == nil {
		clear(dst)
		return
	}
	l := mat.NewDense(m, m, nil)
	r.h.Factors.Unpack(l, g, spin)
	raw := s.RawMatrix()
	linalg.Gemm(true, false, n, m, m, scale, raw.Data, raw.Stride, l.RawMatrix().Data, m, 0, dst, m)
}

// Fields sets m.Fields from m.Density for count walkers: one real product of
// 4·count·ng·K flops, K = N·M (the support of one spin where both are summed).
func (r *Rotated) Fields(m *Mixed, count int) {
	if r.Count == 0 {
		return
	}
	density, length := m.Density, r.DensityLength()
	if r.Summed {
		half := length / 2
		m.summed = Grow(m.summed, 2*count*half)
		for i := range 2 * count {
			up, down := m.Density[i*length:i*length+half], m.Density[i*length+half:(i+1)*length]
			dst := m.summed[i*half : (i+1)*half]
			for k := range dst {
				dst[k] = up[k] + down[k]
			}
		}
		density, length = m.summed, half
	}
	if r.Support.Real() {
		r.multiply(m, m.Fields, 2*count, density, length, r.Count)
		return
	}
	ng := r.Count
	m.both = Grow(m.both, 2*count*2*ng)
	r.multiply(m, m.both, 2*count, density, length, 2*ng)
	for i := range count {
		re, im := m.both[4*i*ng:(4*i+2)*ng], m.both[(4*i+2)*ng:(4*i+4)*ng]
		outRe, outIm := m.Fields[2*i*ng:(2*i+1)*ng], m.Fields[(2*i+1)*ng:(2*i+2)*ng]
		for g := range ng {
			outRe[g] = re[g] - im[ng+g]
			outIm[g] = re[ng+g] + im[g]
		}
	}
}

// multiply sets dst = density·operand, rows×width, in the operand's precision.
func (r *Rotated) multiply(m *Mixed, dst []float64, rows int, density []float64, length, width int) {
	if r.single == nil {
		r.operand.Mul(rows, 1, density, length, 0, dst, width)
		return
	}
	m.singleDensity = Grow(m.singleDensity, rows*length)
	m.singleFields = Grow(m.singleFields, rows*width)
	for i := range m.singleDensity {
		m.singleDensity[i] = float32(density[i])
	}
	r.single.Mul(rows, 1, m.singleDensity, length, 0, m.singleFields, width)
	for i, v := range m.singleFields {
		dst[i] = float64(v)
	}
}
