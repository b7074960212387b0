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
// 315 (1984) and Olsen et al., J. Chem. Phys. 89, 2185 (1988)); eigenstates
// come from the block method of Davidson, J. Comput. Phys. 17, 87 (1975), with
// restarts.
package exact
