package afqmc_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"slices"
	"testing"

	"gonum.org/v1/gonum/stat"

	"leadline/afqmc"
	"leadline/afqmc/statistics"
	"leadline/hamiltonian"
	"leadline/hamiltonian/meanfield"
	occupations "leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/expansion"
	"leadline/trial/measured"
	"leadline/trial/measured/amplitude"
	"leadline/trial/measured/collapse"
	"leadline/trial/measured/record"
	"leadline/trial/measured/simulate"
)

// measuredSystem is a system whose exact ground state is measured.
type measuredSystem struct {
	name  string
	exact float64 // full CI of an independent code over the same integral file
	h     *hamiltonian.Hamiltonian
	start trial.Orbitals
	state *simulate.State
}

func newMeasuredSystem(t *testing.T, name string, exact float64) *measuredSystem {
	e := readExpansion(t, name+"_fci")
	up, down := occupations.New(e.Active, e.Up), occupations.New(e.Active, e.Down)
	s := &measuredSystem{name: name, exact: exact, h: load(t, name),
		state: &simulate.State{Orbitals: e.Active, Up: e.Up, Down: e.Down, Amplitudes: make([]complex128, up.Len()*down.Len())}}
	for _, d := range e.Determinants {
		s.state.Amplitudes[up.Index(d.Up)*down.Len()+down.Index(d.Down)] = d.Amplitude
	}
	s.start = columns(solve(t, s.h, meanfield.RHF))
	return s
}

// record simulates a noiseless record.
func (s *measuredSystem) record(t *testing.T, opt simulate.Options) record.Source {
	t.Helper()
	header, settings, err := simulate.Settings(context.Background(), s.state, opt)
	if err != nil {
		t.Fatal(err)
	}
	return record.NewMemory(header, settings)
}

// estimate collapses a record and keeps real singlets.
func (s *measuredSystem) estimate(t *testing.T, source record.Source) *amplitude.Estimate {
	t.Helper()
	e, err := collapse.Run(context.Background(), source, collapse.Options{})
	if err != nil {
		t.Fatal(err)
	}
	e.Real()
	if _, err := e.Spin(0); err != nil {
		t.Fatal(err)
	}
	return e
}

func (s *measuredSystem) place(e *amplitude.Estimate) *expansion.Expansion {
	return measured.Expansion(e, s.h.Orbitals, 0)
}

// populations keeps rows, and the walkers of every so many rows.
type populations struct {
	every, seen         int
	kept                []measured.Population
	numerator, weighted []float64
}

func (p *populations) Record(r afqmc.Row) error {
	if r.Sampled {
		p.numerator, p.weighted = append(p.numerator, r.Numerator), append(p.weighted, r.Weight)
	}
	return nil
}

func (p *populations) Observe(w *afqmc.Walk) {
	if p.seen%p.every == p.every/2 {
		walkers := w.Walkers()
		walkers.Data = slices.Clone(walkers.Data)
		p.kept = append(p.kept, measured.Population{Walkers: walkers, Weights: slices.Clone(w.State.Weight)})
	}
	p.seen++
}

func (s *measuredSystem) run(t *testing.T, source trial.Source, length float64) (*afqmc.Result, *populations) {
	t.Helper()
	guide, err := trial.NewGuide(s.h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	rows := &populations{every: max(1, int(length/0.05)/6)}
	r, err := afqmc.Run(context.Background(), guide, s.start, afqmc.Options{
		TimeStep: 0.01, Walkers: 200, Equilibration: 5, Length: length, Seed: 1, Cores: 2,
	}, rows)
	if err != nil {
		t.Fatal(err)
	}
	return r, rows
}

func (s *measuredSystem) runExpansion(t *testing.T, e *expansion.Expansion, length float64) (*afqmc.Result, *populations) {
	t.Helper()
	source, err := expansion.New(e)
	if err != nil {
		t.Fatal(err)
	}
	return s.run(t, source, length)
}

// TestMeasuredTrials runs with records of the exact state, which without shot
// noise would give the exact energy and no variance. Over independent records of
// each size: with many shots every energy is exact within four combined
// statistical and predicted measurement errors; the deviation falls at least by
// three from the fewest shots to the most, a hundred times as many or more; the energies of half records differ by what the measurement error
// predicts, twice that of the full record.
func TestMeasuredTrials(t *testing.T) {
	if testing.Short() {
		t.Skip("statistical")
	}
	long := os.Getenv("LEADLINE_LONG") != ""
	for _, c := range []struct {
		name     string
		exact    float64
		ensemble record.Ensemble
		settings []int // of 20 shots
		records  int
		length   float64
		long     bool
	}{
		{"H4_square2.4b_sto6g", -1.98664152, record.Lagrangian, []int{100, 1000, 10000}, 3, 10, false},
		{"H6_ring_R2.8_sto6g", -3.0474873688514066, record.Matching, []int{10000}, 1, 6, false},
		{"H4_square2.4b_sto6g", -1.98664152, record.Matching, []int{100, 1000, 10000, 100000}, 8, 20, true},
		{"H6_ring_R2.8_sto6g", -3.0474873688514066, record.Lagrangian, []int{1000, 10000, 100000}, 4, 20, true},
	} {
		t.Run(fmt.Sprintf("%s %s", c.name, c.ensemble), func(t *testing.T) {
			if c.long && !long {
				t.Skip("set LEADLINE_LONG=1 for the long rows")
			}
			s := newMeasuredSystem(t, c.name, c.exact)
			const shots = 20
			t.Logf("%9s  %10s  %9s  %9s  %9s  %9s  %9s  %9s  %9s", "shots", "infidelity", "bias", "rms", "statist.", "measurem.", "halves/2", "its stat.", "SE(E_L)")
			most := 0.0
			for k, settings := range c.settings {
				var deviation, statistical, predicted, halved, paired, pulls, infidelity, local []float64
				for seed := range c.records {
					e := s.estimate(t, s.record(t, simulate.Options{Ensemble: c.ensemble, Settings: settings, ShotsPerSetting: shots, Seed: uint64(100*k + seed + 1)}))
					r, rows := s.runExpansion(t, s.place(e), c.length)
					errors, err := measured.Energies(context.Background(), s.h, e, s.place, rows.kept, 1<<30)
					if err != nil {
						t.Fatal(err)
					}
					first, second := measured.HalfExpansions(e, s.h.Orbitals, 0)
					_, a := s.runExpansion(t, first, c.length)
					_, b := s.runExpansion(t, second, c.length)
					difference, pairedError := pairedDifference(a, b)
					x := e.Noise()
					infidelity = append(infidelity, x/(1+x))
					deviation = append(deviation, 1e3*(r.Energy.Mean-c.exact))
					statistical = append(statistical, 1e3*r.Energy.Error)
					predicted = append(predicted, 1e3*errors.Mixed)
					halved, paired = append(halved, 1e3*difference/2), append(paired, 1e3*pairedError/2)
					pulls = append(pulls, difference/math.Hypot(2*errors.Mixed, pairedError))
					local = append(local, 1e3*errors.Local)
					if k == len(c.settings)-1 {
						if sigma := math.Hypot(r.Energy.Error, errors.Mixed); math.Abs(r.Energy.Mean-c.exact) > 4*sigma {
							t.Errorf("%d shots, record %d: off by %.3f mEh, error %.3f statistical and %.3f of the measurement",
								shots*settings, seed, 1e3*(r.Energy.Mean-c.exact), 1e3*r.Energy.Error, 1e3*errors.Mixed)
						}
					}
				}
				spread := rms(deviation)
				t.Logf("%9d  %10.2e  %+9.3f  %9.3f  %9.3f  %9.3f  %9.3f  %9.3f  %9.3f", shots*settings, stat.Mean(infidelity, nil), stat.Mean(deviation, nil), spread,
					rms(statistical), rms(predicted), rms(halved), rms(paired), stat.Mean(local, nil))
				most = max(most, spread)
				if k > 0 && k == len(c.settings)-1 && spread > 0.35*most {
					t.Errorf("%d shots: deviation %.3f mEh, was %.3f with fewer", shots*settings, spread, most)
				}
				// χ² per record of the half differences, three sigma; from 10⁴ shots
				// on, where the noise is small enough for linear propagation.
				n := float64(len(pulls))
				if x := rms(pulls) * rms(pulls); k > 0 && n > 1 && (x > 1+3*math.Sqrt(2/n) || x < 0.05) {
					t.Errorf("%d shots: half differences are %.2f times their predicted error, measurement and statistics", shots*settings, math.Sqrt(x))
				}
			}
		})
	}
}

func rms(x []float64) float64 {
	sum := 0.0
	for _, v := range x {
		sum += v * v
	}
	return math.Sqrt(sum / float64(len(x)))
}

// pairedDifference returns the difference of two energies from the same random
// numbers with its statistical error.
func pairedDifference(a, b *populations) (difference, err float64) {
	one, two := statistics.Ratio(a.numerator, a.weighted).Mean, statistics.Ratio(b.numerator, b.weighted).Mean
	rows := make([]float64, len(a.numerator))
	for i := range rows {
		rows[i] = (a.numerator[i]-one*a.weighted[i])/stat.Mean(a.weighted, nil) - (b.numerator[i]-two*b.weighted[i])/stat.Mean(b.weighted, nil)
	}
	return one - two, statistics.Mean(rows).Error
}

// TestDirectSourceWalks lets the snapshots themselves drive a short walk, by
// Pfaffians and by minors: the same rows as from the collapsed amplitudes.
func TestDirectSourceWalks(t *testing.T) {
	s := newMeasuredSystem(t, "H4_square2.4b_sto6g", -1.98664152)
	for _, ensemble := range []record.Ensemble{record.Matching, record.Lagrangian} {
		source := s.record(t, simulate.Options{Ensemble: ensemble, Settings: 60, Seed: 5})
		estimate, err := collapse.Run(context.Background(), source, collapse.Options{})
		if err != nil {
			t.Fatal(err)
		}
		collapsed, err := expansion.New(s.place(estimate))
		if err != nil {
			t.Fatal(err)
		}
		direct, err := measured.NewDirect(source, s.h.Orbitals, 0, nil)
		if err != nil {
			t.Fatal(err)
		}
		var rows [2]populations
		// The same mean-field shift for both: it moves the fields.
		shifted := struct {
			*measured.Direct
			trial.Expectations
		}{direct, collapsed}
		for k, own := range []trial.Source{collapsed, shifted} {
			guide, err := trial.NewGuide(s.h, own, 1<<30)
			if err != nil {
				t.Fatal(err)
			}
			rows[k].every = 100
			_, err = afqmc.Run(context.Background(), guide, s.start, afqmc.Options{TimeStep: 0.01, Walkers: 4, Equilibration: 0.01, Length: 0.15, Seed: 3}, &rows[k])
			if err != nil {
				t.Fatal(err)
			}
		}
		if n := len(rows[0].numerator); n < 3 || n != len(rows[1].numerator) {
			t.Fatalf("%s: %d and %d rows", ensemble, n, len(rows[1].numerator))
		}
		for i := range rows[0].numerator {
			a, b := rows[0].numerator[i]/rows[0].weighted[i], rows[1].numerator[i]/rows[1].weighted[i]
			if math.Abs(a-b) > 1e-8*math.Abs(a) || math.Abs(rows[0].weighted[i]/rows[1].weighted[i]-1) > 1e-8 {
				t.Errorf("%s, row %d: energy %.12f, direct %.12f", ensemble, i+1, a, b)
			}
		}
	}
}
