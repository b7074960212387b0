package trial

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Walkers is a batch of Slater-determinant walkers. Each walker holds its
// columns one after the other, up before down; each column holds M real parts,
// then M imaginary parts. Seen as a real matrix a batch has 2·Columns()·Count
// rows of M numbers, which is the left operand of every hot product.
type Walkers struct {
	hamiltonian.Sector
	// Paired says that the down columns equal the up columns and are not stored.
	Paired bool
	// Count is the number of walkers.
	Count int
	// Data holds Count·Stride() numbers.
	Data []float64
}

// NewWalkers returns a batch of zero walkers. Paired needs N_up = N_down.
func NewWalkers(s hamiltonian.Sector, paired bool, count int) Walkers {
	if paired && s.Up != s.Down {
		panic("trial: paired walkers need as many up as down electrons")
	}
	w := Walkers{Sector: s, Paired: paired, Count: count}
	w.Data = make([]float64, count*w.Stride())
	return w
}

// Columns returns the number of stored columns of one walker.
func (w Walkers) Columns() int {
	if w.Paired {
		return w.Up
	}
	return w.Up + w.Down
}

// Stride returns the length of one walker, 2·M·Columns().
func (w Walkers) Stride() int { return 2 * w.Orbitals * w.Columns() }

// Walker returns walker i, aliasing Data.
func (w Walkers) Walker(i int) []float64 {
	n := w.Stride()
	return w.Data[i*n : (i+1)*n : (i+1)*n]
}

// Spin returns the columns of one spin of walker i, aliasing Data:
// N_σ rows of M real and M imaginary parts.
func (w Walkers) Spin(i, spin int) []float64 {
	all := w.Walker(i)
	up := 2 * w.Orbitals * w.Up
	if spin == hamiltonian.Up || w.Paired {
		return all[:up:up]
	}
	return all[up:]
}

// Slice returns walkers from ≤ i < to, aliasing Data.
func (w Walkers) Slice(from, to int) Walkers {
	n := w.Stride()
	w.Data = w.Data[from*n : to*n : to*n]
	w.Count = to - from
	return w
}

// At returns φ_pj of one spin of walker i.
func (w Walkers) At(i, spin, p, j int) complex128 {
	c := w.Spin(i, spin)[2*w.Orbitals*j:]
	return complex(c[p], c[w.Orbitals+p])
}

// Set sets φ_pj of one spin of walker i.
func (w Walkers) Set(i, spin, p, j int, v complex128) {
	c := w.Spin(i, spin)[2*w.Orbitals*j:]
	c[p], c[w.Orbitals+p] = real(v), imag(v)
}

// Unpaired returns the batch with both spins stored: w itself when it is not
// paired, a copy otherwise.
func (w Walkers) Unpaired() Walkers {
	if !w.Paired {
		return w
	}
	out := NewWalkers(w.Sector, false, w.Count)
	for i := range w.Count {
		copy(out.Spin(i, hamiltonian.Up), w.Walker(i))
		copy(out.Spin(i, hamiltonian.Down), w.Walker(i))
	}
	return out
}

// Orbitals are the columns of a determinant, M×N for each spin; Im is nil where
// all are real.
type Orbitals struct {
	Re, Im [2]*mat.Dense
}

// RealOrbitals returns orbitals without imaginary part, sharing up and down.
// An empty spin may be given as nil.
func RealOrbitals(up, down *mat.Dense) Orbitals {
	return Orbitals{Re: [2]*mat.Dense{up, down}}
}

// Columns returns the number of columns of one spin.
func (o Orbitals) Columns(spin int) int {
	if o.Re[spin] == nil || o.Re[spin].IsEmpty() {
		return 0
	}
	_, n := o.Re[spin].Dims()
	return n
}

// Real reports whether no orbital has an imaginary part.
func (o Orbitals) Real() bool { return o.Im[0] == nil && o.Im[1] == nil }

// At returns element (p, j) of one spin.
func (o Orbitals) At(spin, p, j int) complex128 {
	v := complex(o.Re[spin].At(p, j), 0)
	if o.Im[spin] != nil {
		v += complex(0, o.Im[spin].At(p, j))
	}
	return v
}

// Equal reports whether both spins have the very same columns.
func (o Orbitals) Equal() bool {
	same := func(a, b *mat.Dense) bool {
		return a == b || (a != nil && b != nil && !a.IsEmpty() && !b.IsEmpty() && mat.Equal(a, b))
	}
	return same(o.Re[0], o.Re[1]) && same(o.Im[0], o.Im[1])
}

// Fill sets every walker of the batch to the determinant of the orbitals.
func (w Walkers) Fill(o Orbitals) {
	for i := range w.Count {
		for spin := range 2 {
			if spin == hamiltonian.Down && w.Paired {
				continue
			}
			for j := range w.Electrons(spin) {
				for p := range w.Orbitals {
					w.Set(i, spin, p, j, o.At(spin, p, j))
				}
			}
		}
	}
}
