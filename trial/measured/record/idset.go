package record

import "strconv"

// idSet remembers setting ids in pages of 1024 bits: consecutive ids, the usual
// case, cost a bit each.
type idSet map[uint32]*[16]uint64

// add reports whether id is new.
func (m idSet) add(id uint32) bool {
	page := m[id>>10]
	if page == nil {
		page = new([16]uint64)
		m[id>>10] = page
	}
	word, bit := &page[id>>6&15], uint64(1)<<(id&63)
	if *word&bit != 0 {
		return false
	}
	*word |= bit
	return true
}

// parseCount reads a whole number that fits int64.
func parseCount(raw []byte) (int64, bool) {
	v, err := strconv.ParseInt(string(raw), 10, 64)
	return v, err == nil && v >= 0
}
