package matchgate

import "math/bits"

// Generators returns the observables of a matching as Paulis: −i g_a g_b of
// pair j, in the order in which it is written, is (−1)^{r_j} i^{|x∧z|} X^x Z^z.
func Generators(n int, pairs []uint8) (x, z []uint64, r uint64) {
	for j := range n {
		g, h := majorana(pairs[2*j]), majorana(pairs[2*j+1])
		phase := int(g.phase+h.phase) + 2*bits.OnesCount64(g.z&h.x) + 3
		x, z = append(x, g.x^h.x), append(z, g.z^h.z)
		phase -= bits.OnesCount64(x[j] & z[j])
		r |= uint64(phase>>1&1) << j
	}
	return x, z, r
}
