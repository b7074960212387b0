// Package meanfield solves the Hartree–Fock equations of a
// [hamiltonian.Hamiltonian] in its orthonormal basis: restricted (RHF),
// restricted open-shell (ROHF) and unrestricted (UHF).
//
// A determinant with occupied orbitals C^σ (M×N_σ, real, orthonormal columns)
// and densities D^σ = C^σ C^σᵀ has the energy
//
//	E = E_c + Σ_σ tr(h^σ D^σ) + ½ Σ_g s_g [ρ_g² − Σ_σ tr(L^{gσ} D^σ L^{gσ} D^σ)],
//	ρ_g = Σ_σ tr(L^{gσ} D^σ)   (zero for antisymmetric factors)
//
// whose derivative is the Fock matrix
//
//	F^σ = ∂E/∂D^σ = h^σ + Σ_g s_g [ρ_g L^{gσ} − L^{gσ} D^σ L^{gσ}].
//
// The three kinds differ only in which rotations of orbitals are allowed: those
// of each spin on its own (UHF), or one rotation for both (RHF and ROHF, where
// closed, open and empty orbitals mix). Each start runs through DIIS, then a
// trust-region Newton method where DIIS stalls, then a test of the lowest
// eigenvalue of the orbital Hessian, which is followed downhill until the
// solution is a minimum. The lowest solution of all starts is kept. No search
// of this kind proves that a solution is the global minimum.
//
// All functions are deterministic for any number of goroutines. Energies are in
// hartree, or in the model's own unit.
//
// References: Roothaan, Rev. Mod. Phys. 23, 69 (1951) and 32, 179 (1960);
// Pople & Nesbet, J. Chem. Phys. 22, 571 (1954); Seeger & Pople, J. Chem. Phys.
// 66, 3045 (1977) for the conditions of stability.
package meanfield
