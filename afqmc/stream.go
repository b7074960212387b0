package afqmc

import "math/rand/v2"

// stream gives random numbers keyed by seed, step and a stream number, so that
// they do not depend on who draws them.
type stream struct {
	source rand.PCG
	rand   *rand.Rand
}

func newStream() *stream {
	s := &stream{}
	s.rand = rand.New(&s.source)
	return s
}

// controlStream keys the random numbers of population control; walker i uses
// stream i+1.
const controlStream = 0

// key sets the stream. The key is hashed into the generator's state, since raw
// neighbouring seeds give related streams.
func (s *stream) key(seed, step, number uint64) {
	a := mix(seed + 0x9e3779b97f4a7c15)
	a = mix(a ^ step*0xbf58476d1ce4e5b9)
	a = mix(a ^ number*0x94d049bb133111eb)
	s.source.Seed(a, mix(a+0x9e3779b97f4a7c15))
}

// normal fills y with normal deviates.
func (s *stream) normal(y []float64) {
	for g := range y {
		y[g] = s.rand.NormFloat64()
	}
}

// mix is a bijective hash of 64 bits (the finaliser of splitmix64: Steele, Lea &
// Flood, OOPSLA 2014, DOI 10.1145/2660193.2660195).
func mix(x uint64) uint64 {
	x = (x ^ x>>30) * 0xbf58476d1ce4e5b9
	x = (x ^ x>>27) * 0x94d049bb133111eb
	return x ^ x>>31
}
