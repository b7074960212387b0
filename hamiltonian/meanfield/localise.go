package meanfield

import (
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

const (
	localiseSweeps = 60
	localiseAngle  = 1e-5 // radians; sweeps end when no pair turns further
)

// localise returns orbitals c with columns a to b turned among themselves so
// that their self-repulsion Σ_i (ii|ii) = Σ_i Σ_g s_g (L^g_ii)² is a maximum
// (Edmiston & Ruedenberg, Rev. Mod. Phys. 35, 457 (1963)), by sweeps of plane
// rotations from a small random rotation, which leaves saddle points. Only
// symmetric factors of the up electrons count.
// Cost: 2·ng·M·(b−a)·(M+b−a) flops, then about 4·ng·(b−a)³ per sweep.
func localise(h *hamiltonian.Hamiltonian, c *mat.Dense, a, b int, seed uint64) *mat.Dense {
	m, n, f := h.Orbitals, b-a, h.Factors
	local := mat.DenseCopyOf(c.Slice(0, m, a, b))
	random := rand.New(rand.NewPCG(seed, 0))
	for p := range n {
		for q := range p {
			turnColumns(local, p, q, 0.3*random.NormFloat64())
		}
	}
	sub := (&hamiltonian.Hamiltonian{
		Sector:  h.Sector,
		OneBody: [2]*mat.SymDense{h.OneBody[0], h.OneBody[0]},
		Factors: &hamiltonian.Factors{Sign: f.Sign, Antisymmetric: f.Antisymmetric, Packed: [2][]float64{f.Packed[0], f.Packed[0]}},
	}).Rotate(local)
	factors := make([]*mat.Dense, f.Symmetric())
	for g := range factors {
		factors[g] = mat.NewDense(n, n, nil)
		sub.Factors.Unpack(factors[g], g, hamiltonian.Up)
	}
	for range localiseSweeps {
		largest := 0.0
		for p := range n {
			for q := range p {
				angle := bestAngle(factors, f.Sign, p, q)
				largest = max(largest, math.Abs(angle))
				if math.Abs(angle) < 1e-9 {
					continue
				}
				turnColumns(local, p, q, angle)
				for _, l := range factors {
					turnColumns(l, p, q, angle)
					turnRows(l, p, q, angle)
				}
			}
		}
		if largest < localiseAngle {
			break
		}
	}
	out := mat.DenseCopyOf(c)
	out.Slice(0, m, a, b).(*mat.Dense).Copy(local)
	return out
}

// bestAngle returns the angle α of the rotation p' = p cos α + q sin α,
// q' = q cos α − p sin α that maximises (pp|pp) + (qq|qq), which is a constant
// plus B sin 4α − A cos 4α with A = Σ s [L_pq² − ¼(L_pp − L_qq)²] and
// B = Σ s L_pq (L_pp − L_qq).
func bestAngle(factors []*mat.Dense, sign []float64, p, q int) float64 {
	a, b := 0.0, 0.0
	for g, l := range factors {
		off, diff := l.At(p, q), l.At(p, p)-l.At(q, q)
		a += sign[g] * (off*off - 0.25*diff*diff)
		b += sign[g] * off * diff
	}
	if math.Hypot(a, b) < 1e-13 {
		return 0
	}
	return 0.25 * math.Atan2(b, -a)
}

func turnColumns(x *mat.Dense, p, q int, angle float64) {
	s, c := math.Sincos(angle)
	rows, _ := x.Dims()
	for i := range rows {
		u, v := x.At(i, p), x.At(i, q)
		x.Set(i, p, c*u+s*v)
		x.Set(i, q, c*v-s*u)
	}
}

func turnRows(x *mat.Dense, p, q int, angle float64) {
	s, c := math.Sincos(angle)
	_, columns := x.Dims()
	for j := range columns {
		u, v := x.At(p, j), x.At(q, j)
		x.Set(p, j, c*u+s*v)
		x.Set(q, j, c*v-s*u)
	}
}

// couplings returns the squared one-body elements between orbitals a to b of c,
// which favour opposite spins on neighbours (superexchange; Anderson, Phys.
// Rev. 115, 2 (1959)), flat n×n.
func couplings(h *hamiltonian.Hamiltonian, c *mat.Dense, a, b int) []float64 {
	n := b - a
	part := c.Slice(0, h.Orbitals, a, b)
	var half, t mat.Dense
	half.Mul(h.OneBody[hamiltonian.Up], part)
	t.Mul(part.T(), &half)
	out := make([]float64, n*n)
	for i := range n {
		for j := range n {
			if i != j {
				out[i*n+j] = t.At(i, j) * t.At(i, j)
			}
		}
	}
	return out
}

// empty marks a site that no electron of its own occupies.
const empty = -1

// alternate gives up sites to up electrons, down to down electrons and leaves
// the rest empty so that strongly coupled sites have opposite spins: from
// alternating order, pairs of sites are exchanged while that lowers
// Σ_ij W_ij s_i s_j.
func alternate(coupling []float64, up, down int) []int {
	n := int(math.Sqrt(float64(len(coupling))))
	spins, s := make([]int, n), make([]float64, n)
	u, d := up, down
	for i := range n {
		switch {
		case u > 0 && (u >= d || d == 0):
			spins[i], s[i] = hamiltonian.Up, 1
			u--
		case d > 0:
			spins[i], s[i] = hamiltonian.Down, -1
			d--
		default:
			spins[i] = empty
		}
	}
	field := func(i, skip int) float64 {
		sum := 0.0
		for k := range n {
			if k != skip {
				sum += coupling[i*n+k] * s[k]
			}
		}
		return sum
	}
	for range n * n {
		best, bi, bj := -1e-12, 0, 0
		for i := range n {
			for j := range i {
				if s[i] == s[j] {
					continue
				}
				if gain := (s[j] - s[i]) * (field(i, j) - field(j, i)); gain < best {
					best, bi, bj = gain, i, j
				}
			}
		}
		if bi == bj {
			break
		}
		s[bi], s[bj] = s[bj], s[bi]
		spins[bi], spins[bj] = spins[bj], spins[bi]
	}
	return spins
}
