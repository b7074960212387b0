package record

import "fmt"

// SpatialWindow translates the spin orbitals of Active into zero-based spatial
// orbitals of the whole basis, core and active, each ascending. In interleaved
// order spatial orbital p has the spin orbitals 2p and 2p+1. In blocked order
// the first half of each list is α and the second half β, and the two differ
// by one constant, the number of spatial orbitals of the basis. It is nil, nil
// without Active.
func (h *Header) SpatialWindow() (core, active []int, err error) {
	if h.Active == nil {
		return nil, nil, nil
	}
	if len(h.Active.Active) != h.Modes() {
		return nil, nil, fmt.Errorf("active.active lists %d spin orbitals, expected %d, one per qubit", len(h.Active.Active), h.Modes())
	}
	offset := 0
	if h.Order == Blocked {
		half := len(h.Active.Active) / 2
		offset = h.Active.Active[half] - h.Active.Active[0]
	}
	seen := make(map[int]bool)
	spatial := func(key string, list []int) ([]int, error) {
		if len(list)%2 != 0 {
			return nil, fmt.Errorf("active.%s lists %d spin orbitals, expected both spins of every orbital", key, len(list))
		}
		half := len(list) / 2
		orbitals := make([]int, half)
		for i := range list {
			if list[i] < 0 || i > 0 && list[i] <= list[i-1] {
				return nil, fmt.Errorf("active.%s is not an ascending list of spin orbitals: %d at place %d", key, list[i], i+1)
			}
		}
		for i := range half {
			up, down, want := list[i], list[half+i], list[i]+offset
			orbital := up
			if h.Order == Interleaved {
				up, down = list[2*i], list[2*i+1]
				orbital, want = up/2, up+1
				if up%2 != 0 {
					return nil, fmt.Errorf("active.%s lists spin orbital %d without its alpha partner", key, up)
				}
			}
			if down != want || h.Order == Blocked && up >= offset {
				return nil, fmt.Errorf("active.%s pairs spin orbitals %d and %d, expected %d and %d of one orbital", key, up, down, up, want)
			}
			if seen[orbital] {
				return nil, fmt.Errorf("active lists orbital %d twice", orbital)
			}
			seen[orbital] = true
			orbitals[i] = orbital
		}
		return orbitals, nil
	}
	if active, err = spatial("active", h.Active.Active); err != nil {
		return nil, nil, err
	}
	if core, err = spatial("core", h.Active.Core); err != nil {
		return nil, nil, err
	}
	return core, active, nil
}
