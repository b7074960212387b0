package collapse

import (
	"math"
	"math/bits"
)

// accumulate adds the terms of a setting to the rows from lo to hi of the
// accumulator, in which real and imaginary parts alternate. Joining a row and a
// column value takes a population count for the phase, i^phase picks the part
// and the sign, and a table gives the weight: about ten operations per
// determinant, no multiplication by a phase.
func (p *prepared) accumulate(acc []float64, stride, lo, hi int) {
	for i := lo; i < hi; i++ {
		r := &p.rows[i]
		if r.lo == r.hi {
			continue
		}
		row := acc[i*stride : (i+1)*stride]
		cols := p.cols[r.lo:r.hi]
		for k := range p.terms {
			t := &p.terms[k]
			cross := r.cross ^ t.sign
			phase := r.phase + 2*uint32(bits.OnesCount64(t.sign&r.y))
			switch t.kind {
			case constant:
				addConstant(row, cols, cross, phase, t.scale)
			case indexed:
				if p.index.Groups == 2 && t.scale == 1 {
					addIndexed(row, cols, r.y, cross, phase, t.table, p.index.Add, uint(p.index.Width))
				} else {
					for _, c := range cols {
						w := t.scale * t.table[p.index.At(r.y^c.y)]
						add(row, c, cross, phase, w)
					}
				}
			case direct:
				for _, c := range cols {
					add(row, c, cross, phase, t.table[r.y^c.y])
				}
			}
		}
	}
}

// add adds i^phase w to one determinant of a row.
func add(row []float64, c colValue, cross uint64, phase uint32, w float64) {
	ph := phase + c.phase + 2*uint32(bits.OnesCount64(cross&c.y))
	row[int(c.at)+int(ph&1)] += math.Float64frombits(math.Float64bits(w) ^ uint64(ph&2)<<62)
}

func addConstant(row []float64, cols []colValue, cross uint64, phase uint32, w float64) {
	word := math.Float64bits(w)
	for i := range cols {
		c := &cols[i]
		ph := phase + c.phase + 2*uint32(bits.OnesCount64(cross&c.y))
		row[int(c.at)+int(ph&1)] += math.Float64frombits(word ^ uint64(ph&2)<<62)
	}
}

// addIndexed looks up weights through an index of two groups.
func addIndexed(row []float64, cols []colValue, y, cross uint64, phase uint32, table []float64, index []uint32, width uint) {
	size := uint64(1) << (width & 63)
	low, high := index[:size], index[size:2*size]
	mask := size - 1
	for i := range cols {
		c := &cols[i]
		ph := phase + c.phase + 2*uint32(bits.OnesCount64(cross&c.y))
		v := y ^ c.y
		w := table[low[v&mask]+high[v>>(width&63)&mask]]
		row[int(c.at)+int(ph&1)] += math.Float64frombits(math.Float64bits(w) ^ uint64(ph&2)<<62)
	}
}
