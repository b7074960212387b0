package exact

import (
	"math/bits"

	"gonum.org/v1/gonum/blas/gonum"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian/linalg"
	"leadline/hamiltonian/strings"
)

// like is the part of H that acts on one spin: the one-body part and the
// two-body part of like spins, by way of the strings K with one or two electrons
// less,
//
//	H|x⟩ = Σ_K Σ_AB |K+A⟩ (±) G_AB (±) ⟨K+B|x⟩,
//
// A and B orbitals (G = h) or, where there is a two-body part, pairs of orbitals
// (G of tensor.exchanged with h folded in). For each K the rows K+B of the vector
// are gathered and multiplied by the block of G that K leaves free, a matrix
// product with as many columns as the vector has.
type like struct {
	table, below *strings.Table
	removed      int // electrons that K lacks: 0 (nothing to do), 1 or 2
	matrix       []float64
	labels       int // order of the matrix
	diagonal     []float64
}

func newLike(table *strings.Table, one *mat.SymDense, two *tensor) *like {
	m, n := table.Orbitals(), table.Electrons()
	l := &like{table: table, diagonal: make([]float64, table.Len())}
	var g []float64
	var largest float64
	if n > 1 {
		g, largest = two.exchanged(m)
	}
	for i := range l.diagonal {
		occupied := table.Occupied(nil, i)
		for k, p := range occupied {
			l.diagonal[i] += one.At(p, p)
			for _, q := range occupied[:k] {
				l.diagonal[i] += g[pairIndex(q, p)*(m*(m-1)/2+1)]
			}
		}
	}
	switch {
	case n == 0:
	case n == 1 || largest == 0:
		l.removed, l.labels = 1, m
		l.matrix = make([]float64, m*m)
		for p := range m {
			for q := range m {
				l.matrix[p*m+q] = one.At(p, q)
			}
		}
	default:
		l.removed, l.labels = 2, m*(m-1)/2
		foldOneBody(g, one, n)
		l.matrix = g
	}
	if l.removed > 0 {
		l.below = strings.New(m, n-l.removed)
	}
	return l
}

// parents is the list of strings K + A of one K.
type parents struct {
	row, label []int
	sign       []float64
}

// find lists the strings that hold K and the labels A and signs by which they do.
func (l *like) find(k int, out *parents) {
	mask := l.below.Mask(k)
	out.row, out.label, out.sign = out.row[:0], out.label[:0], out.sign[:0]
	free := ^mask
	if m := l.table.Orbitals(); m < 64 {
		free &= 1<<m - 1
	}
	for f := free; f != 0; f &= f - 1 {
		q := bits.TrailingZeros64(f)
		sign := strings.Sign(mask & (1<<q - 1))
		if l.removed == 1 {
			out.row = append(out.row, l.table.Index(mask|1<<q))
			out.label = append(out.label, q)
			out.sign = append(out.sign, sign)
			continue
		}
		for e := free & (1<<q - 1); e != 0; e &= e - 1 {
			// c_q c_p (K + p + q) with p < q: c_p passes what is below p, then
			// c_q what is below q without p.
			p := bits.TrailingZeros64(e)
			out.row = append(out.row, l.table.Index(mask|1<<q|1<<p))
			out.label = append(out.label, pairIndex(p, q))
			out.sign = append(out.sign, sign*strings.Sign(mask&(1<<p-1)))
		}
	}
}

// free returns the number of parents of every K.
func (l *like) free() int {
	if l.removed == 0 {
		return 0
	}
	return strings.Count(l.table.Orbitals()-l.table.Electrons()+l.removed, l.removed)
}

// likeScratch is the workspace of one goroutine for up to width columns.
type likeScratch struct {
	parents
	block, in, out []float64
}

func (l *like) scratch(width int) *likeScratch {
	n := l.free()
	return &likeScratch{block: make([]float64, n*n), in: make([]float64, n*width), out: make([]float64, n*width)}
}

// add computes dst += H src for columns of width numbers; the rows, one per
// string, are ld apart in both. 2·flops(width) operations in matrix products.
func (l *like) add(dst, src []float64, width, ld int, s *likeScratch) {
	if l.removed == 0 {
		return
	}
	n := l.free()
	for k := range l.below.Len() {
		l.find(k, &s.parents)
		for a, labelA := range s.label {
			block, row := s.block[a*n:(a+1)*n], l.matrix[labelA*l.labels:(labelA+1)*l.labels]
			for b, labelB := range s.label {
				block[b] = s.sign[a] * s.sign[b] * row[labelB]
			}
			copy(s.in[a*width:(a+1)*width], src[s.row[a]*ld:s.row[a]*ld+width])
		}
		linalg.Gemm(false, false, n, width, n, 1, s.block, n, s.in, width, 0, s.out, width)
		for a, row := range s.row {
			gonum.Implementation{}.Daxpy(width, 1, s.out[a*width:], 1, dst[row*ld:], 1)
		}
	}
}

// flops returns the operations in matrix products of add.
func (l *like) flops(width int) float64 {
	if l.removed == 0 {
		return 0
	}
	n := float64(l.free())
	return 2 * n * n * float64(width) * float64(l.below.Len())
}
