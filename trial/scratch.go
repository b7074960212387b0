package trial

import "sync"

// Scratch is a free list of work areas for methods that may run on several
// goroutines at once. It never drops an area, so nothing is allocated once as
// many exist as are in use.
type Scratch[T any] struct {
	New  func() *T
	mu   sync.Mutex
	free []*T
}

// Get returns an unused area.
func (s *Scratch[T]) Get() *T {
	s.mu.Lock()
	defer s.mu.Unlock()
	if n := len(s.free); n > 0 {
		area := s.free[n-1]
		s.free = s.free[:n-1]
		return area
	}
	return s.New()
}

// Put hands an area back.
func (s *Scratch[T]) Put(area *T) {
	s.mu.Lock()
	s.free = append(s.free, area)
	s.mu.Unlock()
}

// Grow returns a slice of length n, reusing s where it is long enough. Its
// content is arbitrary.
func Grow[E any](s []E, n int) []E {
	if cap(s) < n {
		return make([]E, n)
	}
	return s[:n]
}
