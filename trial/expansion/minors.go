package expansion

import "slices"

// computeMinors sets m to det θ[P,H] for all P, H of up to levels members;
// theta is particles × holes, row-major. Expansion along the last row,
//
//	m(P,H) = Σ_j (−1)^(k+j) θ[p_k,h_j] m(P−p_k, H−h_j),   k = |P|, j = 1 … k,
//
// costs k complex multiplications for each minor, Σ_k k·C(n_h,k)·C(n_p,k) in all.
func (s *space) computeMinors(m, theta []complex128, levels int) {
	nh := s.electrons
	m[0] = 1
	if levels == 0 {
		return
	}
	copy(m[1:], theta[:s.offset[2]-1])
	for k := 2; k <= levels; k++ {
		h, p := &s.holes.levels[k], &s.particles.levels[k]
		width, below := s.holes.count(k), s.holes.count(k-1)
		for r := range s.particles.count(k) {
			row := theta[int(p.member[r*k+k-1])*nh:][:nh]
			from := m[s.offset[k-1]+int(p.less[r*k+k-1])*below:][:below]
			to := m[s.offset[k]+r*width:][:width]
			expand(to, row, from, h.member, h.less, k)
		}
	}
}

// expand is one block of computeMinors: all column sets for one row set.
func expand(to, row, from []complex128, member, less []int32, k int) {
	for c := range to {
		columns, rest := member[c*k:c*k+k], less[c*k:c*k+k]
		rest = rest[:len(columns)]
		var plus, minus complex128
		j := k - 1
		for ; j > 0; j -= 2 {
			plus += row[columns[j]] * from[rest[j]]
			minus += row[columns[j-1]] * from[rest[j-1]]
		}
		if j == 0 {
			plus += row[columns[0]] * from[rest[0]]
		}
		to[c] = plus - minus
	}
}

// gradient sets w, particles × holes, to Σ g(P,H) ∂m(P,H)/∂θ by running
// computeMinors backwards, at twice its cost. It destroys g.
func (s *space) gradient(w, g, m, theta []complex128, levels int) {
	nh := s.electrons
	clear(w[:s.excitations()])
	if levels == 0 {
		return
	}
	for k := levels; k >= 2; k-- {
		h, p := &s.holes.levels[k], &s.particles.levels[k]
		width, below := s.holes.count(k), s.holes.count(k-1)
		for r := range s.particles.count(k) {
			last := int(p.member[r*k+k-1]) * nh
			at := s.offset[k-1] + int(p.less[r*k+k-1])*below
			expandBack(w[last:last+nh], g[at:at+below], g[s.offset[k]+r*width:][:width],
				theta[last:last+nh], m[at:at+below], h.member, h.less, k)
		}
	}
	for i, v := range g[1:s.offset[2]] {
		w[i] += v
	}
}

// expandBack is one block of gradient.
func expandBack(w, below, g, row, from []complex128, member, less []int32, k int) {
	for c, v := range g {
		if v == 0 {
			continue
		}
		columns, rest := member[c*k:c*k+k], less[c*k:c*k+k]
		rest = rest[:len(columns)]
		for j := k - 1; j >= 0; j-- {
			i, b := columns[j], rest[j]
			w[i] += v * from[b]
			below[b] += v * row[i]
			v = -v
		}
	}
}

// pairs lists, for each size k ≥ 2 and each pair of things, the subsets that
// hold the pair and what is left of them.
type pairs struct {
	count  int // n(n−1)/2; the pair i<j has number j(j−1)/2 + i
	levels []pairLevel
}

// pairLevel holds C(n−2,k−2) terms for each pair.
type pairLevel struct {
	terms   int
	with    []int32 // number of the subset
	without []int32 // 2·(number without the pair, two sizes down), plus 1 where the two positions add up to an odd number
}

func pairNumber(i, j int) int { return j*(j-1)/2 + i }

func newPairs(s *subsets) *pairs {
	out := &pairs{count: s.n * (s.n - 1) / 2, levels: make([]pairLevel, len(s.levels))}
	for k := 2; k < len(s.levels); k++ {
		l, next := &s.levels[k], &s.levels[k-1]
		with, without := make([][]int32, out.count), make([][]int32, out.count)
		for r := range s.count(k) {
			for y := range k {
				for x := range y {
					pair := pairNumber(int(l.member[r*k+x]), int(l.member[r*k+y]))
					one := int(l.less[r*k+y]) // without the later member; the earlier keeps its place
					with[pair] = append(with[pair], int32(r))
					without[pair] = append(without[pair], 2*next.less[one*(k-1)+x]+int32((x+y)&1))
				}
			}
		}
		o := &out.levels[k]
		o.terms = len(with[0])
		o.with, o.without = slices.Concat(with...), slices.Concat(without...)
	}
	return out
}

// secondDerivatives sets d to Σ g(P,H) ∂²m(P,H)/∂θ_ai∂θ_bj for all a<b and i<j,
// pairs of particles × pairs of holes; twice is work space for two numbers for
// each minor. The others follow from antisymmetry in a, b and in i, j. Complex
// multiplications: Σ_k C(n_h,k)·C(n_p,k)·(k(k−1)/2)².
func (s *space) secondDerivatives(d, g, m []complex128, levels int, twice []complex128) {
	pairs := s.pairHole.count
	clear(d[:s.pairPart.count*pairs])
	if levels < 2 {
		return
	}
	twice = twice[:2*s.offset[levels-1]]
	for i := range len(twice) / 2 {
		twice[2*i], twice[2*i+1] = m[i], -m[i]
	}
	for k := 2; k <= levels; k++ {
		width, below := s.holes.count(k), s.holes.count(k-2)
		h, p := &s.pairHole.levels[k], &s.pairPart.levels[k]
		for ab := range s.pairPart.count {
			row := d[ab*pairs:][:pairs]
			for t := ab * p.terms; t < (ab+1)*p.terms; t++ {
				odd := p.without[t] & 1
				from := twice[2*(s.offset[k-2]+int(p.without[t]>>1)*below):][:2*below]
				addPairs(row, g[s.offset[k]+int(p.with[t])*width:][:width], from, h, odd)
			}
		}
	}
}

// addPairs is one pair of particles in one set: all pairs of holes.
func addPairs(row, g, twice []complex128, h *pairLevel, odd int32) {
	n := h.terms
	for ij := range row {
		with, without := h.with[ij*n:][:n], h.without[ij*n:][:n]
		without = without[:len(with)]
		var sum complex128
		for t, c := range with {
			sum += g[c] * twice[without[t]^odd]
		}
		row[ij] += sum
	}
}
