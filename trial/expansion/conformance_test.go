package expansion

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/strings"
	"leadline/trial"
	"leadline/trial/determinant"
	"leadline/trial/trialtest"
)

// window describes a random expansion.
type window struct {
	name                   string
	orbitals, core, active int
	up, down               int // active electrons
	list                   int // determinants; 0 for all
	rank                   int // of C; 0 for full rank
	imaginary              bool
	symmetric              bool // C = Cᵀ
	rotated                bool // orbitals of its own
	antisymmetric          bool // factors
	resolved               bool // spin-resolved Hamiltonian
}

var windows = []window{
	{name: "core and virtuals", orbitals: 6, core: 1, active: 4, up: 2, down: 1},
	{name: "core and virtuals, equal spins", orbitals: 6, core: 1, active: 4, up: 2, down: 2},
	{name: "two core orbitals", orbitals: 6, core: 2, active: 3, up: 2, down: 1},
	{name: "virtuals only", orbitals: 5, active: 3, up: 2, down: 1},
	{name: "core only", orbitals: 5, core: 1, active: 4, up: 2, down: 2, imaginary: true},
	{name: "complex", orbitals: 6, core: 1, active: 4, up: 1, down: 3, imaginary: true},
	{name: "symmetric", orbitals: 5, core: 1, active: 4, up: 2, down: 2, symmetric: true},
	{name: "symmetric complex", orbitals: 5, active: 4, up: 2, down: 2, symmetric: true, imaginary: true},
	{name: "triple excitations", orbitals: 7, active: 6, up: 3, down: 2},
	{name: "rotated", orbitals: 6, core: 1, active: 4, up: 2, down: 1, rotated: true},
	{name: "rotated full", orbitals: 5, active: 5, up: 2, down: 2, rotated: true, imaginary: true},
	{name: "full space", orbitals: 5, active: 5, up: 3, down: 2},
	{name: "full space complex", orbitals: 4, active: 4, up: 2, down: 2, imaginary: true},
	{name: "no down", orbitals: 5, active: 4, up: 2},
	{name: "no up", orbitals: 5, active: 4, down: 3},
	{name: "no active down", orbitals: 5, core: 1, active: 3, up: 2},
	{name: "filled window", orbitals: 5, core: 1, active: 2, up: 2, down: 1},
	{name: "no active electron", orbitals: 4, core: 1, active: 2},
	{name: "antisymmetric factors", orbitals: 5, active: 4, up: 2, down: 1, antisymmetric: true},
	{name: "antisymmetric full space", orbitals: 4, active: 4, up: 2, down: 1, antisymmetric: true, imaginary: true},
	{name: "spin-resolved", orbitals: 5, core: 1, active: 3, up: 2, down: 1, resolved: true},
	{name: "spin-resolved symmetric", orbitals: 5, core: 1, active: 3, up: 1, down: 1, resolved: true, symmetric: true},
	{name: "spin-resolved full space", orbitals: 4, active: 4, up: 2, down: 2, resolved: true},
	{name: "one determinant", orbitals: 6, core: 1, active: 4, up: 2, down: 2, list: 1},
	{name: "selected", orbitals: 6, core: 1, active: 5, up: 2, down: 2, list: 7},
	{name: "selected complex", orbitals: 6, active: 6, up: 3, down: 2, list: 9, imaginary: true},
	{name: "selected symmetric", orbitals: 6, active: 5, up: 3, down: 3, list: 4, symmetric: true},
	{name: "selected rotated", orbitals: 6, core: 1, active: 5, up: 2, down: 1, list: 4, rotated: true},
	{name: "low rank", orbitals: 6, core: 1, active: 5, up: 2, down: 2, rank: 2},
	{name: "low rank complex", orbitals: 6, core: 0, active: 5, up: 3, down: 2, rank: 3, imaginary: true},
	{name: "low rank symmetric", orbitals: 6, core: 1, active: 5, up: 2, down: 2, rank: 1, symmetric: true},
}

func (c window) expansion(t testing.TB, seed uint64) *Expansion {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 9))
	up, down := strings.New(c.active, c.up), strings.New(c.active, c.down)
	e := &Expansion{Orbitals: c.orbitals, Core: c.core, Active: c.active, Up: c.up, Down: c.down}
	for _, a := range up.Masks() {
		for _, b := range down.Masks() {
			v := complex(rng.NormFloat64(), 0)
			if c.imaginary {
				v += complex(0, rng.NormFloat64())
			}
			e.Determinants = append(e.Determinants, Determinant{Up: a, Down: b, Amplitude: v})
		}
	}
	if c.rank > 0 {
		gauss := func() complex128 {
			if c.imaginary {
				return complex(rng.NormFloat64(), rng.NormFloat64())
			}
			return complex(rng.NormFloat64(), 0)
		}
		for k := range e.Determinants {
			e.Determinants[k].Amplitude = 0
		}
		for range c.rank {
			left, right := make([]complex128, up.Len()), make([]complex128, down.Len())
			for _, x := range [][]complex128{left, right} {
				for k := range x {
					x[k] = gauss()
				}
			}
			if c.symmetric {
				copy(right, left)
			}
			for k := range e.Determinants {
				e.Determinants[k].Amplitude += left[k/down.Len()] * right[k%down.Len()]
			}
		}
	}
	if c.symmetric && c.rank == 0 {
		n := down.Len()
		for i := range n {
			for j := range i {
				e.Determinants[i*n+j].Amplitude = e.Determinants[j*n+i].Amplitude
			}
		}
	}
	if c.list > 0 {
		rng.Shuffle(len(e.Determinants), func(i, j int) {
			e.Determinants[i], e.Determinants[j] = e.Determinants[j], e.Determinants[i]
		})
		kept := e.Determinants[:c.list]
		if c.symmetric { // with their mirror images
			e.Determinants = nil
			for _, d := range kept {
				e.Determinants = append(e.Determinants, d)
				if d.Up != d.Down {
					e.Determinants = append(e.Determinants, Determinant{Up: d.Down, Down: d.Up, Amplitude: d.Amplitude})
				}
			}
			e = unique(e)
		} else {
			e.Determinants = kept
		}
	}
	if c.rotated {
		e.Columns = randomRotation(c.orbitals, rng)
	}
	return e
}

// unique drops repeated determinants.
func unique(e *Expansion) *Expansion {
	seen := map[[2]uint64]bool{}
	var list []Determinant
	for _, d := range e.Determinants {
		if key := [2]uint64{d.Up, d.Down}; !seen[key] {
			seen[key] = true
			list = append(list, d)
		}
	}
	return e.with(list)
}

func randomRotation(m int, rng *rand.Rand) *mat.Dense {
	a := mat.NewDense(m, m, nil)
	for p := range m {
		for q := range m {
			a.Set(p, q, rng.NormFloat64())
		}
	}
	var qr mat.QR
	qr.Factorize(a)
	var q mat.Dense
	qr.QTo(&q)
	return &q
}

// specialWalkers returns walkers that a fixed reference would fail on: exactly
// orthogonal to the first (leading) determinant; nearly so; and single
// determinants of the window.
func specialWalkers(e *Expansion, seed uint64) trial.Walkers {
	sector := e.Sector()
	w := trialtest.RandomWalkers(sector, false, 4, seed)
	row := func(i, spin, p int, scale complex128) {
		for j := range sector.Electrons(spin) {
			w.Set(i, spin, p, j, scale*w.At(i, spin, p, j))
		}
	}
	for spin := range 2 {
		// The first active orbital is empty in walker 0 and almost so in walker 1;
		// in walker 2 the first two active orbitals are occupied by one
		// combination only.
		active := [2]int{e.Up, e.Down}[spin]
		if active == 0 || active > e.Active-1 {
			continue
		}
		row(0, spin, e.Core, 0)
		row(1, spin, e.Core, 1e-9)
		for j := range sector.Electrons(spin) {
			w.Set(2, spin, e.Core+1, j, 2*w.At(2, spin, e.Core, j))
		}
	}
	// Walker 3 is close to the expansion's last determinant.
	d := e.Determinants[len(e.Determinants)-1]
	for spin, mask := range [2]uint64{d.Up, d.Down} {
		list := []int{}
		for p := range e.Core {
			list = append(list, p)
		}
		for p := range e.Active {
			if mask>>p&1 == 1 {
				list = append(list, e.Core+p)
			}
		}
		for j, q := range list {
			for p := range sector.Orbitals {
				v := 1e-6 * w.At(3, spin, p, j)
				if p == q {
					v++
				}
				w.Set(3, spin, p, j, v)
			}
		}
	}
	return w
}

func (c window) hamiltonian() *hamiltonian.Hamiltonian {
	sector := hamiltonian.Sector{Orbitals: c.orbitals, Up: c.core + c.up, Down: c.core + c.down}
	anti := 0
	if c.antisymmetric {
		anti = 2
	}
	return trialtest.RandomHamiltonian(sector, 7, anti, c.resolved, 11)
}

func TestConformance(t *testing.T) {
	for k, c := range windows {
		t.Run(c.name, func(t *testing.T) {
			e := c.expansion(t, uint64(k))
			s, err := New(e)
			if err != nil {
				t.Fatal(err)
			}
			checkForm(t, c, s)
			trialtest.Run(t, c.hamiltonian(), s, specialWalkers(e, 21))
		})
	}
}

// checkForm makes sure that the windows cover all forms of the coefficients.
func checkForm(t *testing.T, c window, s *Source) {
	t.Helper()
	switch form := s.c.(type) {
	case *sparse:
		if c.list == 0 {
			t.Errorf("all determinants are kept in a sparse form")
		}
	case *factored:
		if form.rank != c.rank {
			t.Errorf("rank %d found, expected %d", form.rank, c.rank)
		}
	case *dense:
		if c.rank > 0 || c.list > 0 {
			t.Errorf("a dense form, expected another")
		}
	}
	if want := c.symmetric || (c.up == 0 && c.down == 0); s.symmetric != want && c.list != 1 {
		t.Errorf("symmetric is %v", s.symmetric)
	}
}

// forms lists every way to compute a local energy that an expansion has.
func forms(s *Source, h *hamiltonian.Hamiltonian) map[string]trial.Energies {
	r := trial.NewRotated(h, s.Support())
	small := s.newCumulant(h, r, 1<<40)
	if d, ok := small.doubles.(*denseDoubles); ok {
		d.unit, d.numbers = 3, 0
	}
	return map[string]trial.Energies{
		"all memory":   s.Energies(h, r, 1<<40),
		"no memory":    s.Energies(h, r, 0),
		"table":        s.newCumulant(h, r, 1<<40),
		"small blocks": small,
	}
}

// Every form gives the same local energies.
func TestFormsAgree(t *testing.T) {
	for k, c := range windows {
		t.Run(c.name, func(t *testing.T) {
			e := c.expansion(t, uint64(k))
			s, err := New(e)
			if err != nil {
				t.Fatal(err)
			}
			h := c.hamiltonian()
			want := map[int]complex128{}
			for name, energies := range forms(s, h) {
				g, err := trial.NewGuide(h, s, 1<<30)
				if err != nil {
					t.Fatal(err)
				}
				batches := []trial.Walkers{trialtest.RandomWalkers(s.Sector(), false, 5, 8), specialWalkers(e, 9)}
				if e.Up == e.Down {
					batches = append(batches, trialtest.RandomWalkers(s.Sector(), true, 5, 10))
				}
				for batch, w := range batches {
					m := g.NewMixed(w.Count)
					g.Evaluate(m, w)
					energies.LocalEnergies(m, w)
					for i, got := range m.Energy {
						key := batch*100 + i
						if _, ok := want[key]; !ok {
							want[key] = got
						}
						if d := cmplx.Abs(got - want[key]); !(d <= 1e-9*(1+cmplx.Abs(want[key]))) {
							t.Errorf("%s, walker %d: %v, other form %v", name, key, got, want[key])
						}
					}
				}
			}
		})
	}
}

// A single determinant gives what the determinant source gives.
func TestOneDeterminant(t *testing.T) {
	c := window{orbitals: 7, core: 1, active: 4, up: 2, down: 1, rotated: true}
	e := c.expansion(t, 3)
	e.Determinants = e.Determinants[4:5]
	s, err := New(e)
	if err != nil {
		t.Fatal(err)
	}
	h := c.hamiltonian()
	var orbitals [2]*mat.Dense
	for spin, mask := range [2]uint64{e.Determinants[0].Up, e.Determinants[0].Down} {
		columns := []int{0}
		for p := range e.Active {
			if mask>>p&1 == 1 {
				columns = append(columns, 1+p)
			}
		}
		orbitals[spin] = mat.NewDense(e.Orbitals, len(columns), nil)
		for j, u := range columns {
			for p := range e.Orbitals {
				orbitals[spin].Set(p, j, e.Columns.At(p, u))
			}
		}
	}
	one, err := determinant.New(e.Orbitals, trial.RealOrbitals(orbitals[0], orbitals[1]))
	if err != nil {
		t.Fatal(err)
	}
	w := trialtest.RandomWalkers(s.Sector(), false, 6, 4)
	evaluate := func(source trial.Source) *trial.Mixed {
		g, err := trial.NewGuide(h, source, 1<<30)
		if err != nil {
			t.Fatal(err)
		}
		m := g.NewMixed(w.Count)
		g.Evaluate(m, w)
		g.LocalEnergies(m, w)
		return m
	}
	got, want := evaluate(s), evaluate(one)
	amplitude := cmplx.Conj(e.Determinants[0].Amplitude)
	for i := range w.Count {
		if r := got.Overlap[i].Over(want.Overlap[i]); cmplx.Abs(r-amplitude) > 1e-12*cmplx.Abs(amplitude) {
			t.Errorf("walker %d: overlap ratio %v, expected %v", i, r, amplitude)
		}
		if d := cmplx.Abs(got.Energy[i] - want.Energy[i]); d > 1e-11*(1+cmplx.Abs(want.Energy[i])) {
			t.Errorf("walker %d: energy %v, determinant %v", i, got.Energy[i], want.Energy[i])
		}
	}
	for k := range want.Fields {
		if math.Abs(got.Fields[k]-want.Fields[k]) > 1e-11*(1+math.Abs(want.Fields[k])) {
			t.Errorf("field %d: %v, determinant %v", k, got.Fields[k], want.Fields[k])
		}
	}
	if a, b := s.Energy(h), one.Energy(h); math.Abs(a-b) > 1e-11*(1+math.Abs(b)) {
		t.Errorf("trial energy %v, determinant %v", a, b)
	}
	if a, b := s.SpinSquared(), one.SpinSquared(); math.Abs(a-b) > 1e-11 {
		t.Errorf("trial spin %v, determinant %v", a, b)
	}
}
