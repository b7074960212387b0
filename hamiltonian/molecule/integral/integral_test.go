package integral

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"

	"leadline/hamiltonian"
)

// cluster returns invented shells of all momenta up to l on four centres, with
// contractions, a shared set of exponents and a diffuse function.
func cluster(l int) []Shell {
	random := rand.New(rand.NewPCG(5, 1))
	centers := [][3]float64{{0, 0, 0}, {0.3, -1.1, 1.7}, {-1.3, 0.4, -0.6}, {0.9, 1.9, 0.2}}
	var shells []Shell
	for k := range l + 1 {
		n := 1 + k%2
		s := Shell{Center: centers[k%len(centers)], L: k}
		for range n {
			s.Exponents = append(s.Exponents, 0.2+2*random.Float64())
			s.Coefficients = append(s.Coefficients, 0.3+random.Float64())
		}
		shells = append(shells, s)
	}
	return append(shells,
		Shell{Center: centers[2], L: 0, Exponents: []float64{9, 1.1}, Coefficients: []float64{0.4, 0.7}},
		Shell{Center: centers[2], L: 1, Exponents: []float64{9, 1.1}, Coefficients: []float64{0.2, 0.9}},
		Shell{Center: centers[3], L: 0, Exponents: []float64{0.05}, Coefficients: []float64{1}})
}

var nuclei = []Nucleus{{1, [3]float64{0, 0, 0}}, {6, [3]float64{0.3, -1.1, 1.7}}, {3, [3]float64{2, 2, -1}}}

// boys0 is F_0 through the error function.
func boys0(x float64) float64 {
	if x < 1e-12 {
		return 1
	}
	return 0.5 * math.Sqrt(math.Pi/x) * math.Erf(math.Sqrt(x))
}

// Closed formulas over single s functions (S. F. Boys, Proc. R. Soc. London A 200,
// 542 (1950)), from tight to diffuse and from close to far.
func TestClosedFormulas(t *testing.T) {
	near := func(what string, got, want, scale float64) {
		t.Helper()
		if !(math.Abs(got-want) <= 1e-13*scale) {
			t.Errorf("%s is %.16g, expected %.16g", what, got, want)
		}
	}
	for _, a := range []float64{1e-3, 0.7, 40, 1e7} {
		for _, b := range []float64{2e-3, 0.9, 1e5} {
			for _, z := range []float64{0, 1e-7, 0.5, 3, 1e3} {
				f := New([]Shell{
					{Exponents: []float64{a}, Coefficients: []float64{-3}},
					{Center: [3]float64{0.2 * z, 0, z}, Exponents: []float64{b}, Coefficients: []float64{1}},
				}, false)
				r2 := 1.04 * z * z
				p, mu := a+b, a*b/(a+b)
				overlap := -math.Pow(4*mu/p, 0.75) * math.Exp(-mu*r2) // −: the sign of the coefficient
				near("overlap", f.Overlap().At(0, 1), overlap, 1)
				kinetic := mu * (3 - 2*mu*r2) * overlap
				near("kinetic energy", f.Kinetic().At(0, 1), kinetic, p)
				// A charge of 2 at the point c.
				c := [3]float64{0.1, -0.3, 0.4}
				place := func(w float64) (d2 float64) { // |w·B − c|²
					return math.Pow(0.2*z*w-c[0], 2) + c[1]*c[1] + math.Pow(z*w-c[2], 2)
				}
				v := f.Attraction([]Nucleus{{2, c}})
				near("attraction", v.At(0, 1), -2*2*math.Sqrt(p/math.Pi)*overlap*boys0(p*place(b/p)), math.Sqrt(p))
				near("attraction (a)", v.At(0, 0), -2*2*math.Sqrt(2*a/math.Pi)*boys0(2*a*place(0)), math.Sqrt(a))
				d := f.Dipole()
				near("dipole", d[2].At(0, 1), z*b/p*overlap, max(1, z))
				g := f.Repulsion()
				root := func(p, q float64) float64 { return 2 / math.Sqrt(math.Pi) * math.Sqrt(p*q/(p+q)) }
				near("(aa|bb)", g.At(0, 2), root(2*a, 2*b)*boys0(2*mu*r2), math.Sqrt(p))
				near("(ab|ab)", g.At(1, 1), root(p, p)*overlap*overlap, math.Sqrt(p))
				near("(aa|ab)", g.At(0, 1), root(2*a, p)*overlap*boys0(2*a*p/(2*a+p)*r2*b*b/(p*p)), math.Sqrt(p))
			}
		}
	}
}

// Functions are normalised, those of one shell orthogonal, up to i functions.
func TestNormalisation(t *testing.T) {
	shells := cluster(maxL)
	for _, cartesian := range []bool{false, true} {
		f := New(shells, cartesian)
		s := f.Overlap()
		first := 0
		for _, shell := range shells {
			n := f.angles[shell.L].count
			for i := range n {
				for j := range i + 1 {
					v := s.At(first+i, first+j)
					if want := map[bool]float64{true: 1, false: 0}[i == j]; math.Abs(v-want) > 1e-13 && (i == j || !cartesian) {
						t.Errorf("overlap (%d,%d) of a shell with l = %d is %v", i, j, shell.L, v)
					}
				}
			}
			first += n
		}
		if first != f.Count() {
			t.Errorf("%d functions, expected %d", f.Count(), first)
		}
	}
}

// A centre's derivative raises the power: ∂/∂A_x exp(−ar²) = 2a·x·exp(−ar²), and so
// on to x·y·z, for each kind of integral: the recurrences against finite
// differences of lower ones.
func TestRaisingByDerivatives(t *testing.T) {
	const a = 0.8
	// The normalised functions s, p_x, d_xy, f_xyz as multiples of plain monomials.
	norm := func(l int) float64 {
		f := New([]Shell{{L: l, Exponents: []float64{a}, Coefficients: []float64{1}}}, true)
		return f.groups[0].shells[0].coef[0] * f.angles[l].coef[place1(l)][place1(l)]
	}
	values := func(l int, shift [3]float64) []float64 {
		center := [3]float64{0.2, -0.5, 0.7}
		for axis := range center {
			center[axis] += shift[axis]
		}
		f := New([]Shell{
			{Center: center, L: l, Exponents: []float64{a}, Coefficients: []float64{1}},
			{Center: [3]float64{-0.6, 0.1, -0.3}, L: 2, Exponents: []float64{0.9, 0.3}, Coefficients: []float64{0.4, 0.5}},
		}, true)
		k := place1(l)
		n := len(monomials(l))
		var out []float64
		g := f.Repulsion()
		for other := n; other < f.Count(); other++ {
			out = append(out, f.Overlap().At(k, other), f.Kinetic().At(k, other), f.Attraction(nuclei).At(k, other), f.Dipole()[1].At(k, other),
				g.At(hamiltonian.Pair(k, other), hamiltonian.Pair(n+1, n+3)))
		}
		for i := range out {
			out[i] /= norm(l)
		}
		return out
	}
	for l := range 3 {
		axis := l // x, then y, then z
		const h = 1e-3
		want := values(l+1, [3]float64{})
		at := func(steps float64) []float64 {
			var s [3]float64
			s[axis] = steps * h
			return values(l, s)
		}
		m2, m1, p1, p2 := at(-2), at(-1), at(1), at(2)
		for i := range want {
			d := (8*(p1[i]-m1[i]) - (p2[i] - m2[i])) / (12 * h) / (2 * a)
			if math.Abs(d-want[i]) > 1e-9 {
				t.Errorf("integral %d raised to l = %d is %.12f, derivative gives %.12f", i, l+1, want[i], d)
			}
		}
	}
}

// place1 returns the place of 1, x, xy or xyz among the monomials of degree l.
func place1(l int) int {
	e := [3]int{min(l, 1), min(max(l-1, 0), 1), min(max(l-2, 0), 1)}
	return place(e[0], e[1], e[2])
}

// blockNorms returns Σ (ab|cd)² over the components of each quartet of shells, and
// the like for the one-electron integrals: invariant under rotations.
func blockNorms(f *Functions) map[string]float64 {
	shell := make([]int, f.count)
	k := 0
	for _, g := range f.groups {
		for _, s := range g.shells {
			for i := range f.angles[s.l].count {
				shell[s.first+i] = k
			}
			k++
		}
	}
	norms := map[string]float64{}
	add := func(key string, v float64) { norms[key] += v * v }
	one := map[string]*mat.SymDense{"S": f.Overlap(), "T": f.Kinetic(), "V": f.Attraction(nuclei)}
	for name, m := range one {
		for p := range f.count {
			for q := range f.count {
				add(fmt.Sprint(name, shell[p], shell[q]), m.At(p, q))
			}
		}
	}
	g := f.Repulsion()
	for p := range f.count {
		for q := range f.count {
			for r := range f.count {
				for s := range f.count {
					add(fmt.Sprint(shell[p], " ", shell[q], " ", shell[r], " ", shell[s]), g.At(hamiltonian.Pair(p, q), hamiltonian.Pair(r, s)))
				}
			}
		}
	}
	return norms
}

// Moving and turning everything changes no integral (Σ over components) by 1e-12.
func TestInvariance(t *testing.T) {
	const l = 4
	shells := cluster(l)[2:] // d, f, g, s, p, s
	moved := append([]Shell(nil), shells...)
	saved := append([]Nucleus(nil), nuclei...)
	defer func() { nuclei = saved }()
	before := blockNorms(New(shells, false))
	// A turn by 0.7 about (1,2,3)/√14, then a shift.
	turn := func(p [3]float64) [3]float64 {
		axis := [3]float64{1 / math.Sqrt(14), 2 / math.Sqrt(14), 3 / math.Sqrt(14)}
		c, s := math.Cos(0.7), math.Sin(0.7)
		dot := axis[0]*p[0] + axis[1]*p[1] + axis[2]*p[2]
		cross := [3]float64{axis[1]*p[2] - axis[2]*p[1], axis[2]*p[0] - axis[0]*p[2], axis[0]*p[1] - axis[1]*p[0]}
		for i := range p {
			p[i] = p[i]*c + cross[i]*s + axis[i]*dot*(1-c) + float64(i) - 0.8
		}
		return p
	}
	for i := range moved {
		moved[i].Center = turn(moved[i].Center)
	}
	nuclei = append([]Nucleus(nil), nuclei...)
	for i := range nuclei {
		nuclei[i].Position = turn(nuclei[i].Position)
	}
	after := blockNorms(New(moved, false))
	for key, v := range before {
		if d := math.Sqrt(after[key]) - math.Sqrt(v); math.Abs(d) > 1e-12 {
			t.Errorf("%s: norm changes by %.1e", key, d)
		}
	}
}

// Spherical integrals are the cartesian ones taken through Spherical.
func TestSphericalOfCartesian(t *testing.T) {
	shells := cluster(4)
	spherical, cartesian := New(shells, false), New(shells, true)
	c := mat.NewDense(cartesian.Count(), spherical.Count(), nil)
	row, column := 0, 0
	for _, s := range shells {
		for m, r := range Spherical(s.L) {
			for k, v := range r {
				c.Set(row+k, column+m, v)
			}
		}
		row, column = row+len(monomials(s.L)), column+2*s.L+1
	}
	var half, full mat.Dense
	half.Mul(cartesian.Attraction(nuclei), c)
	full.Mul(c.T(), &half)
	if want := spherical.Attraction(nuclei); !mat.EqualApprox(&full, want, 1e-12) {
		t.Error("attraction integrals differ")
	}
}

// The second derivative acts on one of the two functions only; the other order
// of the shells must give the same kinetic energy.
func TestKineticIsSymmetric(t *testing.T) {
	shells := cluster(5)
	reversed := make([]Shell, len(shells))
	for i, s := range shells {
		reversed[len(shells)-1-i] = s
	}
	a, b := New(shells, true), New(reversed, true)
	ta, tb := a.Kinetic(), b.Kinetic()
	first := func(f *Functions, shells []Shell, k int) int {
		n := 0
		for _, s := range shells[:k] {
			n += f.angles[s.L].count
		}
		return n
	}
	for i, s := range shells {
		for j, u := range shells {
			for p := range a.angles[s.L].count {
				for q := range a.angles[u.L].count {
					v := ta.At(first(a, shells, i)+p, first(a, shells, j)+q)
					w := tb.At(first(b, reversed, len(shells)-1-i)+p, first(b, reversed, len(shells)-1-j)+q)
					if math.Abs(v-w) > 1e-12 {
						t.Fatalf("shells %d and %d: %v in one order, %v in the other", i, j, v, w)
					}
				}
			}
		}
	}
}

// The repulsion of a very tight charge is the attraction of a point charge; that
// of two far clouds is that of their charges.
func TestLimits(t *testing.T) {
	shells := cluster(4)
	at := [3]float64{0.4, 0.5, -0.3}
	f := New(append(shells, Shell{Center: at, Exponents: []float64{1e13}, Coefficients: []float64{1}}), false)
	n := f.Count() - 1
	g, v := f.Repulsion(), f.Attraction([]Nucleus{{1, at}})
	for p := range n {
		for q := range p + 1 {
			if d := g.At(hamiltonian.Pair(p, q), hamiltonian.Pair(n, n)) + v.At(p, q); math.Abs(d) > 1e-11 {
				t.Errorf("(%d,%d): a tight cloud repels by %.1e more than a point", p, q, d)
			}
		}
	}
	const far = 1e5
	f = New([]Shell{
		{L: 0, Exponents: []float64{0.9}, Coefficients: []float64{1}},
		{L: 0, Center: [3]float64{0, far, 0}, Exponents: []float64{1.4, 0.3}, Coefficients: []float64{1, 1}},
	}, false)
	if got := f.Repulsion().At(0, 2); math.Abs(got*far-1) > 1e-14 {
		t.Errorf("two charges %v bohr apart repel with %.16g, expected %v", far, got, 1/far)
	}
}

// Nothing is allocated once the storage has grown.
func TestNoAllocation(t *testing.T) {
	f := New(cluster(3), false)
	q := newQuartets(f)
	var k ket
	k.set(f.pairs[len(f.pairs)-1], []int{0, 1}, f.tables.sign)
	out := make([]float64, 2*f.rows)
	run := func() {
		for i := range f.pairs {
			q.columns(f.pairs[i:i+1], &k, out, f.rows)
		}
	}
	run()
	if n := testing.AllocsPerRun(20, run); n > 0 {
		t.Errorf("%v allocations for %d quartets", n, len(f.pairs))
	}
}
