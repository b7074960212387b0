package record

import "strconv"

// scanner reads the setting lines that every writer produces — known keys, each
// once, in the order s, setting, shots, no escapes — without building a tree.
// It accepts a subset of what parseSetting accepts and reads it alike; of
// anything else it only says no, and parseSetting decides. White space between
// tokens is allowed.
type scanner struct {
	b  []byte
	i  int
	ok bool
}

// scanSetting fills s from line, or reports false.
func scanSetting(line []byte, h *Header, s *Setting) bool {
	sc := scanner{b: line, ok: true}
	n := h.Qubits
	s.reset()
	sc.byte('{')
	sc.key("s")
	s.ID = sc.uint32()
	sc.byte(',')
	switch h.Ensemble {
	case Matching:
		sc.key("pairs")
		s.Pairs = sc.pairs(s.Pairs, n)
	case Lagrangian:
		sc.key("R")
		s.R = sc.words(s.R, n, n)
		sc.byte(',')
		sc.key("B")
		s.B = sc.words(s.B, len(s.R), len(s.R))
		if len(s.B) != len(s.R) {
			return false
		}
		if sc.hasKey(`,"gl"`) {
			s.GL = sc.words(s.GL, n, n)
			if len(s.GL) != n {
				return false
			}
		}
		if sc.hasKey(`,"x"`) {
			s.X = sc.word(n, Q0First)
		}
	case Tableau:
		sc.key("x")
		s.TX = sc.words(s.TX, n, n)
		sc.byte(',')
		sc.key("z")
		s.TZ = sc.words(s.TZ, n, n)
		sc.byte(',')
		sc.key("r")
		s.TSign = sc.word(n, Q0First)
		if len(s.TX) != n || len(s.TZ) != n {
			return false
		}
	case Orthogonal:
		sc.key("Q")
		s.Q = sc.matrix(s.Q, 2*n)
	}
	sc.byte(',')
	sc.key("shots")
	s.Shots = sc.shots(s.Shots, n, h.Bits)
	sc.byte('}')
	sc.space()
	return sc.ok && sc.i == len(sc.b)
}

func (sc *scanner) space() {
	for sc.i < len(sc.b) && (sc.b[sc.i] == ' ' || sc.b[sc.i] == '\t' || sc.b[sc.i] == '\r') {
		sc.i++
	}
}

// byte consumes one structural character.
func (sc *scanner) byte(c byte) {
	if sc.i < len(sc.b) && sc.b[sc.i] == c {
		sc.i++
		return
	}
	sc.space()
	if sc.i < len(sc.b) && sc.b[sc.i] == c {
		sc.i++
		return
	}
	sc.ok = false
}

// next reports whether the next structural character is c, and consumes it.
func (sc *scanner) next(c byte) bool {
	sc.space()
	if sc.ok && sc.i < len(sc.b) && sc.b[sc.i] == c {
		sc.i++
		return true
	}
	return false
}

func (sc *scanner) literal(text string) bool {
	if len(sc.b)-sc.i >= len(text) && string(sc.b[sc.i:sc.i+len(text)]) == text {
		sc.i += len(text)
		return true
	}
	return false
}

// key consumes "name": with the quotes.
func (sc *scanner) key(name string) {
	sc.byte('"')
	if !sc.literal(name) {
		sc.ok = false
		return
	}
	if sc.i < len(sc.b) && sc.b[sc.i] == '"' {
		sc.i++
	} else {
		sc.ok = false
	}
	sc.byte(':')
}

// hasKey consumes a comma, a quoted key and a colon, or nothing.
func (sc *scanner) hasKey(commaKey string) bool {
	start := sc.i
	sc.space()
	if sc.literal(commaKey[:1]) {
		sc.space()
		if sc.literal(commaKey[1:]) {
			sc.byte(':')
			return sc.ok
		}
	}
	sc.i = start
	return false
}

func (sc *scanner) uint32() uint32 {
	sc.space()
	start := sc.i
	var v uint64
	for sc.i < len(sc.b) && sc.b[sc.i]-'0' <= 9 && sc.i-start < 10 {
		v = 10*v + uint64(sc.b[sc.i]-'0')
		sc.i++
	}
	digits := sc.i - start
	if digits == 0 || v > 1<<32-1 || digits > 1 && sc.b[start] == '0' {
		sc.ok = false
	}
	return uint32(v)
}

// pairs reads n pairs of numbers below 2n.
func (sc *scanner) pairs(dst []uint8, n int) []uint8 {
	sc.byte('[')
	for j := 0; j < n && sc.ok; j++ {
		if j > 0 {
			sc.byte(',')
		}
		sc.byte('[')
		a := sc.uint32()
		sc.byte(',')
		b := sc.uint32()
		sc.byte(']')
		if a >= uint32(2*n) || b >= uint32(2*n) {
			sc.ok = false
		}
		dst = append(dst, uint8(a), uint8(b))
	}
	sc.byte(']')
	return dst
}

// word reads one quoted string of n bits.
func (sc *scanner) word(n int, order BitOrder) uint64 {
	sc.byte('"')
	if !sc.ok || len(sc.b)-sc.i < n+1 || sc.b[sc.i+n] != '"' {
		sc.ok = false
		return 0
	}
	var word uint64
	bad := byte(0)
	for i, c := range sc.b[sc.i : sc.i+n] {
		bad |= c ^ '0'
		word |= uint64(c&1) << i
	}
	if bad > 1 {
		sc.ok = false
	}
	sc.i += n + 1
	return orderBits(word, n, order)
}

// words reads a list of at most most words of n bits.
func (sc *scanner) words(dst []uint64, most, n int) []uint64 {
	sc.byte('[')
	if sc.next(']') {
		return dst
	}
	for sc.ok {
		if len(dst) == most {
			sc.ok = false
			break
		}
		dst = append(dst, sc.word(n, Q0First))
		if !sc.next(',') {
			break
		}
	}
	sc.byte(']')
	return dst
}

func (sc *scanner) shots(dst []Outcome, n int, order BitOrder) []Outcome {
	sc.byte('{')
	for sc.ok {
		bits := sc.word(n, order)
		sc.byte(':')
		count := sc.uint32()
		dst = append(dst, Outcome{bits, count})
		if count == 0 {
			sc.ok = false
		}
		if !sc.next(',') {
			break
		}
	}
	sc.byte('}')
	if len(dst) > 1 {
		sortShots(dst)
		if repeated(dst) {
			sc.ok = false
		}
	}
	return dst
}

// matrix reads a square matrix of finite numbers.
func (sc *scanner) matrix(dst []float64, n int) []float64 {
	sc.byte('[')
	for r := 0; r < n && sc.ok; r++ {
		if r > 0 {
			sc.byte(',')
		}
		sc.byte('[')
		for c := 0; c < n && sc.ok; c++ {
			if c > 0 {
				sc.byte(',')
			}
			dst = append(dst, sc.float())
		}
		sc.byte(']')
	}
	sc.byte(']')
	return dst
}

// float reads a number by the grammar of JSON.
func (sc *scanner) float() float64 {
	sc.space()
	start := sc.i
	digits := func() int {
		from := sc.i
		for sc.i < len(sc.b) && sc.b[sc.i]-'0' <= 9 {
			sc.i++
		}
		return sc.i - from
	}
	at := func(c byte) bool { return sc.i < len(sc.b) && sc.b[sc.i]|0x20 == c|0x20 }
	if at('-') && sc.b[sc.i] == '-' {
		sc.i++
	}
	whole := sc.i
	if k := digits(); k == 0 || k > 1 && sc.b[whole] == '0' {
		sc.ok = false
		return 0
	}
	if sc.i < len(sc.b) && sc.b[sc.i] == '.' {
		sc.i++
		if digits() == 0 {
			sc.ok = false
			return 0
		}
	}
	if at('e') {
		sc.i++
		if sc.i < len(sc.b) && (sc.b[sc.i] == '+' || sc.b[sc.i] == '-') {
			sc.i++
		}
		if digits() == 0 {
			sc.ok = false
			return 0
		}
	}
	v, err := strconv.ParseFloat(string(sc.b[start:sc.i]), 64)
	if err != nil {
		sc.ok = false
	}
	return v
}
