package exact

import (
	"math/bits"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
)

// spinSquare applies S² = S₋S₊ + S_z(S_z + 1) by way of the vector S₊x, which has
// one more up and one less down electron, S₊ = Σ_p c†_p,up c_p,down. (The sign
// with which c_p,down passes the up string is the same for every term and
// cancels between S₊ and S₋.)
type spinSquare struct {
	space      *Space
	z          float64          // S_z
	raised     *Space           // nil where S₊x = 0
	annihilate []*strings.Moves // of the down strings, per orbital
}

func newSpinSquare(space *Space) *spinSquare {
	m, up, down := space.Orbitals(), space.Up.Electrons(), space.Down.Electrons()
	s := &spinSquare{space: space, z: float64(up-down) / 2}
	if down == 0 || up == m {
		return s
	}
	s.raised = NewSpace(hamiltonian.Sector{Orbitals: m, Up: up + 1, Down: down - 1})
	for p := range m {
		s.annihilate = append(s.annihilate, space.Down.Annihilate(s.raised.Down, p))
	}
	return s
}

// raise computes y = S₊x, of length s.raised.Dim().
func (s *spinSquare) raise(y, x []float64) {
	from, to := s.space.Down.Len(), s.raised.Down.Len()
	each(s.raised.Up.Len(), func(i int) {
		dst := y[i*to : (i+1)*to]
		clear(dst)
		mask := s.raised.Up.Mask(i)
		for o := mask; o != 0; o &= o - 1 {
			p := bits.TrailingZeros64(o)
			row := s.space.Up.Index(mask ^ 1<<p)
			src := x[row*from : (row+1)*from]
			sign := strings.Sign(mask & (1<<p - 1))
			moves := s.annihilate[p]
			for k, j := range moves.From {
				dst[moves.To[k]] += sign * moves.Sign[k] * src[j]
			}
		}
	})
}

// apply computes dst = S²x, with y of length s.raised.Dim() as workspace.
func (s *spinSquare) apply(dst, x, y []float64) {
	for i, v := range x {
		dst[i] = s.z * (s.z + 1) * v
	}
	if s.raised == nil {
		return
	}
	s.raise(y, x)
	from, to := s.raised.Down.Len(), s.space.Down.Len()
	each(s.space.Up.Len(), func(i int) {
		row := dst[i*to : (i+1)*to]
		mask := s.space.Up.Mask(i)
		for p := range s.space.Orbitals() {
			if mask>>p&1 == 1 {
				continue
			}
			up := s.raised.Up.Index(mask | 1<<p)
			src := y[up*from : (up+1)*from]
			sign := strings.Sign(mask & (1<<p - 1))
			moves := s.annihilate[p]
			for k, j := range moves.From {
				row[j] += sign * moves.Sign[k] * src[moves.To[k]]
			}
		}
	})
}

// workspace returns a vector for S₊x.
func (s *spinSquare) workspace() []float64 {
	if s.raised == nil {
		return nil
	}
	return make([]float64, s.raised.Dim())
}

// SpinSquared returns ⟨x|S²|x⟩/⟨x|x⟩ of the state with coefficients re + i·im;
// im is nil for a real state. The norm must not be zero. Memory: one vector of
// the sector with one more up and one less down electron.
func (s *Space) SpinSquared(re, im []float64) float64 {
	square := newSpinSquare(s)
	y := square.workspace()
	var raised, norm float64
	for _, x := range [][]float64{re, im} {
		if x == nil {
			continue
		}
		s.check(x)
		norm += dot(x, x)
		if square.raised != nil {
			square.raise(y, x)
			raised += dot(y, y)
		}
	}
	return square.z*(square.z+1) + raised/norm
}

// spinProjector projects vectors on total spin S by the product over all other
// spins S′ of the sector,
//
//	P = Π_{S′≠S} [S² − S′(S′+1)] / [S(S+1) − S′(S′+1)]
//
// (Löwdin, Phys. Rev. 97, 1509 (1955)), exact in exact arithmetic.
type spinProjector struct {
	square  *spinSquare
	keep    float64
	others  []float64 // S′(S′+1), largest first, which amplifies rounding least
	y, next []float64
}

func newSpinProjector(space *Space, spin float64) *spinProjector {
	p := &spinProjector{square: newSpinSquare(space), keep: spin * (spin + 1), next: make([]float64, space.Dim())}
	p.y = p.square.workspace()
	low, high := spinRange(hamiltonian.Sector{Orbitals: space.Orbitals(), Up: space.Up.Electrons(), Down: space.Down.Electrons()})
	for other := high; other >= low; other-- {
		if other != spin {
			p.others = append(p.others, other*(other+1))
		}
	}
	return p
}

// project replaces x by its component of the wanted spin.
func (p *spinProjector) project(x []float64) {
	for _, other := range p.others {
		p.square.apply(p.next, x, p.y)
		scale := 1 / (p.keep - other)
		each(pieces(len(x), chunk), func(item int) {
			from, to := piece(len(x), pieces(len(x), chunk), item)
			for i := from; i < to; i++ {
				x[i] = scale * (p.next[i] - other*x[i])
			}
		})
	}
}

// spinRange returns the smallest and largest total spin in a sector.
func spinRange(s hamiltonian.Sector) (low, high float64) {
	n := s.Up + s.Down
	low = float64(max(s.Up, s.Down)-min(s.Up, s.Down)) / 2
	return low, float64(min(n, 2*s.Orbitals-n)) / 2
}

// multiplets returns the number of states of total spin S in a sector, the
// formula of Weyl and Paldus (J. Chem. Phys. 61, 5321 (1974)) in the form of a
// difference: the determinants with S_z = S less those with S_z = S + 1, where
// every multiplet of at least that spin has one state.
func multiplets(s hamiltonian.Sector, spin float64) int {
	n, twice := s.Up+s.Down, int(2*spin)
	count := func(twice int) int {
		return strings.Count(s.Orbitals, (n+twice)/2) * strings.Count(s.Orbitals, (n-twice)/2)
	}
	return count(twice) - count(twice+2)
}
