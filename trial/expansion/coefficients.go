package expansion

import (
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
		combine(y[2*i*n:], y[(2*i+1)*n:], (*scratch)[4*i*n:], 1, n)
	}
}
