package record

import (
	"encoding/json"
	"math"
	"strconv"
)

// settingKeys lists the keys of each ensemble's setting, the optional ones
// marked false.
func settingKeys(e Ensemble) map[string]bool {
	switch e {
	case Matching:
		return map[string]bool{"pairs": true}
	case Lagrangian:
		return map[string]bool{"R": true, "B": true, "gl": false, "x": false}
	case Tableau:
		return map[string]bool{"x": true, "z": true, "r": true}
	default:
		return map[string]bool{"Q": true}
	}
}

// parseSetting is the reader of setting lines that decides: it accepts any
// JSON object of the right content and explains each refusal.
func parseSetting(m map[string]json.RawMessage, h *Header, s *Setting) *Error {
	s.reset()
	keys := settingKeys(h.Ensemble)
	for key := range m {
		_, known := keys[key]
		if known || key == "s" || key == "shots" {
			continue
		}
		for _, other := range []Ensemble{Lagrangian, Tableau, Matching, Orthogonal} {
			if _, foreign := settingKeys(other)[key]; foreign {
				return refusef(CodeEnsemble, "setting has key %q of ensemble %s, header says %s", key, other, h.Ensemble)
			}
		}
		return refusef(CodeJSON, "setting has unknown key %.80q", key)
	}
	for _, key := range []string{"s", "shots", "pairs", "R", "B", "x", "z", "r", "Q"} {
		if _, ok := m[key]; !ok && (key == "s" || key == "shots" || keys[key]) {
			return refusef(CodeJSON, "setting lacks key %q", key)
		}
	}
	var e *Error
	if s.ID, e = wholeNumber(m["s"], CodeNumber, "s"); e != nil {
		return e
	}
	n := h.Qubits
	switch h.Ensemble {
	case Matching:
		s.Pairs, e = parsePairs(s.Pairs, m["pairs"], n)
	case Lagrangian:
		e = parseForm(s, m, n)
	case Tableau:
		if s.TX, e = parseWords(s.TX, m["x"], "x", n, n); e != nil {
			return e
		}
		if s.TZ, e = parseWords(s.TZ, m["z"], "z", n, n); e != nil {
			return e
		}
		s.TSign, e = parseWord(m["r"], "r", n, Q0First)
	case Orthogonal:
		s.Q, e = parseMatrix(s.Q, m["Q"], 2*n)
	}
	if e != nil {
		return e
	}
	return parseShots(s, m["shots"], h)
}

func parseForm(s *Setting, m map[string]json.RawMessage, n int) (e *Error) {
	var rows []json.RawMessage
	if json.Unmarshal(m["R"], &rows) == nil && len(rows) > n {
		return refusef(CodeLength, "R has %d rows, expected at most %d", len(rows), n)
	}
	if s.R, e = parseWords(s.R, m["R"], "R", len(rows), n); e != nil {
		return e
	}
	if s.B, e = parseWords(s.B, m["B"], "B", len(rows), len(rows)); e != nil {
		return e
	}
	if gl, ok := m["gl"]; ok {
		if s.GL, e = parseWords(s.GL, gl, "gl", n, n); e != nil {
			return e
		}
	}
	if x, ok := m["x"]; ok {
		s.X, e = parseWord(x, "x", n, Q0First)
	}
	return e
}

// wholeNumber reads digits only: no sign, fraction or exponent.
func wholeNumber(raw json.RawMessage, code Code, what string) (uint32, *Error) {
	v, err := strconv.ParseUint(string(raw), 10, 32)
	if err != nil {
		return 0, refusef(code, "%s is %.40s, expected a whole number up to 4294967295", what, raw)
	}
	return uint32(v), nil
}

func parsePairs(dst []uint8, raw json.RawMessage, n int) ([]uint8, *Error) {
	var pairs [][]json.RawMessage
	if err := json.Unmarshal(raw, &pairs); err != nil {
		return dst, refusef(CodePairing, "pairs is %.40q, expected %d pairs [a,b]", raw, n)
	}
	if len(pairs) != n {
		return dst, refusef(CodeLength, "pairs has %d entries, expected %d", len(pairs), n)
	}
	for j, p := range pairs {
		if len(p) != 2 {
			return dst, refusef(CodeLength, "pairs[%d] has %d entries, expected 2", j, len(p))
		}
		for _, entry := range p {
			a, e := wholeNumber(entry, CodePairing, "Majorana index in pairs")
			if e != nil || a >= uint32(2*n) {
				return dst, refusef(CodePairing, "pairs[%d] holds %.40s, expected a whole number from 0 to %d", j, entry, 2*n-1)
			}
			dst = append(dst, uint8(a))
		}
	}
	return dst, nil
}

func parseWord(raw json.RawMessage, what string, n int, order BitOrder) (uint64, *Error) {
	var text string
	if err := json.Unmarshal(raw, &text); err != nil || string(raw) == "null" {
		return 0, refusef(CodeBits, "%s is %.40q, expected a string of %d bits", what, raw, n)
	}
	word, e := parseBits([]byte(text), n, order)
	if e != nil {
		return 0, refusef(e.Code, "%s: %s", what, e.Text)
	}
	return word, nil
}

func parseWords(dst []uint64, raw json.RawMessage, what string, count, n int) ([]uint64, *Error) {
	var list []json.RawMessage
	if err := json.Unmarshal(raw, &list); err != nil || list == nil {
		return dst, refusef(CodeBits, "%s is %.40q, expected a list of bit strings", what, raw)
	}
	if len(list) != count {
		return dst, refusef(CodeLength, "%s has %d rows, expected %d", what, len(list), count)
	}
	for _, entry := range list {
		w, e := parseWord(entry, what, n, Q0First)
		if e != nil {
			return dst, e
		}
		dst = append(dst, w)
	}
	return dst, nil
}

func parseMatrix(dst []float64, raw json.RawMessage, n int) ([]float64, *Error) {
	var rows [][]json.RawMessage
	if err := json.Unmarshal(raw, &rows); err != nil {
		return dst, refusef(CodeNumber, "Q is %.40q, expected a matrix", raw)
	}
	if len(rows) != n {
		return dst, refusef(CodeLength, "Q has %d rows, expected %d", len(rows), n)
	}
	for i, row := range rows {
		if len(row) != n {
			return dst, refusef(CodeLength, "row %d of Q has %d entries, expected %d", i, len(row), n)
		}
		for _, entry := range row {
			var v float64
			if err := json.Unmarshal(entry, &v); err != nil || string(entry) == "null" || math.IsInf(v, 0) {
				return dst, refusef(CodeNumber, "row %d of Q holds %.40s, expected a finite number", i, entry)
			}
			dst = append(dst, v)
		}
	}
	return dst, nil
}

func parseShots(s *Setting, raw json.RawMessage, h *Header) *Error {
	var shots map[string]json.RawMessage
	if err := json.Unmarshal(raw, &shots); err != nil || shots == nil {
		return refusef(CodeCount, "shots is %.40q, expected an object of bit strings and counts", raw)
	}
	if len(shots) == 0 {
		return refusef(CodeCount, "shots is empty, expected at least one outcome")
	}
	for key, value := range shots {
		word, e := parseBits([]byte(key), h.Qubits, h.Bits)
		if e != nil {
			return refusef(e.Code, "shots: %s", e.Text)
		}
		count, e := wholeNumber(value, CodeCount, "count of "+key)
		if e != nil {
			return e
		}
		s.Shots = append(s.Shots, Outcome{word, count})
	}
	sortShots(s.Shots)
	return nil
}
