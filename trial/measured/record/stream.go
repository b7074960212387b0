package record

import (
	"crypto/sha256"
	"hash"
	"io"
)

const (
	// maxHeader bounds the header, so that a length read from a file cannot
	// make the reader take memory.
	maxHeader = 1 << 20
	// maxLine bounds a line of text and the outcomes of a packed setting.
	maxLine = 64 << 20
	// bufferSize is what is read from the source at once.
	bufferSize = 256 << 10
)

// stream hands out consecutive pieces of a source and hashes them later, in
// large blocks, up to any piece that the caller wants left out.
type stream struct {
	source io.Reader
	buf    []byte
	lo, hi int   // the bytes not handed out yet are buf[lo:hi]
	hashed int   // buf[:hashed] is in the hash
	base   int64 // position in the source of buf[0]
	err    error // from the source, after buf[:hi]
	sum    hash.Hash
}

func newStream(source io.Reader) *stream {
	return &stream{source: source, buf: make([]byte, bufferSize), sum: sha256.New()}
}

// offset is the position in the source of the next byte.
func (s *stream) offset() int64 { return s.base + int64(s.lo) }

// fill reads more behind buf[lo:hi], moving that to the front of the buffer.
func (s *stream) fill() {
	s.hash()
	if s.lo > 0 {
		copy(s.buf, s.buf[s.lo:s.hi])
		s.base += int64(s.lo)
		s.hi -= s.lo
		s.lo, s.hashed = 0, 0
	}
	if s.hi == len(s.buf) {
		s.buf = append(s.buf, make([]byte, len(s.buf))...)
	}
	for tries := 0; s.err == nil; tries++ {
		n, err := s.source.Read(s.buf[s.hi:])
		s.hi += n
		s.err = err
		if n > 0 {
			return
		}
		if tries == 100 {
			s.err = io.ErrNoProgress
		}
	}
}

// hash brings the hash up to the bytes handed out so far.
func (s *stream) hash() {
	s.sum.Write(s.buf[s.hashed:s.lo])
	s.hashed = s.lo
}

// digest is the hash of all bytes handed out so far.
func (s *stream) digest() (d [sha256.Size]byte) {
	s.hash()
	s.sum.Sum(d[:0])
	return d
}

// need hands out n bytes, valid until the next call, or fewer at the end.
func (s *stream) need(n int) []byte {
	for s.hi-s.lo < n && s.err == nil {
		s.fill()
	}
	n = min(n, s.hi-s.lo)
	piece := s.buf[s.lo : s.lo+n]
	s.lo += n
	return piece
}
