package exact

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// hubbard returns the Hubbard model with hopping 1 on a ring or an open chain, in
// the spin (v = n_up − n_down) or charge (v = n_up + n_down) decomposition.
func hubbard(sector hamiltonian.Sector, repulsion float64, ring, spin bool) *hamiltonian.Hamiltonian {
	m := sector.Orbitals
	h := &hamiltonian.Hamiltonian{Sector: sector, Factors: hamiltonian.NewFactors(m, m)}
	one := mat.NewSymDense(m, nil)
	for i := range m {
		if i+1 < m || ring && m > 2 {
			one.SetSym(i, (i+1)%m, -1)
		}
	}
	h.OneBody = [2]*mat.SymDense{one, one}
	f := h.Factors
	if spin {
		f.Packed[hamiltonian.Down] = make([]float64, len(f.Packed[hamiltonian.Up]))
	}
	for i := range m {
		f.Sign[i] = math.Copysign(1, repulsion)
		f.Row(i, hamiltonian.Up)[hamiltonian.Pair(i, i)] = math.Sqrt(math.Abs(repulsion))
		if spin {
			f.Sign[i] = -f.Sign[i]
			f.Row(i, hamiltonian.Down)[hamiltonian.Pair(i, i)] = -math.Sqrt(math.Abs(repulsion))
		}
	}
	return h
}

// Ground states of the Hubbard model. Rings of 6 and 10 sites and the ring of 8
// with 6 electrons also solve the equations of Lieb & Wu, Phys. Rev. Lett. 20,
// 1445 (1968), to 1e-10; the others are from an independent Lanczos program in
// the site basis.
var rings = []struct {
	sites, up, down int
	repulsion       float64
	ring            bool
	energy          float64
}{
	{4, 2, 2, 2, true, -2.828427124746},
	{4, 2, 2, 4, true, -2.102748483462},
	{6, 3, 3, 2, true, -5.4094568451006},
	{6, 3, 3, 4, true, -3.6687061788729647},
	{6, 3, 3, 8, true, -2.048130886091},
	{6, 2, 2, 4, true, -4.698355190949},
	{8, 3, 3, 4, true, -6.672195997058457},
	{8, 4, 3, 4, true, -5.597449098656},
	{8, 3, 2, 4, true, -6.416855219224},
	{8, 4, 4, 8, true, -2.666147420132},
	{10, 3, 3, 4, true, -8.262531385370815},
	{6, 3, 3, 4, false, -3.092565319505},
	{8, 4, 4, 8, false, -2.420831400038},
	{8, 4, 3, 8, false, -3.84372852098},
}

func TestHubbard(t *testing.T) {
	for _, c := range rings {
		sector := hamiltonian.Sector{Orbitals: c.sites, Up: c.up, Down: c.down}
		for _, inSpin := range []bool{false, true} {
			h := hubbard(sector, c.repulsion, c.ring, inSpin)
			if !CommutesWithSpin(h) {
				t.Errorf("%+v: spin decomposition %v does not commute with the total spin", c, inSpin)
			}
			if got := solve(t, h, Options{}).States[0].Energy; math.Abs(got-c.energy) > 1e-9 {
				t.Errorf("%+v: spin decomposition %v: energy %.12f", c, inSpin, got)
			}
		}
	}
	field := hubbard(hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, 4, true, true)
	field.OneBody[hamiltonian.Up] = mat.NewSymDense(4, nil)
	if CommutesWithSpin(field) {
		t.Error("hopping of one spin only commutes with the total spin")
	}
}

// Attractive from repulsive at half filling on a bipartite ring, by the
// particle–hole transformation of one spin: E(−U) = E(U) − U·N_sites/2.
func TestAttractiveHubbard(t *testing.T) {
	sector := hamiltonian.Sector{Orbitals: 6, Up: 3, Down: 3}
	want := -3.6687061788729647 - 4*3
	for _, inSpin := range []bool{false, true} {
		if got := solve(t, hubbard(sector, -4, true, inSpin), Options{}).States[0].Energy; math.Abs(got-want) > 1e-10 {
			t.Errorf("spin decomposition %v: energy %.12f, expected %.12f", inSpin, got, want)
		}
	}
}

// pairing returns the reduced pairing model with levels 1 … M,
// H = Σ ε n − G Σ_pq P†_p P_q, P†_p = c†_p,up c†_p,down, in operator squares with
// s = −1: √G E_pp, and for p < q √(G/2)(E_pq ± E_qp).
func pairing(levels, pairs int, coupling float64) *hamiltonian.Hamiltonian {
	m := levels
	var symmetric, antisymmetric [][]float64
	row := func(p, q int, v float64) []float64 {
		l := make([]float64, hamiltonian.Pairs(m))
		l[hamiltonian.Pair(p, q)] = v
		return l
	}
	for p := range m {
		symmetric = append(symmetric, row(p, p, math.Sqrt(coupling)))
		for q := range p {
			symmetric = append(symmetric, row(p, q, math.Sqrt(coupling/2)))
			antisymmetric = append(antisymmetric, row(p, q, math.Sqrt(coupling/2)))
		}
	}
	f := hamiltonian.NewFactors(m, m*m)
	f.Antisymmetric = len(antisymmetric)
	for g, l := range append(symmetric, antisymmetric...) {
		f.Sign[g] = -1
		copy(f.Row(g, hamiltonian.Up), l)
	}
	one := mat.NewSymDense(m, nil)
	for p := range m {
		one.SetSym(p, p, float64(p+1))
	}
	return &hamiltonian.Hamiltonian{
		Sector:  hamiltonian.Sector{Orbitals: m, Up: pairs, Down: pairs},
		OneBody: [2]*mat.SymDense{one, one}, Factors: f,
	}
}

// Exact energies of the pairing model by Richardson's equations (Phys. Lett. 3,
// 277 (1963)) in 60-digit arithmetic. Its squares carry a like-spin part, which
// here must cancel.
func TestPairing(t *testing.T) {
	for _, c := range []struct {
		levels, pairs    int
		coupling, energy float64
	}{
		{4, 2, 0.1, 5.787661867014894}, {4, 2, 1, 2.5103478446361533},
		{6, 3, 0.25, 11.105926380626023}, {6, 3, 0.5, 9.801527971008904},
		{8, 4, 0.5, 16.889170412332163},
	} {
		if got := solve(t, pairing(c.levels, c.pairs, c.coupling), Options{}).States[0].Energy; math.Abs(got-c.energy) > 1e-10 {
			t.Errorf("%+v: energy %.12f", c, got)
		}
	}
}

// Many low states of a ring, degenerate by momentum, spin and pseudospin.
func TestDegenerateStates(t *testing.T) {
	for _, c := range []struct {
		sector    hamiltonian.Sector
		repulsion float64
	}{
		{hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, 4},
		{hamiltonian.Sector{Orbitals: 6, Up: 3, Down: 2}, 4},
		{hamiltonian.Sector{Orbitals: 5, Up: 2, Down: 2}, 8},
		{hamiltonian.Sector{Orbitals: 6, Up: 2, Down: 2}, 0},
	} {
		h := hubbard(c.sector, c.repulsion, true, false)
		energies, _ := lowest(t, bruteForce(h), bruteSpinSquared(c.sector))
		for _, states := range []int{1, 2, 3, 6, 10} {
			for k, state := range solve(t, h, Options{States: states}).States {
				if math.Abs(state.Energy-energies[k]) > 1e-10 {
					t.Errorf("%+v: state %d of %d has energy %.12f, brute force %.12f", c, k, states, state.Energy, energies[k])
				}
			}
		}
	}
}

// Hydrogen atoms far apart, in spirit: without hopping every spin arrangement has
// one energy, and S² must still be diagonal.
func TestDegenerateSpins(t *testing.T) {
	h := hubbard(hamiltonian.Sector{Orbitals: 4, Up: 2, Down: 2}, 4, true, false)
	zero := mat.NewSymDense(4, nil)
	h.OneBody = [2]*mat.SymDense{zero, zero}
	// Four spins: two singlets, three triplets, a quintet; and nothing else at zero.
	want := []float64{0, 0, 2, 2, 2, 6}
	for k, state := range solve(t, h, Options{States: 6}).States {
		if math.Abs(state.Energy) > 1e-12 || math.Abs(state.SpinSquared-want[k]) > 1e-10 {
			t.Errorf("state %d has energy %v and S² %v, expected 0 and %v", k, state.Energy, state.SpinSquared, want[k])
		}
	}
}

// 853,776 determinants with a dense two-body part: the ring of 12 sites with 12
// electrons in the orbitals of the free ring. Energy of an independent Lanczos
// program in the site basis.
func BenchmarkSolve12in12(b *testing.B) {
	h := hubbard(hamiltonian.Sector{Orbitals: 12, Up: 6, Down: 6}, 4, true, false)
	var eigen mat.EigenSym
	eigen.Factorize(h.OneBody[0], true)
	var c mat.Dense
	eigen.VectorsTo(&c)
	h = h.Rotate(&c)
	for b.Loop() {
		result := solve(b, h, Options{})
		if got := result.States[0].Energy; math.Abs(got+6.920353562419) > 1e-8 {
			b.Fatalf("energy %.12f", got)
		}
		b.ReportMetric(float64(result.Iterations), "iterations")
	}
}
