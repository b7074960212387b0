package afqmc

import (
	"sync"
	"sync/atomic"
)

// crew is a fixed set of goroutines, each with a work area of its own, that
// share the pieces of one task at a time. Which goroutine takes which piece is
// left open, so a piece's result must not depend on the area's past content.
type crew struct {
	own   *workspace
	tasks chan struct{}
	done  sync.WaitGroup
	next  atomic.Int64
	count int
	work  func(ws *workspace, piece int)
}

// newCrew starts size−1 goroutines; the caller of run is the last worker.
func newCrew(size int, area func() *workspace) *crew {
	c := &crew{own: area(), tasks: make(chan struct{})}
	for range size - 1 {
		ws := area()
		go func() {
			for range c.tasks {
				c.share(ws)
				c.done.Done()
			}
		}()
	}
	c.count = size
	return c
}

// run does pieces 0 … pieces−1 and returns when all are done.
func (c *crew) run(pieces int, work func(ws *workspace, piece int)) {
	c.work = work
	c.next.Store(int64(pieces))
	helpers := min(c.count, pieces) - 1
	c.done.Add(max(0, helpers))
	for range helpers {
		c.tasks <- struct{}{}
	}
	c.share(c.own)
	c.done.Wait()
}

func (c *crew) share(ws *workspace) {
	for {
		piece := c.next.Add(-1)
		if piece < 0 {
			return
		}
		c.work(ws, int(piece))
	}
}

func (c *crew) close() { close(c.tasks) }
