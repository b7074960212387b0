package measured

import (
	"context"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"

	"leadline/hamiltonian"
	"leadline/trial"
	"leadline/trial/expansion"
	"leadline/trial/measured/amplitude"
)

// Population is a set of walkers of one moment of a walk with their weights.
type Population struct {
	Walkers trial.Walkers
	Weights []float64
}

// EnergyErrors is what the shot noise of a record does to energies over fixed
// walkers, hartree.
type EnergyErrors struct {
	// Mixed is one standard error of Σ W Re E_L / Σ W.
	Mixed float64
	// Local is the weighted median over the walkers of the standard error of
	// Re E_L.
	Local float64
}

// Energies returns the jackknife errors of energies over populations that a walk
// with the estimate has passed through: local energies with every batch of the
// record left out in turn. It takes as long as one evaluation of all local
// energies for each batch. place makes of an estimate the expansion whose sector
// is that of h. With fewer than three batches the errors are NaN.
func Energies(ctx context.Context, h *hamiltonian.Hamiltonian, e *amplitude.Estimate, place func(*amplitude.Estimate) *expansion.Expansion, populations []Population, memory int64) (EnergyErrors, error) {
	batches := len(e.Batches)
	out := EnergyErrors{math.NaN(), math.NaN()}
	if batches < 3 || len(populations) == 0 {
		return out, nil
	}
	// Of each walker: its energy without the first batch, sums of the others'
	// differences from that, its weight.
	var first, sum, squares, weights []float64
	mixed := make([]float64, batches)
	for without := range batches {
		if err := ctx.Err(); err != nil {
			return out, err
		}
		part := *e
		part.Batches = slices.Delete(slices.Clone(e.Batches), without, without+1)
		part.Weights = slices.Delete(slices.Clone(e.Weights), without, without+1)
		source, err := expansion.New(place(&part))
		if err != nil {
			return out, err
		}
		guide, err := trial.NewGuide(h, source, memory)
		if err != nil {
			return out, err
		}
		numerator, denominator, at := 0.0, 0.0, 0
		for _, p := range populations {
			m := guide.NewMixed(p.Walkers.Count)
			guide.Evaluate(m, p.Walkers)
			guide.LocalEnergies(m, p.Walkers)
			for i, w := range p.Weights {
				if without == 0 {
					first, sum, squares, weights = append(first, real(m.Energy[i])), append(sum, 0), append(squares, 0), append(weights, w)
				}
				if w > 0 && !m.Overlap[i].Zero() {
					energy := real(m.Energy[i])
					numerator += w * energy
					denominator += w
					sum[at] += energy - first[at]
					squares[at] += (energy - first[at]) * (energy - first[at])
				} else {
					weights[at] = 0
				}
				at++
			}
		}
		mixed[without] = numerator / denominator
	}
	n := float64(batches)
	for i := range sum {
		sum[i] = math.Sqrt(math.Max(0, squares[i]-sum[i]*sum[i]/n) * (n - 1) / n)
	}
	stat.SortWeighted(sum, weights)
	out.Local = stat.Quantile(0.5, stat.Empirical, sum, weights)
	out.Mixed = math.Sqrt(stat.PopVariance(mixed, nil) * (n - 1))
	return out, nil
}
