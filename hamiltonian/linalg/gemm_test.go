package linalg

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"runtime"
	"strings"
	"sync"
	"testing"
	"unsafe"
)

// eachTier runs a test on every tier that the process has.
func eachTier(t *testing.T, f func(t *testing.T, tier tier)) {
	defer func(was tier) { active = was }(active)
	for _, tier := range tiers() {
		active = tier
		t.Run(tier.String(), func(t *testing.T) { f(t, tier) })
	}
}

// TestTiers compares the tiers with what the operating system says about the
// processor, so that a tier cannot be lost without notice.
func TestTiers(t *testing.T) {
	if strings.Contains(os.Getenv("GODEBUG"), "cpu.") {
		t.Skip("GODEBUG takes processor features away")
	}
	want := "gonum"
	if runtime.GOARCH == "amd64" && !noasm {
		info, err := os.ReadFile("/proc/cpuinfo")
		if err != nil {
			t.Skipf("no second opinion on the processor: %v", err)
		}
		flags := strings.Fields(string(info))
		has := func(flag string) bool {
			for _, f := range flags {
				if f == flag {
					return true
				}
			}
			return false
		}
		if has("avx2") && has("fma") {
			want += " avx2"
		}
		if has("avx512f") {
			want += " avx512"
		}
	}
	var got []string
	for _, tier := range tiers() {
		got = append(got, tier.String())
	}
	if strings.Join(got, " ") != want {
		t.Errorf("tiers %v, the processor has %s", got, want)
	}
	if Kernel() != got[len(got)-1] {
		t.Errorf("%s in use, the best is %s", Kernel(), got[len(got)-1])
	}
}

// TestSwitch starts this test again with processor features taken away.
func TestSwitch(t *testing.T) {
	const child = "LINALG_TEST_PRINT_KERNEL"
	if os.Getenv(child) != "" {
		fmt.Printf("kernel=%s\n", Kernel())
		return
	}
	if strings.Contains(os.Getenv("GODEBUG"), "cpu.") {
		t.Skip("GODEBUG takes processor features away")
	}
	below := portable // AVX-512
	for _, tier := range tiers() {
		if tier < avx512 {
			below = tier
		}
	}
	for debug, want := range map[string]tier{
		"":                best(),
		"cpu.avx512f=off": below,
		"cpu.all=off":     portable,
	} {
		cmd := exec.Command(os.Args[0], "-test.run=^TestSwitch$")
		cmd.Env = append(os.Environ(), child+"=1", "GODEBUG="+debug)
		out, err := cmd.CombinedOutput()
		if err != nil {
			t.Fatalf("GODEBUG=%s: %v\n%s", debug, err, out)
		}
		if !strings.Contains(string(out), "kernel="+want.String()+"\n") {
			t.Errorf("GODEBUG=%s: %s, expected %s", debug, out, want)
		}
	}
}

func random[T float](rng *rand.Rand, n int) []T {
	x := make([]T, n)
	for i := range x {
		x[i] = T(rng.NormFloat64())
	}
	return x
}

// reference returns op(A)·op(B) in double precision, and the sums of the
// magnitudes of the terms, which rounding is measured by.
func reference[T float](a, b operand[T], m, n, k int) (value, size []float64) {
	value, size = make([]float64, m*n), make([]float64, m*n)
	row := make([]float64, n)
	for l := range k {
		for j := range row {
			row[j] = float64(b.data[at(b, l, j)])
		}
		for i := range m {
			x := float64(a.data[at(a, i, l)])
			v, s := value[i*n:i*n+n], size[i*n:i*n+n]
			for j, y := range row {
				v[j] += x * y
				s[j] += math.Abs(x * y)
			}
		}
	}
	return value, size
}

func randomOperand[T float](rng *rand.Rand, rows, cols int) operand[T] {
	a := operand[T]{trans: rng.IntN(2) == 0}
	if a.trans {
		rows, cols = cols, rows
	}
	a.ld = max(1, cols+rng.IntN(3)*rng.IntN(9))
	a.data = random[T](rng, max(0, (rows-1)*a.ld+cols))
	return a
}

// checkProduct compares one random product, by Gemm and from a packed operand,
// element by element with the sum in double precision, and looks for writes
// outside of C.
func checkProduct[T float](t *testing.T, tier tier, rng *rand.Rand, m, n, k int) {
	t.Helper()
	a, b := randomOperand[T](rng, m, k), randomOperand[T](rng, k, n)
	ldc := max(1, n+rng.IntN(3)*rng.IntN(9))
	old := random[T](rng, m*ldc+5)
	alpha := []T{1, -1, 0.75, T(rng.NormFloat64())}[rng.IntN(4)]
	beta := []T{0, 1, -0.5, T(rng.NormFloat64())}[rng.IntN(4)]
	if beta == 0 {
		for i := range old {
			old[i] = T(math.NaN())
		}
	}
	got := append([]T(nil), old...)
	product(tier, a.trans, b.trans, m, n, k, alpha, a.data, a.ld, b.data, b.ld, beta, got, ldc)
	where := func() string {
		return fmt.Sprintf("m=%d n=%d k=%d transA=%v transB=%v lda=%d ldb=%d ldc=%d alpha=%v beta=%v", m, n, k, a.trans, b.trans, a.ld, b.ld, ldc, alpha, beta)
	}
	epsilon := 0x1p-52
	if unsafe.Sizeof(alpha) == 4 {
		epsilon = 0x1p-23
	}
	value, size := reference(a, b, m, n, k)
	for i := range old {
		if row, col := i/ldc, i%ldc; row < m && col < n {
			want, scale := float64(alpha)*value[row*n+col], math.Abs(float64(alpha))*size[row*n+col]
			if beta != 0 {
				want += float64(beta) * float64(old[i])
				scale += math.Abs(float64(beta) * float64(old[i]))
			}
			// Rounding of k sums, doubled; see Higham, Accuracy and Stability
			// of Numerical Algorithms, section 3.1 (from memory).
			if !(math.Abs(float64(got[i])-want) <= epsilon*float64(k+4)*scale) {
				t.Fatalf("%s: %v at (%d,%d), expected %v", where(), got[i], row, col, want)
			}
		} else if got[i] != old[i] && (got[i] == got[i] || old[i] == old[i]) {
			t.Fatalf("%s: wrote outside of C at %d", where(), i)
		}
	}
	if a.trans {
		return
	}
	again := append([]T(nil), old...)
	p := pack(tier, b.trans, k, n, b.data, b.ld)
	p.multiply(m, alpha, a.data, a.ld, beta, again, ldc)
	for i := range again {
		if again[i] != got[i] && (again[i] == again[i] || got[i] == got[i]) && (tier != portable || !b.trans) {
			t.Fatalf("%s: packed operand gives %v, Gemm %v at %d", where(), again[i], got[i], i)
		}
	}
}

func TestGemm(t *testing.T)   { testGemm[float64](t) }
func TestGemm32(t *testing.T) { testGemm[float32](t) }

func testGemm[T float](t *testing.T) {
	eachTier(t, func(t *testing.T, tier tier) {
		rng := rand.New(rand.NewPCG(5, 1))
		for m := range 20 {
			for _, n := range []int{0, 1, 2, 3, 5, 7, 8, 9, 15, 16, 17, 23, 24, 25, 31, 47, 48, 49, 65, 97} {
				for _, k := range []int{0, 1, 3, 30} {
					checkProduct[T](t, tier, rng, m, n, k)
				}
			}
		}
		for range 30 {
			checkProduct[T](t, tier, rng, 1+rng.IntN(400), 1+rng.IntN(120), 1+rng.IntN(400))
		}
		for _, s := range [][3]int{{200, 500, 390}, {450, 1001, 290}, {7, 1200, 600}, {64, 300, 1000}, {450, 3, 450}, {1, 1, 5000}} {
			checkProduct[T](t, tier, rng, s[0], s[1], s[2])
		}
	})
}

// TestGemmSameBits: an element depends on its row of A, its column of B and the
// scalars alone, whatever surrounds them, and not on the kernel.
func TestGemmSameBits(t *testing.T)   { testSameBits[float64](t) }
func TestGemm32SameBits(t *testing.T) { testSameBits[float32](t) }

func testSameBits[T float](t *testing.T) {
	const m, n, k = 230, 700, 411
	rng := rand.New(rand.NewPCG(6, 1))
	a := operand[T]{data: random[T](rng, m*k), ld: k}
	b := operand[T]{data: random[T](rng, k*n), ld: n}
	old := random[T](rng, m*n)
	var want []T
	for _, tier := range tiers() {
		if tier == portable {
			continue
		}
		t.Run(tier.String(), func(t *testing.T) {
			whole := append([]T(nil), old...)
			product(tier, false, false, m, n, k, 0.7, a.data, a.ld, b.data, b.ld, 0.3, whole, n)
			if want == nil {
				want = whole
			}
			for i := range whole {
				if whole[i] != want[i] {
					t.Fatalf("element %d: %v, another tier %v", i, whole[i], want[i])
				}
			}
			for range 200 {
				i, j := rng.IntN(m), rng.IntN(n)
				rows, cols := 1+rng.IntN(min(30, m-i)), 1+rng.IntN(min(100, n-j))
				sub := append([]T(nil), old...)
				left, right := operand[T]{data: a.data[i*k:], ld: k}, operand[T]{data: b.data[j:], ld: n}
				if rng.IntN(2) == 0 {
					left = flip(left, rows, k)
				}
				if rng.IntN(2) == 0 {
					right = flip(right, k, cols)
				}
				product(tier, left.trans, right.trans, rows, cols, k, 0.7, left.data, left.ld, right.data, right.ld, 0.3, sub[i*n+j:], n)
				for r := range rows {
					for c := range cols {
						if x := (i+r)*n + j + c; sub[x] != want[x] {
							t.Fatalf("element (%d,%d) of %d×%d at (%d,%d): %v alone, %v in the whole", r, c, rows, cols, i, j, sub[x], want[x])
						}
					}
				}
			}
		})
	}
	if want == nil {
		t.Skip("no kernels on this processor")
	}
}

// flip stores the same matrix transposed.
func flip[T float](a operand[T], rows, cols int) operand[T] {
	out := operand[T]{data: make([]T, rows*cols), ld: rows, trans: true}
	for i := range rows {
		for j := range cols {
			out.data[j*rows+i] = a.data[i*a.ld+j]
		}
	}
	return out
}

// TestGemmNaN puts one NaN or infinity into A or B: exactly its row or column of
// C must be spoilt. (No zeros: gonum's product passes over those of A.)
func TestGemmNaN(t *testing.T)   { testNaN[float64](t) }
func TestGemm32NaN(t *testing.T) { testNaN[float32](t) }

func testNaN[T float](t *testing.T) {
	eachTier(t, func(t *testing.T, tier tier) {
		rng := rand.New(rand.NewPCG(7, 1))
		for _, s := range [][3]int{{3, 5, 4}, {13, 30, 20}, {200, 500, 200}} {
			m, n, k := s[0], s[1], s[2]
			for _, bad := range []T{T(math.NaN()), T(math.Inf(1)), T(math.Inf(-1))} {
				a, b, c := random[T](rng, m*k), random[T](rng, k*n), make([]T, m*n)
				i, l, j := rng.IntN(m), rng.IntN(k), rng.IntN(n)
				a[i*k+l] = bad
				product(tier, false, false, m, n, k, 1, a, k, b, n, 0, c, n)
				for x := range c {
					if finite := float64(c[x]-c[x]) == 0; finite == (x/n == i) {
						t.Fatalf("%v in row %d of A: %v in row %d of C", bad, i, c[x], x/n)
					}
				}
				a[i*k+l], b[l*n+j] = 1, bad
				product(tier, false, false, m, n, k, 1, a, k, b, n, 0, c, n)
				for x := range c {
					if finite := float64(c[x]-c[x]) == 0; finite == (x%n == j) {
						t.Fatalf("%v in column %d of B: %v in column %d of C", bad, j, c[x], x%n)
					}
				}
			}
		}
		if tier == portable {
			return
		}
		a, b, c := []T{0}, []T{T(math.NaN())}, []T{0}
		product(tier, false, false, 1, 1, 1, 1, a, 1, b, 1, 0, c, 1)
		if c[0] == c[0] {
			t.Error("0·NaN is lost")
		}
	})
}

func TestGemmZeroFactor(t *testing.T) {
	eachTier(t, func(t *testing.T, tier tier) {
		for _, beta := range []float64{0, 1, 2} {
			c := []float64{3, math.NaN(), 4, 5}
			Gemm(false, false, 2, 1, 0, 1, nil, 1, nil, 1, beta, c, 2) // k = 0
			if c[0] != 3*beta || c[2] != 4*beta || !math.IsNaN(c[1]) || c[3] != 5 {
				t.Errorf("k=0 beta=%v: %v", beta, c)
			}
			c = []float64{3, math.NaN(), 4, 5}
			Gemm(false, false, 2, 1, 1, 0, []float64{math.NaN(), 1}, 1, []float64{1}, 1, beta, c, 2) // alpha = 0
			if c[0] != 3*beta || c[2] != 4*beta || !math.IsNaN(c[1]) || c[3] != 5 {
				t.Errorf("alpha=0 beta=%v: %v", beta, c)
			}
		}
		c := []float64{math.NaN()}
		Gemm(false, false, 1, 1, 0, 1, nil, 1, nil, 1, 0, c, 1)
		if c[0] != 0 {
			t.Errorf("beta=0 leaves %v", c[0])
		}
	})
}

// TestGemmSweep compares with gonum, every size from 1 to 130 and some larger.
func TestGemmSweep(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 1))
	sizes := []int{191, 192, 193, 255, 256, 257, 384, 400, 512}
	for n := range 130 {
		sizes = append(sizes, n+1)
	}
	for _, n := range sizes {
		a, b := random[float64](rng, n*n), random[float64](rng, n*n)
		want, got := make([]float64, n*n), make([]float64, n*n)
		product(portable, false, false, n, n, n, 1, a, n, b, n, 0, want, n)
		for _, tier := range tiers()[1:] {
			product(tier, false, false, n, n, n, 1, a, n, b, n, 0, got, n)
			for i := range got {
				if math.Abs(got[i]-want[i]) > 1e-12*math.Sqrt(float64(n)) {
					t.Fatalf("%v n=%d: %v, gonum %v", tier, n, got[i], want[i])
				}
			}
		}
	}
}

func TestGemmConcurrent(t *testing.T) {
	eachTier(t, func(t *testing.T, tier tier) {
		const m, n, k = 200, 400, 200
		rng := rand.New(rand.NewPCG(9, 1))
		a, b := random[float64](rng, m*k), random[float64](rng, k*n)
		want := make([]float64, m*n)
		Gemm(true, true, m, n, k, 1, a, m, b, k, 0, want, n)
		var wait sync.WaitGroup
		for range 4 {
			wait.Go(func() {
				c := make([]float64, m*n)
				for range 5 {
					Gemm(true, true, m, n, k, 1, a, m, b, k, 0, c, n)
					for i := range c {
						if c[i] != want[i] {
							t.Errorf("element %d differs", i)
							return
						}
					}
				}
			})
		}
		wait.Wait()
	})
}

func TestGemmAllocations(t *testing.T) {
	eachTier(t, func(t *testing.T, tier tier) {
		const n = 300
		rng := rand.New(rand.NewPCG(10, 1))
		a, b, c := random[float64](rng, n*n), random[float64](rng, n*n), make([]float64, n*n)
		p := Pack(false, n, n, b, n)
		if got := testing.AllocsPerRun(5, func() {
			Gemm(false, false, n, n, n, 1, a, n, b, n, 0, c, n)
			Gemm(true, true, n, n, n, 1, a, n, b, n, 0, c, n)
			Gemm(true, false, 20, n, 20, 1, a, n, b, n, 0, c, n)
			p.Mul(n, 1, a, n, 0, c, n)
		}); got != 0 {
			t.Errorf("%v allocations", got)
		}
	})
}

func TestGemmPanics(t *testing.T) {
	x := make([]float64, 6)
	for name, f := range map[string]func(){
		"negative":        func() { Gemm(false, false, -1, 1, 1, 1, x, 1, x, 1, 0, x, 1) },
		"short A":         func() { Gemm(false, false, 3, 1, 3, 1, x, 3, x, 1, 0, x, 1) },
		"short row of B":  func() { Gemm(false, false, 1, 3, 2, 1, x, 2, x, 2, 0, x, 3) },
		"short C":         func() { Gemm(false, false, 3, 3, 1, 1, x, 1, x, 3, 0, x, 3) },
		"short packed":    func() { Pack(false, 3, 3, x, 3) },
		"short left side": func() { Pack(false, 3, 2, x, 2).Mul(3, 1, x, 3, 0, x, 2) },
	} {
		t.Run(name, func(t *testing.T) {
			defer func() {
				if s, ok := recover().(string); !ok || !strings.HasPrefix(s, "linalg: ") {
					t.Error("no panic of this package")
				}
			}()
			f()
		})
	}
}
