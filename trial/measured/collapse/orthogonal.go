package collapse

import (
	"math/bits"

	"leadline/trial/measured/matchgate"
)

// accumulateOrthogonal is the slow path for rotations that are no permutations:
// all Pfaffians of the snapshot's contractions, at n+1 points each. Settings
// are evaluated side by side and added in order.
func (p *plan) accumulateOrthogonal(acc []float64) func(*chunk) error {
	n := p.header.Qubits
	dets := make([]uint64, 0, p.target.size())
	most := 0
	for _, row := range p.target.rows {
		for _, col := range p.target.cols {
			dets = append(dets, row|col)
			most = max(most, bits.OnesCount64((row|col)^p.row))
		}
	}
	type worker struct {
		gaussian *matchgate.Gaussian
		table    []complex128
		one      []complex128
	}
	workers := make([]worker, p.workers)
	for w := range workers {
		workers[w].gaussian = matchgate.NewGaussian(n, p.inverse)
		workers[w].one = make([]complex128, len(dets))
	}
	var sums [][]complex128
	return func(c *chunk) error {
		for len(sums) < c.n {
			sums = append(sums, make([]complex128, len(dets)))
		}
		share(p.workers, c.n, func(w, i int) {
			k, s, sum := &workers[w], &c.list[i], sums[i]
			clear(sum)
			s.shots, s.rejected = 0, 0
			for _, o := range s.setting.Shots {
				if p.reverse {
					o.Bits = bits.Reverse64(o.Bits) >> (64 - n)
				}
				s.shots += int64(o.Count)
				k.gaussian.SetOrthogonal(s.setting.Q, o.Bits, p.row)
				if k.gaussian.ParityOdd() {
					s.rejected += int64(o.Count)
					if p.symmetric {
						continue
					}
				}
				clear(k.one)
				k.table = k.gaussian.Determinants(k.one, dets, p.row, most, k.table)
				for d, v := range k.one {
					sum[d] += complex(float64(o.Count), 0) * v
				}
			}
		})
		for _, sum := range sums[:c.n] {
			for d, v := range sum {
				// finish takes the form of <r|M^{-1}(G)|D>.
				acc[2*d] += real(v)
				acc[2*d+1] += imag(v)
			}
		}
		return nil
	}
}
