package expansion

import (
	"cmp"
	"math"
	"slices"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// coefficients is the matrix C of a trial state, up strings × down strings, of
// which only the conjugate acts, on batches of vectors laid out as [layout] says.
type coefficients interface {
	// contract sets y = C* d for the up strings (spin = Up, d of the down
	// strings), or y = C†d for the down strings, for count walkers.
	contract(y, d []float64, count, spin int, scratch *[]float64)
}

// sparseRatio is how many times faster the dense products, with all that follows
// from them in a local energy, do an element of C than the sparse ones: found by
// measurement.
const sparseRatio = 5

// setCoefficients chooses the strings and the form of C: all strings and the
// whole matrix, or only those that occur and their nonzero elements.
func (s *Source) setCoefficients() {
	e := s.expansion
	largest := e.largest()
	s.scale = math.Log(largest)
	list := slices.DeleteFunc(slices.Clone(e.Determinants), func(d Determinant) bool { return d.Amplitude == 0 })
	isComplex := slices.ContainsFunc(list, func(d Determinant) bool { return imag(d.Amplitude) != 0 })

	var masks [2][]uint64
	if e.Up == e.Down {
		masks[0] = occurring(list, func(d Determinant) [2]uint64 { return [2]uint64{d.Up, d.Down} })
		masks[1] = masks[0]
	} else {
		masks[0] = occurring(list, func(d Determinant) [2]uint64 { return [2]uint64{d.Up, d.Up} })
		masks[1] = occurring(list, func(d Determinant) [2]uint64 { return [2]uint64{d.Down, d.Down} })
	}
	whole := [2][]uint64{allStrings(e.Active, e.Up), allStrings(e.Active, e.Down)}
	full := float64(len(whole[0])) * float64(len(whole[1]))
	useSparse := sparseRatio*float64(len(list)) < full
	if !useSparse {
		masks = whole
	}
	s.spaces[0] = newSpace(e.Active, e.Up, masks[0])
	s.spaces[1] = s.spaces[0]
	if e.Up != e.Down {
		s.spaces[1] = newSpace(e.Active, e.Down, masks[1])
	}

	elements := make([]element, len(list))
	var number [2]map[uint64]int32
	for spin := range 2 {
		number[spin] = make(map[uint64]int32, len(masks[spin]))
		for k, mask := range masks[spin] {
			number[spin][mask] = int32(k)
		}
	}
	for k, d := range list {
		elements[k] = element{
			at:    [2]int32{number[0][d.Up], number[1][d.Down]},
			value: complex(real(d.Amplitude)/largest, imag(d.Amplitude)/largest),
		}
	}
	slices.SortFunc(elements, func(a, b element) int {
		return cmp.Or(cmp.Compare(a.at[0], b.at[0]), cmp.Compare(a.at[1], b.at[1]))
	})
	leading := slices.MaxFunc(list, func(a, b Determinant) int { return cmp.Compare(magnitude(a), magnitude(b)) })
	s.preferred = [2]uint64{leading.Up, leading.Down}
	s.symmetric = e.Up == e.Down && isSymmetric(elements)
	up, down := len(masks[0]), len(masks[1])
	if useSparse {
		s.c = newSparse(up, down, elements, isComplex)
		return
	}
	re := make([]float64, up*down)
	var im []float64
	if isComplex {
		im = make([]float64, up*down)
	}
	for _, v := range elements {
		k := int(v.at[0])*down + int(v.at[1])
		re[k] = real(v.value)
		if isComplex {
			im[k] = imag(v.value)
		}
	}
	if c := newFactored(up, down, re, im); c != nil {
		s.c = c
		return
	}
	s.c = newDense(up, down, re, im)
}

// occurring returns the distinct strings of a list, ascending.
func occurring(list []Determinant, of func(Determinant) [2]uint64) []uint64 {
	var masks []uint64
	for _, d := range list {
		pair := of(d)
		masks = append(masks, pair[0], pair[1])
	}
	slices.Sort(masks)
	return slices.Compact(masks)
}

// symmetry is the largest deviation, relative to the largest amplitude, from
// equal amplitudes of determinants with up and down exchanged that counts as
// none: what a solver leaves by rounding.
const symmetry = 1e-14

// isSymmetric reports whether the sorted elements of a square C have C = Cᵀ, and
// then makes them so exactly.
func isSymmetric(elements []element) bool {
	find := func(at [2]int32) int {
		k, ok := slices.BinarySearchFunc(elements, at, func(e element, at [2]int32) int {
			return cmp.Or(cmp.Compare(e.at[0], at[0]), cmp.Compare(e.at[1], at[1]))
		})
		if !ok {
			return -1
		}
		return k
	}
	for _, e := range elements {
		k := find([2]int32{e.at[1], e.at[0]})
		if k < 0 {
			return false
		}
		d := e.value - elements[k].value
		if math.Hypot(real(d), imag(d)) > symmetry {
			return false
		}
	}
	for k, e := range elements {
		if e.at[0] < e.at[1] {
			elements[find([2]int32{e.at[1], e.at[0]})].value = elements[k].value
		}
	}
	return true
}

// dense holds all of C; 4·S_up·S_down flops for each vector, twice that if
// complex.
type dense struct {
	strings [2]int
	planes  int
	to      [2]*linalg.Packed // [Re | Im] of C†: strings of the other spin × this one's
	rows    []float64         // C†, down strings × up strings, plane after plane
}

// newDense takes C as up × down strings, im nil for a real one.
func newDense(up, down int, re, im []float64) *dense {
	c := &dense{strings: [2]int{up, down}, planes: 1}
	if im != nil {
		c.planes = 2
	}
	c.rows = make([]float64, c.planes*up*down)
	for i := range up {
		for j := range down {
			c.rows[j*up+i] = re[i*down+j]
			if im != nil {
				c.rows[(down+j)*up+i] = -im[i*down+j]
			}
		}
	}
	for spin, n := range c.strings {
		other := c.strings[1-spin]
		all := make([]float64, other*c.planes*n)
		for plane := range c.planes {
			for i := range up {
				for j := range down {
					v := c.rows[(plane*down+j)*up+i]
					if spin == hamiltonian.Up {
						all[(j*c.planes+plane)*n+i] = v
					} else {
						all[(i*c.planes+plane)*n+j] = v
					}
				}
			}
		}
		c.to[spin] = linalg.Pack(false, other, c.planes*n, all, c.planes*n)
	}
	return c
}

// triangle returns the elements of a symmetric C at and beyond the diagonal, which
// is halved, laid out as rows; the others are zero.
func (c *dense) triangle() []float64 {
	n := c.strings[0]
	out := make([]float64, len(c.rows))
	for row := range c.planes * n {
		from := row % n
		copy(out[row*n+from:(row+1)*n], c.rows[row*n+from:])
		out[row*n+from] *= 0.5
	}
	return out
}

func (c *dense) contract(y, d []float64, count, spin int, scratch *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	if c.planes == 1 {
		c.to[spin].Mul(2*count, 1, d, other, 0, y, n)
		return
	}
	*scratch = trial.Grow(*scratch, 4*count*n)
	c.to[spin].Mul(2*count, 1, d, other, 0, *scratch, 2*n)
	for i := range count {
		combine(y[2*i*n:], y[(2*i+1)*n:], (*scratch)[4*i*n:], 1, n)
	}
}
