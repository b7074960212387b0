package record

import (
	"errors"
	"io"
)

// Stream is a record that is being read: a Reader, or a Memory. Next fills in
// one setting, or returns io.EOF after the last; see Reader.
type Stream interface {
	Header() *Header
	// Declared returns the numbers of settings and shots, −1 if unknown.
	Declared() (settings, shots int64)
	Next(*Setting) error
	// Digest identifies the content once Next has returned io.EOF; "" if the
	// stream has no file behind it.
	Digest() string
}

// Source opens a record from its beginning. Some estimates read it more than
// once.
type Source func() (Stream, error)

// Total returns the number of settings that a stream, not read from yet, declares.
// Where the end mark could not be found it reads on to the reason, with its place.
func Total(s Stream) (int64, error) {
	total, _ := s.Declared()
	if total >= 0 {
		return total, nil
	}
	var one Setting
	for {
		if err := s.Next(&one); err == io.EOF {
			return 0, errors.New("record does not tell its number of settings before it is read: open it as a file")
		} else if err != nil {
			return 0, err
		}
	}
}

// At returns the source of a record at hand as a whole, such as a memory-mapped
// file; see Open.
func At(name string, r io.ReaderAt, size int64) Source {
	return func() (Stream, error) {
		rd, err := Open(name, r, size)
		if err != nil {
			return nil, err
		}
		return rd, nil
	}
}

// Memory is a record held in memory, such as a simulated one.
type Memory struct {
	header   Header
	settings []*Setting
	next     int
}

// NewMemory returns a source of the given record. Header and settings are
// shared with the caller and must not change while it is read; they must be
// valid as a Writer would demand.
func NewMemory(h *Header, settings []*Setting) Source {
	return func() (Stream, error) { return &Memory{header: *h, settings: settings}, nil }
}

// Header implements Stream.
func (m *Memory) Header() *Header { return &m.header }

// Declared implements Stream.
func (m *Memory) Declared() (settings, shots int64) {
	for _, s := range m.settings {
		shots += s.Count()
	}
	return int64(len(m.settings)), shots
}

// Next implements Stream.
func (m *Memory) Next(s *Setting) error {
	if m.next == len(m.settings) {
		return io.EOF
	}
	s.CopyFrom(m.settings[m.next])
	m.next++
	return nil
}

// Digest implements Stream.
func (m *Memory) Digest() string { return "" }
