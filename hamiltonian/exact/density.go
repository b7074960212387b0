package exact

import (
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
)

// Density returns the one-body density matrix of one spin, M×M,
//
//	γ_pq = Re ⟨x|c†_p c_q|x⟩/⟨x|x⟩,
//
// of the state with coefficients re + i·im; im is nil for a real state. Its
// eigenvectors are the natural orbitals. The norm must not be zero.
// Cost: 2·(M−n+1)² flops for each string with one electron less and each string
// of the other spin.
func (s *Space) Density(re, im []float64, spin int) *mat.SymDense {
	m, rows, columns := s.Orbitals(), s.Up.Len(), s.Down.Len()
	table, cut, size := s.Up, columns, columnsPerItem
	if spin == hamiltonian.Down {
		table, cut, size = s.Down, rows, rowsPerItem
	}
	var norm float64
	sum := make([]float64, m*m)
	for _, x := range [][]float64{re, im} {
		if x == nil {
			continue
		}
		s.check(x)
		norm += dot(x, x)
		if table.Electrons() == 0 {
			continue
		}
		parts := pieces(cut, size)
		partial := make([]float64, parts*m*m)
		holes := &like{table: table, below: strings.New(m, table.Electrons()-1), removed: 1}
		each(parts, func(item int) {
			from, to := piece(cut, parts, item)
			gamma, scratch := partial[item*m*m:(item+1)*m*m], holes.scratch(to-from)
			if spin == hamiltonian.Up {
				holes.density(gamma, x[from:], to-from, columns, scratch)
				return
			}
			block := make([]float64, (to-from)*columns)
			transpose(block, x[from*columns:], to-from, columns, columns)
			holes.density(gamma, block, to-from, to-from, scratch)
		})
		for part := range parts {
			for i, v := range partial[part*m*m : (part+1)*m*m] {
				sum[i] += v
			}
		}
	}
	gamma := mat.NewSymDense(m, nil)
	for p := range m {
		for q := range p + 1 {
			gamma.SetSym(p, q, sum[p*m+q]/norm)
		}
	}
	return gamma
}

// density adds Σ_K ⟨x|c†_p|K⟩⟨K|c_q|x⟩ to gamma, M×M, for columns of width
// numbers; the rows of x are ld apart.
func (l *like) density(gamma, x []float64, width, ld int, s *likeScratch) {
	m, n := l.table.Orbitals(), l.free()
	for k := range l.below.Len() {
		l.find(k, &s.parents)
		for a, row := range s.row {
			copy(s.in[a*width:(a+1)*width], x[row*ld:row*ld+width])
		}
		linalg.Gemm(false, true, n, n, width, 1, s.in, width, s.in, width, 0, s.block, n)
		for a, p := range s.label {
			for b, q := range s.label {
				gamma[p*m+q] += s.sign[a] * s.sign[b] * s.block[a*n+b]
			}
		}
	}
}
