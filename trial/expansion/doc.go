// Package expansion is the trial source of a CI expansion over core and active
// orbitals.
package expansion
