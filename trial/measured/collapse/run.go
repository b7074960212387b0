package collapse

import (
	"context"
	"fmt"
	"io"
	"math"
	"sync"
	"sync/atomic"

	"leadline/trial/measured/record"
)

const (
	// chunkSettings and chunkBytes bound the settings prepared at once.
	chunkSettings = 512
	chunkBytes    = 4 << 20
	// tableBytes bounds the tables over y in a chunk, as far as one setting
	// does not exceed it.
	tableBytes = 64 << 20
	// tileNumbers is the part of an accumulator that a core works on at once,
	// small enough for its cache.
	tileNumbers = 1 << 14
)

// chunk is a run of consecutive settings of one batch.
type chunk struct {
	list  []prepared
	n     int
	batch int
	last  bool // of its batch
}

// pass reads a record once and hands every setting, in order, to a consumer of
// chunks.
type pass struct {
	plan     *plan
	batches  int
	total    int64 // settings
	progress func(done, total int64)
	// consume processes one chunk, whose settings are filled in but not
	// prepared.
	consume func(*chunk) error

	settings, shots int64
	digest          string
}

// run drives the pass; reading overlaps with processing.
func (ps *pass) run(ctx context.Context, st record.Stream) error {
	ctx, cancel := context.WithCancel(ctx)
	full, free := make(chan *chunk), make(chan *chunk, 2)
	free <- new(chunk)
	free <- new(chunk)
	var readErr error
	var wg sync.WaitGroup
	wg.Go(func() {
		defer close(full)
		readErr = ps.read(ctx, st, full, free)
	})
	defer wg.Wait()
	defer cancel() // before the wait
	done := int64(0)
	for c := range full {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := ps.consume(c); err != nil {
			return err
		}
		done += int64(c.n)
		if ps.progress != nil {
			ps.progress(done, ps.total)
		}
		free <- c
	}
	if err := ctx.Err(); err != nil {
		return err
	}
	return readErr
}

// read fills chunks until the record ends.
func (ps *pass) read(ctx context.Context, st record.Stream, full chan<- *chunk, free <-chan *chunk) error {
	limit := ps.plan.chunkLimit()
	i := int64(0)
	batchOf := func(i int64) int { return int(i * int64(ps.batches) / ps.total) }
	for {
		var c *chunk
		select {
		case c = <-free:
		case <-ctx.Done():
			return ctx.Err()
		}
		c.n, c.last = 0, false
		tables := 0
		var end error
		for c.n < limit {
			if c.n == len(c.list) {
				c.list = append(c.list, prepared{})
			}
			s := &c.list[c.n].setting
			if end = st.Next(s); end != nil {
				break
			}
			if i >= ps.total {
				return fmt.Errorf("record has more than the %d settings of its end mark", ps.total)
			}
			if c.n == 0 {
				c.batch = batchOf(i)
			}
			c.n++
			i++
			ps.shots += s.Count()
			if n := ps.plan.header.Qubits; ps.plan.directPays(len(s.Shots), n) {
				tables += 16 << n
			}
			if i == ps.total || batchOf(i) != c.batch {
				c.last = true
				break
			}
			if tables > tableBytes {
				break
			}
		}
		if end == io.EOF {
			if i < ps.total {
				return fmt.Errorf("record has %d settings, its end mark says %d", i, ps.total)
			}
			ps.settings, ps.digest = i, st.Digest()
			return nil
		}
		if end != nil {
			return end
		}
		select {
		case full <- c:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
}

// chunkLimit is the number of settings that are prepared at once.
func (p *plan) chunkLimit() int {
	bytes := 40*len(p.rows) + 16*len(p.cols)
	switch p.header.Ensemble {
	case record.Orthogonal:
		bytes = 16 * p.target.size()
	case record.Matching:
		// The largest table of weights: cycles of three modes.
		bytes += int(8 * math.Pow(3, float64(p.header.Qubits)/3))
	}
	return max(2, min(chunkSettings, chunkBytes/(bytes+1)))
}

// share calls do(worker, i) for every i < n on the given number of goroutines.
func share(workers, n int, do func(worker, i int)) {
	if workers = min(workers, n); workers <= 1 {
		for i := range n {
			do(0, i)
		}
		return
	}
	var next atomic.Int64
	var wg sync.WaitGroup
	for w := range workers {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(w, i)
			}
		})
	}
	wg.Wait()
}
