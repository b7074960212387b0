package main

import (
	"context"
	"fmt"

	"leadline/hamiltonian"
	"leadline/hamiltonian/fcidump"
	"leadline/hamiltonian/prepared"
)

// comparableTolerance is the factor tolerance, hartree, behind energies that are
// to be compared with others: those of leadline exact and inspect.
const comparableTolerance = 1e-10

// readIntegrals reads an integral file and factorises it; residual is the largest
// error left on any diagonal integral, hartree.
func readIntegrals(ctx context.Context, in *inputs, name string, tolerance float64, progress progressFunc) (h *hamiltonian.Hamiltonian, residual float64, err error) {
	file, size, err := in.open(name)
	if err != nil {
		return nil, 0, err
	}
	defer file.Close()
	tell := progress("reading "+name, size)
	integrals, err := fcidump.ReadWithin(ctx, file, in.path(name), readingMemory(), tell)
	if err != nil {
		return nil, 0, err
	}
	tell(size)
	if h, residual, err = integrals.Hamiltonian(ctx, tolerance); err != nil {
		return nil, 0, fmt.Errorf("%s: %w", in.path(name), err)
	}
	return h, residual, nil
}

// readPrepared reads a prepared Hamiltonian.
func readPrepared(ctx context.Context, in *inputs, name string, progress progressFunc) (*prepared.File, error) {
	file, size, err := in.open(name)
	if err != nil {
		return nil, err
	}
	defer file.Close()
	tell := progress("reading "+name, size)
	return prepared.Read(ctx, file, in.path(name), func(done, _ int64) { tell(done) })
}
