package afqmc

import "leadline/hamiltonian"

// Stage is one part of a step, to be timed on its own.
type Stage struct {
	Name string
	// Flops of one call: one tile of walkers.
	Flops float64
	// Run does the part once, on the calling goroutine.
	Run func()
}

// Stages returns the parts of a step of the first tile and the number of
// walkers in it. The parts work on the walk's state, which is of no further use
// afterwards.
func (w *Walk) Stages() (stages []Stage, walkers int) {
	ws, p, tile := w.crew.own, w.Propagator, w.tiles[0]
	part := w.walkers.Slice(tile[0], tile[1])
	h := w.Guide.Hamiltonian
	m, ng, count := float64(p.orbitals), float64(len(p.Shift)), float64(part.Count)
	columns := float64(part.Columns())
	down := part.Down
	if part.Paired {
		down = 0
	}
	support := w.Guide.Support()
	rotated := float64(support.Columns(0)+support.Columns(1)) * m
	if h.SpinFree() && support.Equal() {
		rotated /= 2
	}
	up, dn := float64(h.Up), float64(h.Down)
	tables := up*up + dn*dn
	inverses := up*up*up + dn*dn*dn
	overlaps := 4 * m * (up*up + dn*dn)
	if part.Paired && support.Equal() {
		tables, inverses, overlaps = up*up, up*up*up, 4*m*up*up
	}
	w.propagate(ws, tile) // fills the coefficients
	pairs := float64(hamiltonian.Pairs(p.orbitals))
	return []Stage{
		{"random numbers and coefficients", 0, func() {
			for i := tile[0]; i < tile[1]; i++ {
				w.draw(ws, i)
				fields := w.State.Fields[2*i*len(p.Shift) : 2*(i+1)*len(p.Shift)]
				p.draw(ws.area, i-tile[0], fields[:len(p.Shift)], fields[len(p.Shift):])
			}
		}},
		{"field product", float64(p.spins) * 4 * count * ng * pairs, func() {
			for spin := range p.spins {
				ws.area.exponential.fields(ws.area.coefficients, part.Count, spin)
			}
		}},
		{"exponential", count * 8 * m * m * columns * float64(p.Order), func() {
			for i := range part.Count {
				ws.area.exponential.unpack(i)
				copy(ws.area.columns, part.Walker(i))
				ws.area.exponential.series(ws.area.columns[:part.Stride()], p.Order)
			}
		}},
		{"one-body half steps", count * 8 * m * m * columns, func() {
			p.applyHalf(ws.area.columns, part.Data, part.Count, part.Up, down)
			p.applyHalf(part.Data, ws.area.columns, part.Count, part.Up, down)
		}},
		{"overlaps, inverses, densities", count * (overlaps + 2*overlaps + 8*inverses), func() { w.Guide.Densities(ws.mixed, part) }},
		{"force bias", count * 4 * ng * rotated, func() { w.Guide.Fields(ws.mixed, part) }},
		{"local energy", count * 4 * tables * m * m, func() { w.localEnergies(ws, tile) }},
	}, part.Count
}
