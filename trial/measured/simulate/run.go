package simulate

import (
	"cmp"
	"context"
	"fmt"
	"math/rand/v2"
	"runtime"
	"slices"
	"sync"

	"leadline/trial/measured/clifford"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
)

// Run draws the settings of a record one after another and hands them to emit,
// which must not keep them. Progress, if not nil, is called now and then.
func Run(ctx context.Context, st *State, opt Options, emit func(*record.Setting) error, progress func(done, total int64)) error {
	h, err := NewHeader(st, &opt)
	if err != nil {
		return err
	}
	if opt.Settings < 1 {
		return fmt.Errorf("number of settings is %d", opt.Settings)
	}
	if opt.ShotsPerSetting == 0 {
		opt.ShotsPerSetting = 1
	}
	list, err := components(st, h)
	if err != nil {
		return err
	}
	workers := opt.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	devices := make([]*device, workers)
	for w := range devices {
		devices[w] = newDevice(h, &opt, list)
	}
	block := make([]record.Setting, 32*workers)
	for first := 0; first < opt.Settings; first += len(block) {
		if err := ctx.Err(); err != nil {
			return err
		}
		n := min(len(block), opt.Settings-first)
		errs := make([]error, workers)
		var wg sync.WaitGroup
		for w := range workers {
			wg.Go(func() {
				for i := w; i < n && errs[w] == nil; i += workers {
					errs[w] = devices[w].measure(&block[i], first+i)
				}
			})
		}
		wg.Wait()
		if err := cmp.Or(errs...); err != nil {
			return err
		}
		for i := range block[:n] {
			if err := emit(&block[i]); err != nil {
				return err
			}
		}
		if progress != nil {
			progress(int64(first+n), int64(opt.Settings))
		}
	}
	return nil
}

// Settings returns the whole record in memory.
func Settings(ctx context.Context, st *State, opt Options) (*record.Header, []*record.Setting, error) {
	h, err := NewHeader(st, &opt)
	if err != nil {
		return nil, nil, err
	}
	list := make([]*record.Setting, 0, opt.Settings)
	err = Run(ctx, st, opt, func(s *record.Setting) error {
		list = append(list, s.Clone())
		return nil
	}, nil)
	return h, list, err
}

// device draws settings and outcomes. Each worker has its own.
type device struct {
	h     *record.Header
	opt   *Options
	state []component
	// weights is the cumulative distribution of the state's determinants.
	weights []float64
	ranks   []float64

	basis   clifford.Basis
	encoder clifford.Encoder
	sampler sampler
	counts  map[uint64]uint32
	vector  []complex128
}

func newDevice(h *record.Header, opt *Options, state []component) *device {
	d := &device{h: h, opt: opt, state: state, counts: make(map[uint64]uint32)}
	sum := 0.0
	for _, c := range state {
		sum += real(c.amplitude)*real(c.amplitude) + imag(c.amplitude)*imag(c.amplitude)
		d.weights = append(d.weights, sum)
	}
	if h.Ensemble.Clifford() {
		d.ranks = clifford.RankDistribution(h.Qubits)
	}
	return d
}

// stream returns the random numbers of one setting.
func stream(seed uint64, setting int) *rand.Rand {
	a := mix(seed + 0x9E3779B97F4A7C15)
	return rand.New(rand.NewPCG(a, mix(a^mix(uint64(setting)))))
}

// mix is the finaliser of SplitMix64 (Steele, Lea and Flood, OOPSLA 2014): close
// keys become unrelated ones.
func mix(x uint64) uint64 {
	x = (x ^ x>>30) * 0xBF58476D1CE4E5B9
	x = (x ^ x>>27) * 0x94D049BB133111EB
	return x ^ x>>31
}

// measure draws setting number i and its shots.
func (d *device) measure(s *record.Setting, i int) error {
	rng := stream(d.opt.Seed, i)
	*s = record.Setting{ID: uint32(i), Pairs: s.Pairs[:0], R: s.R[:0], B: s.B[:0], GL: s.GL[:0],
		TX: s.TX[:0], TZ: s.TZ[:0], Q: s.Q[:0], Shots: s.Shots[:0]}
	clear(d.counts)
	shots := d.opt.ShotsPerSetting
	if d.h.Ensemble == record.Orthogonal {
		s.Q = matchgate.Rotation(s.Q, d.h.Qubits, rng)
		d.rotated(s.Q, shots, rng)
	} else {
		if err := d.choose(s, rng); err != nil {
			return err
		}
		d.encoder = d.basis.Encoder()
		d.sampler.draw(&d.basis, d.state, d.weights, shots, rng, func(t, u uint64) {
			d.read(d.encoder.Bits(t, u), rng)
		})
	}
	for word, count := range d.counts {
		s.Shots = append(s.Shots, record.Outcome{Bits: word, Count: count})
	}
	slices.SortFunc(s.Shots, func(a, b record.Outcome) int { return cmp.Compare(a.Bits, b.Bits) })
	return nil
}

// choose draws a stabilizer basis, writes it to the setting and sets d.basis.
func (d *device) choose(s *record.Setting, rng *rand.Rand) error {
	n, twirl := d.h.Qubits, d.h.Twirl
	if d.h.Ensemble == record.Matching {
		s.Pairs = matchgate.Pairs(s.Pairs, n, rng)
		if twirl != record.TwirlFull {
			sortPairs(s.Pairs, twirl == record.TwirlX)
		}
		return setBasis(&d.basis, d.h, s)
	}
	k := clifford.Rank(d.ranks, rng)
	s.R = clifford.Subspace(s.R, n, k, rng)
	s.B = clifford.Phases(s.B, k, rng)
	if twirl == record.TwirlFull {
		s.GL = clifford.Invertible(s.GL, n, rng)
	}
	if twirl != record.TwirlNone {
		s.X = rng.Uint64() & (1<<n - 1)
	}
	if err := d.basis.Lagrangian(n, s.R, s.B, s.GL, s.X); err != nil || d.h.Ensemble == record.Lagrangian {
		return err
	}
	// The same freedom in a tableau: products of generators, and signs.
	x, z := d.basis.Generators()
	for j := range n {
		row := uint64(1) << j
		if len(s.GL) > 0 {
			row = s.GL[j]
		}
		var xj, zj uint64
		for i := range n {
			if row>>i&1 != 0 {
				xj ^= x[i]
				zj ^= z[i]
			}
		}
		s.TX, s.TZ = append(s.TX, xj), append(s.TZ, zj)
	}
	s.TSign = s.X
	s.R, s.B, s.GL, s.X = s.R[:0], s.B[:0], s.GL[:0], 0
	return setBasis(&d.basis, d.h, s)
}

// sortPairs removes the random place of the pairs, and with signs false their
// random orientation too.
func sortPairs(pairs []uint8, signs bool) {
	n := len(pairs) / 2
	list := make([][2]uint8, n)
	for j := range list {
		list[j] = [2]uint8(pairs[2*j : 2*j+2])
		if !signs && list[j][0] > list[j][1] {
			list[j][0], list[j][1] = list[j][1], list[j][0]
		}
	}
	slices.SortFunc(list, func(a, b [2]uint8) int { return cmp.Compare(min(a[0], a[1]), min(b[0], b[1])) })
	for j, p := range list {
		pairs[2*j], pairs[2*j+1] = p[0], p[1]
	}
}

// read passes the true bits through the noise and counts them.
func (d *device) read(word uint64, rng *rand.Rand) {
	if d.opt.Depolarizing > 0 && rng.Float64() < d.opt.Depolarizing {
		word = rng.Uint64() & (1<<d.h.Qubits - 1)
	}
	for j, f := range d.opt.Readout {
		p := f.Zero
		if word>>j&1 != 0 {
			p = f.One
		}
		if p > 0 && rng.Float64() < p {
			word ^= 1 << j
		}
	}
	d.counts[word]++
}
