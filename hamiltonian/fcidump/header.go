package fcidump

import (
	"bufio"
	"fmt"
	"io"
	"strconv"
	"strings"

	"leadline/hamiltonian"
)

// headerLimit is the largest header read, in bytes; a thousand orbitals with
// their symmetry labels take about 4000.
const headerLimit = 1 << 20

// header is what a file says before its integrals.
type header struct {
	sector        hamiltonian.Sector
	symmetry      []int
	stateSymmetry int
}

// entry is one KEY=value,value,… of the header.
type entry struct {
	key    string // upper case
	values []string
	line   int
}

// headerReader splits the header into entries.
type headerReader struct {
	in      *bufio.Reader
	line    int
	end     int // line of the end of the header
	read    int
	entries []entry
	words   []string // not yet assigned to a key
}

// fault is an error at a line of the file.
type fault struct {
	line int
	text string
}

func (e *fault) Error() string { return e.text }

func (h *headerReader) fail(format string, args ...any) error {
	return &fault{h.line, fmt.Sprintf(format, args...)}
}

// next returns the next byte; the end of the file is an error.
func (h *headerReader) next() (byte, error) {
	c, err := h.in.ReadByte()
	switch h.read++; {
	case err == io.EOF && h.read == 1:
		return 0, &fault{0, "file is empty"}
	case err == io.EOF:
		return 0, h.fail("file ends inside the header, expected &END or / after it")
	case err != nil:
		return 0, err
	case h.read > headerLimit:
		return 0, h.fail("header has no end within %d bytes, expected &END or /", headerLimit)
	case h.breaks(c):
		h.line++
	case c < ' ' && !blank(c), c == 0x7f:
		return 0, h.fail("byte 0x%02x in the header, expected text", c)
	}
	return c, nil
}

func blank(c byte) bool { return c == ' ' || c == '\t' || c == '\n' || c == '\r' }

// breaks reports whether c, the byte just read, ends a line: a line feed or a
// carriage return without one.
func (h *headerReader) breaks(c byte) bool {
	if c != '\r' {
		return c == '\n'
	}
	next, _ := h.in.Peek(1)
	return len(next) == 0 || next[0] != '\n'
}

// parse reads up to the end of the header and of its line.
func (h *headerReader) parse() error {
	if mark, _ := h.in.Peek(3); string(mark) == "\xef\xbb\xbf" {
		h.in.Discard(3) // byte order mark
	}
	if err := h.start(); err != nil {
		return err
	}
	var word []byte
	for {
		c, err := h.next()
		if err != nil {
			return err
		}
		switch {
		case c == '\'' || c == '"':
			for quote := c; ; {
				if c, err = h.next(); err != nil {
					return err
				}
				if c == quote {
					break
				}
				word = append(word, c)
			}
			continue
		case !blank(c) && !strings.ContainsRune(",=/!", rune(c)):
			word = append(word, c)
			continue
		}
		if len(word) > 0 {
			text := string(word)
			word = word[:0]
			if strings.EqualFold(text, "&END") || strings.EqualFold(text, "$END") {
				return h.finish(c)
			}
			h.words = append(h.words, text)
		}
		switch c {
		case '=':
			if len(h.words) == 0 {
				return h.fail("= without a key before it in the header")
			}
			last := len(h.words) - 1
			key := strings.ToUpper(h.words[last])
			h.assign(h.words[:last])
			for _, e := range h.entries {
				if e.key == key {
					return h.fail("%s is given twice in the header, first at line %d", key, e.line)
				}
			}
			h.entries, h.words = append(h.entries, entry{key: key, line: h.line}), nil
		case '!':
			for c != '\n' {
				if c, err = h.next(); err != nil {
					return err
				}
			}
		case '/':
			return h.finish(' ')
		}
	}
}

// start reads the opening &FCI.
func (h *headerReader) start() error {
	peek, err := h.in.Peek(16)
	if err != nil && err != io.EOF {
		return err
	}
	opening := string(peek)
	var word []byte
	for line := 1; len(word) < 5; {
		c, err := h.next()
		if at, is := err.(*fault); is && at.line > 0 && len(word) < 4 {
			break
		} else if err != nil {
			return err
		}
		switch {
		case !blank(c):
			word, line = append(word, c), h.line
		case strings.EqualFold(string(word), "&FCI") || strings.EqualFold(string(word), "$FCI"):
			return nil
		case len(word) > 0:
			return &fault{line, fmt.Sprintf("file starts with %q, expected &FCI", opening)}
		}
	}
	return h.fail("file starts with %q, expected &FCI", opening)
}

// assign gives words to the latest key.
func (h *headerReader) assign(words []string) {
	if n := len(h.entries); n > 0 {
		h.entries[n-1].values = append(h.entries[n-1].values, words...)
	}
}

// finish reads what is left of the line of the header's end, c being read.
func (h *headerReader) finish(c byte) error {
	h.assign(h.words)
	for h.end = h.line; !h.breaks(c); {
		if !blank(c) {
			return h.fail("text after the end of the header, expected a new line")
		}
		var err error
		if c, err = h.in.ReadByte(); err == io.EOF {
			return nil
		} else if err != nil {
			return err
		}
		if h.breaks(c) {
			h.line++
			return nil
		}
	}
	h.end-- // c has been counted
	return nil
}

// result interprets the entries.
func (h *headerReader) result() (header, error) {
	var out header
	fail := func(format string, args ...any) error {
		return &fault{h.end, fmt.Sprintf(format, args...)}
	}
	var orbitals, electrons, unpaired *int
	for _, e := range h.entries {
		var err error
		switch e.key {
		case "NORB":
			orbitals, err = e.integer()
		case "NELEC":
			electrons, err = e.integer()
		case "MS2":
			unpaired, err = e.integer()
		case "ISYM":
			var label *int
			if label, err = e.integer(); err == nil {
				out.stateSymmetry = *label
			}
		case "ORBSYM":
			out.symmetry, err = e.integers()
		case "IUHF", "UHF":
			if text := strings.Trim(strings.ToUpper(strings.Join(e.values, "")), "."); text != "" && text[0] != 'F' && text != "0" {
				err = &fault{e.line, fmt.Sprintf("integrals are spin-resolved (%s=%s), expected spin-free integrals over one set of orbitals, as a restricted calculation gives", e.key, e.values[0])}
			}
		}
		if err != nil {
			return out, err
		}
	}
	switch {
	case orbitals == nil:
		return out, fail("header has no NORB")
	case electrons == nil:
		return out, fail("header has no NELEC")
	case unpaired == nil:
		unpaired = new(int)
	}
	if *orbitals < 1 {
		return out, fail("NORB=%d, expected at least 1", *orbitals)
	}
	if *electrons < 0 || *electrons > 2**orbitals {
		return out, fail("NELEC=%d, expected 1 to %d (two per orbital)", *electrons, 2**orbitals)
	}
	if *unpaired < -*electrons || *unpaired > *electrons {
		return out, fail("MS2=%d, expected at most NELEC=%d", *unpaired, *electrons)
	}
	if (*electrons+*unpaired)%2 != 0 {
		return out, fail("NELEC=%d and MS2=%d contradict each other, expected both even or both odd (MS2 is the number of up minus down electrons)", *electrons, *unpaired)
	}
	out.sector = hamiltonian.Sector{Orbitals: *orbitals, Up: (*electrons + *unpaired) / 2, Down: (*electrons - *unpaired) / 2}
	if err := out.sector.Validate(); err != nil {
		return out, fail("NORB=%d, NELEC=%d, MS2=%d: %v", *orbitals, *electrons, *unpaired, err)
	}
	if out.symmetry != nil && len(out.symmetry) != *orbitals {
		return out, fail("ORBSYM has %d labels, expected NORB=%d", len(out.symmetry), *orbitals)
	}
	return out, nil
}

func (e entry) integer() (*int, error) {
	if len(e.values) != 1 {
		return nil, &fault{e.line, fmt.Sprintf("%s has %d values, expected one integer", e.key, len(e.values))}
	}
	v, err := strconv.Atoi(e.values[0])
	if err != nil || v != int(int32(v)) {
		return nil, &fault{e.line, fmt.Sprintf("%s=%.40q, expected an integer", e.key, e.values[0])}
	}
	return &v, nil
}

// integers reads a list, with Fortran's repeat counts (4*1).
func (e entry) integers() ([]int, error) {
	out := []int{}
	for _, text := range e.values {
		count := 1
		before, after, repeated := strings.Cut(text, "*")
		if repeated {
			var err error
			if count, err = strconv.Atoi(before); err != nil || count < 0 || len(out)+count > headerLimit {
				return nil, &fault{e.line, fmt.Sprintf("%s holds %.40q, expected integers", e.key, text)}
			}
		} else {
			after = text
		}
		v, err := strconv.Atoi(after)
		if err != nil {
			return nil, &fault{e.line, fmt.Sprintf("%s holds %.40q, expected integers", e.key, text)}
		}
		for range count {
			out = append(out, v)
		}
	}
	return out, nil
}
