package prepared

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"io"
	"math"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// Write writes f; every number comes back from [Read] bit by bit. It refuses
// contents that a reader would.
func Write(w io.Writer, f *File) error {
	if err := f.validate(); err != nil {
		return err
	}
	head := headerOf(f)
	if err := head.validate(); err != nil {
		return err
	}
	sum := sha256.New()
	out := &writer{Writer: bufio.NewWriterSize(io.MultiWriter(w, sum), 1<<16)}
	text, err := json.Marshal(head)
	if err != nil {
		return err
	}
	first := fmt.Sprintf("%s%d\n", magic, version)
	length := len(first) + len(text) + 1
	padding := (alignment - length%alignment) % alignment
	if length+padding > headerLimit {
		return fmt.Errorf("header takes %d bytes, expected at most %d: shorten the provenance", length+padding, headerLimit)
	}
	out.WriteString(first)
	out.Write(text)
	out.Write(bytes.Repeat([]byte{' '}, padding))
	out.WriteByte('\n')

	h := f.Hamiltonian
	out.numbers(h.Constant)
	for spin := range head.OneBodySpins {
		for p := range h.Orbitals {
			for q := range p + 1 {
				out.numbers(h.OneBody[spin].At(p, q))
			}
		}
	}
	out.numbers(h.Factors.Sign...)
	for spin := range head.FactorSpins {
		out.numbers(h.Factors.Packed[spin]...)
	}
	out.dense(f.Orbitals)
	if f.Reference != nil {
		out.dense(f.Reference.Occupied[hamiltonian.Up])
		out.dense(f.Reference.Occupied[hamiltonian.Down])
	}
	if err := out.Flush(); err != nil {
		return err
	}
	_, err = w.Write(sum.Sum(nil))
	return err
}

// writer writes numbers; its errors stay with it until Flush.
type writer struct{ *bufio.Writer }

func (w *writer) numbers(values ...float64) {
	for _, v := range values {
		w.Write(binary.LittleEndian.AppendUint64(w.AvailableBuffer(), math.Float64bits(v)))
	}
}

func (w *writer) dense(a *mat.Dense) {
	if a == nil {
		return
	}
	rows, _ := a.Dims()
	for i := range rows {
		w.numbers(a.RawRowView(i)...)
	}
}
