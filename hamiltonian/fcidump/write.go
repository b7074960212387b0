package fcidump

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"math"
	"strconv"

	"leadline/hamiltonian"
	"leadline/hamiltonian/linalg"
)

// Options of [Write].
type Options struct {
	// Threshold leaves out integrals of at most this magnitude, hartree; at 0 only
	// those that vanish.
	Threshold float64
	// Symmetry holds the symmetry label of each orbital, or is nil for no symmetry.
	Symmetry []int
	// StateSymmetry is the symmetry label of the state; 0 stands for 1.
	StateSymmetry int
	// Progress, unless nil, is called with the numbers of orbital pairs done and
	// to do.
	Progress func(done, total int64)
}

// Write writes h as an integral interchange file with (pq|rs) = Σ_g s_g L^g_pq
// L^g_rs. Every number is written in full: reading gives the same ones, bit by
// bit. The form holds only spin-free Hamiltonians with symmetric factors; another
// one is an error. It takes npair·64 numbers of memory and M⁴·ng/4 flops.
func Write(ctx context.Context, w io.Writer, h *hamiltonian.Hamiltonian, options Options) error {
	switch {
	case !h.SpinFree():
		return fmt.Errorf("an integral interchange file holds spin-free integrals, this Hamiltonian differs between spins")
	case h.Factors.Antisymmetric > 0:
		return fmt.Errorf("an integral interchange file holds integrals of eightfold symmetry, this Hamiltonian has antisymmetric factors")
	case options.Symmetry != nil && len(options.Symmetry) != h.Orbitals:
		return fmt.Errorf("%d symmetry labels, expected one for each of %d orbitals", len(options.Symmetry), h.Orbitals)
	}
	out := bufio.NewWriterSize(w, chunk)
	fmt.Fprintf(out, "&FCI NORB=%d, NELEC=%d, MS2=%d,\n  ORBSYM=", h.Orbitals, h.Up+h.Down, h.Up-h.Down)
	for p := range h.Orbitals {
		label := 1
		if options.Symmetry != nil {
			label = options.Symmetry[p]
		}
		fmt.Fprintf(out, "%d,", label)
	}
	fmt.Fprintf(out, "\n  ISYM=%d,\n&END\n", max(1, options.StateSymmetry))

	l := &lineWriter{out: out, threshold: options.Threshold}
	if err := l.twoBody(ctx, h, options.Progress); err != nil {
		return err
	}
	for p := range h.Orbitals {
		for q := range p + 1 {
			l.write(h.OneBody[hamiltonian.Up].At(p, q), p+1, q+1, 0, 0)
		}
	}
	l.threshold = -1
	l.write(h.Constant, 0, 0, 0, 0)
	return out.Flush()
}

// lineWriter writes one integral per line.
type lineWriter struct {
	out       *bufio.Writer
	threshold float64
	line      []byte
}

func (l *lineWriter) write(value float64, indices ...int) {
	if math.Abs(value) <= l.threshold {
		return
	}
	l.line = l.line[:0]
	if !math.Signbit(value) {
		l.line = append(l.line, ' ')
	}
	l.line = strconv.AppendFloat(l.line, value, 'E', -1, 64)
	for _, i := range indices {
		l.line = append(l.line, ' ')
		l.line = strconv.AppendInt(l.line, int64(i), 10)
	}
	l.out.Write(append(l.line, '\n')) // errors stay with the writer
}

// twoBody writes the integrals in bands of pairs pq, each one matrix product.
func (l *lineWriter) twoBody(ctx context.Context, h *hamiltonian.Hamiltonian, progress func(done, total int64)) error {
	const band = 64
	pairs, count := hamiltonian.Pairs(h.Orbitals), h.Factors.Count()
	if count == 0 {
		return nil
	}
	packed := h.Factors.Packed[hamiltonian.Up]
	rows, left := make([]float64, band*pairs), make([]float64, band*count)
	p, q := 0, 0
	for from := 0; from < pairs; from += band {
		if err := ctx.Err(); err != nil {
			return err
		}
		to := min(pairs, from+band)
		for g, s := range h.Factors.Sign {
			for i, x := range h.Factors.Row(g, hamiltonian.Up)[from:to] {
				left[i*count+g] = s * x
			}
		}
		linalg.Gemm(false, false, to-from, to, count, 1, left, count, packed, pairs, 0, rows, pairs)
		for i := from; i < to; i++ {
			r, s := 0, 0
			for _, value := range rows[(i-from)*pairs : (i-from)*pairs+i+1] {
				l.write(value, p+1, q+1, r+1, s+1)
				if s++; s > r {
					r, s = r+1, 0
				}
			}
			if q++; q > p {
				p, q = p+1, 0
			}
		}
		if progress != nil {
			progress(int64(to), int64(pairs))
		}
		if err := l.flushed(); err != nil {
			return err
		}
	}
	return nil
}

// flushed returns the first error of the writer.
func (l *lineWriter) flushed() error {
	_, err := l.out.Write(nil)
	return err
}
