// Package measured makes trial states of records of randomized measurements.
//
// The parts: record (the file format), snapshot, clifford and matchgate (what
// one outcome says), calibrate (the noisy channel), collapse (a record into
// amplitudes), amplitude (means, errors, projections), check (figures of merit)
// and simulate (records of a known state). A collapsed record becomes an
// ordinary expansion, see Expansion; Direct asks the snapshots themselves.
package measured
