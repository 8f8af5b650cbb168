package pipeline

import (
	"math"
	"strings"

	"duskline/configs"
	"duskline/continuum"
	"duskline/linelist"
	"duskline/spectrum"
)

// View is one spectrum laid out for the eye: vacuum barycentric Angstrom on the
// logarithmic grid of the pipeline. Pixels without data are NaN.
type View struct {
	Wave      []float64
	Flux      []float64
	Sigma     []float64
	Continuum []float64
	FluxUnit  string
}

// Mark is a line to be pointed out in a view.
type Mark struct {
	Label    string  // such as "[O III] 5007"
	Wave     float64 // observed, vacuum Angstrom
	Emission bool
	SNR      float64
}

// The view's own grid and spline: those of the pipeline's defaults. They serve
// the eye; no number of a catalog comes from them.
const (
	viewStep    = 1e-4
	viewSpacing = 0.025
	viewClip    = 4
	viewRounds  = 5
)

// NewView lays out a spectrum. The wavelengths of s are brought to standard.
func NewView(s *spectrum.Spectrum) View {
	s.ToStandard()
	s.RescaleArms(20)
	var g spectrum.Grid
	gridder := spectrum.Gridder{Step: viewStep, MinWave: 100, MaxWave: 1e6}
	gridder.Grid(&g, s)
	n := g.Len()
	v := View{Wave: make([]float64, n), Flux: make([]float64, n), Sigma: make([]float64, n), Continuum: make([]float64, n), FluxUnit: s.FluxUnit}
	x := make([]float64, n)
	for i := range n {
		x[i] = g.LogWave(i)
		v.Wave[i] = math.Pow(10, x[i])
		v.Flux[i], v.Sigma[i] = math.NaN(), math.NaN()
		if w := g.Ivar[i]; w > 0 {
			v.Flux[i], v.Sigma[i] = g.Flux[i], 1/math.Sqrt(w)
		}
	}
	var fit continuum.Fitter
	err := fit.Fit(x, g.Flux, g.Ivar, continuum.Options{Spacing: viewSpacing, ClipLow: viewClip, ClipHigh: viewClip, Iterations: viewRounds, Grow: 2})
	for i := range n {
		v.Continuum[i] = math.NaN()
		if err == nil && g.Ivar[i] > 0 {
			v.Continuum[i] = fit.Value(x[i])
		}
	}
	return v
}

// Marks returns the lines of an outcome that were seen, in order of
// wavelength.
func Marks(out *Outcome) ([]Mark, error) {
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		return nil, err
	}
	z := out.Object.Redshift
	if math.IsNaN(z) {
		return nil, nil
	}
	var marks []Mark
	for i := range out.Lines {
		l := &out.Lines[i]
		if l.Kind != "emission" && l.Kind != "absorption" {
			continue
		}
		known, _ := list.Find(l.Line)
		marks = append(marks, Mark{lineLabel(l.Line, known.Ion), l.RestWave * (1 + z), l.Kind == "emission", l.SNR})
	}
	return marks, nil
}

var greek = strings.NewReplacer("a", "α", "b", "β", "g", "γ", "d", "δ", "e", "ε")

// lineLabel writes a line as astronomers do: "Hα", "[O III] 5007", "Ca II K".
func lineLabel(name, ion string) string {
	for _, series := range []string{"Ly", "H", "Pa"} {
		if upper, ok := strings.CutPrefix(name, series); ok && len(upper) == 1 {
			return series + greek.Replace(upper)
		}
	}
	if _, rest, ok := strings.Cut(name, "_"); ok && ion != "" {
		return ion + " " + rest
	}
	if name == "Gband" {
		return "G band"
	}
	return name
}
