package meanfield

import (
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"gonum.org/v1/gonum/blas/blas64"
	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// chunks is the number of parts that the factors are divided into. It bounds
// the parallelism and fixes the order of the sums, so that results do not
// depend on the number of processors.
const chunks = 16

// tileFloats is the size of the buffer of half-transformed factors that goes
// into one product: 1 MiB, about a second-level cache.
const tileFloats = 1 << 17

// factored is a symmetric matrix given as ½(A Bᵀ + B Aᵀ), A and B M×k. A density
// matrix has A = B = C, as the same pointer. A nil A is the zero matrix.
type factored struct{ a, b *mat.Dense }

// columns returns k.
func (d factored) columns() int {
	if d.a == nil || d.a.IsEmpty() {
		return 0
	}
	_, k := d.a.Dims()
	return k
}

// builder computes two-body parts of Fock matrices. It is safe for concurrent
// use.
type builder struct {
	h       *hamiltonian.Hamiltonian
	scratch *sync.Pool // of *scratch
}

// scratch holds the buffers of one worker.
type scratch struct {
	l      *mat.Dense   // one factor, M×M
	za, zb [2][]float64 // half-transformed factors of one tile by spin, k×M each
}

func newBuilder(h *hamiltonian.Hamiltonian) builder {
	return builder{h, &sync.Pool{New: func() any {
		return &scratch{l: mat.NewDense(h.Orbitals, h.Orbitals, nil)}
	}}}
}

// twoBody returns, for each spin,
//
//	G^σ = Σ_g s_g [ρ_g L^{gσ} − L^{gσ} D^σ L^{gσ}],   ρ_g = Σ_σ tr(L^{gσ} D^σ),
//
// M×M. Where factors act alike on both spins and both densities are the same,
// one matrix is computed and returned twice. Exchange is a product of
// half-transformed factors Z_g = Aᵀ L^g: per spin about 2·ng·k·M² flops for the
// half transformation (twice that when A and B differ) and as many for the sum.
func (b builder) twoBody(d [2]factored) [2]*mat.SymDense {
	m, f := b.h.Orbitals, b.h.Factors
	shared := f.SpinFree() && d[hamiltonian.Up] == d[hamiltonian.Down]
	spins := 2
	if shared {
		spins = 1
	}
	packed := [2][]float64{packDensity(d[hamiltonian.Up], m)}
	if !shared {
		packed[hamiltonian.Down] = packDensity(d[hamiltonian.Down], m)
	}
	parts := make([]*part, min(chunks, f.Count()))
	var next atomic.Int64
	var wg sync.WaitGroup
	for range min(len(parts), runtime.GOMAXPROCS(0)) {
		wg.Go(func() {
			buffers := b.scratch.Get().(*scratch)
			defer b.scratch.Put(buffers)
			for {
				i := int(next.Add(1)) - 1
				if i >= len(parts) {
					return
				}
				parts[i] = b.sumPart(buffers, d, packed, spins, i*f.Count()/len(parts), (i+1)*f.Count()/len(parts))
			}
		})
	}
	wg.Wait()
	var g [2]*mat.SymDense
	for spin := range spins {
		direct, exchange := make([]float64, hamiltonian.Pairs(m)), make([]float64, m*m)
		for _, p := range parts {
			floats.Add(direct, p.direct[spin])
			if p.exchange[spin] != nil {
				floats.Add(exchange, p.exchange[spin])
			}
		}
		g[spin] = mat.NewSymDense(m, nil)
		for p := range m {
			for q := range p + 1 {
				g[spin].SetSym(p, q, direct[p*(p+1)/2+q]-0.5*(exchange[p*m+q]+exchange[q*m+p]))
			}
		}
	}
	if shared {
		g[hamiltonian.Down] = g[hamiltonian.Up]
	}
	return g
}

// packDensity returns the lower triangle of a density with the elements off the
// diagonal doubled, so that tr(L D) is a dot product of packed rows.
func packDensity(d factored, m int) []float64 {
	out := make([]float64, hamiltonian.Pairs(m))
	k := d.columns()
	if k == 0 {
		return out
	}
	full := make([]float64, m*m)
	a, b := d.a.RawMatrix(), d.b.RawMatrix()
	linalg.Gemm(false, true, m, m, k, 1, a.Data, a.Stride, b.Data, b.Stride, 0, full, m)
	for p := range m {
		for q := range p {
			out[p*(p+1)/2+q] = full[p*m+q] + full[q*m+p]
		}
		out[p*(p+1)/2+p] = full[p*m+p]
	}
	return out
}

// part holds the sums over a run of factors.
type part struct {
	direct   [2][]float64 // packed
	exchange [2][]float64 // M×M, of which only the symmetric part counts
}

func (b builder) sumPart(buffers *scratch, d [2]factored, density [2][]float64, spins, from, to int) *part {
	m, f := b.h.Orbitals, b.h.Factors
	out := &part{}
	for spin := range spins {
		out.direct[spin] = make([]float64, hamiltonian.Pairs(m))
	}
	for g := from; g < min(to, f.Symmetric()); g++ {
		rho := floats.Dot(f.Row(g, hamiltonian.Up), density[hamiltonian.Up])
		if spins == 1 {
			rho *= 2
		} else {
			rho += floats.Dot(f.Row(g, hamiltonian.Down), density[hamiltonian.Down])
		}
		if rho == 0 {
			continue
		}
		for spin := range spins {
			floats.AddScaled(out.direct[spin], f.Sign[g]*rho, f.Row(g, spin))
		}
	}
	out.exchange = b.sumExchange(buffers, d, spins, from, to)
	return out
}

// sumExchange returns, per spin, Σ_g s_g L D L over a run of factors, as a matrix
// whose symmetric part is meant; nil for a zero density. With Z_A = Aᵀ L and L of
// parity π, L A Bᵀ L = π Z_Aᵀ Z_B.
func (b builder) sumExchange(buffers *scratch, d [2]factored, spins, from, to int) [2][]float64 {
	m, f := b.h.Orbitals, b.h.Factors
	var sums, at, bt [2][]float64
	widest := max(d[hamiltonian.Up].columns(), d[hamiltonian.Down].columns())
	if widest == 0 {
		return sums
	}
	tile := min(max(1, tileFloats/(widest*m)), to-from)
	for spin := range spins {
		k := d[spin].columns()
		if k == 0 {
			continue
		}
		sums[spin] = make([]float64, m*m)
		at[spin] = transposed(d[spin].a)
		buffers.za[spin] = slices.Grow(buffers.za[spin][:0], tile*k*m)[:tile*k*m]
		if d[spin].a != d[spin].b {
			bt[spin] = transposed(d[spin].b)
			buffers.zb[spin] = slices.Grow(buffers.zb[spin][:0], tile*k*m)[:tile*k*m]
		}
	}
	l := buffers.l.RawMatrix().Data
	for g := from; g < to; {
		weight := f.Sign[g] * f.Parity(g)
		n := 0
		for ; n < tile && g < to && f.Sign[g]*f.Parity(g) == weight; n, g = n+1, g+1 {
			unpacked := false
			for spin := range spins {
				k := d[spin].columns()
				if k == 0 {
					continue
				}
				if !unpacked || !f.SpinFree() {
					f.Unpack(buffers.l, g, spin)
					unpacked = true
				}
				linalg.Gemm(false, false, k, m, m, 1, at[spin], m, l, m, 0, buffers.za[spin][n*k*m:], m)
				if bt[spin] != nil {
					linalg.Gemm(false, false, k, m, m, 1, bt[spin], m, l, m, 0, buffers.zb[spin][n*k*m:], m)
				}
			}
		}
		for spin := range spins {
			k, zb := d[spin].columns(), buffers.za[spin]
			if k == 0 {
				continue
			}
			if bt[spin] != nil {
				zb = buffers.zb[spin]
			}
			linalg.Gemm(true, false, m, m, n*k, weight, buffers.za[spin], m, zb, m, 1, sums[spin], m)
		}
	}
	return sums
}

func transposed(a *mat.Dense) []float64 {
	var t mat.Dense
	t.CloneFrom(a.T())
	return t.RawMatrix().Data
}

// Fock returns the Fock matrices F^σ = ∂E/∂D^σ of real symmetric densities, M×M
// each; see the package comment. The densities need not be those of a
// determinant; a nil one is zero. Cost: as many flops per factor and spin as
// the rank of the density times 4·M².
func Fock(h *hamiltonian.Hamiltonian, densities [2]*mat.SymDense) [2]*mat.SymDense {
	var d [2]factored
	for spin, density := range densities {
		if spin == hamiltonian.Down && density == densities[hamiltonian.Up] {
			d[spin] = d[hamiltonian.Up]
			continue
		}
		d[spin] = factorDensity(density, h.Orbitals)
	}
	return addOneBody(h, newBuilder(h).twoBody(d))
}

// factorDensity writes a symmetric matrix as ½(A Bᵀ + B Aᵀ) by its eigenvectors.
func factorDensity(density *mat.SymDense, m int) factored {
	if density == nil {
		return factored{}
	}
	if density.SymmetricDim() != m {
		panic("meanfield: density of the wrong shape")
	}
	var eigen mat.EigenSym
	if !eigen.Factorize(density, true) {
		panic("meanfield: density has no eigenvectors (is it finite?)")
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	var keep []int
	values := eigen.Values(nil)
	for i, v := range values {
		if math.Abs(v) > 1e-15 {
			keep = append(keep, i)
		}
	}
	if len(keep) == 0 {
		return factored{}
	}
	a, b := mat.NewDense(m, len(keep), nil), mat.NewDense(m, len(keep), nil)
	for j, i := range keep {
		for p := range m {
			a.Set(p, j, values[i]*vectors.At(p, i))
			b.Set(p, j, vectors.At(p, i))
		}
	}
	return factored{a, b}
}

func addOneBody(h *hamiltonian.Hamiltonian, g [2]*mat.SymDense) [2]*mat.SymDense {
	var f [2]*mat.SymDense
	for spin := range f {
		if spin == hamiltonian.Down && g[spin] == g[hamiltonian.Up] && h.OneBody[hamiltonian.Up] == h.OneBody[hamiltonian.Down] {
			f[spin] = f[hamiltonian.Up]
			continue
		}
		f[spin] = mat.NewSymDense(h.Orbitals, nil)
		f[spin].AddSym(h.OneBody[spin], g[spin])
	}
	return f
}

// Energy returns the energy of the determinant with the given real occupied
// orbitals, M×N_σ with orthonormal columns. An empty or nil matrix holds no
// electrons; both may be the same pointer.
func Energy(h *hamiltonian.Hamiltonian, occupied [2]*mat.Dense) float64 {
	d := densities(occupied)
	return determinantEnergy(h, d, addOneBody(h, newBuilder(h).twoBody(d)))
}

func densities(occupied [2]*mat.Dense) [2]factored {
	return [2]factored{{occupied[0], occupied[0]}, {occupied[1], occupied[1]}}
}

// determinantEnergy returns E_c + ½ Σ_σ tr D^σ (h^σ + F^σ).
func determinantEnergy(h *hamiltonian.Hamiltonian, d [2]factored, f [2]*mat.SymDense) float64 {
	e := h.Constant
	for spin, pair := range d {
		k := pair.columns()
		if k == 0 {
			continue
		}
		c := pair.a
		var sum, half mat.Dense
		sum.Add(h.OneBody[spin], f[spin])
		half.Mul(&sum, c)
		for i := range k {
			e += 0.5 * blas64.Dot(column(&half, i), column(c, i))
		}
	}
	return e
}

func column(a *mat.Dense, j int) blas64.Vector {
	raw := a.RawMatrix()
	return blas64.Vector{N: raw.Rows, Inc: raw.Stride, Data: raw.Data[j:]}
}

// SpinSquared returns ⟨S²⟩ of the determinant with the given real occupied
// orbitals, M×N_σ with orthonormal columns; an empty or nil matrix holds no
// electrons:
//
//	⟨S²⟩ = ¼(N_up − N_down)² + ½(N_up + N_down) − Σ_ij ⟨i_up|j_down⟩²
//
// Löwdin, Phys. Rev. 97, 1474 (1955).
func SpinSquared(occupied [2]*mat.Dense) float64 {
	up, down := factored{a: occupied[0]}.columns(), factored{a: occupied[1]}.columns()
	z := 0.5 * math.Abs(float64(up-down))
	least := z * (z + 1)
	if up == 0 || down == 0 {
		return least
	}
	var overlap mat.Dense
	overlap.Mul(occupied[0].T(), occupied[1])
	norm := mat.Norm(&overlap, 2)
	return max(least, z*z+0.5*float64(up+down)-norm*norm)
}
