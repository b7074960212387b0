// Package molecule makes the Hamiltonian of a molecule from its geometry and a
// Gaussian basis: [Build]. It also gives what a mean-field calculation needs
// beyond it, the orthonormal orbitals, dipole matrices and a first density.
//
// Positions are in bohr, energies in hartree.
package molecule
