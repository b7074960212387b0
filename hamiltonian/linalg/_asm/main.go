// Command _asm generates the assembly of package linalg. With -set it picks
// one of the files: avx512, avx2, avx512single, avx2single.
package main

import (
	"flag"
	"log"

	. "github.com/mmcloughlin/avo/build"
)

func main() {
	set := flag.String("set", "", "instruction set and precision")
	flag.Parse()
	s, ok := map[string]isa{
		"avx512":       {suffix: "AVX512", avx512: true, double: true},
		"avx2":         {suffix: "AVX2", double: true},
		"avx512single": {suffix: "AVX512Single", avx512: true},
		"avx2single":   {suffix: "AVX2Single"},
	}[*set]
	if !ok {
		log.Fatalf("unknown set %q", *set)
	}
	ConstraintExpr("amd64,!noasm")
	for vectors := 3; vectors >= 1; vectors-- {
		s.panel(vectors, false)
		s.panel(vectors, true)
	}
	if s.double {
		s.outer()
		s.eliminate()
	}
	if !s.avx512 {
		s.transpose()
	}
	Generate()
}
