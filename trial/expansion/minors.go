package expansion

import "leadline/trial/expansion/internal/lanes"

// recursion holds the lists of the sums over strings, for minors of each size k.
// All act on eight walkers at once; θ is particles × holes, row-major, and minors
// are numbered as the space says.
type recursion struct {
	// expand: m(P,·) from row p_k of θ and m(P−p_k,·),
	//
	//	m(P,H) = Σ_j (−1)^(k+j) θ[p_k,h_j] m(P−p_k, H−h_j),   j = 1 … k.
	expand []lanes.Terms
	// Run backwards: adjoints g(P,·) act on row p_k of W by way of m(P−p_k,·), and
	// on g(P−p_k,·) by way of row p_k of θ.
	onRow, onBelow []lanes.Terms
	// inner: Σ g(P,H) m(P,H) over the minors of one size.
	inner []lanes.Terms
	// pairs: ∂²m(P,·)/∂θ_ai∂θ_bj for each pair of holes i<j, summed with g(P,·),
	// from m(P−a−b,·); even and odd by the places of a and b in P.
	pairs [2][]lanes.Terms
}

func pairNumber(i, j int) int { return j*(j-1)/2 + i }

func newRecursion(holes, particles *subsets) *recursion {
	levels := len(holes.levels)
	r := &recursion{
		expand: make([]lanes.Terms, levels), onRow: make([]lanes.Terms, levels), onBelow: make([]lanes.Terms, levels),
		pairs: [2][]lanes.Terms{make([]lanes.Terms, levels), make([]lanes.Terms, levels)},
		inner: make([]lanes.Terms, levels),
	}
	for k := range levels {
		r.inner[k].Reset()
		for i := range holes.count(k) * particles.count(k) {
			r.inner[k].List = append(r.inner[k].List, lanes.NewTerm(i, i, false))
		}
		r.inner[k].End()
	}
	for k := 1; k < levels; k++ {
		l := &holes.levels[k]
		row, below := make([][]lanes.Term, holes.n), make([][]lanes.Term, holes.count(k-1))
		r.expand[k].Reset()
		for h := range holes.count(k) {
			for j := range k {
				hole, rest, odd := int(l.member[h*k+j]), int(l.less[h*k+j]), (k-1-j)%2 == 1
				r.expand[k].List = append(r.expand[k].List, lanes.NewTerm(hole, rest, odd))
				row[hole] = append(row[hole], lanes.NewTerm(h, rest, odd))
				below[rest] = append(below[rest], lanes.NewTerm(h, hole, odd))
			}
			r.expand[k].End()
		}
		collect(&r.onRow[k], row)
		collect(&r.onBelow[k], below)
		if k < 2 {
			continue
		}
		next := &holes.levels[k-1]
		for parity := range 2 {
			pairs := make([][]lanes.Term, holes.n*(holes.n-1)/2)
			for h := range holes.count(k) {
				for y := range k {
					for x := range y {
						pair := pairNumber(int(l.member[h*k+x]), int(l.member[h*k+y]))
						one := int(l.less[h*k+y]) // without the later member; the earlier keeps its place
						pairs[pair] = append(pairs[pair], lanes.NewTerm(h, int(next.less[one*(k-1)+x]), (x+y+parity)%2 == 1))
					}
				}
			}
			collect(&r.pairs[parity][k], pairs)
		}
	}
	return r
}

func collect(t *lanes.Terms, lists [][]lanes.Term) {
	t.Reset()
	for _, list := range lists {
		t.List = append(t.List, list...)
		t.End()
	}
}

// numbers returns n numbers of an array of them from number at on.
func numbers(x []float64, at, n int) []float64 { return x[at*lanes.Size : (at+n)*lanes.Size] }

// computeMinors sets m to det θ[P,H] for all P, H of up to levels members, in
// Σ_k k·C(n_h,k)·C(n_p,k) complex multiplications for each walker.
func (s *space) computeMinors(m, theta []float64, levels int) {
	nh := s.electrons
	for l := range lanes.Width {
		m[l], m[lanes.Width+l] = 1, 0
	}
	if levels == 0 {
		return
	}
	copy(numbers(m, 1, s.excitations()), theta)
	for k := 2; k <= levels; k++ {
		p := &s.particles.levels[k]
		width, below := s.holes.count(k), s.holes.count(k-1)
		for r := range s.particles.count(k) {
			s.lists.expand[k].Multiply(
				numbers(m, s.offset[k]+r*width, width),
				numbers(theta, int(p.member[r*k+k-1])*nh, nh),
				numbers(m, s.offset[k-1]+int(p.less[r*k+k-1])*below, below), false)
		}
	}
}

// innerProduct sets sum, one number, to Σ g(P,H) m(P,H).
func (s *space) innerProduct(sum, g, m []float64, levels int) {
	for k := range levels + 1 {
		n := s.offset[k+1] - s.offset[k]
		s.lists.inner[k].Multiply(sum, numbers(g, s.offset[k], n), numbers(m, s.offset[k], n), k > 0)
	}
}

// gradient sets w, particles × holes, to Σ g(P,H) ∂m(P,H)/∂θ by running
// computeMinors backwards, at twice its cost. It destroys g.
func (s *space) gradient(w, g, m, theta []float64, levels int) {
	nh := s.electrons
	clear(w[:s.excitations()*lanes.Size])
	if levels == 0 {
		return
	}
	for k := levels; k >= 2; k-- {
		p := &s.particles.levels[k]
		width, below := s.holes.count(k), s.holes.count(k-1)
		for r := range s.particles.count(k) {
			last := int(p.member[r*k+k-1]) * nh
			at := s.offset[k-1] + int(p.less[r*k+k-1])*below
			block := numbers(g, s.offset[k]+r*width, width)
			s.lists.onRow[k].Multiply(numbers(w, last, nh), block, numbers(m, at, below), true)
			s.lists.onBelow[k].Multiply(numbers(g, at, below), block, numbers(theta, last, nh), true)
		}
	}
	for i, v := range numbers(g, 1, s.excitations()) {
		w[i] += v
	}
}

// secondDerivatives sets d to Σ g(P,H) ∂²m(P,H)/∂θ_ai∂θ_bj for all a<b and i<j,
// pairs of particles × pairs of holes. The others follow from antisymmetry in a,
// b and in i, j. Complex multiplications for each walker:
// Σ_k C(n_h,k)·C(n_p,k)·(k(k−1)/2)².
func (s *space) secondDerivatives(d, g, m []float64, levels int) {
	pairs := s.electrons * (s.electrons - 1) / 2
	np := s.active - s.electrons
	clear(d[:np*(np-1)/2*pairs*lanes.Size])
	for k := 2; k <= levels; k++ {
		p, next := &s.particles.levels[k], &s.particles.levels[k-1]
		width, below := s.holes.count(k), s.holes.count(k-2)
		for r := range s.particles.count(k) {
			block := numbers(g, s.offset[k]+r*width, width)
			for y := range k {
				one := int(p.less[r*k+y])
				for x := range y {
					ab := pairNumber(int(p.member[r*k+x]), int(p.member[r*k+y]))
					rest := int(next.less[one*(k-1)+x])
					s.lists.pairs[(x+y)%2][k].Multiply(numbers(d, ab*pairs, pairs), block,
						numbers(m, s.offset[k-2]+rest*below, below), true)
				}
			}
		}
	}
}
