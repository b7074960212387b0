// Package matchgate turns measurement bases of fermionic Gaussian circuits into
// estimators: matchings of the Majorana operators (signed permutations) in
// closed combinatorial form, any orthogonal rotation by Pfaffians.
//
// A snapshot is a Gaussian projector G = Π_pairs (1 + s(−i g_a g_b))/2. The
// ensemble average of the snapshots damps the part of the state of Majorana
// degree 2k by λ_k = C(n,k)/C(2n,2k) and loses odd degrees; matchings and Haar
// rotations agree in the first three moments (Zhao, Rubin and Miyake, Phys. Rev.
// Lett. 127, 110504 (2021); Wan, Huggins, Lee and Babbush, Commun. Math. Phys.
// 404, 629 (2023)). With a formal z on every pair, G_z = Π (1 + z s(−i g_a g_b))/2,
// the unbiased estimate of <r|ρ|φ> is Σ_k λ_k^{-1} [z^k] <r|G_z|φ>.
package matchgate

// Channel returns λ_0..λ_n, what a noiseless measurement keeps of each Majorana
// degree 0, 2, …, 2n.
func Channel(n int) []float64 {
	lambda := make([]float64, n+1)
	for k := range lambda {
		// C(n,k)/C(2n,2k) = Π_{i=1..k} (2i−1)/(2n−2i+1)
		lambda[k] = 1
		for i := 1; i <= min(k, n-k); i++ {
			lambda[k] *= float64(2*i-1) / float64(2*n-2*i+1)
		}
	}
	return lambda
}

// Inverse returns 1/λ_k of a channel; the estimators take it so that a
// calibrated channel can stand in for the noiseless one.
func Inverse(lambda []float64) []float64 {
	g := make([]float64, len(lambda))
	for k, l := range lambda {
		g[k] = 1 / l
	}
	return g
}

// Binomial returns C(n,k).
func Binomial(n, k int) float64 {
	if k < 0 || k > n {
		return 0
	}
	b := 1.0
	for i := range min(k, n-k) {
		b = b * float64(n-i) / float64(i+1)
	}
	return b
}
