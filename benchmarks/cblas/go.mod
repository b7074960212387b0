module leadline/benchmarks/cblas

go 1.26.0

require (
	golang.org/x/sys v0.50.0
	gonum.org/v1/gonum v0.17.0
	leadline v0.0.0
)

replace leadline => ../..
