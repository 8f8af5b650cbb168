package pipeline

import (
	"math"

	"duskline/catalog"
	"duskline/continuum"
	"duskline/hydrogen"
	"duskline/redshift"
	"duskline/spectrum"
)

// level is the continuum of one object: one spline, or for hot stars one on
// either side of the Balmer jump.
type level struct {
	main, below continuum.Fitter
	ready       bool
	wide        bool    // a star with wide Balmer lines
	jump        float64 // log10 wavelength below which below holds; 0: nowhere
	flux, ivar  []float64
	window      []float64
	troughs     []trough // of a quasar's outflows
	edge        float64  // log10 wavelength below which lines have none, for a saturated forest; 0: nowhere
	spacing     float64  // of the knots
}

// Value returns the continuum at a log10 wavelength.
func (l *level) Value(x float64) float64 {
	if x < l.jump {
		return l.below.Value(x)
	}
	return l.main.Value(x)
}

// Sigma returns its standard error.
func (l *level) Sigma(x float64) float64 {
	if x < l.jump {
		return l.below.Sigma(x)
	}
	return l.main.Sigma(x)
}

const (
	// gapBend is the standard deviation of a bend of the continuum across a gap, see
	// continuum.Options: a power law of exponent -2 bends by 0.013 a knot of 0.0251
	// dex. Common practice, no source.
	gapBend = 0.02
	// heldWithin is how far from what holds it, on either side, a continuum is one, in
	// distances of knots, and heldLeast how many pixels that takes: 0.05 dex at the usual
	// spacing, less than half the widest mask of a quasar. Common practice, no source.
	heldWithin = 2.0
	heldLeast  = 10
)

// covers reports whether the continuum is held at x: by data on both sides, within
// reach of the ends of the data on the inner one. slack beyond the last pixels counts as
// inside.
func (l *level) covers(x, slack float64) bool {
	f, high := &l.main, l.main.Basis().High
	if x < l.jump {
		f = &l.below
	}
	low := f.Basis().Low
	if x < l.edge || x < low-slack || x > high+slack {
		return false
	}
	reach := heldWithin * l.spacing
	return (x < low+reach || f.Between(x-reach, x) >= heldLeast) && (x > f.Basis().High-reach || f.Between(x, x+reach) >= heldLeast)
}

// fit fits the continuum to the grid with the lines of the found redshift
// masked. It reports false when no continuum could be had.
func (l *level) fit(g *spectrum.Grid, x []float64, res *redshift.Result, set *Settings) bool {
	l.ready, l.jump, l.edge, l.troughs = false, 0, 0, l.troughs[:0]
	l.flux, l.ivar = append(l.flux[:0], g.Flux...), append(l.ivar[:0], g.Ivar...)
	opt := set.continuumOptions()
	l.spacing = opt.Spacing
	masks := masker{grid: g, ivar: l.ivar, widths: set.Continuum.MaskWidths}
	masks.lines(res)
	if res.Class == catalog.Quasar {
		l.crossTroughs(g, &masks, 1+res.Redshift)
		for _, c := range complexes {
			l.bridgeComplex(g, &masks, c, 1+res.Redshift)
		}
		l.anchor(g, &masks, 1+res.Redshift)
	}
	l.wide = res.Class == catalog.Star && res.Family == "hot"
	if !l.wide {
		l.ready = l.main.Fit(x, l.flux, l.ivar, opt) == nil
		l.wide = l.ready && res.Class == catalog.Star && l.balmerWidth(g, &masks, res.Redshift, wideWithin, 4) > wideFrom
	}
	if l.wide {
		l.ready = l.hot(g, x, &masks, res, opt)
	}
	if !l.ready {
		// So much was masked that nothing holds the spline: lines and all.
		l.ready = l.plain(g, x, opt)
	}
	if l.ready {
		l.main.Errors()
	}
	return l.ready
}

// plain fits the continuum to all pixels.
func (l *level) plain(g *spectrum.Grid, x []float64, opt continuum.Options) bool {
	l.jump, l.edge = 0, 0
	return l.main.Fit(x, g.Flux, g.Ivar, opt) == nil
}

// masker takes the weight from pixels on lines.
type masker struct {
	grid   *spectrum.Grid
	ivar   []float64
	widths float64 // half width of a mask in Gaussian sigmas of the template's line
}

// lines masks the lines that the winning model uses; in quasars all emission that it
// could: a line too weak to be worth its price there still bends the spline. Troughs that
// are not there are not masked: with theirs nothing would be left for thousands of km/s.
func (m *masker) lines(res *redshift.Result) {
	for _, e := range res.Lines {
		if e.Name == "" || e.Model < 1 && (res.Class != catalog.Quasar || e.Absorption) {
			continue
		}
		width := math.Min(e.Breadth, maxMaskKms)
		if res.Class == catalog.Quasar && width > broadFromKms {
			width = math.Max(width, broadMaskKms)
		}
		half := m.widths * width / spectrum.SpeedOfLight
		m.hide(e.Wave*(1-half), e.Wave*(1+half))
	}
}

// hide masks a range of wavelength.
func (m *masker) hide(from, to float64) {
	lo, hi := m.pixels(from, to)
	for i := lo; i < hi; i++ {
		m.ivar[i] = 0
	}
}

// pixels returns the range of pixels whose centers lie in [from, to].
func (m *masker) pixels(from, to float64) (lo, hi int) {
	g := m.grid
	lo = int(math.Ceil((math.Log10(from) - g.Start) / g.Step))
	hi = int(math.Floor((math.Log10(to)-g.Start)/g.Step)) + 1
	return min(max(0, lo), g.Len()), min(max(0, hi), g.Len())
}

const (
	// Lines of a quasar whose template is wider than broadFromKms, sigma, are
	// broad; the template knows few widths, and they are masked as wide as the
	// usual one at least: the median C IV of quasars has a full width at half
	// maximum of 5,500 km/s (Shen et al. 2011, ApJS 194, 45, from memory).
	broadFromKms = 800
	broadMaskKms = 2400
)

// maxMaskKms bounds the Gaussian sigma that a mask is made for: a mask wider
// than the knot spacing leaves the spline without a hold.
const maxMaskKms = 3000

const (
	// starkReach is the half width of the mask on a Balmer line of a hot star in
	// units of its equivalent width. The wings of linear Stark broadening fall as
	// the distance to the power -5/2 (Holtsmark 1919; Struve 1929): with R = d
	// (1 - exp(-(x/x0)^(-5/2))), W = 2 d x0 Gamma(3/5), and at 4 W a line of
	// core depth d = 0.65 is 0.65 (4 * 1.94)^(-5/2) = 0.4 % deep.
	starkReach = 4.0
	// Bounds of the half width, Angstrom: lines narrower than a few pixels, and
	// the widest lines of white dwarfs.
	starkLeast, starkMost = 12.0, 160.0
	starkFirst            = 60.0
	starkRounds           = 3
	// A star of another family has wide lines when H-alpha and H-beta have a
	// mean equivalent width of wideFrom within wideWithin of their centers,
	// Angstrom: those of late A. Common practice, no source.
	wideFrom, wideWithin = 6.0, 30.0
	// balmerLast is the last upper level that is masked by itself; its
	// neighbor lies 5 Angstrom away.
	balmerLast = 20
	// extrapolationDoubt is the relative standard error given to the continuum
	// extrapolated over merged lines. Common practice, no source.
	extrapolationDoubt = 0.02
)

// hot fits the continuum of a star with wide Balmer lines. The mask on each line
// follows from the equivalent width of the lines themselves. Where the masks of
// neighbors meet, and from there down to the limit of the series, no continuum
// is seen: it is extrapolated, as a power law fitted to the windows within 20 %
// redward. Below the limit stands a spline of its own.
func (l *level) hot(g *spectrum.Grid, x []float64, m *masker, res *redshift.Result, opt continuum.Options) bool {
	z, half := res.Redshift, starkFirst
	for round := range starkRounds {
		copy(l.flux, g.Flux)
		copy(l.ivar, g.Ivar)
		m.lines(res)
		l.bridge(g, m, z, half)
		if l.main.Fit(x, l.flux, l.ivar, opt) != nil {
			return false
		}
		if round < starkRounds-1 {
			w := l.balmerWidth(g, m, z, half, 6)
			half = min(max(starkReach*w, starkLeast), starkMost)
		}
	}
	l.belowJump(g, x, m, z, opt)
	return true
}

// balmerWave returns the vacuum wavelength of the Balmer line of an upper
// level.
func balmerWave(upper int) float64 {
	t, err := hydrogen.NewTransition(2, upper)
	if err != nil {
		panic(err) // a constant of this file is wrong
	}
	return t.Wave
}

// bridge masks the Balmer lines of a star and writes the extrapolated continuum
// over the pixels where they have merged; below the limit nothing is left.
func (l *level) bridge(g *spectrum.Grid, m *masker, z, half float64) {
	z1 := 1 + z
	merged := 0.0 // red edge of what has merged
	for n := 3; n <= balmerLast; n++ {
		w := balmerWave(n)
		m.hide((w-half)*z1, (w+half)*z1)
		if merged == 0 && w-balmerWave(n+1) < 2*half {
			merged = (w + half) * z1
		}
	}
	limit := hydrogen.BalmerLimit * z1
	_, hi := m.pixels(1, limit)
	clear(l.ivar[:hi])
	if merged == 0 {
		return
	}
	var s [5]float64 // of the weights, and of the moments of log F against log wavelength
	from, to := m.pixels(merged, 1.2*merged)
	for i := from; i < to; i++ {
		if f := l.flux[i]; l.ivar[i] > 0 && f > 0 {
			w := l.ivar[i] * f * f
			dx, y := g.LogWave(i)-math.Log10(merged), math.Log(f)
			s[0], s[1], s[2], s[3], s[4] = s[0]+w, s[1]+w*dx, s[2]+w*y, s[3]+w*dx*dx, s[4]+w*dx*y
		}
	}
	det := s[0]*s[3] - s[1]*s[1]
	if to-from < 100 || !(det > 1e-9*s[0]*s[3]) {
		return
	}
	slope := (s[0]*s[4] - s[1]*s[2]) / det
	level := (s[2] - slope*s[1]) / s[0]
	from, to = m.pixels(limit, merged)
	for i := from; i < to; i++ {
		l.flux[i] = math.Exp(level + slope*(g.LogWave(i)-math.Log10(merged)))
		l.ivar[i] = 1 / (extrapolationDoubt * extrapolationDoubt * l.flux[i] * l.flux[i])
	}
}

// balmerWidth returns the mean rest equivalent width, Angstrom, of the covered
// ones of H-alpha to the Balmer line of the last upper level, within half of
// their centers; 0 without any.
func (l *level) balmerWidth(g *spectrum.Grid, m *masker, z, half float64, last int) float64 {
	total, covered := 0.0, 0.0
	for n := 3; n <= last; n++ {
		w := balmerWave(n)
		lo, hi := m.pixels((w-half)*(1+z), (w+half)*(1+z))
		sum, seen := 0.0, 0.0
		for i := lo; i < hi; i++ {
			if c := l.main.Value(g.LogWave(i)); g.Ivar[i] > 0 && c > 0 {
				d := math.Pow(10, g.LogWave(i)) * g.Step * math.Ln10 / (1 + z)
				sum += d * (1 - g.Flux[i]/c)
				seen += d
			}
		}
		if seen > 1.6*half {
			total, covered = total+sum, covered+1
		}
	}
	if covered == 0 {
		return 0
	}
	return total / covered
}

// belowJump fits the spline below the Balmer limit where there is enough for it.
func (l *level) belowJump(g *spectrum.Grid, x []float64, m *masker, z float64, opt continuum.Options) {
	_, hi := m.pixels(1, hydrogen.BalmerLimit*(1+z))
	if hi == 0 || l.below.Fit(x[:hi], g.Flux[:hi], g.Ivar[:hi], opt) != nil {
		return // the main spline holds its end value
	}
	l.below.Errors()
	l.jump = math.Log10(hydrogen.BalmerLimit * (1 + z))
}
