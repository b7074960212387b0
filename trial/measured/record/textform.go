package record

import (
	"bytes"
	"encoding/hex"
	"encoding/json"
	"io"
	"strings"
)

// textForm reads JSON Lines.
type textForm struct {
	s    *stream
	line int64 // of the line handed out last
}

// next returns one line without its end; whole is false for a last line
// without a line end. At the end of the source it returns io.EOF.
func (t *textForm) next() (line []byte, whole bool, e *Error) {
	seen := 0
	s := t.s
	for {
		if i := bytes.IndexByte(s.buf[s.lo+seen:s.hi], '\n'); i >= 0 {
			line = s.buf[s.lo : s.lo+seen+i]
			t.line++
			return line, true, nil
		}
		seen = s.hi - s.lo
		if seen > maxLine {
			t.line++
			return nil, false, refusef(CodeLength, "line has more than %d bytes", maxLine)
		}
		if s.err != nil {
			t.line++
			return s.buf[s.lo:s.hi], false, nil
		}
		s.fill()
	}
}

// skip marks the line as handed out.
func (t *textForm) skip(line []byte, whole bool) {
	t.s.lo += len(line)
	if whole {
		t.s.lo++
	}
}

func (t *textForm) header() (*Header, *Error) {
	line, whole, e := t.next()
	if e != nil {
		return nil, e
	}
	if len(line) > maxHeader {
		return nil, refusef(CodeHeader, "header has %d bytes, expected at most %d", len(line), maxHeader)
	}
	if !whole && len(line) == 0 {
		return nil, refusef(CodeTruncated, "record is empty, expected a header")
	}
	h, e := parseHeader(line)
	if e != nil {
		return nil, e
	}
	t.skip(line, whole)
	return h, nil
}

func (t *textForm) setting(h *Header, s *Setting, total *totals) *Error {
	line, whole, e := t.next()
	if e != nil {
		return e
	}
	if !whole && len(line) == 0 {
		return refusef(CodeTruncated, "record ends after %d settings without its end mark", total.settings)
	}
	if whole && scanSetting(line, h, s) {
		t.skip(line, whole)
		return s.validate(h)
	}
	m, e := object(line)
	if e != nil {
		return e
	}
	if _, ok := m["end"]; ok {
		return t.end(m, line, whole, total)
	}
	if e := parseSetting(m, h, s); e != nil {
		return e
	}
	if !whole {
		return refusef(CodeTruncated, "last line has no line end and no end mark follows it")
	}
	t.skip(line, whole)
	return s.validate(h)
}

// end checks the end mark; total.done then stops the reader.
func (t *textForm) end(m map[string]json.RawMessage, line []byte, whole bool, total *totals) *Error {
	for _, key := range []string{"end", "settings", "shots", "sha256"} {
		if _, ok := m[key]; !ok {
			return refusef(CodeJSON, "end mark lacks key %q", key)
		}
	}
	if len(m) != 4 || string(m["end"]) != "true" {
		return refusef(CodeJSON, "end mark is %.80q, expected end:true, settings, shots and sha256 only", line)
	}
	var settings, shots int64
	var sum string
	if json.Unmarshal(m["settings"], &settings) != nil || json.Unmarshal(m["shots"], &shots) != nil {
		return refusef(CodeCount, "end mark counts %.40s settings and %.40s shots, expected whole numbers", m["settings"], m["shots"])
	}
	if json.Unmarshal(m["sha256"], &sum) != nil || !isHash(strings.ToLower(sum)) {
		return refusef(CodeChecksum, "sha256 is %.80s, expected 64 hexadecimal digits", m["sha256"])
	}
	total.digest = t.s.digest()
	if found := hex.EncodeToString(total.digest[:]); found != strings.ToLower(sum) {
		return refusef(CodeChecksum, "content has SHA-256 %s, end mark says %s: the record was changed after it was written", found, sum)
	}
	if e := total.compare(settings, shots); e != nil {
		return e
	}
	t.skip(line, whole)
	rest, _, e := t.next()
	if e != nil || len(rest) > 0 || t.s.lo < t.s.hi {
		return refusef(CodeJSON, "text after the end mark")
	}
	if t.s.err != io.EOF {
		return refusef(CodeTruncated, "%v", t.s.err)
	}
	total.done = true
	return nil
}
