package simulate

import (
	"math/bits"
	"math/rand/v2"
	"slices"

	"leadline/trial/measured/clifford"
	"leadline/trial/measured/matchgate"
	"leadline/trial/measured/record"
	"leadline/trial/measured/snapshot"
)

// sampler draws outcomes of a stabilizer basis from the exact distribution. The
// u of an outcome is the coset of a determinant drawn from |ψ|². Within the coset
// the amplitude of t is a Walsh transform of 2^k numbers; one shot needs only
// half of each of its steps: a bit of t is drawn, the half that was not drawn is
// dropped, and the vector has half the length. That is 2^{k+1} operations.
type sampler struct {
	cosets []uint64
	vector []complex128
	half   []complex128
}

// draw calls got(t, u) for every shot.
func (s *sampler) draw(c *clifford.Basis, state []component, weights []float64, shots int, rng *rand.Rand, got func(t, u uint64)) {
	s.cosets = s.cosets[:0]
	for range shots {
		_, u := c.Coordinates(state[pick(weights, rng)].det)
		s.cosets = append(s.cosets, u)
	}
	slices.Sort(s.cosets)
	size := 1 << c.K
	if cap(s.vector) < size {
		s.vector, s.half = make([]complex128, size), make([]complex128, size)
	}
	for i := 0; i < shots; {
		u := s.cosets[i]
		count := 1
		for i+count < shots && s.cosets[i+count] == u {
			count++
		}
		i += count
		vector := s.vector[:size]
		clear(vector)
		for _, comp := range state {
			y, coset := c.Coordinates(comp.det)
			if coset == u {
				vector[y] = comp.amplitude * snapshot.Power(-c.Phase(y))
			}
		}
		if count <= max(2, c.K/2) {
			for range count {
				copy(s.half[:size], vector)
				got(halve(s.half[:size], rng), u)
			}
			continue
		}
		transform(vector)
		cumulative := make([]float64, size)
		sum := 0.0
		for t, a := range vector {
			sum += real(a)*real(a) + imag(a)*imag(a)
			cumulative[t] = sum
		}
		for range count {
			got(uint64(pick(cumulative, rng)), u)
		}
	}
}

// Probabilities returns the exact distribution of the outcomes of a setting,
// whatever its shots, for a state vector psi of 2^n numbers whose index is the
// mask of occupied modes.
func Probabilities(h *record.Header, s *record.Setting, psi []complex128) ([]float64, error) {
	p := make([]float64, 1<<h.Qubits)
	if len(psi) != len(p) {
		panic("simulate: state vector has the wrong length")
	}
	if h.Ensemble == record.Orthogonal {
		v := append([]complex128(nil), psi...)
		flips := circuit(v, s.Q)
		for i, a := range v {
			p[uint64(i)^flips] = real(a)*real(a) + imag(a)*imag(a)
		}
		return p, nil
	}
	var c clifford.Basis
	if err := setBasis(&c, h, s); err != nil {
		return nil, err
	}
	e := c.Encoder()
	cosets := make(map[uint64][]complex128)
	for det, a := range psi {
		y, u := c.Coordinates(uint64(det))
		if cosets[u] == nil {
			cosets[u] = make([]complex128, 1<<c.K)
		}
		cosets[u][y] = a * snapshot.Power(-c.Phase(y))
	}
	for u, v := range cosets {
		transform(v)
		for t, a := range v {
			p[e.Bits(uint64(t), u)] = (real(a)*real(a) + imag(a)*imag(a)) / float64(len(v))
		}
	}
	return p, nil
}

// setBasis makes the stabilizer basis of any setting but an orthogonal one.
func setBasis(c *clifford.Basis, h *record.Header, s *record.Setting) error {
	if h.Ensemble == record.Matching {
		x, z, r := matchgate.Generators(h.Qubits, s.Pairs)
		return c.Tableau(h.Qubits, x, z, r)
	}
	return c.FromSetting(h, s)
}

// pick draws an index from a cumulative distribution of any total.
func pick(cumulative []float64, rng *rand.Rand) int {
	x := rng.Float64() * cumulative[len(cumulative)-1]
	i, found := slices.BinarySearch(cumulative, x)
	if found { // boundaries belong to the interval above
		i++
	}
	for i < len(cumulative)-1 && i > 0 && cumulative[i] == cumulative[i-1] {
		i++
	}
	return min(i, len(cumulative)-1)
}

// halve draws t from |Σ_y (−1)^{t·y} v_y|² and destroys v.
func halve(v []complex128, rng *rand.Rand) (t uint64) {
	for len(v) > 1 {
		half := len(v) / 2
		a, b := v[:half], v[half:]
		var norm, cross float64
		for i, x := range a {
			y := b[i]
			norm += real(x)*real(x) + imag(x)*imag(x) + real(y)*real(y) + imag(y)*imag(y)
			cross += real(x)*real(y) + imag(x)*imag(y)
		}
		// P(bit = 0) = |a+b|²/(|a+b|² + |a−b|²)
		if rng.Float64()*norm < norm/2+cross {
			for i, y := range b {
				a[i] += y
			}
		} else {
			t |= 1 << (bits.Len(uint(half)) - 1)
			for i, y := range b {
				a[i] -= y
			}
		}
		v = a
	}
	return t
}

// transform replaces v by Σ_y (−1)^{t·y} v_y.
func transform(v []complex128) {
	for step := 1; step < len(v); step *= 2 {
		for i := 0; i < len(v); i += 2 * step {
			lo, hi := v[i:i+step], v[i+step:i+2*step]
			for j, a := range lo {
				b := hi[j]
				lo[j], hi[j] = a+b, a-b
			}
		}
	}
}
