package expansion

import (
	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
	"leadline/trial"
)

// coefficients is the matrix C of a trial state, up strings × down strings, of
// which only the conjugate acts. Vectors of a batch are rows 2i (real) and 2i+1
// (imaginary part) of walker i.
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

// sparse holds the nonzero elements of C*, row by row for each spin; 4 flops
// (8 if complex) for each element and vector.
type sparse struct {
	strings [2]int
	lists   [2]rows // of up strings over down ones, and the other way
}

type rows struct {
	start []int32
	index []int32
	re    []float64
	im    []float64 // nil for a real C
}

// element is one nonzero of C.
type element struct {
	at    [2]int32 // up and down string
	value complex128
}

// newSparse takes the elements sorted by up string, then down string.
func newSparse(up, down int, elements []element, isComplex bool) *sparse {
	c := &sparse{strings: [2]int{up, down}}
	for spin, n := range c.strings {
		r := &c.lists[spin]
		r.start = make([]int32, n+1)
		for _, e := range elements {
			r.start[e.at[spin]+1]++
		}
		for k := range n {
			r.start[k+1] += r.start[k]
		}
		r.index, r.re = make([]int32, len(elements)), make([]float64, len(elements))
		if isComplex {
			r.im = make([]float64, len(elements))
		}
		next := append([]int32(nil), r.start...)
		for _, e := range elements {
			k := next[e.at[spin]]
			next[e.at[spin]]++
			r.index[k], r.re[k] = e.at[1-spin], real(e.value)
			if isComplex {
				r.im[k] = -imag(e.value)
			}
		}
	}
	return c
}

func (c *sparse) contract(y, d []float64, count, spin int, _ *[]float64) {
	n, other := c.strings[spin], c.strings[1-spin]
	r := &c.lists[spin]
	for w := range count {
		dRe, dIm := d[2*w*other:][:other], d[(2*w+1)*other:][:other]
		yRe, yIm := y[2*w*n:][:n], y[(2*w+1)*n:][:n]
		for k := range yRe {
			var re, im float64
			from, to := r.start[k], r.start[k+1]
			index, values := r.index[from:to], r.re[from:to]
			for l, j := range index {
				v := values[l]
				re += v * dRe[j]
				im += v * dIm[j]
			}
			if r.im != nil {
				for l, j := range index {
					v := r.im[int(from)+l]
					re -= v * dIm[j]
					im += v * dRe[j]
				}
			}
			yRe[k], yIm[k] = re, im
		}
	}
}
