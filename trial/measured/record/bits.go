package record

import "math/bits"

// parseBits reads a string of n zeros and ones into a word whose bit j is qubit j.
func parseBits(text []byte, n int, order BitOrder) (uint64, *Error) {
	if len(text) != n {
		return 0, refusef(CodeLength, "bit string %.80q has %d characters, expected %d", text, len(text), n)
	}
	var word uint64
	for i, c := range text {
		if c != '0' && c != '1' {
			return 0, refusef(CodeBits, "bit string %.80q holds %q, expected only 0 and 1", text, c)
		}
		word |= uint64(c&1) << i
	}
	return orderBits(word, n, order), nil
}

// appendBits writes the n bits of word.
func appendBits(dst []byte, word uint64, n int, order BitOrder) []byte {
	word = orderBits(word, n, order)
	for i := range n {
		dst = append(dst, '0'+byte(word>>i&1))
	}
	return dst
}

// orderBits turns bit i into bit n−1−i if the last qubit is printed first.
func orderBits(word uint64, n int, order BitOrder) uint64 {
	if order == Q0Last && n > 0 {
		return bits.Reverse64(word) >> (64 - n)
	}
	return word
}

// lowBits is the mask of the n lowest bits.
func lowBits(n int) uint64 {
	if n >= 64 {
		return ^uint64(0)
	}
	return 1<<n - 1
}
