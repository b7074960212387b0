// Package afqmc is the walk: phaseless auxiliary-field quantum Monte Carlo with
// a guide from package trial (Zhang & Krakauer, Phys. Rev. Lett. 90, 136401
// (2003); review: Motta & Zhang, WIREs Comput. Mol. Sci. 8, e1364 (2018)).
//
// With A_g = v_g − l_g, l_g = ⟨Ψ_T|v_g|Ψ_T⟩/⟨Ψ_T|Ψ_T⟩,
//
//	H = e0 + T + ½ Σ_g s_g A_g²,  T = t + Σ_g s_g l_g L_g,  e0 = E_c − ½ Σ_g s_g l_g²
//
// and one step of length τ is, for each walker with normal deviates y_g,
//
//	x̄_g = −√τ η_g (⟨v_g⟩ − l_g),  η_g = √(−s_g),  |x̄_g| ≤ 1 by rescaling
//	z   = y − x̄
//	φ   ← e^{−τT/2} exp(X) e^{−τT/2} φ,  X = √τ Σ_g z_g η_g L_g
//	R   = ⟨Ψ_T|φ′⟩/⟨Ψ_T|φ⟩ · exp(−√τ Σ_g z_g η_g l_g)
//	I   = R · exp(Σ_g (y_g x̄_g − x̄_g²/2)),  E_hyb = e0 − ln|I|/τ
//	W   ← W · exp(−τ (E_hyb − E_T)) · max(0, cos arg R)
//
// The bounded force bias x̄ is used in the shift and in the weight alike, so the
// bound changes the variance and not the average. A run is a pure function of
// (Hamiltonian, trial, options): walkers go in tiles of fixed size, random
// numbers come from streams keyed by seed, step and walker, and sums are taken
// in walker order, so results do not depend on the number of cores.
//
// Energies are in hartree and imaginary times in 1/hartree (or in the unit of a
// model Hamiltonian and its inverse).
package afqmc
