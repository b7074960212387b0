package lanes

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"testing"
)

//go:generate go -C _asm run . -set avx512 -out ../lanes_avx512_amd64.s -stubs ../lanes_avx512_amd64.go -pkg lanes
//go:generate go -C _asm run . -set avx2 -out ../lanes_avx2_amd64.s -stubs ../lanes_avx2_amd64.go -pkg lanes

// TestGenerated compares the assembly with what its generator writes today.
func TestGenerated(t *testing.T) {
	if testing.Short() {
		t.Skip("builds the generator")
	}
	run := func(name string, args ...string) ([]byte, error) {
		cmd := exec.Command(name, args...)
		cmd.Dir = "_asm"
		cmd.Env = append(os.Environ(), "GOWORK=off", "GOFLAGS=", "GODEBUG=")
		return cmd.CombinedOutput()
	}
	if out, err := run("go", "mod", "download"); err != nil {
		t.Skipf("the generator's modules cannot be had here: %v\n%s", err, out)
	}
	dir := t.TempDir()
	generator := filepath.Join(dir, "generator")
	if out, err := run("go", "build", "-o", generator, "."); err != nil {
		t.Fatalf("the generator does not build: %v\n%s", err, out)
	}
	for _, set := range []string{"avx512", "avx2"} {
		base := "lanes_" + set + "_amd64"
		asm, stubs := filepath.Join(dir, base+".s"), filepath.Join(dir, base+".go")
		if out, err := run(generator, "-set", set, "-out", asm, "-stubs", stubs, "-pkg", "lanes"); err != nil {
			t.Fatalf("generating %s: %v\n%s", set, err, out)
		}
		for _, fresh := range []string{asm, stubs} {
			kept := filepath.Base(fresh)
			if !bytes.Equal(withoutCommand(t, fresh), withoutCommand(t, kept)) {
				t.Errorf("%s is not what _asm generates; run go generate", kept)
			}
		}
	}
}

// withoutCommand reads a file without its first line, which holds the command
// that wrote it.
func withoutCommand(t *testing.T, path string) []byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	_, rest, _ := bytes.Cut(b, []byte("\n"))
	return rest
}
