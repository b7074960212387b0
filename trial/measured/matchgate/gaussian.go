package matchgate

import (
	"math"
	"math/bits"
	"math/cmplx"

	"leadline/hamiltonian/linalg"
)

// radius of the circle on which the generating polynomials are evaluated. The
// contractions K_z have poles on the unit circle, which the snapshots of
// matchings meet exactly, so the circle stays inside; 0.9^{−n} is the loss of
// accuracy.
const radius = 0.9

// Gaussian evaluates Pfaffian estimates of one snapshot after another; it holds
// scratch for n modes and is for one goroutine.
//
// With C the covariance of the snapshot, C_ab = tr(G(−i)g_a g_b), cut into its
// even and odd rows and columns, and J that of the vacuum,
//
//	A = (C_eo − C_oe) − i(C_ee + C_oo),  B = −(C_eo + C_oe) − i(C_ee − C_oo),
//	K_z = −((1+z²)1 + zA)^{-1} zB,       h(z) = 2^{-n} Pf(J + zC),
//	<0|G_z a†(v_1)…a†(v_N)|0> = h(z) Pf(VᵀK_zV)
//
// by Wick's theorem; <0|a†_i = 0 and G_z^{-1} g G_z = [(1+z²) − 2izC] g/(1−z²)
// give K. Other rows follow by turning the even Majoranas of r through G_z.
type Gaussian struct {
	n       int
	c       []float64 // covariance in the row's frame
	nodes   []complex128
	weights []complex128

	k          [2][]float64 // planes of K_z, n×n
	right      [2][]float64 // planes of zB
	left       []float64    // (1+z²)1 + zA, two planes in one block
	pfaffian   [2][]float64
	kv, vkv    [2][]float64
	log        [1]float64
	phase      [1]complex128
	contracted []complex128
}

// NewGaussian returns an evaluator for n modes and the inverse channel g.
func NewGaussian(n int, g []float64) *Gaussian {
	if len(g) != n+1 {
		panic("matchgate: inverse channel needs n+1 entries")
	}
	e := &Gaussian{n: n, c: make([]float64, 4*n*n), left: make([]float64, 2*n*n), contracted: make([]complex128, n*n)}
	for part := range 2 {
		e.k[part], e.right[part] = make([]float64, n*n), make([]float64, n*n)
		e.pfaffian[part] = make([]float64, 4*n*n)
	}
	for j := range n + 1 {
		z := cmplx.Rect(radius, 2*math.Pi*float64(j)/float64(n+1))
		var w complex128
		for k, v := range g {
			w += complex(v/float64(n+1), 0) / cmplx.Pow(z, complex(float64(k), 0))
		}
		e.nodes = append(e.nodes, z)
		e.weights = append(e.weights, w)
	}
	return e
}

// SetOrthogonal takes the snapshot of rotation q (2n×2n, row-major) and an
// outcome, in the row of determinant r.
func (e *Gaussian) SetOrthogonal(q []float64, outcome, r uint64) {
	m := 2 * e.n
	for i := range e.c {
		e.c[i] = 0
	}
	for j := range e.n {
		s := 1.0
		if outcome>>j&1 != 0 {
			s = -1
		}
		a, b := q[2*j*m:(2*j+1)*m], q[(2*j+1)*m:(2*j+2)*m]
		for mu := range m {
			row := e.c[mu*m : (mu+1)*m]
			x, y := s*a[mu], s*b[mu]
			for nu := range m {
				row[nu] += x*b[nu] - y*a[nu]
			}
		}
	}
	e.turn(r)
}

// SetMatching takes the snapshot of the pairs (pairs[2j], pairs[2j+1]).
func (e *Gaussian) SetMatching(pairs []uint8, outcome, r uint64) {
	m := 2 * e.n
	for i := range e.c {
		e.c[i] = 0
	}
	for j := range e.n {
		s := 1.0
		if outcome>>j&1 != 0 {
			s = -1
		}
		a, b := int(pairs[2*j]), int(pairs[2*j+1])
		e.c[a*m+b], e.c[b*m+a] = s, -s
	}
	e.turn(r)
}

// turn moves the even Majoranas of r through G: g_{2p} changes the sign of all
// Majoranas but itself.
func (e *Gaussian) turn(r uint64) {
	m := 2 * e.n
	for ; r != 0; r &= r - 1 {
		p := 2 * bits.TrailingZeros64(r)
		for i := range m {
			e.c[p*m+i] = -e.c[p*m+i]
			e.c[i*m+p] = -e.c[i*m+p]
		}
	}
}

// at sets up K_z and returns h(z).
func (e *Gaussian) at(z complex128) complex128 {
	n, m := e.n, 2*e.n
	for i := range n {
		for j := range n {
			ee, eo := e.c[2*i*m+2*j], e.c[2*i*m+2*j+1]
			oe, oo := e.c[(2*i+1)*m+2*j], e.c[(2*i+1)*m+2*j+1]
			l := z * complex(eo-oe, -ee-oo)
			if i == j {
				l += 1 + z*z
			}
			r := z * complex(-eo-oe, oo-ee)
			e.left[i*n+j], e.left[n*n+i*n+j] = real(l), imag(l)
			e.right[0][i*n+j], e.right[1][i*n+j] = real(r), imag(r)
		}
	}
	linalg.InvertBatch(n, 1, e.left, e.log[:], e.phase[:]) // regular inside the unit circle
	multiply(n, n, n, -1, [2][]float64{e.left[:n*n], e.left[n*n:]}, n, e.right, n, e.k, n)
	re, im := e.pfaffian[0][:m*m], e.pfaffian[1][:m*m]
	for i, v := range e.c {
		re[i], im[i] = real(z)*v, imag(z)*v
	}
	for p := range n {
		re[2*p*m+2*p+1]++
		re[(2*p+1)*m+2*p]--
	}
	log, phase := linalg.Pfaffian(m, re, im)
	return complex(math.Exp(log-float64(n)*math.Ln2), 0) * phase
}

// multiply sets C = scale·A·B for matrices in planes, A m×k, B k×n.
func multiply(m, n, k int, scale float64, a [2][]float64, lda int, b [2][]float64, ldb int, c [2][]float64, ldc int) {
	linalg.Gemm(false, false, m, n, k, scale, a[0], lda, b[0], ldb, 0, c[0], ldc)
	linalg.Gemm(false, false, m, n, k, -scale, a[1], lda, b[1], ldb, 1, c[0], ldc)
	linalg.Gemm(false, false, m, n, k, scale, a[0], lda, b[1], ldb, 0, c[1], ldc)
	linalg.Gemm(false, false, m, n, k, scale, a[1], lda, b[0], ldb, 1, c[1], ldc)
}

// Overlaps adds to dst[w] the estimate Σ_k g_k [z^k] <r|G_z|φ_w> of <r|ρ|φ_w> for
// len(dst) walkers of so many electrons. v holds the planes of their columns, n
// rows by walkers·electrons columns, the columns of a walker next to each
// other, left to right. r must be the determinant that the snapshot was set
// with. Per node, O(n³) for the snapshot and O(n²·electrons + (|r|+electrons)³)
// for each walker.
func (e *Gaussian) Overlaps(dst []complex128, r uint64, v [2][]float64, electrons int) {
	n := e.n
	columns := len(dst) * electrons
	if len(v[0]) != n*columns || len(v[1]) != n*columns {
		panic("matchgate: walkers have the wrong shape")
	}
	occupied := bits.OnesCount64(r)
	size := occupied + electrons
	for part := range 2 {
		e.pfaffian[part] = grow(e.pfaffian[part], max(4*n*n, size*size))
		e.kv[part] = grow(e.kv[part], n*columns)
		e.vkv[part] = grow(e.vkv[part], electrons*electrons)
	}
	var rows [64]int // of r, descending: <r| = <0|g…g
	at := 0
	for p := n - 1; p >= 0; p-- {
		if r>>p&1 != 0 {
			rows[at] = p
			at++
		}
	}
	for node, z := range e.nodes {
		factor := e.weights[node] * e.at(z)
		multiply(n, columns, n, 1, e.k, n, v, columns, e.kv, columns)
		for w := range dst {
			e.transposed(v, w*electrons, electrons, columns)
			for part := range 2 {
				pf := e.pfaffian[part][:size*size]
				for a, p := range rows[:occupied] {
					for b := a + 1; b < occupied; b++ {
						pf[a*size+b] = e.k[part][p*n+rows[b]]
					}
					for k := range electrons {
						col := p*columns + w*electrons + k
						pf[a*size+occupied+k] = v[part][col] + e.kv[part][col]
					}
				}
				for k := range electrons {
					copy(pf[(occupied+k)*size+occupied:][:electrons], e.vkv[part][k*electrons:])
				}
			}
			log, phase := linalg.Pfaffian(size, e.pfaffian[0][:size*size], e.pfaffian[1][:size*size])
			if !math.IsInf(log, -1) {
				dst[w] += factor * complex(math.Exp(log), 0) * phase
			}
		}
	}
}

// transposed sets vkv = VᵀKV for the columns of one walker.
func (e *Gaussian) transposed(v [2][]float64, first, electrons, columns int) {
	product := func(a, b []float64, scale, keep float64, c []float64) {
		linalg.Gemm(true, false, electrons, electrons, e.n, scale, a[first:], columns, b[first:], columns, keep, c, electrons)
	}
	product(v[0], e.kv[0], 1, 0, e.vkv[0])
	product(v[1], e.kv[1], -1, 1, e.vkv[0])
	product(v[0], e.kv[1], 1, 0, e.vkv[1])
	product(v[1], e.kv[0], 1, 1, e.vkv[1])
}

func grow(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}

// Determinants adds to values[i] the estimate Σ_k g_k [z^k] <r|G_z|D_i> of the
// determinants dets, by the table of all Pfaffians of K_z on sets of up to
// most modes: 2^{n−1} numbers, n/2 multiplications each and node. Row signs are
// not in it: see RowSign.
func (e *Gaussian) Determinants(values []complex128, dets []uint64, r uint64, most int, table []complex128) []complex128 {
	n := e.n
	if len(table) < 1<<n {
		table = make([]complex128, 1<<n)
	}
	table[0] = 1
	for node, z := range e.nodes {
		w := e.weights[node] * e.at(z)
		for i, v := range e.k[0] {
			e.contracted[i] = complex(v, e.k[1][i])
		}
		for set := uint64(3); set < 1<<n; set++ {
			if c := bits.OnesCount64(set); c&1 != 0 || c > most {
				continue
			}
			first := bits.TrailingZeros64(set)
			rest := set & (set - 1)
			row := e.contracted[first*n : (first+1)*n]
			var s complex128
			plus := true
			for left := rest; left != 0; left &= left - 1 {
				j := bits.TrailingZeros64(left)
				if plus {
					s += row[j] * table[rest&^(1<<j)]
				} else {
					s -= row[j] * table[rest&^(1<<j)]
				}
				plus = !plus
			}
			table[set] = s
		}
		for i, d := range dets {
			values[i] += w * table[d^r]
		}
	}
	return table
}

// Polynomial returns the coefficients of 2^n <0|G_z|0> = Pf(J + zC), k = 0..n:
// what calibration averages.
func (e *Gaussian) Polynomial() []float64 {
	n := e.n
	p := make([]float64, n+1)
	for _, z := range e.nodes {
		h := e.at(z) * complex(math.Ldexp(1, n), 0)
		for k := range p {
			p[k] += real(h/cmplx.Pow(z, complex(float64(k), 0))) / float64(n+1)
		}
	}
	return p
}

// ParityOdd reports whether the parity of the snapshot, Pf C = det Q Π(−1)^b, is
// not that of the row's determinant: a noiseless state never yields that.
func (e *Gaussian) ParityOdd() bool {
	size := 4 * e.n * e.n
	copy(e.pfaffian[0], e.c)
	clear(e.pfaffian[1][:size])
	_, phase := linalg.Pfaffian(2*e.n, e.pfaffian[0][:size], e.pfaffian[1][:size])
	return real(phase) < 0
}
