package afqmc

// Observer is what a Recorder may be besides: it is shown the walk at every
// sampled measurement, local energies and overlaps fresh, before population
// control. It must not change anything.
type Observer interface {
	Observe(w *Walk)
}
