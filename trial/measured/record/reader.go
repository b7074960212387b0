package record

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"io"
)

// Reader streams a record in either form, told apart by their first bytes. It
// is for one goroutine.
type Reader struct {
	name   string
	s      *stream
	text   *textForm // nil for a packed record
	header *Header
	ids    idSet
	total  totals
	// declared is what the end mark says, where that could be looked up.
	declaredSettings, declaredShots int64
	err                             error
}

// totals is what the reader has counted so far.
type totals struct {
	settings, shots int64
	digest          [sha256.Size]byte
	done            bool
}

func (t *totals) compare(settings, shots int64) *Error {
	if settings != t.settings || shots != t.shots {
		return refusef(CodeCount, "end mark counts %d settings and %d shots, found %d and %d", settings, shots, t.settings, t.shots)
	}
	return nil
}

// NewReader reads the header of the record in r. The name stands in messages.
// The error is an *Error unless r itself fails.
func NewReader(name string, r io.Reader) (*Reader, error) {
	rd := &Reader{name: name, s: newStream(r), ids: make(idSet), declaredSettings: -1, declaredShots: -1}
	for rd.s.hi < len(packedMagic) && rd.s.err == nil {
		rd.s.fill()
	}
	var e *Error
	if bytes.HasPrefix(rd.s.buf[:rd.s.hi], []byte(packedMagic)) {
		rd.header, e = packedForm{rd.s}.header()
	} else {
		rd.text = &textForm{s: rd.s}
		rd.header, e = rd.text.header()
	}
	if rd.s.err != nil && rd.s.err != io.EOF {
		return nil, rd.s.err
	}
	if e != nil {
		return nil, rd.place(e, 0)
	}
	return rd, nil
}

// Open is NewReader for a record at hand as a whole, such as a memory-mapped
// file (golang.org/x/exp/mmap): it looks up the totals in the end mark first,
// see Declared. Reading goes on in pieces, so the record may be larger than
// memory.
func Open(name string, r io.ReaderAt, size int64) (*Reader, error) {
	rd, err := NewReader(name, io.NewSectionReader(r, 0, size))
	if err != nil {
		return nil, err
	}
	tail := make([]byte, min(size, tailBytes))
	if _, err := r.ReadAt(tail, size-int64(len(tail))); err != nil && err != io.EOF {
		return nil, err
	}
	if e := rd.lookUpTotals(tail); e != nil {
		e.File = name
		e.Offset = size
		return nil, e
	}
	return rd, nil
}

// lookUpTotals reads the counts of the end mark, which are checked when the
// reader comes there.
func (rd *Reader) lookUpTotals(tail []byte) *Error {
	missing := refusef(CodeTruncated, "record has no end mark")
	if rd.text == nil {
		if len(tail) < packedTrailer {
			return missing
		}
		b := tail[len(tail)-packedTrailer:]
		if le.Uint32(b) != trailerMark || le.Uint64(b[8:]) > 1<<62 {
			return missing
		}
		rd.declaredSettings, rd.declaredShots = int64(le.Uint32(b[4:])), int64(le.Uint64(b[8:]))
		return nil
	}
	last := bytes.TrimRight(tail, "\n")
	last = last[bytes.LastIndexByte(last, '\n')+1:]
	m, e := object(last)
	if e != nil {
		return nil // whatever is wrong there, Next meets it with its line
	}
	if _, ok := m["end"]; !ok {
		return nil
	}
	settings, e1 := wholeNumber(m["settings"], CodeCount, "settings")
	shots, ok := parseCount(m["shots"])
	if e1 == nil && ok {
		rd.declaredSettings, rd.declaredShots = int64(settings), shots
	}
	return nil
}

// Header returns the header, which belongs to the reader.
func (rd *Reader) Header() *Header { return rd.header }

// Declared returns the numbers of settings and shots that the end mark names,
// unverified, or −1 where the source could not be looked at from its end.
func (rd *Reader) Declared() (settings, shots int64) { return rd.declaredSettings, rd.declaredShots }

// Next reads and validates one setting into s. It returns io.EOF after the end
// mark once checksum and totals agree: only then is the record as a whole
// valid. After any error every call returns the same error.
func (rd *Reader) Next(s *Setting) error {
	if rd.err != nil {
		return rd.err
	}
	at := rd.s.offset()
	var e *Error
	if rd.text != nil {
		e = rd.text.setting(rd.header, s, &rd.total)
	} else {
		e = packedForm{rd.s}.setting(rd.header, s, &rd.total)
	}
	switch {
	case rd.s.err != nil && rd.s.err != io.EOF:
		rd.err = rd.s.err
	case e != nil:
		rd.err = rd.place(e, at)
	case rd.total.done:
		rd.err = io.EOF
	case !rd.ids.add(s.ID):
		rd.err = rd.place(refusef(CodeDuplicate, "setting id %d appears twice", s.ID), at)
	default:
		rd.total.settings++
		rd.total.shots += s.Count()
	}
	return rd.err
}

// Settings returns the number of settings read so far.
func (rd *Reader) Settings() int64 { return rd.total.settings }

// Shots returns the number of shots read so far.
func (rd *Reader) Shots() int64 { return rd.total.shots }

// Digest returns the verified SHA-256 of the content in hexadecimal; "" before
// Next has returned io.EOF.
func (rd *Reader) Digest() string {
	if !rd.total.done {
		return ""
	}
	return hex.EncodeToString(rd.total.digest[:])
}

// place fills in where a refusal happened.
func (rd *Reader) place(e *Error, offset int64) *Error {
	e.File, e.Offset = rd.name, offset
	if rd.text != nil {
		e.Line = rd.text.line
	}
	return e
}
