// Package integral evaluates integrals over contracted Gaussian functions:
// overlap, kinetic energy, nuclear attraction, dipole and electron repulsion,
// and factorises the repulsion integrals straight from shells.
//
// # Choice of recurrence
//
// Integrals follow McMurchie and Davidson, J. Comput. Phys. 26, 218 (1978): the
// product of two functions is expanded in Hermite Gaussians,
//
//	χ_a χ_b = Σ_ij Σ_h E^{ab}_{ij,h} Λ_h(p_ij, P_ij),   h = (t,u,v), t+u+v ≤ l_a+l_b
//
// and the repulsion of two Hermite Gaussians depends on their orders only
// through the sum,
//
//	(ab|cd) = Σ_ij,h Σ_kl,h' E^{ab}_{ij,h} · (−1)^{t'+u'+v'} E^{cd}_{kl,h'} · R_{h+h'}(α, P−Q).
//
// It is chosen because both sums are matrix products. The matrix E of a shell
// pair holds contraction, angular momentum and the passage to spherical
// harmonics at once, is made once per pair, and serves every integral here. A
// column (··|cd) needs only the rows of E for the functions c and d wanted,
// which is what a Cholesky factorisation asks for. Recurrences that build
// angular momentum on contracted quartets (Obara and Saika, J. Chem. Phys. 84,
// 3963 (1986); Head-Gordon and Pople, ibid. 89, 5777 (1988)) need fewer
// operations for the classes they are tuned to, but those operations are long
// chains of short scalar sums; here most of the work is done by the product
// kernel. Roots of Rys polynomials would save memory for high angular momenta
// only.
//
// Flops of one quartet of shell pairs with n primitive pairs, order L = l+l',
// H(L) = (L+1)(L+2)(L+3)/6 and f functions on each side:
//
//	n·n'·[≈ 2·C(L+4,4) (recurrence) + 2·f'·H·H' (ket)] + 2·f·f'·n·H (bra).
//
// Shells of one centre with the same exponents (s and p of the split-valence
// sets, general contractions) are evaluated together.
//
// # Conventions
//
// Centres in bohr, exponents in bohr⁻², integrals in hartree, chemists' notation.
// Functions are normalised to one. Within a shell of angular momentum l the
// real solid harmonics are ordered m = −l … l (y, z, x for p), cartesian
// functions x^i y^j z^k with i falling first, then j; each cartesian function is
// normalised by itself.
package integral
