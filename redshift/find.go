package redshift

import (
	"errors"
	"math"
	"slices"

	"duskline/continuum"
	"duskline/spectrum"
)

// Options steers a Finder. The defaults, in configs/default.toml, put 18 interior knots of the
// spline over 3500 to 10500 Angstrom.
type Options struct {
	KnotSpacing float64 // of the continuum spline, dex
	Floor       float64 // template error, fraction of the local flux
	Stiffness   float64 // prior on fast waves of the continuum, fraction; 0 for a plain spline
	Temper      int     // half width in pixels over which misfit lowers the weights; 0 for never
	Nominees    int     // trial redshifts a family and width that go to the joint fit
	MinPixels   int     // usable pixels below which no redshift is sought
	SearchFrom  float64 // observed Angstrom; pixels outside do not count when enough are inside
	SearchTo    float64
	SkyBands    [][2]float64 // observed wavelengths that weigh zero, Angstrom
	// TelluricBands are observed wavelengths where the template error is
	// TelluricFloor instead: absorption of the air spoils what is subtle there,
	// not a strong emission line.
	TelluricBands [][2]float64
	TelluricFloor float64
	// WaterBands are observed wavelengths where water of the air takes light; the
	// template error there grows with what the spectrum shows of it.
	WaterBands [][2]float64
	// SkyLines are observed wavelengths of night-sky lines, of which the subtraction may leave
	// what looks like an emission line.
	SkyLines [][2]float64
	// Lines are rest wavelengths, Angstrom, at which objects have emission lines beside those of the families, coronal and auroral ones with them.
	Lines []float64
	// Night holds observed wavelengths of lines of the night sky, Angstrom, in order.
	Night []float64
	// Galactic names the lines that gas of our own Galaxy absorbs in front of everything.
	Galactic []string
}

// Finder finds redshifts with a fixed set of families. It is immutable and may
// be shared by workers.
type Finder struct {
	families []*Family
	opt      Options
	step     float64
	series   *Family             // Lyman-alpha and the forest, over the range of the forested families
	survive  [ladderSize]float64 // of a line's norm beside the spline, on full pixels
	binned   [ladderSize]float64 // the same on those of the coarse level
}

// NewFinder returns a finder for spectra on grids of the given step in dex.
func NewFinder(families []*Family, step float64, opt Options) (*Finder, error) {
	if len(families) == 0 {
		return nil, errors.New("no template families")
	}
	var series *Family
	for _, f := range families {
		if !f.forested {
			continue
		}
		forest() // built here, not in the first spectrum
		if series == nil {
			series = f.lyman()
		}
		series.ZMin, series.ZMax = math.Min(series.ZMin, f.ZMin), math.Max(series.ZMax, f.ZMax)
	}
	return &Finder{series: series, families: families, opt: opt, step: step, survive: survival(opt.KnotSpacing / step), binned: survival(opt.KnotSpacing / (coarseFactor * step))}, nil
}

// Families returns the families in the order in which they are tried.
func (f *Finder) Families() []*Family { return f.families }

// Scratch holds the buffers of one worker.
type Scratch struct {
	fit         continuum.Fitter
	x           []float64
	full        level
	coarse      level
	rough       level // for breaks
	bench       bench
	scan        scanner
	scanCoarse  scanner
	shifts      []float64
	breaks      []float64 // shifts at which the forest alone describes the data best
	drops       []float64
	peaks       []peak
	tmp         []float64
	smooth      []float64
	dropLag     []float64
	features    []feature
	binFlux     []float64 // of maskTroughs
	binErr      []float64
	count       []int // of peaks, by family
	traces      []trace
	slope, part []float64 // change of the model with the redshift
	single      drawing   // of one line
	normal      []float64 // normalized residuals
	inSpline    []float64 // of a single line: B^T W t
	solved      []float64 // and the spline that describes it
	excess      []float64
	scaled      []float64 // flux in the units of the levels
	weight      []float64 // weights before they are tempered
	independent float64   // fraction of the pixels that are independent
	floor       []float64 // template error, fraction of the local flux
	left        float64   // share of the light that water takes, see waterLeft
	night       float64   // by how much residuals on lines of the night sky exceed others, see nightLeft
	shares      []float64 // of departure
	filtered    []float64 // of leftovers
	byWave      []int     // of weakLines
	promises    []promise
	aside       []float64
	errors      []float64
	basis       continuum.Basis
}

// NewScratch returns scratch for one worker.
func (f *Finder) NewScratch() *Scratch { return &Scratch{} }

const (
	coarseFactor = 4
	roughFactor  = 16
	// ridge carries splines over gaps, see continuum.Normal.Ridge.
	ridge = 1e-9
	// finalists are refined once more with the tempered weights.
	finalists = 12
	// sameVelocity is the velocity within which two peaks are one answer; broad
	// lines leave their redshift less certain.
	sameVelocity      = 1000.0
	sameVelocityBroad = 3000.0
)

// Find finds the redshift of g. It never fails: an answer that cannot be had
// is a Result with Found false and its reason.
func (f *Finder) Find(g *spectrum.Grid, s *Scratch) Result {
	var res Result
	res.Redshift, res.RedshiftErr, res.RivalRedshift = math.NaN(), math.NaN(), math.NaN()
	res.Gap, res.RStat, res.Chi2Dof, res.SNR = math.NaN(), math.NaN(), math.NaN(), math.NaN()
	if !f.prepare(g, s, &res) {
		return res
	}
	s.peaks = s.peaks[:0]
	s.scan.reset(&s.full)
	s.scanCoarse.reset(&s.coarse)
	f.sweep(s)
	for index, fam := range f.families {
		for _, width := range fam.Widths {
			f.nominate(s, index, width)
		}
	}
	f.judge(s)
	if len(s.peaks) == 0 {
		switch {
		case len(f.families) == 0:
			res.Reason = "no template family reaches into the range of redshift that is left"
		case !slices.ContainsFunc(f.families, func(fam *Family) bool { return fam.reaches(&s.full) }):
			res.Reason = "no template family has a feature inside the coverage"
		default:
			res.Reason = "no template family describes the spectrum better than its continuum alone"
		}
		return res
	}
	f.conclude(g, s, &res)
	return res
}

// reaches reports whether a feature of the family lies on the level at some redshift of its range.
func (f *Family) reaches(l *level) bool {
	lo, hi := l.start-math.Log10(1+f.ZMax), l.start+float64(l.n-1)*l.step-math.Log10(1+f.ZMin)
	return slices.ContainsFunc(f.components, func(c component) bool {
		return c.wide() || slices.ContainsFunc(c.terms, func(t term) bool { return t.logWave >= lo && t.logWave <= hi })
	})
}

// prepare makes the levels. It reports false, with the reason in res, when the
// spectrum cannot be fitted.
func (f *Finder) prepare(g *spectrum.Grid, s *Scratch, res *Result) bool {
	l := &s.full
	l.n, l.start, l.step = g.Len(), g.Start, g.Step
	l.weight, l.resid, l.cont = grow(l.weight, l.n), grow(l.resid, l.n), grow(l.cont, l.n)
	s.x, s.tmp = grow(s.x, l.n), s.tmp[:0]
	for i := range s.x {
		s.x[i] = g.LogWave(i)
	}
	for i, w := range g.Ivar {
		if w > 0 {
			s.tmp = append(s.tmp, math.Abs(g.Flux[i]))
		}
	}
	res.PixelsUsed = len(s.tmp)
	if len(s.tmp) < f.opt.MinPixels {
		res.FewPixels = true
		res.Reason = "too few usable pixels"
		return false
	}
	scale := spectrum.Median(s.tmp)
	if !(scale > 0) {
		scale = slices.Max(s.tmp)
	}
	if !(scale > 0) || math.IsInf(scale, 0) {
		res.Reason = "flux is zero everywhere"
		return false
	}
	s.smooth = grow(s.smooth, l.n)
	for i, w := range g.Ivar {
		l.resid[i] = 0
		s.smooth[i] = 0
		if w > 0 {
			l.resid[i], s.smooth[i] = g.Flux[i]/scale, w*scale*scale
		}
	}
	res.SNR = medianSNR(s, l.resid, s.smooth)
	s.floor = grow(s.floor, l.n)
	for i := range s.floor {
		s.floor[i] = f.opt.Floor
	}
	s.waterLeft(g, l.resid, s.smooth, f.opt.WaterBands)
	fillBands(s.floor, g, f.opt.WaterBands, math.Max(f.opt.Floor, waterReach*s.left))
	fillBands(s.floor, g, f.opt.TelluricBands, math.Max(f.opt.Floor, f.opt.TelluricFloor))
	weightFloor(l.weight, l.resid, s.smooth, s.floor, 15)
	fillBands(l.weight, g, f.opt.SkyBands, 0)
	f.limitRange(l)
	s.maskTroughs(l)
	copt := continuum.Options{Spacing: f.opt.KnotSpacing, ClipLow: clipSpikes, ClipHigh: clipSpikes, Iterations: 4}
	if err := s.fit.Fit(s.x, l.resid, l.weight, copt); err != nil {
		res.FewPixels = true
		res.Reason = err.Error()
		return false
	}
	s.tmp = s.tmp[:0]
	below := 0
	for i := range l.cont {
		l.cont[i] = s.fit.Value(s.x[i])
		if l.weight[i] > 0 {
			s.tmp = append(s.tmp, math.Abs(l.cont[i]))
			if l.cont[i] < 0 {
				below++
			}
		}
	}
	if len(s.tmp) == 0 {
		res.FewPixels = true
		res.Reason = "too few usable pixels outside the night-sky bands"
		return false
	}
	res.BelowZero = 4*below > len(s.tmp)
	least := 0.05 * spectrum.Median(s.tmp)
	for i, c := range l.cont {
		l.cont[i] = math.Max(c, least)
	}
	basis := s.fit.Basis()
	if f.opt.Stiffness > 0 {
		basis.Intervals *= 4
	}
	// Of the pixels left by the bands as many are independent as of all.
	s.independent = 1
	if g.Independent > 0 {
		s.independent = math.Min(1, g.Independent/float64(res.PixelsUsed))
	}
	s.basis = basis
	s.scaled = append(s.scaled[:0], l.resid...)
	s.weight = append(s.weight[:0], l.weight...)
	capOutliers(l)
	s.coarse.bin(l, coarseFactor)
	s.rough.bin(l, roughFactor)
	if !l.prepare(basis, f.opt.Stiffness, ridge) || !s.coarse.prepare(basis, f.opt.Stiffness, ridge) || !s.rough.prepare(basis, f.opt.Stiffness, ridge) {
		res.FewPixels = true
		res.Reason = "too few usable pixels for a continuum"
		return false
	}
	price := math.Log(math.Max(1, s.independent*float64(l.good)))
	l.price, s.coarse.price, s.rough.price = price, price, price
	return true
}

// capOutliers lowers the weight of pixels far from the continuum, so that none
// counts for more than outlierCap sigmas in the first ranking. Else one damped
// absorber or cosmic ray decides which trial redshifts are looked at again.
func capOutliers(l *level) {
	for i, w := range l.weight {
		d := l.cont[i] - l.resid[i]
		if q := w * d * d; q > outlierCap*outlierCap {
			l.weight[i] *= outlierCap * outlierCap / q
		}
	}
}

const outlierCap = 8.0

// clipSpikes is the distance in sigmas from which a pixel does not shape the continuum
// of the search.
const clipSpikes = 6.0

// limitRange takes the weight of pixels outside the searched wavelengths, if
// enough are left inside: in the far ultraviolet the star families have no
// lines yet, and a family without lines where others have them loses for that
// alone.
func (f *Finder) limitRange(l *level) {
	lo := max(0, int(math.Ceil((math.Log10(f.opt.SearchFrom)-l.start)/l.step)))
	hi := min(l.n-1, int(math.Floor((math.Log10(f.opt.SearchTo)-l.start)/l.step)))
	inside := 0
	for i := lo; i <= hi; i++ {
		if l.weight[i] > 0 {
			inside++
		}
	}
	if inside < 2*f.opt.MinPixels {
		return
	}
	for i := range l.weight {
		if i < lo || i > hi {
			l.weight[i] = 0
		}
	}
}

// medianSNR returns the median signal-to-noise ratio a pixel.
func medianSNR(s *Scratch, flux, ivar []float64) float64 {
	s.tmp = s.tmp[:0]
	for i, w := range ivar {
		if w > 0 {
			s.tmp = append(s.tmp, flux[i]*math.Sqrt(w))
		}
	}
	return spectrum.Median(s.tmp)
}

// judge refines the most promising peaks on the full pixels and sorts by score.
func (f *Finder) judge(s *Scratch) {
	slices.SortStableFunc(s.peaks, byScore)
	if len(s.peaks) == 0 {
		return
	}
	// Peaks far behind cannot win by refinement; of each family a few are kept
	// as possible rivals.
	best := s.peaks[0].score
	kept := s.peaks[:0]
	s.count = grow(s.count, len(f.families))
	clear(s.count)
	for _, p := range s.peaks {
		if p.score > 0.4*best+30 || s.count[p.index] >= 5 {
			continue
		}
		dup := false
		for _, q := range kept {
			if q.family == p.family && math.Abs(q.shift-p.shift) < 8*s.full.step {
				dup = true
				break
			}
		}
		if dup {
			continue
		}
		s.count[p.index]++
		kept = append(kept, p)
	}
	s.peaks = kept
	for i := range s.peaks {
		p := &s.peaks[i]
		h := s.full.step * math.Max(1, 0.5*p.family.narrowest(p.width)/s.pixelKms())
		p.fit = s.bench.evaluate(&s.full, p.family, p.width, p.shift)
		s.bench.climb(&s.full, p, h, 4)
		s.score(p)
	}
	slices.SortStableFunc(s.peaks, byScore)
	if f.opt.Temper > 0 && f.temper(s) {
		for i := range s.peaks {
			p := &s.peaks[i]
			p.fit = s.bench.evaluate(&s.full, p.family, p.width, p.shift)
			s.score(p)
		}
		slices.SortStableFunc(s.peaks, byScore)
		for i := range s.peaks[:min(finalists, len(s.peaks))] {
			p := &s.peaks[i]
			s.bench.climb(&s.full, p, 0.5*s.full.step, 2)
			s.score(p)
		}
		slices.SortStableFunc(s.peaks, byScore)
		// Where the weights changed much the winner may have further to go.
		win := s.peaks[0]
		s.bench.climb(&s.full, &win, s.full.step*math.Max(1, 0.25*win.width/s.pixelKms()), 4)
		s.bench.climb(&s.full, &win, 0.5*s.full.step, 3)
		s.score(&win)
		if win.score < s.peaks[0].score {
			s.peaks[0] = win // else it only took more components
		}
	}
}

// score sets the score of a peak from its joint fit: chi^2 relative to the
// continuum alone, plus penalties.
func (s *Scratch) score(p *peak) {
	if !p.family.whole(&p.fit) {
		p.score = 0 // no better than the continuum alone
		return
	}
	p.score = p.family.search(s.full.step) - p.fit.gain
}

// whole reports whether a fit has one of the components that the family needs.
func (f *Family) whole(fit *fit) bool {
	return len(f.needs) == 0 || slices.ContainsFunc(f.needs, func(c int) bool { return fit.amp[c] > 0 && fit.amp[c] >= f.components[c].least })
}

// search is the price of the search: the logarithm of the number of trial redshifts.
func (f *Family) search(step float64) float64 {
	return math.Log(math.Max(1, (math.Log10(1+f.ZMax)-math.Log10(1+f.ZMin))/step))
}

// narrowest returns the smallest Gaussian width of the family in km/s.
func (f *Family) narrowest(width float64) float64 {
	least := math.Inf(1)
	for i := range f.components {
		c := &f.components[i]
		if c.stack != nil {
			least = math.Min(least, c.sigmaKms(&term{}, width))
		}
		for j := range c.terms {
			least = math.Min(least, c.sigmaKms(&c.terms[j], width))
		}
	}
	return least
}

// headed reports whether a component has bands, which the scan cannot gather.
func (f *Family) headed() bool {
	return slices.ContainsFunc(f.components, func(c component) bool { return len(c.heads) > 0 })
}
