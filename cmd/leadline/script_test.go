package main

import (
	"os"
	"path/filepath"
	"testing"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"leadline": main})
}

// TestScripts runs the command as a user would; each script stands in
// testdata/script.
func TestScripts(t *testing.T) {
	integrals, err := filepath.Abs(filepath.Join("..", "..", "testdata", "integrals"))
	if err != nil {
		t.Fatal(err)
	}
	examples, err := filepath.Abs("example")
	if err != nil {
		t.Fatal(err)
	}
	testscript.Run(t, testscript.Params{
		Dir: filepath.Join("testdata", "script"),
		Setup: func(env *testscript.Env) error {
			env.Setenv("INTEGRALS", integrals)
			env.Setenv("EXAMPLES", examples)
			return nil
		},
		RequireExplicitExec: true,
		Condition: func(name string) (bool, error) {
			if name == "root" {
				return os.Geteuid() == 0, nil
			}
			return false, nil
		},
	})
}
