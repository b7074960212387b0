package integral

import (
	"runtime"
	"sync"
	"sync/atomic"
)

// each calls the function that worker returns once for every index below n, from
// GOMAXPROCS goroutines with a worker each. Every index must write to its own
// place, so that results do not depend on who does what.
func each(n int, worker func() func(int)) {
	var next atomic.Int64
	var group sync.WaitGroup
	for range min(n, runtime.GOMAXPROCS(0)) {
		group.Go(func() {
			do := worker()
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i)
			}
		})
	}
	group.Wait()
}
