// Package trial holds the vocabulary between a trial state and the walk that it
// guides. A trial answers one question: what is your overlap with this walker?
// Everything else that the walk needs (the mixed one-body density behind the
// force bias, the local energy) is an optional ability of a source, found by
// assertion, and is otherwise completed exactly from overlaps.
//
//	O(φ)    = ⟨Ψ_T|φ⟩
//	D_iq    = ⟨Ψ_T|s†_i c_q|φ⟩ / O        s†_i creates support orbital i
//	⟨v_g⟩   = Σ_σ Σ_iq (S†L^{gσ})_iq D^σ_iq
//	E_L(φ)  = ⟨Ψ_T|H|φ⟩ / O
//
// ⟨Ψ_T| carries complex-conjugated coefficients; O, D, ⟨v_g⟩ and E_L are complex.
// A determinant walker |φ⟩ = Π_j (Σ_p φ_pj c†_p)|0⟩, columns left to right, up
// before down.
package trial
