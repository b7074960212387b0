package exact

import (
	"context"
	"math"
	"runtime"
	"slices"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

func solve(t testing.TB, h *hamiltonian.Hamiltonian, options Options) *Result {
	t.Helper()
	result, err := Solve(context.Background(), h, options)
	if err != nil {
		t.Fatal(err)
	}
	return result
}

func spin(s float64) *float64 { return &s }

// molecules lists full CI energies in hartree of the files in testdata/integrals,
// made from the same files by an independent string-based program (checked there
// against Jordan–Wigner matrices to 5e-13), and the lowest energy of odd total
// spin, S = 1; NaN where not computed.
var molecules = []struct {
	name         string
	lowest, odd  float64
	determinants int
	slow         bool
}{
	{"H2_sto3g_R1.4", -1.137275943617, -0.531807570497, 4, false},
	{"H2_sto6g_R1.4", -1.145929244971405, math.NaN(), 4, false},
	{"HeH+_sto3g_R1.4632", -2.85146618041, -2.041771591705, 4, false},
	{"H2_ccpvdz_R4.0", -1.01240407573, -0.991187834035, 100, false},
	{"H4_chain_R1.8_sto6g", -2.1903842187899376, math.NaN(), 36, false},
	{"H4_rect2.0x2.2b_sto6g", -1.994333484952, -1.945592759461, 36, false},
	{"H4_square1.23A_sto3g", -1.969512165218, -1.94222667221, 36, false},
	{"H4_square2.4b_sto6g", -1.9866415143937017, math.NaN(), 36, false},
	{"H5_chain_R1.8_sto6g_doublet", -2.677036500885, math.NaN(), 100, false},
	{"H6_chain_R1.8_sto6g", -3.2667430997007814, math.NaN(), 400, false},
	{"H6_chain_R2.4_sto6g", -3.136097475419, -3.043375374957, 400, false},
	{"H6_ring_R1.8_sto6g", -3.257438035111, -2.837695330265, 400, false},
	{"H6_ring_R2.8_sto6g", -3.0474873688514066, math.NaN(), 400, false},
	{"H8_chain_R1.8_sto6g", -4.345079402184432, math.NaN(), 4900, false},
	{"H10_chain_R1.8_sto6g", -5.424385376351, -5.297081007847, 63504, true},
	{"LiH_1.6A_sto6g", -7.972249851361, -7.855392958152, 225, false},
	{"LiH_3.0A_631g", -7.949786252771, -7.924848427775, 3025, false},
	{"Be_ccpvdz", -14.617409506554, -14.516302760636, 8281, false},
	{"BeH2_C_purvis", -15.674818551705, -15.637040989036, 14400, true},
	{"H2O_sto3g_testgeom", -75.012980198443, -74.736462542149, 441, false},
	{"N2_1.6A_sto6g", -108.597095443637, -108.54806886063, 14400, true},
	{"N_631g_quartet", -54.419939662414, math.NaN(), 4536, false},
	{"Hubbard_sq2x4_U8_4u4d", -3.467173437214, math.NaN(), 4900, false},
	{"Hubbard_ring10_U4_5u5d", -5.834322635773, math.NaN(), 63504, true},
}

func TestMolecules(t *testing.T) {
	const tolerance = 1e-8
	for _, c := range molecules {
		if c.slow && testing.Short() {
			continue
		}
		h := readIntegrals(t, c.name)
		low, _ := spinRange(h.Sector)
		result := solve(t, h, Options{})
		state := result.States[0]
		if math.Abs(state.Energy-c.lowest) > tolerance || result.Space.Dim() != c.determinants {
			t.Errorf("%s: energy %.12f in %d determinants, reference %.12f in %d", c.name, state.Energy, result.Space.Dim(), c.lowest, c.determinants)
		}
		if math.Abs(state.SpinSquared-low*(low+1)) > 1e-9 {
			t.Errorf("%s: S² %v, expected %v", c.name, state.SpinSquared, low*(low+1))
		}
		if math.IsNaN(c.odd) {
			continue
		}
		state = solve(t, h, Options{Spin: spin(1)}).States[0]
		if math.Abs(state.Energy-c.odd) > tolerance || math.Abs(state.SpinSquared-2) > 1e-9 {
			t.Errorf("%s: triplet energy %.12f, reference %.12f, S² %v", c.name, state.Energy, c.odd, state.SpinSquared)
		}
	}
}

// lowest returns the eigenvalues of a small matrix, ascending, and the S² of each
// eigenvector, from those of a + 1e-7 S²: in degenerate groups S² is diagonal.
func lowest(t *testing.T, a, square *mat.SymDense) (energies, spins []float64) {
	t.Helper()
	n := a.SymmetricDim()
	shifted := mat.NewSymDense(n, nil)
	shifted.ScaleSym(1e-7, square)
	shifted.AddSym(shifted, a)
	var eigen mat.EigenSym
	if !eigen.Factorize(shifted, true) {
		t.Fatal("no eigenvalues")
	}
	var vectors mat.Dense
	eigen.VectorsTo(&vectors)
	for k := range n {
		x := vectors.ColView(k)
		energies, spins = append(energies, mat.Inner(x, a, x)), append(spins, mat.Inner(x, square, x))
	}
	return energies, spins
}

// Many states of random Hamiltonians of every kind against diagonalised Fock space.
func TestStatesAgainstFockSpace(t *testing.T) {
	seed := uint64(100)
	for _, s := range sectors {
		for _, kind := range kinds {
			seed++
			h := randomHamiltonian(s, kind.symmetric, kind.antisymmetric, kind.spinFree, seed)
			energies, spins := lowest(t, bruteForce(h), bruteSpinSquared(s))
			for _, states := range []int{1, 2, 5, len(energies)} {
				if states > len(energies) {
					continue
				}
				result := solve(t, h, Options{States: states})
				for k, state := range result.States {
					if math.Abs(state.Energy-energies[k]) > 1e-11 || state.Residual > 1e-7 {
						t.Errorf("%+v %+v: state %d of %d has energy %v, brute force %v", s, kind, k, states, state.Energy, energies[k])
					}
					// A degenerate group cut by the number of states has no definite spin.
					cut := states < len(energies) && energies[states]-energies[k] < 1e-6
					if kind.spinFree && !cut && math.Abs(state.SpinSquared-spins[k]) > 1e-6 {
						t.Errorf("%+v %+v: state %d of %d has S² %v, brute force %v", s, kind, k, states, state.SpinSquared, spins[k])
					}
				}
			}
		}
	}
}

// All states of every total spin, and no more, against diagonalised Fock space.
func TestTotalSpinAgainstFockSpace(t *testing.T) {
	for k, s := range sectors {
		h := randomHamiltonian(s, 2, 1, true, uint64(200+k))
		energies, spins := lowest(t, bruteForce(h), bruteSpinSquared(s))
		low, high := spinRange(s)
		count := 0
		for total := low; total <= high; total++ {
			var want []float64
			for i, v := range spins {
				if math.Abs(v-total*(total+1)) < 1e-6 {
					want = append(want, energies[i])
				}
			}
			count += len(want)
			result := solve(t, h, Options{States: len(want), Spin: &total})
			for i, state := range result.States {
				if math.Abs(state.Energy-want[i]) > 1e-11 || math.Abs(state.SpinSquared-total*(total+1)) > 1e-11 {
					t.Errorf("%+v S=%v: state %d has energy %v and S² %v, brute force %v", s, total, i, state.Energy, state.SpinSquared, want[i])
				}
			}
			if _, err := Solve(context.Background(), h, Options{States: len(want) + 1, Spin: &total}); err == nil {
				t.Errorf("%+v S=%v: %d states given, there are %d", s, total, len(want)+1, len(want))
			}
		}
		if count != len(energies) {
			t.Errorf("%+v: %d states of all spins, expected %d", s, count, len(energies))
		}
	}
}

// Even and odd orbitals that do not mix: four symmetries, and the determinant
// lowest on the diagonal is often not of the symmetry of the lowest states.
func TestNoSymmetryIsMissed(t *testing.T) {
	wrong := 0
	for seed := range uint64(25) {
		s := hamiltonian.Sector{Orbitals: 6, Up: 2, Down: 2}
		h := randomHamiltonian(s, 3, 0, true, 300+seed)
		for p := range 6 {
			for q := range p {
				if (p+q)%2 == 1 {
					h.OneBody[0].SetSym(p, q, 0)
					for g := range h.Factors.Sign {
						h.Factors.Row(g, hamiltonian.Up)[hamiltonian.Pair(p, q)] = 0
					}
				}
			}
		}
		brute := bruteForce(h)
		var eigen mat.EigenSym
		eigen.Factorize(brute, true)
		want := eigen.Values(nil)
		var vectors mat.Dense
		eigen.VectorsTo(&vectors)
		o, err := NewOperator(h)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(vectors.At(lowestOf(o.Diagonal(), 1)[0], 0)) < 1e-10 {
			wrong++
		}
		for _, states := range []int{1, 2, 4} {
			for k, state := range solve(t, h, Options{States: states}).States {
				if math.Abs(state.Energy-want[k]) > 1e-10 {
					t.Errorf("seed %d: state %d of %d has energy %v, brute force %v", seed, k, states, state.Energy, want[k])
				}
			}
		}
	}
	if wrong == 0 {
		t.Error("no case starts from the wrong symmetry")
	}
}

// The test state alone must find what a start of good symmetry misses.
func TestGuardFindsMissedState(t *testing.T) {
	// Two blocks of 40 states that do not couple. The second holds the lowest
	// state, the first the lowest diagonal element.
	const n = 80
	a := mat.NewSymDense(n, nil)
	for i := range n {
		a.SetSym(i, i, float64(i%40))
	}
	for i := 40; i < n; i++ {
		a.SetSym(i, i, a.At(i, i)+1)
		for j := 40; j < i; j++ {
			a.SetSym(i, j, -1)
		}
	}
	var eigen mat.EigenSym
	eigen.Factorize(a, false)
	d := &davidson{
		operator: func(dst, x []float64) {
			mat.NewVecDense(n, dst).MulVec(a, mat.NewVecDense(n, x))
		},
		states: 2, tolerance: 1e-9, iterations: 1000,
	}
	first := true
	d.project = func(x []float64) { // keeps the noise out of the start
		if first && d.space.size < d.states {
			clear(x[40:])
		} else {
			first = false
		}
	}
	for i := range n {
		d.diagonal = append(d.diagonal, a.At(i, i))
	}
	got, converged, err := d.run(context.Background())
	if err != nil || !converged {
		t.Fatal(converged, err)
	}
	for k, v := range got {
		if want := eigen.Values(nil)[k]; math.Abs(v-want) > 1e-12 {
			t.Errorf("state %d has energy %v, expected %v", k, v, want)
		}
	}
}

// The same numbers, bit by bit, on one processor and on three.
func TestIndependentOfProcessors(t *testing.T) {
	h := readIntegrals(t, "LiH_3.0A_631g")
	solveOn := func(processors int) State {
		defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(processors))
		return solve(t, h, Options{}).States[0]
	}
	one, three := solveOn(1), solveOn(3)
	if one.Energy != three.Energy || !slices.Equal(one.Coefficients, three.Coefficients) {
		t.Errorf("energies %v and %v", one.Energy, three.Energy)
	}
}

// Orbital rotations, spins exchanged and a shifted constant leave the spectrum.
func TestInvariance(t *testing.T) {
	h := randomHamiltonian(hamiltonian.Sector{Orbitals: 6, Up: 3, Down: 2}, 2, 2, false, 9)
	want := solve(t, h, Options{States: 3})
	var qr mat.QR
	qr.Factorize(mat.NewDense(6, 6, randomVector(36, 4)))
	var c mat.Dense
	qr.QTo(&c)
	exchanged := *h
	exchanged.Up, exchanged.Down = h.Down, h.Up
	exchanged.OneBody[0], exchanged.OneBody[1] = h.OneBody[1], h.OneBody[0]
	factors := *h.Factors
	factors.Packed[0], factors.Packed[1] = factors.Packed[1], factors.Packed[0]
	exchanged.Factors = &factors
	exchanged.Constant += 3
	for k, state := range solve(t, h.Rotate(&c), Options{States: 3}).States {
		if math.Abs(state.Energy-want.States[k].Energy) > 1e-11 {
			t.Errorf("rotated: state %d has energy %v, expected %v", k, state.Energy, want.States[k].Energy)
		}
	}
	for k, state := range solve(t, &exchanged, Options{States: 3}).States {
		if math.Abs(state.Energy-3-want.States[k].Energy) > 1e-11 {
			t.Errorf("spins exchanged: state %d has energy %v, expected %v", k, state.Energy-3, want.States[k].Energy)
		}
		if math.Abs(state.SpinSquared-want.States[k].SpinSquared) > 1e-6 {
			t.Errorf("spins exchanged: state %d has S² %v, expected %v", k, state.SpinSquared, want.States[k].SpinSquared)
		}
	}
}
