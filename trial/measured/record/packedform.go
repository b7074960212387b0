package record

import (
	"crypto/sha256"
	"encoding/binary"
	"io"
	"math"
)

// packedMagic begins a packed record.
const packedMagic = "OVSHOT1\n"

// trailerMark stands where the next setting's id would be.
const trailerMark = 0xFFFFFFFF

const (
	flagGL = 1 << iota
	flagX
)

// packedTrailer is the length of the trailer.
const packedTrailer = 4 + 4 + 8 + sha256.Size

// packedForm reads the packed binary form.
type packedForm struct {
	s *stream
}

var le = binary.LittleEndian

// piece is need with a refusal for a short file.
func (p packedForm) piece(n int, what string) ([]byte, *Error) {
	b := p.s.need(n)
	if len(b) < n {
		if p.s.err != nil && p.s.err != io.EOF {
			return nil, refusef(CodeTruncated, "%v", p.s.err)
		}
		return nil, refusef(CodeTruncated, "file ends within %s: %d bytes left, expected %d", what, len(b), n)
	}
	return b, nil
}

func (p packedForm) header() (*Header, *Error) {
	b, e := p.piece(len(packedMagic)+4, "the header")
	if e != nil {
		return nil, e
	}
	length := le.Uint32(b[len(packedMagic):])
	if length > maxHeader {
		return nil, refusef(CodeHeader, "header length is %d bytes, expected at most %d", length, maxHeader)
	}
	if b, e = p.piece(int(length), "the header"); e != nil {
		return nil, e
	}
	return parseHeader(b)
}

func (p packedForm) setting(h *Header, s *Setting, total *totals) *Error {
	b, e := p.piece(4, "the id of a setting")
	if e != nil {
		return e
	}
	s.reset()
	s.ID = le.Uint32(b)
	if s.ID == trailerMark {
		return p.end(total)
	}
	n := h.Qubits
	switch h.Ensemble {
	case Matching:
		if b, e = p.piece(2*n, "pairs"); e == nil {
			s.Pairs = append(s.Pairs, b...)
		}
	case Lagrangian:
		e = p.form(s, n)
	case Tableau:
		if b, e = p.piece(8*(2*n+1), "a tableau"); e == nil {
			s.TX = appendWords(s.TX, b[:8*n])
			s.TZ = appendWords(s.TZ, b[8*n:16*n])
			s.TSign = le.Uint64(b[16*n:])
		}
	case Orthogonal:
		if b, e = p.piece(8*4*n*n, "Q"); e == nil {
			for ; len(b) > 0; b = b[8:] {
				s.Q = append(s.Q, math.Float64frombits(le.Uint64(b)))
			}
		}
	}
	if e != nil {
		return e
	}
	if e := p.shots(s); e != nil {
		return e
	}
	return s.validate(h)
}

func (p packedForm) form(s *Setting, n int) *Error {
	b, e := p.piece(2, "R")
	if e != nil {
		return e
	}
	k, flags := int(b[0]), b[1]
	if k > n {
		return refusef(CodeLength, "R has %d rows, expected at most %d", k, n)
	}
	if flags&^(flagGL|flagX) != 0 {
		return refusef(CodeUnsupported, "flags are %#x, expected at most %#x", flags, flagGL|flagX)
	}
	words := 2 * k
	if flags&flagGL != 0 {
		words += n
	}
	if flags&flagX != 0 {
		words++
	}
	if b, e = p.piece(8*words, "a quadratic form"); e != nil {
		return e
	}
	s.R = appendWords(s.R, b[:8*k])
	s.B = appendWords(s.B, b[8*k:16*k])
	b = b[16*k:]
	if flags&flagGL != 0 {
		s.GL = appendWords(s.GL, b[:8*n])
		b = b[8*n:]
	}
	if flags&flagX != 0 {
		s.X = le.Uint64(b)
	}
	return nil
}

func (p packedForm) shots(s *Setting) *Error {
	b, e := p.piece(4, "the number of outcomes")
	if e != nil {
		return e
	}
	// The outcomes are read in pieces: a count that lies ends with the file.
	const atOnce = 4096
	count := le.Uint32(b)
	if int64(count)*12 > maxLine {
		return refusef(CodeLength, "setting %d has %d distinct outcomes, expected at most %d", s.ID, count, maxLine/12)
	}
	for left := int(count); left > 0; {
		m := min(left, atOnce)
		if b, e = p.piece(12*m, "outcomes"); e != nil {
			return e
		}
		for ; len(b) >= 12; b = b[12:] {
			s.Shots = append(s.Shots, Outcome{le.Uint64(b), le.Uint32(b[8:])})
		}
		left -= m
	}
	return nil
}

func (p packedForm) end(total *totals) *Error {
	b, e := p.piece(12, "the trailer")
	if e != nil {
		return e
	}
	settings, shots := int64(le.Uint32(b)), le.Uint64(b[4:])
	total.digest = p.s.digest()
	if b, e = p.piece(sha256.Size, "the trailer"); e != nil {
		return e
	}
	if [sha256.Size]byte(b) != total.digest {
		return refusef(CodeChecksum, "content has SHA-256 %x, trailer says %x: the record was changed after it was written", total.digest, b)
	}
	if shots > math.MaxInt64 {
		return refusef(CodeCount, "trailer counts %d shots", shots)
	}
	if e := total.compare(settings, int64(shots)); e != nil {
		return e
	}
	if len(p.s.need(1)) > 0 {
		return refusef(CodeLength, "bytes after the trailer")
	}
	if p.s.err != io.EOF {
		return refusef(CodeTruncated, "%v", p.s.err)
	}
	total.done = true
	return nil
}

func appendWords(dst []uint64, b []byte) []uint64 {
	for ; len(b) >= 8; b = b[8:] {
		dst = append(dst, le.Uint64(b))
	}
	return dst
}
