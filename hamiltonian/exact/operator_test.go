package exact

import (
	"context"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
	"leadline/hamiltonian/fcidump"
	"leadline/hamiltonian/internal/fock"
)

// permutation returns, for each determinant of Fock space, its place in vectors
// of this package. Both have up operators left of down ones, each ascending, so
// signs agree.
func permutation(f *fock.Space, s *Space) []int {
	place := make([]int, f.Dim())
	for i := range place {
		var mask [2]uint64
		for spin := range 2 {
			for p := range s.Orbitals() {
				mask[spin] |= uint64(f.Occupied(i, spin, p)) << p
			}
		}
		place[i] = s.Up.Index(mask[hamiltonian.Up])*s.Down.Len() + s.Down.Index(mask[hamiltonian.Down])
	}
	return place
}

// reorder brings a Fock-space matrix into this package's order.
func reorder(a *mat.Dense, place []int) *mat.SymDense {
	out := mat.NewSymDense(len(place), nil)
	for i, to := range place {
		for j, from := range place {
			out.SetSym(to, from, a.At(i, j))
		}
	}
	return out
}

// bruteForce returns H over the determinants of a sector, from Fock space.
func bruteForce(h *hamiltonian.Hamiltonian) *mat.SymDense {
	f := fock.New(h.Sector)
	return reorder(f.Normal(h), permutation(f, NewSpace(h.Sector)))
}

// bruteSpinSquared returns S² over the determinants of a sector from Fock space,
// S² = S_z² + S_z + S₋S₊ with S₋S₊ = N_down − Σ_pq c†_p,up c_q,up c†_q,down c_p,down.
func bruteSpinSquared(sector hamiltonian.Sector) *mat.SymDense {
	f := fock.New(sector)
	a := mat.NewDense(f.Dim(), f.Dim(), nil)
	// ½ Σ over both orders of the spins of c†_p c†_r c_s c_q with p = s, q = r.
	exchange := func(p, q, r, s int) float64 {
		if p == s && q == r {
			return -1
		}
		return 0
	}
	f.TwoBody(a, hamiltonian.Up, hamiltonian.Down, exchange)
	f.TwoBody(a, hamiltonian.Down, hamiltonian.Up, exchange)
	z := float64(sector.Up-sector.Down) / 2
	for i := range f.Dim() {
		a.Set(i, i, a.At(i, i)+z*z+z+float64(sector.Down))
	}
	return reorder(a, permutation(f, NewSpace(sector)))
}

// randomHamiltonian has factors of both symmetries and of both signs.
func randomHamiltonian(sector hamiltonian.Sector, symmetric, antisymmetric int, spinFree bool, seed uint64) *hamiltonian.Hamiltonian {
	r := rand.New(rand.NewPCG(seed, 1))
	m := sector.Orbitals
	f := &hamiltonian.Factors{Antisymmetric: antisymmetric}
	for range symmetric + antisymmetric {
		f.Sign = append(f.Sign, float64(1-2*r.IntN(2)))
	}
	h := &hamiltonian.Hamiltonian{Sector: sector, Constant: r.NormFloat64(), Factors: f}
	for spin := range 2 {
		if spin == hamiltonian.Down && spinFree {
			h.OneBody[spin], f.Packed[spin] = h.OneBody[hamiltonian.Up], f.Packed[hamiltonian.Up]
			break
		}
		h.OneBody[spin] = mat.NewSymDense(m, nil)
		for p := range m {
			for q := range p + 1 {
				h.OneBody[spin].SetSym(p, q, r.NormFloat64())
			}
		}
		for g := range f.Sign {
			for p := range m {
				for q := range p + 1 {
					v := 0.5 * r.NormFloat64()
					if g >= symmetric && p == q {
						v = 0
					}
					f.Packed[spin] = append(f.Packed[spin], v)
				}
			}
		}
	}
	return h
}

func randomVector(n int, seed uint64) []float64 {
	r := rand.New(rand.NewPCG(seed, 2))
	x := make([]float64, n)
	for i := range x {
		x[i] = r.NormFloat64()
	}
	return x
}

// readIntegrals reads a shared integral file. Its factors are right to 1e-12.
func readIntegrals(t testing.TB, name string) *hamiltonian.Hamiltonian {
	t.Helper()
	file, err := os.Open(filepath.Join("..", "..", "testdata", "integrals", name+".fcidump"))
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	integrals, err := fcidump.Read(context.Background(), file, name, nil)
	if err != nil {
		t.Fatal(err)
	}
	h, _, err := integrals.Hamiltonian(context.Background(), 1e-12)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

var sectors = []hamiltonian.Sector{
	{Orbitals: 1, Up: 1, Down: 0}, {Orbitals: 1, Up: 1, Down: 1}, {Orbitals: 2, Up: 1, Down: 1},
	{Orbitals: 3, Up: 2, Down: 1}, {Orbitals: 3, Up: 0, Down: 2}, {Orbitals: 4, Up: 2, Down: 2},
	{Orbitals: 4, Up: 1, Down: 3}, {Orbitals: 4, Up: 4, Down: 1}, {Orbitals: 4, Up: 3, Down: 0},
	{Orbitals: 5, Up: 3, Down: 2}, {Orbitals: 5, Up: 1, Down: 4},
}

// kinds of factors: numbers of symmetric and antisymmetric ones, spin-free or not.
var kinds = []struct {
	symmetric, antisymmetric int
	spinFree                 bool
}{{0, 0, true}, {3, 0, true}, {3, 0, false}, {0, 2, true}, {0, 2, false}, {2, 2, true}, {2, 2, false}}

// H x against Fock space, every kind of factor, every shape of sector.
func TestApplyAgainstFockSpace(t *testing.T) {
	seed := uint64(0)
	for _, s := range sectors {
		for _, kind := range kinds {
			seed++
			h := randomHamiltonian(s, kind.symmetric, kind.antisymmetric, kind.spinFree, seed)
			o, err := NewOperator(h)
			if err != nil {
				t.Fatal(err)
			}
			brute := bruteForce(h)
			x := randomVector(o.Dim(), seed)
			var want mat.VecDense
			want.MulVec(brute, mat.NewVecDense(o.Dim(), x))
			got := make([]float64, o.Dim())
			for i := range got {
				got[i] = math.NaN() // must not be read
			}
			o.Apply(got, x)
			for i := range got {
				if !(math.Abs(got[i]-want.AtVec(i)) < 1e-11) {
					t.Fatalf("%+v %+v: element %d of H x is %v, brute force %v", s, kind, i, got[i], want.AtVec(i))
				}
				if d := o.Diagonal()[i]; !(math.Abs(d-brute.At(i, i)) < 1e-11) {
					t.Fatalf("%+v %+v: diagonal element %d is %v, brute force %v", s, kind, i, d, brute.At(i, i))
				}
			}
		}
	}
}

// With more strings than fit in one piece of the work (64 rows, 256 or 512 columns), and with
// as many orbitals as a mask holds. The other side is a plain
// sum over the excitation lists in the form of operator squares, v_g v_g x.
func TestApplyInPieces(t *testing.T) {
	for _, sector := range []hamiltonian.Sector{{Orbitals: 12, Up: 3, Down: 5}, {Orbitals: 11, Up: 8, Down: 4}, {Orbitals: 13, Up: 6, Down: 0}, {Orbitals: 64, Up: 64, Down: 1}} {
		m := sector.Orbitals
		h := randomHamiltonian(sector, 1, 1, false, uint64(m))
		o, err := NewOperator(h)
		if err != nil {
			t.Fatal(err)
		}
		x := randomVector(o.Dim(), 7)
		want := make([]float64, o.Dim())
		for i, v := range x {
			want[i] = h.Constant * v
		}
		oneBody := func(dst, src []float64, scale float64, l [2]mat.Matrix) {
			columns := o.Down.Len()
			for p := range m {
				for q := range m {
					up, down := o.Up.Single(p, q), o.Down.Single(p, q)
					for k, from := range up.From {
						a, row, image := scale*up.Sign[k]*l[hamiltonian.Up].At(p, q), src[int(from)*columns:][:columns], dst[int(up.To[k])*columns:][:columns]
						for j, v := range row {
							image[j] += a * v
						}
					}
					for k, from := range down.From {
						a := scale * down.Sign[k] * l[hamiltonian.Down].At(p, q)
						for i := range o.Up.Len() {
							dst[i*columns+int(down.To[k])] += a * src[i*columns+int(from)]
						}
					}
				}
			}
		}
		oneBody(want, x, 1, [2]mat.Matrix{h.SquareOneBody(hamiltonian.Up), h.SquareOneBody(hamiltonian.Down)})
		for g, sign := range h.Factors.Sign {
			var l [2]mat.Matrix
			for spin := range l {
				dense := mat.NewDense(m, m, nil)
				h.Factors.Unpack(dense, g, spin)
				l[spin] = dense
			}
			half := make([]float64, o.Dim())
			oneBody(half, x, 1, l)
			oneBody(want, half, 0.5*sign, l)
		}
		got := make([]float64, o.Dim())
		o.Apply(got, x)
		scale := math.Sqrt(dot(want, want) / float64(o.Dim()))
		for i := range got {
			if !(math.Abs(got[i]-want[i]) < 1e-11*scale) {
				t.Fatalf("%+v: element %d of H x is %v, by squares %v", sector, i, got[i], want[i])
			}
		}
	}
}

// Energy, spin and densities of a complex state against Fock space.
func TestExpectationValues(t *testing.T) {
	for k, s := range sectors {
		h := randomHamiltonian(s, 2, 1, false, uint64(k))
		o, err := NewOperator(h)
		if err != nil {
			t.Fatal(err)
		}
		re, im := randomVector(o.Dim(), 11), randomVector(o.Dim(), 12)
		expect := func(a mat.Symmetric) float64 {
			var sum, norm float64
			for _, x := range [][]float64{re, im} {
				v := mat.NewVecDense(len(x), x)
				sum += mat.Inner(v, a, v)
				norm += mat.Dot(v, v)
			}
			return sum / norm
		}
		if got, want := o.Energy(re, im), expect(bruteForce(h)); !(math.Abs(got-want) < 1e-11) {
			t.Errorf("%+v: energy %v, brute force %v", s, got, want)
		}
		if got, want := o.SpinSquared(re, im), expect(bruteSpinSquared(s)); !(math.Abs(got-want) < 1e-12) {
			t.Errorf("%+v: S² %v, brute force %v", s, got, want)
		}
		f := fock.New(s)
		place := permutation(f, o.Space)
		for spin := range 2 {
			gamma := o.Density(re, im, spin)
			for p := range s.Orbitals {
				for q := range s.Orbitals {
					a := mat.NewDense(f.Dim(), f.Dim(), nil)
					f.OneBody(a, spin, func(r, t int) float64 {
						if r == p && t == q {
							return 0.5
						}
						return 0
					})
					var symmetric mat.Dense
					symmetric.Add(a, a.T())
					if want := expect(reorder(&symmetric, place)); !(math.Abs(gamma.At(p, q)-want) < 1e-12) {
						t.Errorf("%+v spin %d: density (%d,%d) is %v, brute force %v", s, spin, p, q, gamma.At(p, q), want)
					}
				}
			}
		}
	}
}

// A density in pieces: its trace with the one-body part is the energy without
// the two-body part.
func TestDensityInPieces(t *testing.T) {
	h := randomHamiltonian(hamiltonian.Sector{Orbitals: 11, Up: 5, Down: 4}, 0, 0, false, 3)
	o, err := NewOperator(h)
	if err != nil {
		t.Fatal(err)
	}
	x := randomVector(o.Dim(), 5)
	want := o.Energy(x, nil) - h.Constant
	var got float64
	for spin := range 2 {
		var product mat.Dense
		product.Mul(h.OneBody[spin], o.Density(x, nil, spin))
		got += mat.Trace(&product)
	}
	if math.Abs(got-want) > 1e-12 {
		t.Errorf("tr hγ is %v, energy %v", got, want)
	}
}
