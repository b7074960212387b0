// Package trialtest is the law for trial sources: one conformance suite that
// every source passes. Everything is compared with the source's own overlaps,
// through exact relations or a brute-force expansion in Fock space, so the suite
// needs nothing from the source but what the walk uses.
package trialtest

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/trial"
)

// tolerance is the largest relative deviation in exact relations.
const tolerance = 1e-10

// Run runs the suite for a source and a Hamiltonian of its sector; special are
// further walkers that the source must handle, such as ones orthogonal to its
// leading determinant.
func Run(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source, special ...trial.Walkers) {
	t.Helper()
	walkers := []trial.Walkers{RandomWalkers(source.Sector(), false, 5, 1)}
	if s := source.Sector(); s.Up == s.Down {
		walkers = append(walkers, RandomWalkers(s, true, 3, 2))
	}
	walkers = append(walkers, special...)
	for _, w := range walkers {
		t.Run("overlap", func(t *testing.T) { testBruteForceOverlap(t, source, w) })
		t.Run("laws", func(t *testing.T) { testLaws(t, source, w) })
		t.Run("density", func(t *testing.T) { testDensity(t, source, w) })
		t.Run("fields", func(t *testing.T) { testFields(t, h, source, w) })
		t.Run("energy", func(t *testing.T) { testEnergy(t, h, source, w) })
		t.Run("batch", func(t *testing.T) { testBatch(t, h, source, w) })
	}
	t.Run("paired", func(t *testing.T) { testPaired(t, h, source) })
	t.Run("expectations", func(t *testing.T) { testExpectations(t, h, source) })
	t.Run("allocations", func(t *testing.T) { testAllocations(t, h, source) })
}

// RandomWalkers returns complex Gaussian walkers from a fixed seed.
func RandomWalkers(s hamiltonian.Sector, paired bool, count int, seed uint64) trial.Walkers {
	rng := rand.New(rand.NewPCG(seed, 77))
	w := trial.NewWalkers(s, paired, count)
	for i := range w.Data {
		w.Data[i] = rng.NormFloat64()
	}
	return w
}

// RandomHamiltonian returns a Hamiltonian with random one-body part and factors
// of both signs; antisymmetric factors and spin-resolved parts on request.
func RandomHamiltonian(s hamiltonian.Sector, factors, antisymmetric int, spinResolved bool, seed uint64) *hamiltonian.Hamiltonian {
	rng := rand.New(rand.NewPCG(seed, 78))
	h := &hamiltonian.Hamiltonian{Sector: s, Constant: rng.NormFloat64(), Factors: hamiltonian.NewFactors(s.Orbitals, factors)}
	h.Factors.Antisymmetric = antisymmetric
	for spin := range 2 {
		if spin == hamiltonian.Down && !spinResolved {
			h.OneBody[spin] = h.OneBody[hamiltonian.Up]
			continue
		}
		h.OneBody[spin] = mat.NewSymDense(s.Orbitals, nil)
		for p := range s.Orbitals {
			for q := range p + 1 {
				h.OneBody[spin].SetSym(p, q, rng.NormFloat64())
			}
		}
		packed := make([]float64, factors*hamiltonian.Pairs(s.Orbitals))
		for g := range factors {
			for p := range s.Orbitals {
				for q := range p + 1 {
					if g >= factors-antisymmetric && p == q {
						continue
					}
					packed[g*hamiltonian.Pairs(s.Orbitals)+hamiltonian.Pair(p, q)] = 0.4 * rng.NormFloat64()
				}
			}
		}
		h.Factors.Packed[spin] = packed
		if spin == hamiltonian.Up {
			h.Factors.Packed[hamiltonian.Down] = packed
		}
	}
	for g := range h.Factors.Sign {
		if g%3 == 2 {
			h.Factors.Sign[g] = -1
		}
	}
	return h
}

func guide(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source) *trial.Guide {
	t.Helper()
	g, err := trial.NewGuide(h, source, 1<<30)
	if err != nil {
		t.Fatal(err)
	}
	return g
}

func overlaps(source trial.Source, w trial.Walkers) []trial.Overlap {
	out := make([]trial.Overlap, w.Count)
	source.Overlaps(out, w)
	return out
}

// near fails unless got is within a relative distance of want, on the scale
// of the larger of |want| and scale.
func near(t *testing.T, what string, got, want complex128, scale float64) {
	t.Helper()
	if d := cmplx.Abs(got - want); !(d <= tolerance*math.Max(cmplx.Abs(want), scale)) {
		t.Errorf("%s: got %.12g, want %.12g, difference %.3g", what, got, want, d)
	}
}

// testBruteForceOverlap compares the overlap with Σ_D conj(c_D) ⟨D|φ⟩, where
// conj(c_D) is the source's own overlap with the basis determinant D: linearity.
func testBruteForceOverlap(t *testing.T, source trial.Source, w trial.Walkers) {
	f := newFock(source.Sector())
	bra := f.bra(source)
	w = w.Unpaired()
	for i, got := range overlaps(source, w) {
		ket := f.expand(w, i)
		var sum complex128
		var scale float64
		for d := range ket {
			sum += bra[d] * ket[d]
			scale += cmplx.Abs(bra[d] * ket[d])
		}
		near(t, "overlap", got.Value(), sum, scale)
	}
}

// testLaws checks the scale and phase law, antisymmetry, and invariance under a
// mix of columns of unit determinant.
func testLaws(t *testing.T, source trial.Source, w trial.Walkers) {
	w = w.Unpaired()
	before := overlaps(source, w)
	for spin := range 2 {
		n := w.Electrons(spin)
		if n == 0 {
			continue
		}
		m := w.Orbitals
		factor := complex(0.3, -1.7)
		scaled := clone(w)
		for i := range w.Count {
			for p := range m {
				scaled.Set(i, spin, p, n-1, factor*w.At(i, spin, p, n-1))
			}
		}
		for i, o := range overlaps(source, scaled) {
			near(t, "scaled column", o.Over(before[i]), factor, 1)
		}
		if n < 2 {
			continue
		}
		swapped, mixed := clone(w), clone(w)
		for i := range w.Count {
			for p := range m {
				a, b := w.At(i, spin, p, 0), w.At(i, spin, p, n-1)
				swapped.Set(i, spin, p, 0, b)
				swapped.Set(i, spin, p, n-1, a)
				mixed.Set(i, spin, p, 0, a+complex(0.7, 0.4)*b)
			}
		}
		for i, o := range overlaps(source, swapped) {
			near(t, "swapped columns", o.Over(before[i]), -1, 1)
		}
		for i, o := range overlaps(source, mixed) {
			near(t, "mixed columns", o.Over(before[i]), 1, 1)
		}
	}
}

// testDensity compares the whole one-body density, obtained by contraction with
// the support, with the completer's, and its trace with N.
func testDensity(t *testing.T, source trial.Source, w trial.Walkers) {
	fast, ok := source.(trial.DensitySource)
	if !ok {
		t.Skip("source gives overlaps only")
	}
	slow := trial.Complete(source)
	m := w.Orbitals
	support := fast.Support()
	lengthFast := (support.Columns(0) + support.Columns(1)) * m
	lengthSlow := 2 * m * m
	of, os := make([]trial.Overlap, w.Count), make([]trial.Overlap, w.Count)
	df, ds := make([]float64, 2*w.Count*lengthFast), make([]float64, 2*w.Count*lengthSlow)
	fast.Densities(of, df, w)
	slow.Densities(os, ds, w)
	for i := range w.Count {
		near(t, "overlap with density", of[i].Over(os[i]), 1, 1)
		atFast, atSlow := 0, 0
		for spin := range 2 {
			n := support.Columns(spin)
			var trace complex128
			scale := 0.0
			for k := range m * m {
				scale = max(scale, math.Abs(ds[2*i*lengthSlow+atSlow+k]))
			}
			for p := range m {
				for q := range m {
					var sum complex128
					for j := range n {
						d := complex(df[2*i*lengthFast+atFast+j*m+q], df[(2*i+1)*lengthFast+atFast+j*m+q])
						sum += cmplx.Conj(support.At(spin, p, j)) * d
					}
					want := complex(ds[2*i*lengthSlow+atSlow+p*m+q], ds[(2*i+1)*lengthSlow+atSlow+p*m+q])
					near(t, "density", sum, want, scale)
					if p == q {
						trace += sum
					}
				}
			}
			near(t, "trace of density", trace, complex(float64(w.Electrons(spin)), 0), scale)
			atFast += n * m
			atSlow += m * m
		}
	}
}

// testFields checks d/dε ln O(exp(εL_g)φ) = ⟨v_g⟩ by central differences.
func testFields(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source, w trial.Walkers) {
	g := guide(t, h, source)
	m := g.NewMixed(w.Count)
	g.Evaluate(m, w)
	ng := h.Factors.Count()
	w = w.Unpaired()
	const step = 1e-4
	for k := range ng {
		var moved [2][]trial.Overlap
		for side, e := range []float64{step, -step} {
			moved[side] = overlaps(source, rotate(h, w, k, e))
		}
		for i := range w.Count {
			got := complex(m.Fields[2*i*ng+k], m.Fields[(2*i+1)*ng+k])
			want := cmplx.Log(moved[0][i].Over(moved[1][i])) / (2 * step)
			if d := cmplx.Abs(got - want); d > 1e-5*(1+cmplx.Abs(want)*cmplx.Abs(want)*cmplx.Abs(want)) {
				t.Errorf("field %d of walker %d: got %.8g, finite difference %.8g", k, i, got, want)
			}
		}
	}
}

// rotate returns exp(εv_g)φ to fourth order.
func rotate(h *hamiltonian.Hamiltonian, w trial.Walkers, g int, e float64) trial.Walkers {
	out := clone(w)
	m := w.Orbitals
	l := mat.NewDense(m, m, nil)
	for spin := range 2 {
		h.Factors.Unpack(l, g, spin)
		for i := range w.Count {
			for j := range w.Electrons(spin) {
				term := make([]complex128, m)
				for p := range term {
					term[p] = w.At(i, spin, p, j)
				}
				for order := 1; order <= 4; order++ {
					next := make([]complex128, m)
					for p := range m {
						for q := range m {
							next[p] += complex(e*l.At(p, q)/float64(order), 0) * term[q]
						}
						out.Set(i, spin, p, j, out.At(i, spin, p, j)+next[p])
					}
					term = next
				}
			}
		}
	}
	return out
}

// testEnergy compares the local energy with ⟨Ψ_T|H|φ⟩ by brute force and with
// the completer's.
func testEnergy(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source, w trial.Walkers) {
	g := guide(t, h, source)
	m := g.NewMixed(w.Count)
	g.Evaluate(m, w)
	g.LocalEnergies(m, w)
	f := newFock(source.Sector())
	bra := f.bra(source)
	u := w.Unpaired()
	for i := range w.Count {
		ket := f.expand(u, i)
		product := f.apply(h, ket)
		var numerator, denominator complex128
		var scale float64
		for d := range ket {
			numerator += bra[d] * product[d]
			denominator += bra[d] * ket[d]
			scale += cmplx.Abs(bra[d] * product[d])
		}
		near(t, "local energy", m.Energy[i], numerator/denominator, scale/cmplx.Abs(denominator))
	}
}

// testBatch checks that a walker gives the same in a batch and alone.
func testBatch(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source, w trial.Walkers) {
	g := guide(t, h, source)
	all, one := g.NewMixed(w.Count), g.NewMixed(1)
	g.Evaluate(all, w)
	g.LocalEnergies(all, w)
	ng := h.Factors.Count()
	for i := range w.Count {
		single := w.Slice(i, i+1)
		g.Evaluate(one, single)
		g.LocalEnergies(one, single)
		near(t, "overlap alone and in a batch", all.Overlap[i].Over(one.Overlap[0]), 1, 1)
		near(t, "energy alone and in a batch", all.Energy[i], one.Energy[0], 1)
		for k := range ng {
			near(t, "field alone and in a batch", complex(all.Fields[2*i*ng+k], all.Fields[(2*i+1)*ng+k]), complex(one.Fields[k], one.Fields[ng+k]), 1)
		}
	}
}

// testPaired checks that paired walkers give what their unpaired copies give.
func testPaired(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source) {
	s := source.Sector()
	if s.Up != s.Down {
		t.Skip("unequal numbers of up and down electrons")
	}
	g := guide(t, h, source)
	w := RandomWalkers(s, true, 4, 5)
	paired, plain := g.NewMixed(w.Count), g.NewMixed(w.Count)
	g.Evaluate(paired, w)
	g.LocalEnergies(paired, w)
	g.Evaluate(plain, w.Unpaired())
	g.LocalEnergies(plain, w.Unpaired())
	for i := range w.Count {
		near(t, "paired overlap", paired.Overlap[i].Over(plain.Overlap[i]), 1, 1)
		near(t, "paired energy", paired.Energy[i], plain.Energy[i], 1)
	}
	for k := range plain.Fields {
		near(t, "paired field", complex(paired.Fields[k], 0), complex(plain.Fields[k], 0), 1)
	}
}

// testExpectations compares the source's own expectation values with brute force.
func testExpectations(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source) {
	e, ok := source.(trial.Expectations)
	if !ok {
		t.Skip("source gives no expectation values")
	}
	f := newFock(source.Sector())
	ket := f.bra(source)
	for d := range ket {
		ket[d] = cmplx.Conj(ket[d])
	}
	norm := real(inner(ket, ket))
	near(t, "trial energy", complex(e.Energy(h), 0), complex(real(inner(ket, f.apply(h, ket)))/norm, 0), 1)
	near(t, "trial spin", complex(e.SpinSquared(), 0), complex(real(f.spinSquared(ket))/norm, 0), 1)
	density := e.OneBodyDensity()
	for spin := range 2 {
		for p := range source.Sector().Orbitals {
			for q := range source.Sector().Orbitals {
				want := real(inner(ket, f.move(ket, spin, p, q))) / norm
				near(t, "trial density", complex(density[spin].At(p, q), 0), complex(want, 0), 1)
			}
		}
	}
}

// testAllocations checks that nothing is allocated per call once warm.
func testAllocations(t *testing.T, h *hamiltonian.Hamiltonian, source trial.Source) {
	if _, ok := source.(trial.EnergySource); !ok {
		t.Skip("completed from overlaps")
	}
	g := guide(t, h, source)
	w := RandomWalkers(source.Sector(), false, 4, 6)
	m := g.NewMixed(w.Count)
	if n := testing.AllocsPerRun(5, func() {
		g.Overlaps(m, w)
		g.Evaluate(m, w)
		g.LocalEnergies(m, w)
	}); n != 0 {
		t.Errorf("%v allocations in a call, expected none", n)
	}
}

func clone(w trial.Walkers) trial.Walkers {
	w.Data = append([]float64(nil), w.Data...)
	return w
}

func inner(a, b []complex128) complex128 {
	var s complex128
	for d := range a {
		s += cmplx.Conj(a[d]) * b[d]
	}
	return s
}
