package clifford

import "math"

func pow2(n int) float64 { return math.Ldexp(1, n) }

// VacuumVariance returns E|ĉ_D|² − |Ψ_D|² of one shot in the vacuum row. The
// states of a stabilizer basis form a 3-design (Kueng and Gross,
// arXiv:1510.02767, from memory), which fixes the second moment:
// E[ĉĉ†] = 4 (d+1)/(d+2) [(3/2)·1 + (1/2)ΨΨ†], d = 2^n, so about 6 per complex
// amplitude whatever n, electrons and determinant.
func VacuumVariance(n int, amplitude float64) float64 {
	d := pow2(n)
	a := amplitude * amplitude
	return 4*(d+1)/(d+2)*(1.5+0.5*a) - a
}

// ReferenceVariance returns the same for ĉ_D = estimate of Ψ_D conj(Ψ_r), D ≠ r,
// in the row of determinant r.
func ReferenceVariance(n int, amplitude, reference float64) float64 {
	d := pow2(n)
	a, b := amplitude*amplitude, reference*reference
	return (d+1)/(d+2)*(1+b+a) - a*b
}

// DiagonalVariance returns the variance of ĉ_r, the estimate of |Ψ_r|².
func DiagonalVariance(n int, reference float64) float64 {
	d := pow2(n)
	b := reference * reference
	return (d+1)/(d+2)*(2+4*b) - 2*b - 1 - b*b
}

// Reached returns the expected fraction of snapshots that reach determinant r
// of a noiseless state that holds r with the given weight: the outcome names
// the coset of r. A random k-dimensional subspace holds a given other vector
// with probability (2^k − 1)/(2^n − 1).
func Reached(n int, weight float64) float64 {
	other := 0.0
	for k, p := range RankDistribution(n) {
		other += p * (pow2(k) - 1) / (pow2(n) - 1)
	}
	return weight + (1-weight)*other
}
