package expansion

import (
	"fmt"
	"math/bits"
	"slices"
	"sync"

	"leadline/hamiltonian/strings"
)

// space holds the strings of one spin species, n electrons in the active
// orbitals, and what is needed to get their minors.
//
// Minors are taken relative to a reference string r, one for each walker: with
// the columns mixed so that the rows of core and r are a unit matrix, the string
// with the holes H ⊂ r and the particles P outside of r has
//
//	d = sign · m(P,H),  m(P,H) = det θ[P, H]   (rows particles, columns holes)
//
// and the m are numbered alike for all references: by |P|, then P, then H.
type space struct {
	active, electrons int
	masks             []uint64 // the strings, in the order of the coefficients
	holes, particles  *subsets
	offset            []int // of the minors of size k; one more entry at the end
	lists             *recursion
	mu                sync.RWMutex
	frames            map[uint64]*frame
	framesLeft        int // frames that may still be kept
}

// frame says where the strings' minors are for one reference.
type frame struct {
	reference uint64
	orbital   []int     // active orbitals: those of the reference, then the others, each ascending
	position  []int     // place of each active orbital in orbital
	place     []int32   // number of the minor of each string
	sign      []float64 // ±1 for each string
	levels    int       // size of the largest minor in use
}

// Bounds on what a window may need; the first is for each spin.
const (
	maxStrings    = 1 << 18
	frameMemory   = 1 << 27 // bytes of frames kept for each spin
	bytesPerPlace = 12
)

// checkWindow says whether all strings of a window can be numbered.
func checkWindow(active, electrons int) error {
	if n := strings.Count(active, electrons); n > maxStrings {
		return fmt.Errorf("%d electrons of one spin in %d active orbitals have %d strings, more than the %d that a trial can hold", electrons, active, n, maxStrings)
	}
	return nil
}

func newSpace(active, electrons int, masks []uint64) *space {
	s := &space{active: active, electrons: electrons, masks: masks, frames: map[uint64]*frame{}}
	most := min(electrons, active-electrons)
	s.holes, s.particles = newSubsets(electrons, most), newSubsets(active-electrons, most)
	s.offset = make([]int, most+2)
	for k := range most + 1 {
		s.offset[k+1] = s.offset[k] + s.holes.count(k)*s.particles.count(k)
	}
	s.framesLeft = max(16, frameMemory/(bytesPerPlace*(len(masks)+1)))
	s.lists = newRecursion(s.holes, s.particles)
	return s
}

// allStrings returns the masks of all strings of a window.
func allStrings(active, electrons int) []uint64 {
	return slices.Clone(strings.New(active, electrons).Masks())
}

// minors returns the number of minors of all sizes.
func (s *space) minors() int { return s.offset[len(s.offset)-1] }

// excitations returns the number of pairs of particle and hole.
func (s *space) excitations() int { return s.electrons * (s.active - s.electrons) }

// frame returns the frame of a reference string; spare is overwritten and
// returned where no more frames are kept.
func (s *space) frame(reference uint64, spare *frame) *frame {
	s.mu.RLock()
	f := s.frames[reference]
	s.mu.RUnlock()
	if f != nil {
		return f
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if f = s.frames[reference]; f != nil {
		return f
	}
	if s.framesLeft > 0 {
		s.framesLeft--
		f = new(frame)
		s.frames[reference] = f
	} else {
		f = spare
	}
	s.fill(f, reference)
	return f
}

func (s *space) fill(f *frame, reference uint64) {
	all := ^uint64(0) >> (64 - s.active)
	others := all &^ reference
	f.reference, f.levels = reference, 0
	f.orbital = f.orbital[:0]
	for _, mask := range []uint64{reference, others} {
		for ; mask != 0; mask &= mask - 1 {
			f.orbital = append(f.orbital, bits.TrailingZeros64(mask))
		}
	}
	f.position = append(f.position[:0], f.orbital...)
	for k, orbital := range f.orbital {
		f.position[orbital] = k
	}
	f.place, f.sign = f.place[:0], f.sign[:0]
	for _, mask := range s.masks {
		holes, particles := reference&^mask, mask&^reference
		k := bits.OnesCount64(holes)
		f.levels = max(f.levels, k)
		at := s.offset[k] + s.particles.index(k, extract(particles, others))*s.holes.count(k) + s.holes.index(k, extract(holes, reference))
		// The particles take the places of the holes, first to first; sorting
		// them in passes the electrons between.
		sign, now := 1.0, reference
		for ; holes != 0; holes, particles = holes&(holes-1), particles&(particles-1) {
			i, a := bits.TrailingZeros64(holes), bits.TrailingZeros64(particles)
			sign *= strings.Sign(now & strings.Between(i, a))
			now ^= 1<<i | 1<<a
		}
		f.place, f.sign = append(f.place, int32(at)), append(f.sign, sign)
	}
}
