package afqmc

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// float is the precision of the fields' exponential.
type float interface{ float32 | float64 }

// operand is a constant right-hand factor of a product, packed.
type operand[T float] interface {
	Mul(m int, alpha T, a []T, lda int, beta T, c []T, ldc int)
}

// exponent applies exp(X), X = Σ_g c_g L_g with complex coefficients c = √τ z η,
// to the columns of walkers. In single precision the terms of the series are
// single and their sum, which is added to the columns, is double: a step then
// has an error of about 1e-7·‖X‖, far below that of a usual time step.
type exponent[T float] struct {
	orbitals, factors  int
	symmetric          [2]operand[T] // packed factors, ng_s × M(M+1)/2
	antisymmetric      [2]operand[T] // packed factors, ng_a × M(M+1)/2
	antisymmetricCount int           // number of antisymmetric factors
	multiply           func(transA, transB bool, m, n, k int, alpha T, a []T, lda int, b []T, ldb int, beta T, c []T, ldc int)
}

// exponential is an exponent of either precision with scratch of its own kind.
type exponential interface {
	newArea(walkers, columns int) exponentialArea
}

// exponentialArea is the scratch for a tile.
type exponentialArea interface {
	// fields forms X of count walkers for one spin from their coefficients, rows
	// 2i and 2i+1 the real and imaginary parts.
	fields(coefficients []float64, count, spin int)
	// unpack makes walker i the one that series works on.
	unpack(i int)
	// series replaces columns, each M real then M imaginary parts, by exp(X) of
	// them, to the given order.
	series(columns []float64, order int)
	// matrix returns [Re Xᵀ | Im Xᵀ] of the unpacked walker, M×2M.
	matrix() []float64
}

func newExponent(f *hamiltonian.Factors, orbitals, spins int) exponential {
	e := &exponent[float64]{orbitals: orbitals, factors: f.Count(), multiply: linalg.Gemm}
	e.pack(f, spins, func(rows []float64, count, width int) operand[float64] {
		return linalg.Pack(false, count, width, rows, width)
	})
	return e
}

func newSingleExponent(f *hamiltonian.Factors, orbitals, spins int) exponential {
	e := &exponent[float32]{orbitals: orbitals, factors: f.Count(), multiply: linalg.Gemm32}
	e.pack(f, spins, func(rows []float64, count, width int) operand[float32] {
		single := make([]float32, len(rows))
		convert(single, rows)
		return linalg.Pack32(false, count, width, single, width)
	})
	return e
}

// convert copies with a change of precision.
func convert[T float](dst []T, src []float64) {
	for i, v := range src {
		dst[i] = T(v)
	}
}

func (e *exponent[T]) pack(f *hamiltonian.Factors, spins int, pack func(rows []float64, count, width int) operand[T]) {
	width, ns := hamiltonian.Pairs(e.orbitals), f.Symmetric()
	e.antisymmetricCount = f.Antisymmetric
	for spin := range spins {
		packed := f.Packed[spin]
		if ns > 0 {
			e.symmetric[spin] = pack(packed[:ns*width], ns, width)
		}
		if f.Antisymmetric > 0 {
			e.antisymmetric[spin] = pack(packed[ns*width:], f.Antisymmetric, width)
		}
	}
}

type exponentArea[T float] struct {
	*exponent[T]
	coefficients        []T
	packed, packedAnti  []T // X packed: rows 2i, 2i+1 of the tile
	x                   []T // [Re Xᵀ | Im Xᵀ], M×2M
	start, source, term []T // columns of one walker
}

func (e *exponent[T]) newArea(walkers, columns int) exponentialArea {
	m := e.orbitals
	a := &exponentArea[T]{
		exponent:     e,
		coefficients: make([]T, 2*walkers*e.factors),
		packed:       make([]T, 2*walkers*hamiltonian.Pairs(m)),
		x:            make([]T, 2*m*m),
		start:        make([]T, columns*2*m),
		source:       make([]T, columns*2*m),
		term:         make([]T, columns*2*m),
	}
	if e.antisymmetricCount > 0 {
		a.packedAnti = make([]T, 2*walkers*hamiltonian.Pairs(m))
	}
	return a
}

// fields: 2·count·ng·M(M+1) flops in one product.
func (a *exponentArea[T]) fields(coefficients []float64, count, spin int) {
	ng, width := a.factors, hamiltonian.Pairs(a.orbitals)
	convert(a.coefficients, coefficients[:2*count*ng])
	if o := a.symmetric[spin]; o != nil {
		o.Mul(2*count, 1, a.coefficients, ng, 0, a.packed, width)
	} else {
		clear(a.packed[:2*count*width])
	}
	if o := a.antisymmetric[spin]; o != nil {
		o.Mul(2*count, 1, a.coefficients[ng-a.antisymmetricCount:], ng, 0, a.packedAnti, width)
	}
}

// block is the number of rows that unpack transposes together, one cache line.
const block = 8

func (a *exponentArea[T]) unpack(i int) {
	m := a.orbitals
	width := hamiltonian.Pairs(m)
	for plane := range 2 {
		row := a.packed[(2*i+plane)*width:][:width]
		x := a.x[plane*m:]
		for r := range m {
			copy(x[r*2*m:], row[r*(r+1)/2:][:r+1])
		}
		for from := 0; from < m; from += block {
			to := min(from+block, m)
			for c := range to {
				dst := x[c*2*m:]
				for r := max(from, c+1); r < to; r++ {
					dst[r] = row[r*(r+1)/2+c]
				}
			}
		}
		if a.packedAnti == nil {
			continue
		}
		row = a.packedAnti[(2*i+plane)*width:][:width]
		for r := range m {
			for c := range r {
				v := row[r*(r+1)/2+c]
				x[r*2*m+c] -= v
				x[c*2*m+r] += v
			}
		}
	}
}

// series sums 1 + X(1 + X/2(1 + X/3(…))): 8·M²·N·order flops for N columns.
func (a *exponentArea[T]) series(columns []float64, order int) {
	m := a.orbitals
	n := len(columns) / (2 * m)
	size := len(columns)
	convert(a.start[:size], columns)
	copy(a.source, a.start[:size])
	for k := order; k >= 1; k-- {
		beta := T(1)
		if k == 1 {
			beta = 0
		} else {
			copy(a.term, a.start[:size])
		}
		// [re | im] ← [re·Re Xᵀ − im·Im Xᵀ | re·Im Xᵀ + im·Re Xᵀ]
		scale := 1 / T(k)
		a.multiply(false, false, n, 2*m, m, scale, a.source, 2*m, a.x, 2*m, beta, a.term, 2*m)
		a.multiply(false, false, n, m, m, -scale, a.source[m:], 2*m, a.x[m:], 2*m, 1, a.term, 2*m)
		a.multiply(false, false, n, m, m, scale, a.source[m:], 2*m, a.x, 2*m, 1, a.term[m:], 2*m)
		a.source, a.term = a.term, a.source
	}
	for i, v := range a.source[:size] {
		columns[i] += float64(v)
	}
}

func (a *exponentArea[T]) matrix() []float64 {
	out := make([]float64, len(a.x))
	for i, v := range a.x {
		out[i] = float64(v)
	}
	return out
}
