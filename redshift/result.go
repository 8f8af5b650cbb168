package redshift

import (
	"math"
	"slices"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// Result is the answer for one spectrum. Numbers that could not be had are
// NaN.
type Result struct {
	Found       bool
	Class       string
	Family      string
	Width       float64 // km/s, Gaussian sigma of the winning lines
	Redshift    float64
	RedshiftErr float64 // one sigma
	Confidence  float64 // first estimate of the probability that the redshift is right

	RivalRedshift float64
	RivalFamily   string
	Gap           float64 // score of the best rival, or of the continuum alone where that is less, minus the best score
	Tight         bool    // the rival, not the continuum alone, sets the gap
	RStat         float64 // Tonry & Davis (1979)
	Chi2Dof       float64
	Correlation   float64 // how often the residuals say the same: 1 for independent pixels
	Drop          float64 // decrease of chi^2 by the templates against continuum alone
	SNR           float64 // median over the pixels
	PixelsUsed    int

	LinesSeen     int  // features of the model that stand out by themselves, blends as one
	LinesOfAir    int  // those that the night sky or water of the air may have made
	InEmission    bool // one of them is in emission
	LinesExpected int  // lines that should stand out in a member of the family
	LinesCovered  int  // those of them inside the coverage
	LinesMissing  int  // lines that the model predicts strongly and the data lack, weak ones together and the forest as one each
	WeakMissing   bool // the lines that do not stand out by themselves lack together
	ForestMissing bool // the forest of Lyman-alpha lacks where it should be deep
	Dark          bool // of a family of emission lines none stands out, nor do they together
	Foreground    bool // a star that stands on lines of our own Galaxy's gas alone

	// Leftovers are the observed wavelengths, Angstrom, of narrow emission that no line at
	// the redshift explains, strongest first.
	Leftovers []float64

	// Doubts that finding raises, and those that Judge adds.
	FewPixels, BelowZero, RangeEnd, Scattered bool
	Normalized                                bool // the input was divided by its continuum; set by the caller
	Faint, Tied, LoneLine, Misfit, Unseen     bool
	OnSky                                     bool // without LinesOfAir too few are left
	FewLines                                  bool // fewer lines than Secure needs, none in emission where there must be, or of our Galaxy's gas alone
	LowConfidence                             bool // less than Secure needs
	Unexplained                               bool // Leftovers enough for a second object

	Verdict Verdict
	Reason  string // why nothing was found
	Lines   []LineEvidence
}

// LineEvidence is what the data say about one line of the winning model.
type LineEvidence struct {
	Name    string
	Wave    float64 // observed, Angstrom
	Width   float64 // Gaussian sigma of the template's highest part, km/s
	Breadth float64 // of its part with most flux
	SNR     float64 // matched-filter signal-to-noise with the rest of the model taken out
	Model   float64 // the same as the model predicts
	Seen    bool    // stands out by itself
	// Absorption says that the model has it in absorption.
	Absorption bool
	Offset     float64 // km/s against the redshift, NaN when not significant
	Err        float64 // km/s
}

// worstPixel is the most sigmas that one pixel counts in Chi2Dof: a single bad
// one is no reason to distrust thousands.
const worstPixel = 30.0

// featureKms is the distance from which two lines are two features: the
// members of [O II] 3726, 3729, 220 km/s apart, are not, for any lone line a little
// wider than the template would pass for both.
const featureKms = 420.0

// Beside a broad line (Gaussian sigma from broadKms) a line of less than a
// quarter of its signal-to-noise within satelliteKms is no feature of its own: He II and O III] beside C IV, Si III]
// beside C III] also describe the wings of any broad line that is no Gaussian.
const (
	broadKms     = 800.0
	satelliteKms = 25000.0
)

const (
	SeenSNR    = 4.0 // signal-to-noise from which a line stands out by itself
	missingSNR = 6.0 // a line the model predicts with this and the data show with less than a third
)

// conclude fills res from the sorted peaks.
func (f *Finder) conclude(g *spectrum.Grid, s *Scratch, res *Result) {
	l := &s.full
	best := s.peaks[0]
	same := sameKms(best.family.Class)
	res.Found = true
	res.Class, res.Family, res.Width = best.family.Class, best.family.Name, best.width
	res.Redshift, res.Drop = best.z(), best.fit.drop
	res.Gap = math.Max(0, -best.score) // to the continuum alone, whose score is 0
	for i := range s.peaks[1:] {
		p := &s.peaks[i+1]
		if math.Abs(p.shift-best.shift)*ln10*speedOfLight > same {
			res.RivalRedshift, res.RivalFamily = p.z(), p.family.Name
			if gap := p.score - best.score; gap < res.Gap {
				res.Gap, res.Tight = gap, true
			}
			break
		}
	}
	best.fit = s.bench.evaluate(l, best.family, best.width, best.shift)
	s.tmp = grow(s.tmp, l.n)
	s.bench.residual(s.tmp, l, &best.fit)
	chi2 := 0.0
	for i, w := range s.weight {
		chi2 += math.Min(w*s.tmp[i]*s.tmp[i], worstPixel*worstPixel)
	}
	s.normal = grow(s.normal, l.n)
	for i, w := range l.weight {
		s.normal[i] = math.Sqrt(w) * s.tmp[i]
	}
	res.Correlation = math.Max(1, correlation(s.normal, l.weight)*s.independent)
	// Of pixels narrower than the input's only a fraction is independent; the
	// stiffened spline has about the freedom of its coarse parent.
	res.Chi2Dof = chi2 / math.Max(1, s.independent*float64(l.good)-float64(s.fit.Basis().Size()+best.fit.active+1))
	res.Leftovers = f.leftovers(s, g, &best)
	f.nightLeft(s)
	f.evidence(s, &best, res)
	res.RedshiftErr = f.redshiftError(s, &best)
	lo, hi := math.Log10(1+best.family.ZMin), math.Log10(1+best.family.ZMax)
	res.RangeEnd = best.shift-lo < 2*l.step || hi-best.shift < 2*l.step
	res.RStat = f.rStat(s, &best)
}

// sameKms is the velocity within which two answers of a class are one.
func sameKms(class string) float64 {
	if class == "quasar" {
		return sameVelocityBroad
	}
	return sameVelocity
}

// Same reports whether two answers were found at one redshift.
func Same(a, b *Result) bool {
	v := math.Log((1+a.Redshift)/(1+b.Redshift)) * speedOfLight
	return math.Abs(v) <= math.Max(sameKms(a.Class), sameKms(b.Class))
}

// redshiftError is the one-sigma error from the curvature of the chi^2 drop,
// with the weights lowered where the model fails, which widens it. The family's
// floor and what its lines' own velocities and the forest leave in doubt are
// added in quadrature.
func (f *Finder) redshiftError(s *Scratch, p *peak) float64 {
	l := &s.full
	delta := l.step
	sigma := math.NaN()
	for k := 0; k < 4; k++ {
		a := s.bench.solve(l, p.family, p.width, p.shift-delta, &p.fit).drop
		b := s.bench.solve(l, p.family, p.width, p.shift+delta, &p.fit).drop
		fall := p.fit.drop - 0.5*(a+b)
		if !(fall > 0) {
			delta *= 3
			continue
		}
		sigma = delta / math.Sqrt(fall)
		if fall > 0.3 && fall < 9 {
			break
		}
		delta = math.Max(0.02*l.step, math.Min(60*l.step, sigma))
	}
	return (1 + p.z()) * math.Hypot(ln10*sigma, math.Hypot(math.Hypot(p.family.floor, s.lineDoubt(p)), p.edgeDoubt(l))/speedOfLight)
}

// zoneScatter is by how many km/s the sizes of the zones that quasars thin around
// them scatter at redshift 6: 2 to 7 Mpc (Eilers et al. 2017, from memory), 700 km/s each.
const zoneScatter = 1500.0

// edgeDoubt is what the redshift of a quasar in a thick forest owes to the unknown
// place where its light is cut, km/s: zoneScatter times the square of the light
// that is lost just blueward of Lyman-alpha; 0 where that is not covered.
func (p *peak) edgeDoubt(l *level) float64 {
	if p.family.proximity == 0 || !l.covers(forestEdgeLog+p.shift) {
		return 0
	}
	lost := 1 - hydrogen.Transmission(p.z(), 1210*(1+p.z()))
	return zoneScatter * lost * lost
}

// evidence measures each line of the winning model by itself, from the
// residual of the joint fit left in s.tmp, and counts.
func (f *Finder) evidence(s *Scratch, p *peak, res *Result) {
	l := &s.full
	s.features = s.features[:0]
	res.Lines = make([]LineEvidence, 0, len(s.traces))
	s.traces = p.traces(s.traces[:0])
	for _, t := range s.traces {
		sigma := t.kms / (speedOfLight * ln10 * l.step)
		e, ok := s.weigh(&t, sigma, (t.logWave+p.shift-l.start)/l.step)
		if !ok {
			continue
		}
		e.Name, e.Width, e.Breadth, e.Absorption = t.name, t.kms, t.breadth, t.absorption
		e.SNR /= math.Sqrt(res.Correlation)
		e.Model /= math.Sqrt(res.Correlation)
		e.Err *= math.Sqrt(res.Correlation)
		e.Wave = math.Pow(10, t.logWave+p.shift)
		e.Seen = t.amp > 0 && e.SNR >= SeenSNR && e.SNR > 0.3*e.Model && e.Model >= 0.5*SeenSNR
		res.Lines = append(res.Lines, e)
		if e.Seen {
			s.features = append(s.features, feature{(t.logWave + p.shift - l.start) / l.step, sigma, e.SNR, f.airMade(s, &e)})
			res.InEmission = res.InEmission || !t.absorption
		}
		if t.amp > 0 && t.name != "" && e.Model > missingSNR && e.SNR < e.Model/3 {
			res.LinesMissing++
		}
	}
	for c := range p.family.components {
		if comp := &p.family.components[c]; comp.stack != nil && p.fit.amp[c] > 0 {
			s.denseFeatures(comp, p.fit.amp[c], p.shift)
		}
	}
	s.features = leaders(s.features, broadKms/s.pixelKms(), satelliteKms/s.pixelKms())
	apart := featureKms / s.pixelKms()
	res.LinesSeen = countFeatures(s.features, apart)
	res.LinesOfAir = res.LinesSeen - countFeatures(slices.DeleteFunc(s.features, func(o feature) bool { return o.air }), apart)
	least := 2 * SeenSNR * math.Sqrt(res.Correlation)
	// A break or band that the data demand counts as one feature.
	bands := 0
	for c := range p.family.components {
		comp := &p.family.components[c]
		if a := p.fit.amp[c]; a > 0 && comp.wide() && comp.stack == nil && len(comp.terms) == 0 && a*math.Sqrt(math.Max(0, s.bench.norm(c))) > least {
			bands++
		}
	}
	res.LinesSeen += bands
	res.LinesExpected = len(p.family.expected)
	for _, e := range p.family.expected {
		x := (e.logWave + p.shift - l.start) / l.step
		if k := int(math.Round(x)); k >= 0 && k < l.n && l.weight[k] > 0 {
			res.LinesCovered++
		}
	}
	res.Scattered = scattered(res.Lines, p.width)
	res.Dark = dark(p, res)
	res.Foreground = foreground(p, res.Lines, bands, f.opt.Galactic)
	s.keeps(p, res)
}

// trace is one line of a model with its amplitude, summed over the components
// that hold it with the same sign.
type trace struct {
	name       string
	absorption bool
	logWave    float64
	kms        float64 // Gaussian sigma
	amp        float64
	breadth    float64 // Gaussian sigma of the part with the largest area
	area       float64 // of that part
}

// blend returns the Gaussian of the area, center and variance of two.
func (t trace) blend(o trace) trace {
	a, b := t.amp*t.kms, o.amp*o.kms
	if a+b == 0 {
		return t
	}
	share := b / (a + b)
	apart := (o.logWave - t.logWave) * ln10 * speedOfLight
	if o.area > t.area {
		t.breadth, t.area = o.breadth, o.area
	}
	t.logWave += share * (o.logWave - t.logWave)
	t.kms = math.Sqrt((1-share)*t.kms*t.kms + share*o.kms*o.kms + share*(1-share)*apart*apart)
	t.amp = (a + b) / t.kms
	return t
}

// traces appends the lines of the model; a line in several components takes
// the width of the one that gives it most. Where components shift it by less than
// makes two lines of it, it is one of their area, center and variance.
func (p *peak) traces(dst []trace) []trace {
	for c := range p.family.components {
		comp := &p.family.components[c]
		for i := range comp.terms {
			t := &comp.terms[i]
			n := trace{t.name, comp.absorption, t.logWave, comp.sigmaKms(t, p.width), p.fit.amp[c] * t.amp, 0, 0}
			n.breadth, n.area = n.kms, n.amp*n.kms
			k := slices.IndexFunc(dst, func(o trace) bool {
				return o.name != "" && o.name == n.name && o.absorption == n.absorption && math.Abs(o.logWave-n.logWave)*ln10*speedOfLight < 2*math.Max(o.kms, n.kms)
			})
			if k < 0 {
				dst = append(dst, n)
				continue
			}
			if dst[k].logWave != n.logWave {
				dst[k] = dst[k].blend(n)
				continue
			}
			if n.amp > dst[k].amp {
				dst[k].kms = n.kms
			}
			if n.area > dst[k].area {
				dst[k].breadth, dst[k].area = n.breadth, n.area
			}
			dst[k].amp += n.amp
		}
	}
	return dst
}

// weigh takes one line of the model at a pixel position out of the model and
// measures what the data have there. It reports false when less than 0.6 of
// the line's core has weight.
func (s *Scratch) weigh(t *trace, sigma, center float64) (LineEvidence, bool) {
	l := &s.full
	if center < 0 || center > float64(l.n-1) {
		return LineEvidence{}, false
	}
	d := &s.single
	d.reset(l.n)
	gaussian(d, l.n, center, sigma, 1)
	var tr, tt, good, all, dr, dd float64
	s.inSpline = grow(s.inSpline, l.size)
	clear(s.inSpline)
	for _, r := range d.runs {
		for k := r.lo; k < r.hi; k++ {
			v := d.values[k]
			if t.absorption {
				v *= -l.cont[k]
			}
			u := (float64(k) - center) / sigma
			if math.Abs(u) < 2 {
				all++
				if l.weight[k] > 0 {
					good++
				}
			}
			w := l.weight[k]
			wv := w * v
			tr += wv * (s.tmp[k] + t.amp*v)
			tt += wv * v
			j, q := int(l.first[k]), &l.value[k]
			for a := range 4 {
				s.inSpline[j+a] += wv * q[a]
			}
			// Derivative with respect to the center, per pixel.
			g := v * u / sigma
			dr += w * g * s.tmp[k]
			dd += w * g * g
		}
	}
	// The spline adapts to a line that is there, and to one that the model forces
	// and the data lack: what it can describe as well is no evidence.
	s.solved = append(s.solved[:0], s.inSpline...)
	l.normal.Solve(s.solved)
	lost := 0.0
	for k, v := range s.inSpline {
		lost += v * s.solved[k]
	}
	tr -= t.amp * lost
	tt -= lost
	if tt <= 0 || good < 0.6*all {
		return LineEvidence{}, false
	}
	e := LineEvidence{SNR: tr / math.Sqrt(tt), Model: t.amp * math.Sqrt(tt), Offset: math.NaN(), Err: math.NaN()}
	if a := tr / tt; e.SNR > SeenSNR && a > 0 && dd > 0 {
		kms := l.step * ln10 * speedOfLight
		e.Offset, e.Err = dr/(a*dd)*kms, kms/(a*math.Sqrt(dd))
	}
	return e, true
}

// scattered reports whether lines disagree on the velocity: their offsets
// scatter by more than three times what their errors and a third of the
// template's width allow.
func scattered(lines []LineEvidence, width float64) bool {
	n, chi2 := 0, 0.0
	for _, e := range lines {
		if e.SNR > 6 && !math.IsNaN(e.Offset) && e.Name != "" {
			n++
			q := e.Offset / math.Hypot(e.Err, 0.35*width)
			chi2 += q * q
		}
	}
	return n >= 2 && chi2 > 9*float64(n)
}

// rStat is the r of Tonry & Davis (1979): the height of the correlation peak
// over sqrt(2) sigma_a, sigma_a^2 = sum over shifts n of (c(n) - c(-n))^2 / 2N
// about the peak. The correlation is that of the residual with the winning
// template, with its amplitudes fixed, over shifts of at most 1500 pixels.
func (f *Finder) rStat(s *Scratch, p *peak) float64 {
	l := &s.full
	const most = 1500
	half := min(most, l.n/2)
	corr := grow(s.dropLag, 2*half+1)
	s.dropLag = corr
	clear(corr)
	for c := range p.family.components {
		comp := &p.family.components[c]
		if p.fit.amp[c] == 0 {
			continue
		}
		if comp.stack != nil {
			num, den := grow(s.scan.num, len(corr)), grow(s.scan.den, len(corr))
			s.scan.num, s.scan.den = num, den
			s.scan.dense.correlate(num, den, l, comp.stack, p.shift-float64(half)*l.step)
			for k, v := range num {
				corr[k] += p.fit.amp[c] * v
			}
		}
		kind := 0
		if comp.absorption {
			kind = 1
		}
		for i := range comp.terms {
			t := &comp.terms[i]
			k := rung(comp.sigmaKms(t, p.width) / (speedOfLight * ln10 * l.step))
			num, _ := s.scan.resp.get(k, kind)
			x := int(math.Round((t.logWave + p.shift - l.start) / l.step))
			gather(corr, num, x-half, p.fit.amp[c]*t.amp)
		}
	}
	h := corr[half]
	sum := 0.0
	for k := 1; k <= half; k++ {
		d := corr[half+k] - corr[half-k]
		sum += d * d
	}
	rms := math.Sqrt(sum / (2 * float64(half)))
	if !(rms > 0) || !(h > 0) {
		return 0
	}
	return h / (math.Sqrt2 * rms)
}
