package expansion

import "leadline/trial/expansion/internal/lanes"

// blocks returns the number of blocks of eight walkers.
func blocks(count int) int { return (count + lanes.Width - 1) / lanes.Width }

// blockMinors returns the minors of one block.
func (a *form) blockMinors(s *space, block int) []float64 {
	return numbers(a.minors, block*s.minors(), s.minors())
}

// layout says how a batch of vectors over the strings of one spin is laid out:
// rows 2i and 2i+1 for real and imaginary part of walker i, or in lanes.
type layout struct {
	lanes bool
	n     int // strings
}

func (s *Source) layout(spin int) layout {
	_, lanes := s.c.(*sparse)
	return layout{lanes: lanes, n: len(s.spaces[spin].masks)}
}

// size returns the length of a batch.
func (v layout) size(count int) int {
	if v.lanes {
		return blocks(count) * v.n * lanes.Size
	}
	return 2 * count * v.n
}

// walker returns where the first string of walker i is, the distance to the next
// string and that to the imaginary part.
func (v layout) walker(i int) (at, step, part int) {
	if v.lanes {
		return i/lanes.Width*v.n*lanes.Size + i%lanes.Width, lanes.Size, lanes.Width
	}
	return 2 * i * v.n, 1, v.n
}

// inner returns Σ_I d_I y_I of walker i.
func (v layout) inner(d, y []float64, i int) complex128 {
	at, step, part := v.walker(i)
	var re, im float64
	for range v.n {
		dRe, dIm, yRe, yIm := d[at], d[at+part], y[at], y[at+part]
		re += dRe*yRe - dIm*yIm
		im += dRe*yIm + dIm*yRe
		at += step
	}
	return complex(re, im)
}
