// Package expansion is the trial source of a CI expansion over core and active
// orbitals, embedded in the full space:
//
//	|Ψ_T⟩ = Σ_IJ C_IJ |core I⟩_up |core J⟩_down,
//
// I, J strings of active orbitals. An [Expansion] is the value, with a file format
// (FORMAT.md); [New] makes it a [Source] of overlaps, densities and local
// energies. Notation: M orbitals, N electrons of a spin, ns = core + active
// orbitals, no active orbitals with ne electrons, S strings, ng factors.
//
// # Overlap and density
//
// Every walker has, for each spin, a reference string r of its own: the leading
// determinant's, or rows of φ chosen by complete pivoting where that would be
// unstable (elements of θ above 16; a fixed reference loses digits like the third
// power of its inverse overlap). With o = core + r, Θ = φ φ_o⁻¹ and θ its block of
// particles (active orbitals outside of r) × holes (r),
//
//	O = det φ_o,up · det φ_o,down · F,   F = Σ_IJ C*_IJ d_I d_J,
//	d_I = ± det θ[particles of I, holes of I]
//	y = C* d_other,   W_ai = (1/F) Σ_I y_I ∂d_I/∂θ_ai
//	D = G Θᵀ,   G_a = W_a (particles),   G_o = 1 − Θ_pᵀ W (occupied)
//
// The minors come from a recursion over their size and W from running it
// backwards, both for eight walkers at once in vector lanes; y is a matrix
// product over the walkers of a tile, or a sparse one. The forms of C: dense;
// sparse, over the strings that occur, where less than a fifth of the
// determinants does; a product of low rank r where r < 0.35 S leaves no element
// of C above 1e-13 of the largest.
//
// # Local energy
//
// With B_g,ai = λ_a L̃_g Θ_i, L̃ = S†L, λ_a = e_a − Σ_o Θ_ao e_o (over particles a
// and active holes i), the energy is that of a determinant with the density D, and
// a cumulant:
//
//	E_L = E_c + h̃·D + ½ Σ_g s_g ⟨v_g⟩² − ½ Σ_σ X_σ[D]
//	    + ½ Σ_σ ⟨V^σσ, D^σσ − W W + (W W)^x⟩ + ⟨V^ud, D^ud − W W⟩
//	X   = Σ_g s_g tr(L̃_g Dᵀ L̃_g Dᵀ)              (see package determinant)
//	V^σσ′_ai,bj = Σ_g s_g B^σ_g,ai B^σ′_g,bj,   (W W)^x_ai,bj = W_aj W_bi
//	D^σσ′_ai,bj = (1/F) ∂²F/∂θ^σ_ai ∂θ^σ′_bj
//
// It holds for real factors of either symmetry that may differ between spins,
// since all follows from derivatives of the overlap. An expansion over all
// orbitals needs none of it: E_L = ⟨HΨ|φ⟩/⟨Ψ|φ⟩, the ratio of two overlaps.
//
// # Cost
//
// Flops for each walker and both spins, at M = 50, N = 10 per spin, ng = 250; the
// first five at every step, the others where energies are measured:
//
//	                                      (10,10) (12,12)
//	minors  2·8 Σ_k k C(ne,k) C(no−ne,k)    0.01    0.04 M
//	W       twice that                      0.02    0.09 M
//	y       2·4 S²                          0.5     6.8  M   halved if paired and C = Cᵀ
//	D       2·8 ns N M                      0.1     0.1  M
//	⟨v_g⟩   4 ng ns M                       0.8     0.8  M
//	X by the table K, 2·4 (ns M)²           4.5     5.1  M
//	  factor by factor, 2·4 ng ns² M        23      26   M   where K has no room
//	B       2·(4 ng ns M ne + 16 ng ns x)   11      14   M   x = ne(no−ne)
//	V       3·8 ng x²                       3.8     7.8  M   a third if paired
//	D^σσ    only a<b, i<j                   0.03    0.25 M
//	D^ud    4 S C(no−2,ne−1) x + 8 S x²     3.0     43   M   see below
//
// Ways to D^ud that cost more: all active pairs in place of particle-hole pairs,
// as a gauge without reference wants it, 4 S C(no−1,ne−1) no ne (6.4 and 123 M);
// never forming it but applying each B_g to both vectors, 4 ng S² (64 and 854 M);
// all strings in place of those that E_bj leads to, 4 S² x (6.4 and 123 M).
// For paired walkers and C = Cᵀ one triangle of C does, which halves the first
// term. A list of n determinants has 4 n x + 8 x (elements of the excitations)
// instead. Ordered by what limits: (10,10) B and X, (12,12) D^ud and y, a list of
// 10⁴ determinants B, V and D^ud.
//
// Formulas: CI trials by generalised Wick's theorem, Mahajan, Lee & Sharma, J.
// Chem. Phys. 156, 174111 (2022) (from memory), arXiv:2201.10458; strings: Knowles
// & Handy, Chem. Phys. Lett. 111, 315 (1984). The cumulant form is derived here:
// the density's part of the energy taken off the second derivative of O.
package expansion
