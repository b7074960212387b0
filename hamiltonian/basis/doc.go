// Package basis holds Gaussian basis sets: the contracted shells that each
// element carries. Thirteen published sets for hydrogen to argon are embedded
// ([Names], [Named]); others are read from text with [Read].
//
// A set's figures are its publication's, named in [Set.Publication]. A
// contracted shell that differs from the printed one only by leaving out a
// primitive that also stands alone spans the same functions.
package basis
