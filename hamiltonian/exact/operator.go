package exact

import (
	"sync"

	"gonum.org/v1/gonum/blas/gonum"

	"leadline/hamiltonian"
)

// Operator is a Hamiltonian acting on the vectors of its sector. It is immutable;
// its methods may be called from several goroutines, and each uses all processors.
// Results do not depend on their number.
type Operator struct {
	*Space
	constant float64
	like     [2]*like
	unlike   *unlike
	diagonal []float64

	columnScratch, rowScratch sync.Pool
}

// NewOperator prepares a Hamiltonian for [Operator.Apply]: strings, two-body
// tensors, lists of excitations and the diagonal. h is not kept. The error
// reports a Hamiltonian that is not valid. Memory: see [Estimate].
func NewOperator(h *hamiltonian.Hamiltonian) (*Operator, error) {
	if err := h.Validate(); err != nil {
		return nil, err
	}
	o := &Operator{Space: NewSpace(h.Sector), constant: h.Constant}
	tables := [2]int{h.Up, h.Down}
	o.like[hamiltonian.Up] = newLike(o.Up, h.OneBody[hamiltonian.Up], newTensor(h, hamiltonian.Up, hamiltonian.Up))
	if h.SpinFree() && tables[0] == tables[1] {
		o.like[hamiltonian.Down] = o.like[hamiltonian.Up]
	} else {
		o.like[hamiltonian.Down] = newLike(o.Down, h.OneBody[hamiltonian.Down], newTensor(h, hamiltonian.Down, hamiltonian.Down))
	}
	mixed := newTensor(h, hamiltonian.Up, hamiltonian.Down)
	o.unlike = newUnlike(o.Space, mixed)
	o.columnScratch.New = func() any { return o.like[hamiltonian.Up].scratch(min(o.Down.Len(), columnsPerItem)) }
	o.rowScratch.New = func() any { return o.newRowScratch() }
	o.diagonal = make([]float64, o.Dim())
	columns := o.Down.Len()
	each(o.Up.Len(), func(i int) {
		row := o.diagonal[i*columns : (i+1)*columns]
		diagonal(row, o.Up.Occupied(nil, i), o.Space, mixed)
		for j := range row {
			row[j] += o.constant + o.like[hamiltonian.Up].diagonal[i] + o.like[hamiltonian.Down].diagonal[j]
		}
	})
	return o, nil
}

// Diagonal returns the expectation value of H in every determinant, length Dim.
// It aliases the operator and must not be changed.
func (o *Operator) Diagonal() []float64 { return o.diagonal }

// Partition of a product into independent items.
const (
	columnsPerItem = 256 // columns of the part that acts on up strings
	rowsPerItem    = 64  // rows of the part that acts on down strings
)

// Apply computes dst = H x. Both have length Dim and must not overlap.
//
// Cost: [Operator.Flops] in matrix products and one addition per down
// excitation and up string.
func (o *Operator) Apply(dst, x []float64) {
	o.check(dst)
	o.check(x)
	rows, columns := o.Up.Len(), o.Down.Len()

	parts := pieces(columns, columnsPerItem)
	each(parts, func(item int) {
		scratch := o.columnScratch.Get().(*likeScratch)
		defer o.columnScratch.Put(scratch)
		from, to := piece(columns, parts, item)
		for i := range rows {
			for j := i*columns + from; j < i*columns+to; j++ {
				dst[j] = o.constant * x[j]
			}
		}
		o.like[hamiltonian.Up].add(dst[from:], x[from:], to-from, columns, scratch)
	})

	blocks := pieces(rows, rowsPerItem)
	each(blocks, func(item int) {
		scratch := o.rowScratch.Get().(*rowScratch)
		defer o.rowScratch.Put(scratch)
		from, to := piece(rows, blocks, item)
		height := to - from
		if down := o.like[hamiltonian.Down]; down.removed > 0 {
			in, out := scratch.in[:height*columns], scratch.out[:height*columns]
			transpose(in, x[from*columns:], height, columns, columns)
			clear(out)
			down.add(out, in, height, height, scratch.like)
			addTransposed(dst[from*columns:], out, height, columns, columns)
		}
		if o.unlike != nil {
			for i := from; i < to; i++ {
				o.unlike.add(dst[i*columns:(i+1)*columns], x, i, scratch.unlike)
			}
		}
	})
}

// rowScratch is the workspace of one goroutine for rowsPerItem rows.
type rowScratch struct {
	in, out []float64 // transposed
	like    *likeScratch
	unlike  *unlikeScratch
}

func (o *Operator) newRowScratch() *rowScratch {
	height := min(o.Up.Len(), rowsPerItem)
	down := o.like[hamiltonian.Down]
	s := &rowScratch{like: down.scratch(height)}
	if down.removed > 0 {
		s.in, s.out = make([]float64, height*o.Down.Len()), make([]float64, height*o.Down.Len())
	}
	if o.unlike != nil {
		s.unlike = o.unlike.scratch()
	}
	return s
}

// Flops returns the floating-point operations in the matrix products of one
// [Operator.Apply].
func (o *Operator) Flops() float64 {
	f := o.like[hamiltonian.Up].flops(o.Down.Len()) + o.like[hamiltonian.Down].flops(o.Up.Len())
	if o.unlike != nil {
		f += o.unlike.flops
	}
	return f
}

// Energy returns ⟨x|H|x⟩/⟨x|x⟩ of the state with coefficients re + i·im; im is
// nil for a real state. The norm must not be zero.
func (o *Operator) Energy(re, im []float64) float64 {
	image := make([]float64, o.Dim())
	var numerator, norm float64
	for _, x := range [][]float64{re, im} {
		if x != nil {
			o.Apply(image, x)
			numerator += dot(x, image)
			norm += dot(x, x)
		}
	}
	return numerator / norm
}

// chunk is the length of the pieces that sums over vectors are cut into.
const chunk = 1 << 15

// dot returns x·y, the same whatever the number of processors.
func dot(x, y []float64) float64 {
	parts := pieces(len(x), chunk)
	partial := make([]float64, parts)
	each(parts, func(i int) {
		from, to := piece(len(x), parts, i)
		partial[i] = gonum.Implementation{}.Ddot(to-from, x[from:to], 1, y[from:to], 1)
	})
	var sum float64
	for _, v := range partial {
		sum += v
	}
	return sum
}
