// Package hamiltonian holds the one form of the Hamiltonian that everything
// downstream sees, in an orthonormal basis of M real orbitals:
//
//	H = E_c + Σ_σ Σ_pq h^σ_pq c†_pσ c_qσ + ½ Σ_g s_g :v_g v_g:   (normal-ordered: stored)
//	  = E_c + Σ_σ Σ_pq t^σ_pq c†_pσ c_qσ + ½ Σ_g s_g v_g²         (squares: derived)
//
//	v_g = Σ_σ Σ_pq L^{gσ}_pq c†_pσ c_qσ,   t^σ = h^σ − ½ Σ_g s_g L^{gσ} L^{gσ}
//
// with signs s_g = ±1 and real factors L^{gσ}, symmetric or antisymmetric.
// For molecules s = +1 and (pq|rs) = Σ_g L^g_pq L^g_rs, in chemists' notation.
//
// The stored one-body matrix h is [Hamiltonian.OneBody]; t is only ever obtained
// from [Hamiltonian.SquareOneBody]. Energies are in hartree (or in the model's
// own unit for lattice and pairing models).
package hamiltonian
