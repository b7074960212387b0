package expansion

import (
	"math/cmplx"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
	"leadline/trial/expansion/internal/lanes"
)

// coefficients is the matrix C of a trial state, up strings × down strings, of
// which only the conjugate acts, on batches of vectors laid out as [layout] says.
type coefficients interface {
	// contract sets y = C* d for the up strings (spin = Up, d of the down
	// strings), or y = C†d for the down strings, for count walkers.
	contract(y, d []float64, count, spin int, scratch *[]float64)
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

func (c *dense) contract(y, d []float64, count, spin int, scratch *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	if c.planes == 1 {
		c.to[spin].Mul(2*count, 1, d, other, 0, y, n)
		return
	}
	*scratch = trial.Grow(*scratch, 4*count*n)
	c.to[spin].Mul(2*count, 1, d, other, 0, *scratch, 2*n)
	for i := range count {
		re, im := (*scratch)[4*i*n:][:2*n], (*scratch)[(4*i+2)*n:][:2*n]
		yRe, yIm := y[2*i*n:][:n], y[(2*i+1)*n:][:n]
		for k := range n {
			yRe[k] = re[k] - im[n+k]
			yIm[k] = re[n+k] + im[k]
		}
	}
}

// sparse holds the nonzero elements of C*, row by row for each spin, and acts in
// lanes; 4 flops (8 if complex) for each element and vector.
type sparse struct {
	strings [2]int
	rows    [2]lanes.Weights // up strings over down ones, and the other way
}

// element is one nonzero of C.
type element struct {
	at    [2]int32 // up and down string
	value complex128
}

func newSparse(up, down int, elements []element, isComplex bool) *sparse {
	c := &sparse{strings: [2]int{up, down}}
	for spin, n := range c.strings {
		r := &c.rows[spin]
		r.Real = !isComplex
		r.Start = make([]int32, n+1)
		for _, e := range elements {
			r.Start[e.at[spin]+1]++
		}
		for k := range n {
			r.Start[k+1] += r.Start[k]
		}
		r.List = make([]lanes.Weight, len(elements))
		next := append([]int32(nil), r.Start...)
		for _, e := range elements {
			k := next[e.at[spin]]
			next[e.at[spin]]++
			r.List[k] = lanes.NewWeight(int(e.at[1-spin]), cmplx.Conj(e.value))
		}
	}
	return c
}

func (c *sparse) contract(y, d []float64, count, spin int, _ *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	for b := range blocks(count) {
		c.rows[spin].Combine(numbers(y, b*n, n), numbers(d, b*other, other))
	}
}
