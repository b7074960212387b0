package matchgate

import (
	"math"
	"math/bits"
	"math/cmplx"
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

	contraction []complex128 // n×n, K_z
	left        []complex128 // n×n
	pfaffian    []complex128
	kv          []complex128
	work        []complex128
}

// NewGaussian returns an evaluator for n modes and the inverse channel g.
func NewGaussian(n int, g []float64) *Gaussian {
	if len(g) != n+1 {
		panic("matchgate: inverse channel needs n+1 entries")
	}
	e := &Gaussian{n: n, c: make([]float64, 4*n*n), contraction: make([]complex128, n*n), left: make([]complex128, n*n),
		pfaffian: make([]complex128, 4*n*n), kv: make([]complex128, n*n), work: make([]complex128, 4*n*n)}
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
			e.left[i*n+j] = z * complex(eo-oe, -ee-oo)
			e.contraction[i*n+j] = -z * complex(-eo-oe, oo-ee)
		}
		e.left[i*n+i] += 1 + z*z
	}
	if !solve(e.left, n, e.contraction, n) {
		return 0 // cannot happen inside the unit circle
	}
	for i := range m {
		for j := range m {
			e.work[i*m+j] = z * complex(e.c[i*m+j], 0)
		}
	}
	for p := range n {
		e.work[2*p*m+2*p+1]++
		e.work[(2*p+1)*m+2*p]--
	}
	return Pfaffian(e.work, m) * complex(math.Ldexp(1, -n), 0)
}

// Overlap returns Σ_k g_k [z^k] <r|G_z|φ> for the walker v (n×electrons,
// row-major, columns left to right): the estimate of <r|ρ|φ>. r must be the
// determinant that the snapshot was set with. O(n³ + n·electrons·n) per node.
func (e *Gaussian) Overlap(r uint64, v []complex128, electrons int) complex128 {
	n := e.n
	size := bits.OnesCount64(r) + electrons
	if len(v) != n*electrons {
		panic("matchgate: walker has the wrong shape")
	}
	if cap(e.pfaffian) < size*size {
		e.pfaffian = make([]complex128, size*size)
	}
	pf := e.pfaffian[:size*size]
	if cap(e.kv) < n*electrons {
		e.kv = make([]complex128, n*electrons)
	}
	kv := e.kv[:n*electrons]
	var rows []int // of r, descending: <r| = <0|g…g
	for p := n - 1; p >= 0; p-- {
		if r>>p&1 != 0 {
			rows = append(rows, p)
		}
	}
	var sum complex128
	for node, z := range e.nodes {
		h := e.at(z)
		for i := range n {
			for k := range electrons {
				var s complex128
				for j := range n {
					s += e.contraction[i*n+j] * v[j*electrons+k]
				}
				kv[i*electrons+k] = s
			}
		}
		for a, p := range rows {
			for b := a + 1; b < len(rows); b++ {
				pf[a*size+b] = e.contraction[p*n+rows[b]]
			}
			for k := range electrons {
				pf[a*size+len(rows)+k] = v[p*electrons+k] + kv[p*electrons+k]
			}
		}
		for k := range electrons {
			for l := k + 1; l < electrons; l++ {
				var s complex128
				for i := range n {
					s += v[i*electrons+k] * kv[i*electrons+l]
				}
				pf[(len(rows)+k)*size+len(rows)+l] = s
			}
		}
		sum += e.weights[node] * h * Pfaffian(pf, size)
	}
	return sum
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
		for set := uint64(3); set < 1<<n; set++ {
			if c := bits.OnesCount64(set); c&1 != 0 || c > most {
				continue
			}
			first := bits.TrailingZeros64(set)
			rest := set & (set - 1)
			row := e.contraction[first*n : (first+1)*n]
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
	for i, v := range e.c {
		e.work[i] = complex(v, 0)
	}
	return real(Pfaffian(e.work, 2*e.n)) < 0
}
