package job

import (
	_ "embed"
	"strings"
	"unicode"
)

//go:embed starter.toml
var starter string

// Starter returns a commented job to begin with, a beryllium atom on its way into
// a hydrogen molecule, with name as its title; an empty name keeps the title.
func Starter(name string) []byte {
	title := []rune(strings.Map(func(r rune) rune {
		if unicode.IsGraphic(r) {
			return r
		}
		return ' '
	}, name))
	if len(title) == 0 {
		return []byte(starter)
	}
	_, rest, _ := strings.Cut(starter, "\n")
	return []byte("title = " + literal(string(title[:min(len(title), longest/4)])) + "\n" + rest)
}
