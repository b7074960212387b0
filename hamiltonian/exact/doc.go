// Package exact solves a Hamiltonian by full configuration interaction: the
// lowest eigenstates in the space of all determinants of a sector.
//
// A state is a matrix of coefficients over up strings × down strings, stored
// row-major: element (I, J) at I·S_down + J belongs to the determinant
//
//	c†_{p_1,up} … c†_{p_n,up} c†_{q_1,down} … c†_{q_m,down} |0⟩
//
// with the orbitals of string I (p, ascending) and string J (q, ascending).
// Strings are numbered lexicographically over ascending orbital lists, as in
// package strings; for two electrons in three orbitals 110, 101, 011. All
// coefficients are real. Energies are in the Hamiltonian's unit (hartree).
//
// The product of the Hamiltonian with a state is written as matrix products
// over gathered rows (in the spirit of Knowles & Handy, Chem. Phys. Lett. 111,
// 315 (1984) and Olsen et al., J. Chem. Phys. 89, 2185 (1988)). With n electrons
// of a spin in M orbitals and S strings it takes, for a dense two-body part,
//
//	like spins:   2·S_other · (M over n−2) · (M−n+2 over 2)²     flops, for each spin
//	unlike spins: 2·S_up·S_down · M(M+1)/2 · (n_up(M−n_up) + 1)  flops
//
// which is 6.4 Gflop for 12 electrons in 12 orbitals (853,776 determinants).
// Antisymmetric factors double the second line, nearly; lattice
// models in their site basis need next to nothing of it. Eigenstates come from
// the block method of Davidson, J. Comput. Phys. 17, 87 (1975), with restarts and
// a test that no lower state of another symmetry was missed; a ground state takes
// 30 to 100 products, the test included.
package exact
