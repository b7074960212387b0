package main

import (
	"context"
	"encoding/gob"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"leadline/cmd/leadline/job"
	"leadline/hamiltonian/strings"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/calibrate"
	"leadline/trial/measured/collapse"
)

// cacheVersion changes with the content of a cached collapse.
const cacheVersion = 1

// cached is a collapsed record as kept on disk: sector imposed, nothing else done.
type cached struct {
	Version                     int
	Orbitals, Up, Down, Batches int
	Means                       [][]complex128
	Weights                     []float64
	Reference                   *[2]uint64
	Provenance                  amplitude.Provenance
}

// collapseRecord returns the amplitudes of a record. They are kept beside it, in
// a file named by the hash of its content, and read back from there if they are.
func collapseRecord(ctx context.Context, r *recordFile, batches int, progress progressFunc) (e *amplitude.Estimate, hash string, err error) {
	if hash, err = r.hash(); err != nil {
		return nil, "", err
	}
	if batches == 0 {
		batches = 32
	}
	cache := fmt.Sprintf("%s.%.16s.collapsed", r.name, hash)
	if e = readCollapsed(cache, batches); e != nil {
		return e, hash, nil
	}
	e, err = runCollapse(ctx, r, collapse.Options{Batches: batches}, progress)
	if err != nil {
		return nil, hash, err
	}
	// Without a place to keep it the record is collapsed anew each time.
	err = writeFile(cache, func(w io.Writer) error {
		return gob.NewEncoder(w).Encode(cached{cacheVersion, e.Up.Orbitals(), e.Up.Electrons(), e.Down.Electrons(), batches,
			e.Batches, e.Weights, e.Reference, e.Provenance})
	})
	if errors.Is(err, os.ErrPermission) || errors.Is(err, os.ErrNotExist) {
		err = nil
	}
	return e, hash, err
}

// readCollapsed returns nil for anything but a whole cache of these settings.
func readCollapsed(name string, batches int) *amplitude.Estimate {
	file, err := os.Open(name)
	if err != nil {
		return nil
	}
	defer file.Close()
	var c cached
	if gob.NewDecoder(file).Decode(&c) != nil || c.Version != cacheVersion || c.Batches != batches {
		return nil
	}
	if c.Orbitals < 1 || c.Orbitals > 32 || min(c.Up, c.Down) < 0 || max(c.Up, c.Down) > c.Orbitals {
		return nil
	}
	size := strings.Count(c.Orbitals, c.Up) * strings.Count(c.Orbitals, c.Down)
	if len(c.Means) == 0 || len(c.Means) != len(c.Weights) {
		return nil
	}
	for _, m := range c.Means {
		if len(m) != size {
			return nil
		}
	}
	return &amplitude.Estimate{
		Up: strings.New(c.Orbitals, c.Up), Down: strings.New(c.Orbitals, c.Down),
		Batches: c.Means, Weights: c.Weights, Reference: c.Reference, Provenance: c.Provenance,
	}
}

func runCollapse(ctx context.Context, r *recordFile, o collapse.Options, progress progressFunc) (*amplitude.Estimate, error) {
	return collapse.Run(ctx, r.source, onThisMachine(o, "collapsing "+filepath.Base(r.name), progress))
}

// onThisMachine fills in the memory at hand and a display of progress.
func onThisMachine(o collapse.Options, stage string, progress progressFunc) collapse.Options {
	if available := availableMemory(); available > 0 {
		o.MemoryLimit = float64(available)
	}
	var tell func(int64)
	o.Progress = func(done, total int64) {
		if tell == nil {
			tell = progress(stage, total)
		}
		tell(done)
	}
	return o
}

// projections are the opt-in changes of collapsed amplitudes.
type projections struct {
	real         bool
	spin         *float64
	significance float64
}

func jobProjections(t job.Trial) projections {
	return projections{real: t.Real, spin: t.Spin, significance: t.Significance}
}

// apply does what was asked for, in a fixed order, linear steps first.
func (p projections) apply(e *amplitude.Estimate) error {
	if p.real {
		e.Real()
	}
	if p.spin != nil {
		if _, err := e.Spin(int(2 * *p.spin)); err != nil {
			return err
		}
	}
	if p.significance > 0 {
		e.Threshold(p.significance)
	}
	return nil
}

// stepTexts says what each step removed, compared with what noise alone puts
// there.
func stepTexts(e *amplitude.Estimate) []string {
	var out []string
	for _, s := range e.Steps {
		text := fmt.Sprintf("%s: removed weight %.4g, of noise alone %.4g, excess %s", s.Name, s.Removed, s.Expected, quoted(s.Excess.Value, s.Excess.Error))
		if !s.Linear {
			text += " (biases the amplitudes)"
		}
		out = append(out, text)
	}
	return out
}

// readCalibration estimates the channel from a calibration record.
func readCalibration(name string) (*calibrate.Channel, error) {
	if name == "" {
		return nil, nil
	}
	r, err := openRecord(name)
	if err != nil {
		return nil, err
	}
	defer r.close()
	return calibrate.Estimate(r.source, 32)
}
