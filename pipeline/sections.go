package pipeline

// Settings is everything that a settings file can say. Each section is a
// struct; each field is a key with these tags:
//
//	toml   the key
//	min    smallest allowed number (of a list: of each of its elements)
//	max    largest allowed number
//	oneof  allowed words, separated by commas
//	free   "true" if the key cannot change any result; it may then differ
//	       between a run and its resumption
//
// Every key stands in configs/default.toml with its default value; a test
// holds the two together. A section that has rules across its keys implements
// checker.
type Settings struct {
	Run       RunSettings       `toml:"run"`
	Grid      GridSettings      `toml:"grid"`
	Continuum ContinuumSettings `toml:"continuum"`
	Redshift  RedshiftSettings  `toml:"redshift"`
	Lines     LinesSettings     `toml:"lines"`
	Verdict   VerdictSettings   `toml:"verdict"`
}

// RunSettings is section [run].
type RunSettings struct {
	BlockSize int `toml:"block_size" min:"1" max:"100000"`
	Workers   int `toml:"workers" min:"0" max:"1024" free:"true"`
}

// GridSettings is section [grid].
type GridSettings struct{}

// ContinuumSettings is section [continuum].
type ContinuumSettings struct{}

// RedshiftSettings is section [redshift].
type RedshiftSettings struct{}

// LinesSettings is section [lines].
type LinesSettings struct{}

// VerdictSettings is section [verdict].
type VerdictSettings struct{}
