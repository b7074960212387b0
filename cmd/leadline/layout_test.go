package main

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// floors of the project, from the ground up: a package may import its own floor
// and those below.
var floors = []string{"hamiltonian", "trial", "afqmc", "cmd", "benchmarks"}

func floor(path string) int {
	for i, name := range floors {
		if path == name || strings.HasPrefix(path, name+"/") {
			return i
		}
	}
	return -1
}

// TestImportsGoDown checks that nothing imports upward, tests included, and that
// below cmd nothing touches flags, TOML, signals or terminals.
func TestImportsGoDown(t *testing.T) {
	root := filepath.Join("..", "..")
	forbidden := []string{"flag", "os/signal", "github.com/BurntSushi/toml", "github.com/spf13/cobra", "golang.org/x/term", "github.com/schollz/progressbar/v3"}
	checked := 0
	err := filepath.WalkDir(root, func(path string, entry fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if entry.IsDir() && strings.HasPrefix(entry.Name(), "_") {
			return fs.SkipDir
		}
		relative, err := filepath.Rel(root, path)
		if err != nil {
			return err
		}
		here := floor(filepath.ToSlash(relative))
		if entry.IsDir() || !strings.HasSuffix(path, ".go") || here < 0 {
			return nil
		}
		file, err := parser.ParseFile(token.NewFileSet(), path, nil, parser.ImportsOnly)
		if err != nil {
			return nil // another test says so
		}
		checked++
		for _, spec := range file.Imports {
			name, err := strconv.Unquote(spec.Path.Value)
			if err != nil {
				return err
			}
			if own, ok := strings.CutPrefix(name, "leadline/"); ok && floor(own) > here {
				t.Errorf("%s imports %s, which lies above it", relative, name)
			}
			if here < floor("cmd") && !strings.HasSuffix(path, "_test.go") {
				for _, f := range forbidden {
					if name == f {
						t.Errorf("%s imports %s, which belongs to cmd", relative, name)
					}
				}
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	if checked < 20 {
		t.Errorf("only %d files checked, expected the whole project", checked)
	}
}
