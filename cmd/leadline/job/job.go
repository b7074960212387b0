package job

// Job is one job as resolved: defaults filled in, keys that do not apply zero.
// FORMAT.md explains every key. Times are imaginary times in 1/hartree (or the
// inverse of the model's unit).
type Job struct {
	Title       string      `toml:"title"`
	Hamiltonian Hamiltonian `toml:"hamiltonian"`
	Trial       Trial       `toml:"trial"`
	Projection  Projection  `toml:"projection"`
	Measurement Measurement `toml:"measurement"`

	origin *document // where the keys stood; nil for a job made by hand
}

// Hamiltonian says what is solved.
type Hamiltonian struct {
	Source string `toml:"source" of:"molecule integrals prepared hubbard pairing" need:"yes"`

	Atoms     []Atom `toml:"atoms" when:"source=molecule" doc:"element, x, y, z"`
	XYZ       string `toml:"xyz" what:"a file name" when:"source=molecule"`
	Unit      string `toml:"unit" of:"bohr angstrom" when:"source=molecule" doc:"of atoms; an xyz file is in angstrom"`
	Basis     string `toml:"basis" what:"the name of a basis set" when:"source=molecule"`
	BasisFile string `toml:"basis_file" what:"a file name" when:"source=molecule" doc:"its elements go before basis"`
	Cartesian bool   `toml:"cartesian" when:"source=molecule" default:"false" doc:"Cartesian d, f, … functions, not spherical"`
	Charge    int    `toml:"charge" when:"source=molecule" default:"0" least:"-100" most:"100"`
	Unpaired  int    `toml:"unpaired" when:"source=molecule" default:"0" least:"0" most:"1000" doc:"N_up - N_down"`

	File       string `toml:"file" what:"a file name" when:"source=integrals|prepared" need:"yes"`
	FrozenCore Core   `toml:"frozen_core" when:"source=molecule|integrals|prepared" default:"0" least:"0" most:"1000" doc:"orbitals kept doubly occupied"`

	Sites         []int   `toml:"sites" when:"source=hubbard" need:"yes" least:"1" most:"10000" doc:"along each axis"`
	Periodic      []bool  `toml:"periodic" when:"source=hubbard" doc:"along each axis"`
	Hopping       float64 `toml:"hopping" when:"source=hubbard" default:"1.0"`
	Repulsion     float64 `toml:"repulsion" when:"source=hubbard" need:"yes" doc:"U; attractive where negative"`
	Up            int     `toml:"up" when:"source=hubbard" need:"yes" least:"1" most:"10000"`
	Down          int     `toml:"down" when:"source=hubbard" need:"yes" least:"0" most:"10000"`
	Decomposition string  `toml:"decomposition" of:"spin charge" when:"source=hubbard" doc:"what the auxiliary fields couple to"`

	Levels   int     `toml:"levels" when:"source=pairing" need:"yes" least:"1" most:"1000"`
	Spacing  float64 `toml:"spacing" when:"source=pairing" default:"1.0" above:"0"`
	Coupling float64 `toml:"coupling" when:"source=pairing" need:"yes" doc:"attractive where positive"`
	Pairs    int     `toml:"pairs" when:"source=pairing" need:"yes" least:"1" most:"1000"`

	FactorTolerance float64 `toml:"factor_tolerance" when:"source=molecule|integrals" default:"1e-9" above:"0" most:"0.1" doc:"hartree"`
}

// Atom is one nucleus, its place in the unit of the job.
type Atom struct {
	Symbol string
	X      [3]float64
}

// Core is a number of frozen orbitals, or [AutoCore].
type Core int

// AutoCore stands for the noble-gas cores of the molecule's atoms ("auto").
const AutoCore Core = -1

// Space is an active space; the zero value means none was given.
type Space struct {
	Electrons, Orbitals int
}

// Trial says what guides the walk.
type Trial struct {
	Kind         string `toml:"kind" of:"determinant expansion measured" default:"determinant"`
	Orbitals     string `toml:"orbitals" of:"rhf rohf uhf file" default:"uhf" doc:"the reference"`
	OrbitalsFile string `toml:"orbitals_file" what:"a file name" when:"orbitals=file" need:"yes"`

	Active       Space    `toml:"active" when:"kind=expansion|measured" doc:"electrons, orbitals"`
	Window       string   `toml:"window" of:"natural canonical" when:"kind=expansion active" default:"natural"`
	File         string   `toml:"file" what:"a file name" when:"kind=expansion"`
	Largest      int      `toml:"largest" when:"kind=expansion" least:"1" most:"1e9" doc:"determinants kept, ties too"`
	Noise        float64  `toml:"noise" when:"kind=expansion" default:"0.0" least:"0" most:"10" doc:"norm relative to the expansion"`
	NoiseSeed    int64    `toml:"noise_seed" when:"kind=expansion" default:"1" least:"0"`
	Record       string   `toml:"record" what:"a file name" when:"kind=measured" need:"yes"`
	Real         bool     `toml:"real" when:"kind=measured" doc:"project on real amplitudes"`
	Spin         *float64 `toml:"spin" when:"kind=measured" least:"0" most:"100" doc:"project on this total spin"` // nil: no projection
	Significance float64  `toml:"significance" when:"kind=measured" least:"0" most:"100" doc:"amplitudes below so many errors dropped"`
	// ForeignBasis lets an expansion or a record be used with orbitals other
	// than those it was made for; the result says so.
	ForeignBasis bool `toml:"foreign_basis" when:"kind=expansion|measured file|record" doc:"orbitals need not be those of the file"`
}

// Projection says how the walk is run.
type Projection struct {
	TimeStep      float64 `toml:"time_step" default:"0.005" above:"0" most:"1" doc:"imaginary time"`
	Walkers       int     `toml:"walkers" default:"400" least:"2" most:"1e7"`
	Equilibration float64 `toml:"equilibration" default:"5.0" least:"0" most:"1e6" doc:"imaginary time"`
	Length        float64 `toml:"length" default:"50.0" above:"0" most:"1e7" doc:"imaginary time sampled after it"`
	Constraint    string  `toml:"constraint" of:"phaseless released" default:"phaseless"`
	Cap           *bool   `toml:"cap" doc:"bound the hybrid energy"` // nil: unless a factor is attractive
	Precision     string  `toml:"precision" of:"double single" default:"double" doc:"of the propagation"`
	Seed          int64   `toml:"seed" default:"1" least:"0"`
	TargetError   float64 `toml:"target_error" above:"0" doc:"stop at this standard error"`
}

// Measurement says how a record is taken from the state that the trial
// describes.
type Measurement struct {
	Ensemble        string `toml:"ensemble" of:"matching lagrangian tableau orthogonal" default:"matching"`
	Row             string `toml:"row" of:"vacuum reference" default:"vacuum"`
	ShotsPerSetting int    `toml:"shots_per_setting" default:"1" least:"1" most:"1e9"`
	Seed            int64  `toml:"seed" default:"1" least:"0"`
}
