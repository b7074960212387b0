package collapse

import (
	"cmp"
	"fmt"
	"math"
	"math/bits"
	"slices"

	"leadline/trial/measured/clifford"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

// rowValue and colValue are the form of a setting at one string. A row meets
// the columns lo to hi, those of its syndrome.
type rowValue struct {
	y, cross, syndrome uint64
	phase              uint32
	lo, hi             int32
}

type colValue struct {
	y     uint64
	at    int32 // place of the real part in a row of the accumulator
	phase uint32
}

// term is what one outcome, or a class of them, adds: signs and a weight.
type term struct {
	sign  uint64
	scale float64
	kind  termKind
	table []float64
}

type termKind uint8

const (
	constant termKind = iota // scale
	indexed                  // scale·table[index(y)]
	direct                   // table[y]
)

// prepared is a setting ready for accumulation.
type prepared struct {
	setting record.Setting

	rows  []rowValue
	cols  []colValue // by syndrome
	terms []term
	// starts are the first columns of each syndrome, if there are few;
	// syndromes those of the columns otherwise.
	starts    []int32
	syndromes []uint64
	index     matchgate.Index

	shots, rejected int64

	tables  []float64 // storage of the terms' tables
	classes []class
	decoded []decodedOutcome
}

type decodedOutcome struct {
	p, t  uint64
	count float64
}

// class is the outcomes that share the cycle parities p.
type class struct {
	p      uint64
	lo, hi int
}

// preparer turns settings into prepared ones; each worker has its own.
type preparer struct {
	*plan
	basis    clifford.Basis
	matching matchgate.Matching
	form     snapshot.Form
	values   []snapshot.Value
	order    []int32
	scratch  []float64
}

// maxDirectBits bounds the tables over y to 64 MB a setting.
const maxDirectBits = 22

// maxTables bounds the tables of one setting, in numbers: random matchings need
// a few thousand at most.
const maxTables = 1 << 24

// prepare evaluates the form of p's setting at every string and reduces its
// outcomes to terms.
func (w *preparer) prepare(p *prepared) error {
	p.terms, p.tables, p.decoded, p.classes = p.terms[:0], p.tables[:0], p.decoded[:0], p.classes[:0]
	p.shots, p.rejected = 0, 0
	s := &p.setting
	if w.reverse {
		for i := range s.Shots {
			s.Shots[i].Bits = bits.Reverse64(s.Shots[i].Bits) >> (64 - w.header.Qubits)
		}
	}
	if w.header.Ensemble.Clifford() {
		if err := w.cliffordTerms(p); err != nil {
			return err
		}
	} else if err := w.matchingTerms(p); err != nil {
		return err
	}
	if len(p.terms) > 0 {
		w.strings(p)
	}
	return nil
}

// cliffordTerms keeps the outcomes that reach the row's determinant, in units
// of 2^{-n}: the weight 2^{n−k} is exact.
func (w *preparer) cliffordTerms(p *prepared) error {
	if err := w.basis.FromSetting(w.header, &p.setting); err != nil {
		return err
	}
	w.basis.Form(&w.form)
	coset, sign := w.basis.Row(w.row)
	for _, o := range p.setting.Shots {
		p.shots += int64(o.Count)
		t, u := w.basis.Decode(o.Bits)
		if u != coset {
			p.rejected += int64(o.Count)
			continue
		}
		p.decoded = append(p.decoded, decodedOutcome{0, t ^ sign, float64(o.Count)})
	}
	weight := math.Ldexp(1, w.basis.N-w.basis.K)
	if len(p.decoded) == 0 {
		return nil
	}
	if w.directPays(len(p.decoded), w.basis.K) {
		table := p.addDirect(w.basis.K)
		for _, o := range p.decoded {
			table[o.t] += weight * o.count
		}
		walsh(table)
		p.terms = append(p.terms, term{kind: direct, table: table})
		return nil
	}
	for _, o := range p.decoded {
		p.terms = append(p.terms, term{kind: constant, sign: o.t, scale: weight * o.count})
	}
	return nil
}

// matchingTerms groups the outcomes by the parities of the cycles, which fix
// the table of weights.
func (w *preparer) matchingTerms(p *prepared) error {
	m := &w.matching
	m.Set(w.header.Qubits, p.setting.Pairs)
	m.Form(&w.form)
	for _, o := range p.setting.Shots {
		p.shots += int64(o.Count)
		t, parity := m.Signs(o.Bits, w.row)
		if bits.OnesCount64(parity)&1 != 0 {
			p.rejected += int64(o.Count)
			if w.symmetric {
				continue // contributes exactly zero
			}
		}
		p.decoded = append(p.decoded, decodedOutcome{parity, t, float64(o.Count)})
	}
	if len(p.decoded) == 0 {
		return nil
	}
	slices.SortFunc(p.decoded, func(a, b decodedOutcome) int {
		return cmp.Or(cmp.Compare(a.p, b.p), cmp.Compare(a.t, b.t))
	})
	for i, o := range p.decoded {
		if i == 0 || o.p != p.decoded[i-1].p {
			p.classes = append(p.classes, class{o.p, i, i})
		}
		p.classes[len(p.classes)-1].hi++
	}
	m.Index(&p.index)
	// Tables live in one slice, which must not move once terms point into it.
	entries := m.Entries()
	need := entries * len(p.classes)
	anyDirect := false
	for _, c := range p.classes {
		anyDirect = anyDirect || w.directPays(c.hi-c.lo, m.Bits)
	}
	if anyDirect {
		need += 2 << m.Bits
	}
	if need > maxTables {
		return fmt.Errorf("setting %d: %d cycles with %d combinations of parities need %d weights, at most %d", p.setting.ID, len(m.Cycles), len(p.classes), need, maxTables)
	}
	p.tables = slices.Grow(p.tables, need)
	var sum, one []float64
	if anyDirect {
		sum, one = p.addDirect(m.Bits), p.addDirect(m.Bits)
	}
	for _, c := range p.classes {
		at := len(p.tables)
		p.tables, w.scratch = m.Weights(p.tables, w.inverse, c.p, w.scratch)
		table := p.tables[at:]
		if !w.directPays(c.hi-c.lo, m.Bits) {
			for _, o := range p.decoded[c.lo:c.hi] {
				p.terms = append(p.terms, term{kind: indexed, sign: o.t, scale: o.count, table: table})
			}
			continue
		}
		clear(one)
		for _, o := range p.decoded[c.lo:c.hi] {
			one[o.t] += o.count
		}
		walsh(one)
		for y, v := range one {
			sum[y] += v * table[p.index.At(uint64(y))]
		}
	}
	if anyDirect {
		p.terms = append(p.terms, term{kind: direct, table: sum})
	}
	return nil
}

// directPays decides between one pass over the strings for each outcome and a
// Walsh transform of their histogram over all 2^bits values of y.
func (p *plan) directPays(outcomes, bits int) bool {
	return bits <= maxDirectBits && float64(outcomes)*float64(p.target.size()) > float64((bits+4)<<bits)
}

// addDirect reserves a zeroed table over y.
func (p *prepared) addDirect(bits int) []float64 {
	at := len(p.tables)
	p.tables = slices.Grow(p.tables, 1<<bits)[:at+1<<bits]
	table := p.tables[at : at+1<<bits]
	clear(table)
	return table
}

// walsh replaces h by Σ_t h[t] (−1)^{t·y}; len(h) is a power of two.
func walsh(h []float64) {
	for step := 1; step < len(h); step *= 2 {
		for i := 0; i < len(h); i += 2 * step {
			lo, hi := h[i:i+step], h[i+step:i+2*step]
			for j, a := range lo {
				b := hi[j]
				lo[j], hi[j] = a+b, a-b
			}
		}
	}
}

// strings evaluates the form at rows and columns and sorts the columns by
// syndrome.
func (w *preparer) strings(p *prepared) {
	n := len(w.target.cols)
	if cap(w.values) < n {
		w.values = make([]snapshot.Value, n)
		w.order = make([]int32, n)
	}
	values, order := w.values[:n], w.order[:n]
	for j, mask := range w.cols {
		values[j] = w.form.At(mask)
		order[j] = int32(j)
	}
	// Syndromes of more than a handful of bits are rare; those are sorted.
	const counted = 10
	p.starts, p.syndromes = p.starts[:0], p.syndromes[:0]
	if w.form.SyndromeBits <= counted {
		used := 1 << w.form.SyndromeBits
		p.starts = slices.Grow(p.starts, used+1)[:used+1]
		clear(p.starts)
		for _, v := range values {
			p.starts[v.Syndrome+1]++
		}
		for i := range used {
			p.starts[i+1] += p.starts[i]
		}
		var fill [1 << counted]int32
		copy(fill[:], p.starts[:used])
		for j, v := range values {
			order[fill[v.Syndrome]] = int32(j)
			fill[v.Syndrome]++
		}
	} else {
		slices.SortFunc(order, func(a, b int32) int {
			return cmp.Or(cmp.Compare(values[a].Syndrome, values[b].Syndrome), cmp.Compare(a, b))
		})
		for _, j := range order {
			p.syndromes = append(p.syndromes, values[j].Syndrome)
		}
	}
	p.cols = p.cols[:0]
	for _, j := range order {
		v := &values[j]
		p.cols = append(p.cols, colValue{v.Y, 2 * j, v.Phase & 3})
	}
	p.rows = p.rows[:0]
	for _, mask := range w.rows {
		v := w.form.At(mask)
		r := rowValue{y: v.Y, cross: v.Cross, syndrome: v.Syndrome, phase: v.Phase & 3}
		r.lo, r.hi = p.bucket(v.Syndrome)
		p.rows = append(p.rows, r)
	}
}

// bucket returns the range of the columns of one syndrome.
func (p *prepared) bucket(syndrome uint64) (lo, hi int32) {
	if len(p.starts) > 0 {
		return p.starts[syndrome], p.starts[syndrome+1]
	}
	first, _ := slices.BinarySearch(p.syndromes, syndrome)
	last := first
	for last < len(p.syndromes) && p.syndromes[last] == syndrome {
		last++
	}
	return int32(first), int32(last)
}
