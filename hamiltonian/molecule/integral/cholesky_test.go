package integral

import (
	"context"
	"math"
	"runtime"
	"slices"
	"strings"
	"testing"

	"leadline/hamiltonian"
)

// rebuilt returns Σ_g L^g L^g over function pairs.
func rebuilt(c *Cholesky, n int) [][]float64 {
	sum := make([][]float64, hamiltonian.Pairs(n))
	for i := range sum {
		sum[i] = make([]float64, len(sum))
	}
	l, row := make([]float64, n*n), make([]float64, len(sum))
	for b := range c.Blocks() {
		count, unpack := c.Unpack(b)
		for i := range count {
			unpack(l, i)
			for p := range n {
				copy(row[hamiltonian.Pair(p, 0):], l[p*n:p*n+p+1])
			}
			for p, x := range row {
				for q, y := range row {
					sum[p][q] += x * y
				}
			}
		}
	}
	return sum
}

// What is left over all integrals is bounded by the tolerance and by the residual
// reported, which is the one found; a tighter tolerance takes more factors.
func TestFactorise(t *testing.T) {
	f := New(cluster(3), false)
	exact := f.Repulsion()
	previous := 0
	for _, tolerance := range []float64{1e-2, 1e-5, 1e-8, 1e-11} {
		steps, last := 0, int64(0)
		c, err := f.Factorise(context.Background(), tolerance, func(done, total int64) {
			if done < last || done > total {
				t.Errorf("progress %d of %d after %d", done, total, last)
			}
			steps, last = steps+1, done
		})
		if err != nil {
			t.Fatal(err)
		}
		if steps == 0 || last != 1000 {
			t.Errorf("progress ended at %d of 1000 after %d calls", last, steps)
		}
		got := rebuilt(c, f.Count())
		diagonal, all := 0.0, 0.0
		for p := range got {
			for q := range got {
				e := math.Abs(exact.At(p, q) - got[p][q])
				all = max(all, e)
				if p == q {
					diagonal = max(diagonal, e)
				}
			}
		}
		if math.Abs(diagonal-c.Residual) > 1e-13 || c.Residual > tolerance {
			t.Errorf("tolerance %.0e: %.3e left on the diagonal, %.3e reported", tolerance, diagonal, c.Residual)
		}
		if all > tolerance {
			t.Errorf("tolerance %.0e: %.3e left on some integral", tolerance, all)
		}
		if c.Count() <= previous || c.Count() > hamiltonian.Pairs(f.Count()) {
			t.Errorf("tolerance %.0e: %d factors after %d, at most %d", tolerance, c.Count(), previous, hamiltonian.Pairs(f.Count()))
		}
		previous = c.Count()
	}
}

// Clusters far apart: most rows are dropped early, and still no integral is off by
// more than the tolerance.
func TestFactoriseFarApart(t *testing.T) {
	var shells []Shell
	for i := range 5 {
		for l := range 2 {
			shells = append(shells, Shell{Center: [3]float64{0, 0.3 * float64(i%2), 5 * float64(i)}, L: l, Exponents: []float64{0.9, 0.4}, Coefficients: []float64{1, 1}})
		}
	}
	f := New(shells, false)
	exact := f.Repulsion()
	const tolerance = 1e-4
	c, err := f.Factorise(context.Background(), tolerance, nil)
	if err != nil {
		t.Fatal(err)
	}
	dropped := 0
	for _, p := range f.pairs {
		if p.largest*exact.At(0, 0) < damping*damping*tolerance*tolerance {
			dropped++
		}
	}
	if dropped == 0 {
		t.Error("no pair of shells is small enough to be dropped")
	}
	got := rebuilt(c, f.Count())
	for p := range got {
		for q := range got {
			if e := math.Abs(exact.At(p, q) - got[p][q]); e > tolerance {
				t.Errorf("integral (%d|%d) is off by %.1e", p, q, e)
			}
		}
	}
}

// The factors have the same bits for any number of processors.
func TestFactoriseIsDeterministic(t *testing.T) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(0))
	var want [][]float64
	for _, n := range []int{1, 2, 7} {
		runtime.GOMAXPROCS(n)
		c, err := New(cluster(3), false).Factorise(context.Background(), 1e-6, nil)
		if err != nil {
			t.Fatal(err)
		}
		if want == nil {
			want = c.blocks
		}
		if !slices.EqualFunc(want, c.blocks, slices.Equal) {
			t.Errorf("factors differ with %d processors", n)
		}
	}
}

func TestFactoriseErrors(t *testing.T) {
	f := New(cluster(1), false)
	if _, err := f.Factorise(context.Background(), 1e-17, nil); err == nil || !strings.Contains(err.Error(), "factor tolerance is 1.0e-17, expected at least") {
		t.Errorf("error %v, expected one about the tolerance", err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	if _, err := f.Factorise(ctx, 1e-6, nil); err != context.Canceled {
		t.Errorf("error %v, expected that of the context", err)
	}
}

// Two identical functions make exact dependence: the factorisation leaves it out.
func TestFactoriseDependent(t *testing.T) {
	s := Shell{L: 1, Exponents: []float64{0.8}, Coefficients: []float64{1}}
	twin := s
	twin.Center[0] = 1e-9
	f := New([]Shell{s, twin}, false)
	c, err := f.Factorise(context.Background(), 1e-9, nil)
	if err != nil {
		t.Fatal(err)
	}
	if c.Count() != 6 { // the products of x, y and z of one shell
		t.Errorf("%d factors for two equal p shells, expected 6", c.Count())
	}
}

// The cost of a shell quartet, beside its flops in the package comment.
func BenchmarkQuartet(b *testing.B) {
	for _, c := range []struct {
		name       string
		l, primary int
	}{{"ss", 0, 1}, {"ss-contracted", 0, 6}, {"pp", 1, 1}, {"pp-contracted", 1, 3}, {"dd", 2, 1}, {"ff", 3, 1}, {"gg", 4, 1}} {
		var shells []Shell
		for i := range 8 {
			s := Shell{Center: [3]float64{float64(i % 2), float64(i / 2 % 2), float64(i / 4)}, L: c.l}
			for k := range c.primary {
				s.Exponents = append(s.Exponents, 0.4*math.Pow(2.7, float64(k))+0.01*float64(i))
				s.Coefficients = append(s.Coefficients, 1)
			}
			shells = append(shells, s)
		}
		f := New(shells, false)
		q := newQuartets(f)
		p := f.pairs[0]
		all := make([]int, len(p.rows))
		for i := range all {
			all[i] = i
		}
		var k ket
		k.set(p, all, f.tables.sign)
		out := make([]float64, k.count*f.rows)
		flops := 0.0
		for _, bra := range f.pairs {
			n, m := float64(len(bra.p)), float64(len(p.p))
			hb, hk, l := float64(hermites(bra.order)), float64(hermites(p.order)), float64(bra.order+p.order)
			recurrence := 2 * (l + 1) * (l + 2) * (l + 3) * (l + 4) / 24
			flops += n*m*(recurrence+2*float64(k.count)*hb*hk) + 2*float64(k.count*len(bra.rows))*n*hb
		}
		b.Run(c.name, func(b *testing.B) {
			for b.Loop() {
				q.columns(f.pairs, &k, out, f.rows)
			}
			each := float64(b.Elapsed().Nanoseconds()) / float64(b.N)
			b.ReportMetric(each/float64(len(f.pairs)), "ns/quartet")
			b.ReportMetric(each/float64(f.rows*k.count), "ns/integral")
			b.ReportMetric(flops/each, "Gflop/s")
			b.ReportMetric(flops/float64(len(f.pairs)), "flop/quartet")
		})
	}
}
