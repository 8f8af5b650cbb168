package pipeline

import (
	"duskline/continuum"
	"duskline/lines"
	"duskline/redshift"
)

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
	BlockSize int `toml:"block_size" min:"1" max:"10000"`
	Workers   int `toml:"workers" min:"0" max:"1024" free:"true"`
}

// GridSettings is section [grid].
type GridSettings struct {
	Step    float64 `toml:"step" min:"2e-5" max:"1e-3"`
	MinWave float64 `toml:"min_wave" min:"100" max:"1e6"`
	MaxWave float64 `toml:"max_wave" min:"100" max:"1e6"`
}

func (g GridSettings) check() []Problem {
	if g.MinWave < g.MaxWave {
		return nil
	}
	return []Problem{{"grid.min_wave", "must be less than grid.max_wave"}}
}

// ContinuumSettings is section [continuum].
type ContinuumSettings struct {
	KnotSpacing float64 `toml:"knot_spacing" min:"0.002" max:"0.5"`
	ClipLow     float64 `toml:"clip_low" min:"0" max:"100"`
	ClipHigh    float64 `toml:"clip_high" min:"0" max:"100"`
	Iterations  int     `toml:"iterations" min:"1" max:"100"`
	MaskWidths  float64 `toml:"mask_widths" min:"0" max:"10"`
}

// RedshiftSettings is section [redshift].
type RedshiftSettings struct {
	SearchFrom    float64   `toml:"search_from" min:"100" max:"1e6"`
	SearchTo      float64   `toml:"search_to" min:"100" max:"1e6"`
	TemplateFloor float64   `toml:"template_floor" min:"0" max:"0.5"`
	Stiffness     float64   `toml:"stiffness" min:"0" max:"1"`
	Temper        int       `toml:"temper" min:"0" max:"1000"`
	Nominees      int       `toml:"nominees" min:"1" max:"200"`
	MinPixels     int       `toml:"min_pixels" min:"20" max:"100000"`
	SpikeSigmas   float64   `toml:"spike_sigmas" min:"0" max:"1000"`
	SkyBands      []float64 `toml:"sky_bands" min:"100" max:"1e6"`
	TelluricBands []float64 `toml:"telluric_bands" min:"100" max:"1e6"`
	TelluricFloor float64   `toml:"telluric_floor" min:"0" max:"10"`
	WaterBands    []float64 `toml:"water_bands" min:"100" max:"1e6"`
}

func (r RedshiftSettings) check() []Problem {
	var problems []Problem
	if r.SearchFrom >= r.SearchTo {
		problems = append(problems, Problem{"redshift.search_from", "must be less than redshift.search_to"})
	}
	for _, b := range []struct {
		key  string
		list []float64
	}{{"redshift.sky_bands", r.SkyBands}, {"redshift.telluric_bands", r.TelluricBands}, {"redshift.water_bands", r.WaterBands}} {
		if len(b.list)%2 != 0 {
			problems = append(problems, Problem{b.key, "wants pairs of first and last wavelength"})
		}
	}
	return problems
}

// LinesSettings is section [lines].
type LinesSettings struct {
	WindowKms float64 `toml:"window_kms" min:"100" max:"30000"`
	MinGood   float64 `toml:"min_good" min:"0.1" max:"1"`
	Profile   string  `toml:"profile" oneof:"gaussian,gauss-hermite,voigt"`
	Indices   string  `toml:"indices"`
	// SkyBands come beside those of [redshift].
	SkyBands []float64 `toml:"sky_bands" min:"100" max:"1e6"`
}

func (l LinesSettings) check() []Problem {
	if len(l.SkyBands)%2 != 0 {
		return []Problem{{"lines.sky_bands", "wants pairs of first and last wavelength"}}
	}
	return nil
}

// VerdictSettings is section [verdict].
type VerdictSettings struct {
	SecureConfidence float64 `toml:"secure_confidence" min:"0.5" max:"1"`
	SecureLines      int     `toml:"secure_lines" min:"0" max:"50"`
	NoneConfidence   float64 `toml:"none_confidence" min:"0" max:"1"`
	GapScale         float64 `toml:"gap_scale" min:"0.1" max:"1000"`
	TiedGap          float64 `toml:"tied_gap" min:"0" max:"1000"`
	TiedShare        float64 `toml:"tied_share" min:"0" max:"1"`
	MisfitChi2       float64 `toml:"misfit_chi2" min:"1" max:"1e6"`
	HopelessChi2     float64 `toml:"hopeless_chi2" min:"1" max:"1e9"`
	FaintSNR         float64 `toml:"faint_snr" min:"0" max:"100"`
}

// finderOptions turns the settings into those of package redshift.
func (s Settings) finderOptions() redshift.Options {
	opt := redshift.Options{
		KnotSpacing: s.Continuum.KnotSpacing, Floor: s.Redshift.TemplateFloor, Stiffness: s.Redshift.Stiffness, Temper: s.Redshift.Temper,
		Nominees: s.Redshift.Nominees, MinPixels: s.Redshift.MinPixels,
		SearchFrom: s.Redshift.SearchFrom, SearchTo: s.Redshift.SearchTo, TelluricFloor: s.Redshift.TelluricFloor,
	}
	opt.SkyBands, opt.TelluricBands = pairs(s.Redshift.SkyBands), pairs(s.Redshift.TelluricBands)
	opt.WaterBands, opt.SkyLines = pairs(s.Redshift.WaterBands), pairs(s.Lines.SkyBands)
	return opt
}

func pairs(v []float64) [][2]float64 {
	var out [][2]float64
	for i := 0; i+1 < len(v); i += 2 {
		out = append(out, [2]float64{v[i], v[i+1]})
	}
	return out
}

// notedBands are the wavelengths to be noted of a line: all that the sky spoils.
func (s Settings) notedBands() []lines.Band {
	var out []lines.Band
	for _, list := range [][]float64{s.Redshift.SkyBands, s.Redshift.TelluricBands, s.Redshift.WaterBands, s.Lines.SkyBands} {
		for _, b := range pairs(list) {
			out = append(out, lines.Band{Lo: b[0], Hi: b[1]})
		}
	}
	return out
}

func (s Settings) thresholds() redshift.Thresholds {
	v := s.Verdict
	return redshift.Thresholds{SecureConfidence: v.SecureConfidence, SecureLines: v.SecureLines, NoneConfidence: v.NoneConfidence,
		GapScale: v.GapScale, MisfitChi2: v.MisfitChi2, HopelessChi2: v.HopelessChi2, TiedGap: v.TiedGap, TiedShare: v.TiedShare, FaintSNR: v.FaintSNR}
}

func (s Settings) continuumOptions() continuum.Options {
	c := s.Continuum
	return continuum.Options{Spacing: c.KnotSpacing, ClipLow: c.ClipLow, ClipHigh: c.ClipHigh, Iterations: c.Iterations, Bend: gapBend}
}
