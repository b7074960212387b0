package record

import (
	"bufio"
	"crypto/sha256"
	"encoding/hex"
	"hash"
	"io"
	"math"
	"strconv"
)

// Writer writes a record. It validates as the reader does, so that nothing it
// writes is refused. It is for one goroutine.
type Writer struct {
	w      *bufio.Writer
	sum    hash.Hash
	header Header
	packed bool
	ids    idSet
	total  totals
	buf    []byte
	err    error
}

// NewTextWriter writes the header of a record as JSON Lines.
func NewTextWriter(w io.Writer, h *Header) (*Writer, error) { return newWriter(w, h, false) }

// NewPackedWriter writes the header of a packed record.
func NewPackedWriter(w io.Writer, h *Header) (*Writer, error) { return newWriter(w, h, true) }

func newWriter(w io.Writer, h *Header, packed bool) (*Writer, error) {
	line, e := h.marshal()
	if e != nil {
		return nil, e
	}
	wr := &Writer{w: bufio.NewWriterSize(w, bufferSize), sum: sha256.New(), header: *h, packed: packed, ids: make(idSet)}
	if packed {
		wr.buf = append(wr.buf, packedMagic...)
		wr.buf = le.AppendUint32(wr.buf, uint32(len(line)))
		wr.buf = append(wr.buf, line...)
	} else {
		wr.buf = append(append(wr.buf, line...), '\n')
	}
	wr.flush()
	return wr, wr.err
}

// Write writes one setting. The setting stays the caller's.
func (wr *Writer) Write(s *Setting) error {
	if wr.err != nil {
		return wr.err
	}
	if e := s.validate(&wr.header); e != nil {
		wr.err = e
		return e
	}
	if !wr.ids.add(s.ID) {
		wr.err = refusef(CodeDuplicate, "setting id %d appears twice", s.ID)
		return wr.err
	}
	if wr.packed {
		if s.ID == trailerMark {
			wr.err = refusef(CodeUnsupported, "setting id %d cannot stand in a packed record", s.ID)
			return wr.err
		}
		wr.appendPacked(s)
	} else {
		wr.appendText(s)
	}
	wr.total.settings++
	wr.total.shots += s.Count()
	wr.flush()
	return wr.err
}

// Close writes the end mark. It does not close the underlying writer.
func (wr *Writer) Close() error {
	if wr.err != nil {
		return wr.err
	}
	if wr.packed {
		wr.buf = le.AppendUint32(wr.buf[:0], trailerMark)
		wr.buf = le.AppendUint32(wr.buf, uint32(wr.total.settings))
		wr.buf = le.AppendUint64(wr.buf, uint64(wr.total.shots))
		wr.sum.Write(wr.buf)
		wr.buf = wr.sum.Sum(wr.buf)
	} else {
		wr.buf = append(wr.buf[:0], `{"end":true,"settings":`...)
		wr.buf = strconv.AppendInt(wr.buf, wr.total.settings, 10)
		wr.buf = append(wr.buf, `,"shots":`...)
		wr.buf = strconv.AppendInt(wr.buf, wr.total.shots, 10)
		wr.buf = append(wr.buf, `,"sha256":"`...)
		wr.buf = hex.AppendEncode(wr.buf, wr.sum.Sum(nil))
		wr.buf = append(wr.buf, "\"}\n"...)
	}
	if _, wr.err = wr.w.Write(wr.buf); wr.err == nil {
		wr.err = wr.w.Flush()
	}
	return wr.err
}

// flush hashes and writes buf.
func (wr *Writer) flush() {
	wr.sum.Write(wr.buf)
	_, wr.err = wr.w.Write(wr.buf)
	wr.buf = wr.buf[:0]
}

func (wr *Writer) appendText(s *Setting) {
	n := wr.header.Qubits
	b := append(wr.buf, `{"s":`...)
	b = strconv.AppendUint(b, uint64(s.ID), 10)
	switch wr.header.Ensemble {
	case Matching:
		b = append(b, `,"pairs":[`...)
		for j := range n {
			b = comma(b, j)
			b = append(b, '[')
			b = strconv.AppendUint(b, uint64(s.Pairs[2*j]), 10)
			b = append(b, ',')
			b = strconv.AppendUint(b, uint64(s.Pairs[2*j+1]), 10)
			b = append(b, ']')
		}
		b = append(b, ']')
	case Lagrangian:
		b = wordList(append(b, `,"R":`...), s.R, n)
		b = wordList(append(b, `,"B":`...), s.B, len(s.R))
		if len(s.GL) > 0 {
			b = wordList(append(b, `,"gl":`...), s.GL, n)
		}
		if len(s.GL) > 0 || s.X != 0 {
			b = append(appendBits(append(b, `,"x":"`...), s.X, n, Q0First), '"')
		}
	case Tableau:
		b = wordList(append(b, `,"x":`...), s.TX, n)
		b = wordList(append(b, `,"z":`...), s.TZ, n)
		b = append(appendBits(append(b, `,"r":"`...), s.TSign, n, Q0First), '"')
	case Orthogonal:
		b = append(b, `,"Q":[`...)
		for i := range 2 * n {
			b = append(comma(b, i), '[')
			for j := range 2 * n {
				b = strconv.AppendFloat(comma(b, j), s.Q[i*2*n+j], 'g', -1, 64)
			}
			b = append(b, ']')
		}
		b = append(b, ']')
	}
	b = append(b, `,"shots":{`...)
	for i, o := range s.Shots {
		b = appendBits(append(comma(b, i), '"'), o.Bits, n, wr.header.Bits)
		b = strconv.AppendUint(append(b, `":`...), uint64(o.Count), 10)
	}
	wr.buf = append(b, "}}\n"...)
}

func comma(b []byte, i int) []byte {
	if i > 0 {
		b = append(b, ',')
	}
	return b
}

func wordList(b []byte, words []uint64, n int) []byte {
	b = append(b, '[')
	for i, w := range words {
		b = append(appendBits(append(comma(b, i), '"'), w, n, Q0First), '"')
	}
	return append(b, ']')
}

func (wr *Writer) appendPacked(s *Setting) {
	b := le.AppendUint32(wr.buf, s.ID)
	switch wr.header.Ensemble {
	case Matching:
		b = append(b, s.Pairs...)
	case Lagrangian:
		var flags byte
		if len(s.GL) > 0 {
			flags |= flagGL
		}
		if len(s.GL) > 0 || s.X != 0 {
			flags |= flagX
		}
		b = append(b, byte(len(s.R)), flags)
		b = packWords(packWords(packWords(b, s.R), s.B), s.GL)
		if flags&flagX != 0 {
			b = le.AppendUint64(b, s.X)
		}
	case Tableau:
		b = packWords(packWords(b, s.TX), s.TZ)
		b = le.AppendUint64(b, s.TSign)
	case Orthogonal:
		for _, v := range s.Q {
			b = le.AppendUint64(b, math.Float64bits(v))
		}
	}
	b = le.AppendUint32(b, uint32(len(s.Shots)))
	for _, o := range s.Shots {
		b = le.AppendUint64(b, o.Bits)
		b = le.AppendUint32(b, o.Count)
	}
	wr.buf = b
}

func packWords(b []byte, words []uint64) []byte {
	for _, w := range words {
		b = le.AppendUint64(b, w)
	}
	return b
}
