package factorize

import (
	"context"
	"errors"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"testing"

	"leadline/hamiltonian"
)

// dense is a matrix held as a whole.
type dense struct {
	n    int
	data []float64
}

func (d dense) Dim() int { return d.n }

func (d dense) Diagonal(dst []float64) {
	for i := range d.n {
		dst[i] = d.data[i*d.n+i]
	}
}

func (d dense) Column(j int, dst []float64) { copy(dst, d.data[j*d.n:(j+1)*d.n]) }

// product returns Σ_g s_g L^g L^gᵀ of random factors that decay like molecular
// ones, over the pairs of m orbitals.
func product(m int, seed uint64, signs ...float64) dense {
	random := rand.New(rand.NewPCG(seed, 1))
	n := hamiltonian.Pairs(m)
	d := dense{n, make([]float64, n*n)}
	l := make([]float64, n)
	for g, s := range signs {
		decay := math.Exp(-20 * float64(g) / float64(len(signs)))
		for i := range l {
			l[i] = random.NormFloat64() * math.Sqrt(decay)
		}
		for i := range n {
			for j := range n {
				d.data[i*n+j] += s * l[i] * l[j]
			}
		}
	}
	return d
}

// check compares every element of V with the factors, term by term.
func check(t *testing.T, v dense, f *hamiltonian.Factors, tolerance float64) {
	t.Helper()
	worst := 0.0
	for i := range v.n {
		for j := range v.n {
			sum := 0.0
			for g, s := range f.Sign {
				row := f.Row(g, hamiltonian.Up)
				sum += s * row[i] * row[j]
			}
			worst = max(worst, math.Abs(sum-v.data[i*v.n+j]))
		}
	}
	if worst > tolerance {
		t.Errorf("largest error %.3g, expected at most %.3g", worst, tolerance)
	}
	measured, err := LargestError(context.Background(), v, f)
	if err != nil || math.Abs(measured-worst) > 1e-12 {
		t.Errorf("LargestError gives %.15g (%v), expected %.15g", measured, err, worst)
	}
}

func TestCholesky(t *testing.T) {
	plus := slices.Repeat([]float64{1}, 60)
	v := product(13, 1, plus...) // 91 pairs, rank 60
	counts := map[float64]int{}
	for _, tolerance := range []float64{1e-2, 1e-4, 1e-6, 1e-9} {
		f, residual, err := Cholesky(t.Context(), v, tolerance)
		if err != nil {
			t.Fatal(err)
		}
		if residual > tolerance {
			t.Errorf("tolerance %g: residual %g", tolerance, residual)
		}
		counts[tolerance] = f.Count()
		check(t, v, f, residual+1e-12)
	}
	// The random matrix has rank 60 and loses nothing before the last factors,
	// e⁻²⁰ = 2e-9 of the first.
	if !(counts[1e-2] < counts[1e-4] && counts[1e-4] < counts[1e-6] && counts[1e-6] < counts[1e-9] && counts[1e-9] <= 60) {
		t.Errorf("numbers of factors %v, expected to grow up to 60", counts)
	}
}

// TestRoundingOnly asks for more than the numbers hold: the factorisation must
// stop at the rank, not go on with rounding errors.
func TestRoundingOnly(t *testing.T) {
	v := product(13, 2, slices.Repeat([]float64{1}, 40)...)
	f, residual, err := Cholesky(t.Context(), v, 1e-300)
	if err != nil {
		t.Fatal(err)
	}
	if f.Count() != 40 || residual > 1e-13 {
		t.Errorf("%d factors, residual %g, expected 40 and below 1e-13", f.Count(), residual)
	}
}

// TestPrinted rounds to eight digits, as some integral files are: the rest is
// indefinite at that level, which is the residual reported.
func TestPrinted(t *testing.T) {
	v := product(13, 3, slices.Repeat([]float64{1}, 60)...)
	for i, x := range v.data {
		v.data[i] = math.Round(x*1e8) / 1e8
	}
	f, residual, err := Cholesky(t.Context(), v, 1e-10)
	if err != nil {
		t.Fatal(err)
	}
	if residual < 1e-10 || residual > 1e-6 {
		t.Errorf("residual %g, expected the size of the rounding", residual)
	}
	check(t, v, f, 2*residual)
}

func TestIndefinite(t *testing.T) {
	signs := slices.Repeat([]float64{1, -1}, 20)
	v := product(9, 4, signs...)
	_, _, err := Cholesky(t.Context(), v, 1e-8)
	if indefinite := (*IndefiniteError)(nil); !errors.As(err, &indefinite) || indefinite.Residual >= 0 {
		t.Fatalf("got %v, expected an IndefiniteError with a negative residual", err)
	}
	f, residual, err := Signed(t.Context(), v, 1e-8)
	if err != nil {
		t.Fatal(err)
	}
	if residual > 1e-8 {
		t.Errorf("residual %g, expected at most 1e-8", residual)
	}
	check(t, v, f, residual+1e-12)
	if f.Count() > 40 || !slices.Contains(f.Sign, -1) || !slices.Contains(f.Sign, 1) {
		t.Errorf("%d factors with signs %v, expected at most 40 of both signs", f.Count(), f.Sign)
	}
}

// TestHidden has a vanishing diagonal and integrals beside it, (11|22) = 1: no
// pivot shows them.
func TestHidden(t *testing.T) {
	v := dense{3, make([]float64, 9)}
	v.data[0*3+2], v.data[2*3+0] = 1, 1
	f, residual, err := Signed(t.Context(), v, 1e-6)
	if err != nil {
		t.Fatal(err)
	}
	if f.Count() != 2 || residual > 1e-14 {
		t.Errorf("%d factors, residual %g, expected 2 and 0", f.Count(), residual)
	}
	check(t, v, f, 1e-14)
}

// TestSites covers on-site integrals of one sign at a size that no
// diagonalisation is offered for.
func TestSites(t *testing.T) {
	for _, u := range []float64{4, -4} {
		v := sites{orbitals: 100, u: u}
		f, residual, err := Signed(t.Context(), v, 1e-6)
		if err != nil {
			t.Fatal(err)
		}
		if f.Count() != 100 || residual != 0 {
			t.Fatalf("U = %g: %d factors, residual %g, expected 100 and 0", u, f.Count(), residual)
		}
		seen := make([]bool, 100)
		for g, s := range f.Sign {
			row := f.Row(g, hamiltonian.Up)
			for i := range 100 {
				if x := row[hamiltonian.Pair(i, i)]; x != 0 {
					if seen[i] || x != 2 || s != math.Copysign(1, u) {
						t.Errorf("U = %g: site %d has factor %g of sign %g", u, i, x, s)
					}
					seen[i] = true
				}
			}
		}
		if slices.Contains(seen, false) {
			t.Errorf("U = %g: a site has no factor", u)
		}
	}
}

// sites holds (ii|ii) = u and nothing else.
type sites struct {
	orbitals int
	u        float64
}

func (s sites) Dim() int { return hamiltonian.Pairs(s.orbitals) }

func (s sites) Diagonal(dst []float64) {
	clear(dst)
	for i := range s.orbitals {
		dst[hamiltonian.Pair(i, i)] = s.u
	}
}

func (s sites) Column(j int, dst []float64) {
	clear(dst)
	for i := range s.orbitals {
		if hamiltonian.Pair(i, i) == j {
			dst[j] = s.u
		}
	}
}

func TestTooLarge(t *testing.T) {
	v := product(60, 5, 1, -1)
	_, _, err := Signed(t.Context(), v, 1e-6)
	if limit := (*sizeError)(nil); !errors.As(err, &limit) || limit.pairs != 1830 {
		t.Errorf("got %v, expected a refusal of 1830 pairs", err)
	}
}

// TestOverflow must end, and with an error.
func TestOverflow(t *testing.T) {
	for _, x := range []float64{math.NaN(), math.Inf(1), math.Inf(-1), 1e200} {
		for place := range 9 {
			v := dense{3, []float64{1, 0, 0, 0, 1, 0, 0, 0, 1}}
			v.data[place], v.data[place%3*3+place/3] = x, x
			if _, _, err := Signed(t.Context(), v, 1e-6); !errors.Is(err, errOverflow) {
				t.Errorf("%g at %d: %v, expected the refusal of such numbers", x, place, err)
			}
		}
	}
}

func TestCancelled(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, _, err := Signed(ctx, product(5, 6, 1), 1e-6); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v, expected context.Canceled", err)
	}
}

func TestIndependentOfProcessors(t *testing.T) {
	v := newCoulomb(5, 3, 2)
	var first []float64
	for _, procs := range []int{1, 2, 7} {
		old := runtime.GOMAXPROCS(procs)
		f, _, err := Cholesky(t.Context(), v, 1e-6)
		runtime.GOMAXPROCS(old)
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = f.Packed[0]
		} else if !slices.Equal(first, f.Packed[0]) {
			t.Errorf("GOMAXPROCS %d changes the factors", procs)
		}
	}
}

// coulomb holds the integrals over s-type Gaussians on a lattice, known in closed
// form: a matrix with the spectrum of a real basis. One entry per pair's product.
type coulomb struct {
	centre [][3]float64
	weight []float64
}

const exponent = 0.5 // 1/bohr²

// newCoulomb puts Gaussians 1.2 bohr apart on a lattice of a×b×c points.
func newCoulomb(a, b, c int) coulomb {
	var points [][3]float64
	for i := range a * b * c {
		points = append(points, [3]float64{1.2 * float64(i%a), 1.2 * float64(i/a%b), 1.2 * float64(i/a/b)})
	}
	var v coulomb
	for p, x := range points {
		for _, y := range points[:p+1] {
			var centre [3]float64
			for k := range centre {
				centre[k] = (x[k] + y[k]) / 2
			}
			v.centre = append(v.centre, centre)
			// Two normalised Gaussians: overlap exp(−a|x−y|²/2).
			v.weight = append(v.weight, math.Exp(-exponent*square(x, y)/2))
		}
	}
	return v
}

func square(x, y [3]float64) (sum float64) {
	for k := range x {
		sum += (x[k] - y[k]) * (x[k] - y[k])
	}
	return sum
}

func (c coulomb) Dim() int { return len(c.centre) }

// element returns (ab|cd) of normalised s Gaussians of one exponent a:
// S_ab S_cd erf(√a R)/R, R the distance of the products' centres (Boys, Proc. R.
// Soc. A 200, 542 (1950)).
func (c coulomb) element(i, j int) float64 {
	r := math.Sqrt(square(c.centre[i], c.centre[j]))
	f := 2 * math.Sqrt(exponent/math.Pi)
	if r > 0 {
		f = math.Erf(math.Sqrt(exponent)*r) / r
	}
	return c.weight[i] * c.weight[j] * f
}

func (c coulomb) Diagonal(dst []float64) {
	for i := range dst {
		dst[i] = c.element(i, i)
	}
}

func (c coulomb) Column(j int, dst []float64) {
	for i := range dst {
		dst[i] = c.element(i, j)
	}
}

// TestOrderOfPivots compares the number of factors with that of strict full
// pivoting, one at a time.
func TestOrderOfPivots(t *testing.T) {
	v := newCoulomb(5, 3, 2)
	f, _, err := Cholesky(t.Context(), v, 1e-6)
	if err != nil {
		t.Fatal(err)
	}
	if strict := strictCount(v, 1e-6); float64(f.Count()) > 1.05*float64(strict) {
		t.Errorf("%d factors, strict pivoting needs %d", f.Count(), strict)
	}
}

func strictCount(v Matrix, tolerance float64) int {
	n := v.Dim()
	d, column := make([]float64, n), make([]float64, n)
	v.Diagonal(d)
	var rows [][]float64
	for slices.Max(d) > tolerance {
		p := slices.Index(d, slices.Max(d))
		v.Column(p, column)
		row := slices.Clone(column)
		for _, l := range rows {
			axpy(row, -l[p], l)
		}
		scaleBy(row, 1/math.Sqrt(row[p]))
		for i, x := range row {
			d[i] -= x * x
		}
		d[p] = 0
		rows = append(rows, row)
	}
	return len(rows)
}

func BenchmarkCholesky(b *testing.B) {
	held := hold(newCoulomb(5, 5, 4))
	b.ResetTimer()
	for b.Loop() {
		f, _, err := Cholesky(b.Context(), held, 1e-9)
		if err != nil {
			b.Fatal(err)
		}
		b.ReportMetric(float64(f.Count()), "factors")
	}
}

func BenchmarkLargestError(b *testing.B) {
	held := hold(newCoulomb(5, 5, 4))
	f, _, err := Cholesky(b.Context(), held, 1e-9)
	if err != nil {
		b.Fatal(err)
	}
	b.ResetTimer()
	for b.Loop() {
		if _, err := LargestError(b.Context(), held, f); err != nil {
			b.Fatal(err)
		}
	}
	n := float64(held.n)
	b.ReportMetric(n*n*float64(f.Count())*float64(b.N)/b.Elapsed().Seconds()/1e9, "GFLOP/s")
}

func BenchmarkEigen(b *testing.B) {
	v := product(30, 7, slices.Repeat([]float64{1, -1}, 50)...)
	b.ResetTimer()
	for b.Loop() {
		if _, _, err := Eigen(b.Context(), v, 1e-6); err != nil {
			b.Fatal(err)
		}
	}
}

func hold(v Matrix) dense {
	n := v.Dim()
	d := dense{n, make([]float64, n*n)}
	for j := range n {
		v.Column(j, d.data[j*n:(j+1)*n])
	}
	return d
}
