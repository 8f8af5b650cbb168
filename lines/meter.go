package lines

import (
	"math"
	"slices"
	"strings"

	"duskline/linelist"
	"duskline/spectrum"
)

// Arm is one piece of a spectrum in the form that measuring needs. All slices
// but Resolution have the length of Wave; ContErr may be nil.
type Arm struct {
	Wave []float64 // vacuum, barycentric, Angstrom, strictly increasing
	Flux []float64 // any unit; not read where Ivar is 0
	Ivar []float64 // inverse variance of Flux, 0 where a pixel must not be used
	Cont []float64 // continuum, in the unit of Flux; a pixel where it is not finite is not used
	// ContErr is its standard error; nil or non-finite counts as 0.
	ContErr []float64
	// Resolution is wavelength / FWHM as in spectrum.Segment: empty, one
	// value, or one per pixel. Values that are not positive count as unknown.
	Resolution []float64
}

// wingsSuffix makes the name of a second component from that of its line.
const wingsSuffix = "_broad"

// The kinds of a Result.
const (
	Absorption = "absorption"
	Emission   = "emission"
	Limit      = "limit"      // covered and measured, not significant
	Unmeasured = "unmeasured" // inside the coverage, but Reason says why not
)

// What Result.Reason can say.
const (
	ReasonMasked      = "masked"       // too few good pixels on the line
	ReasonUnexpected  = "unexpected"   // Options.Expect leaves the line out
	ReasonWrongSign   = "wrong_sign"   // a line that never absorbs, where something absorbs, or the reverse: not this line
	ReasonOffEdge     = "off_edge"     // the line runs over the end of the coverage
	ReasonNoContinuum = "no_continuum" // continuum missing, negative or not above 3 times its error
	ReasonBlended     = "blended"      // too close to another line, which carries the sum of both
	ReasonSum         = "sum"          // measured: carries the lines of its blend that are blended
	ReasonNoFit       = "no_fit"       // the pixels do not determine the profile
	ReasonAtBound     = "at_bound"     // offset or width ended at the limit of its range; the values stand, but of a limit the offset was elsewhere
	ReasonCrowded     = "crowded"      // no higher than the dips around it are deep: the gap between absorption, not emission
	ReasonNoCompanion = "no_companion" // a line of the ion that would be stronger in emission is not there
)

// Result is one line of the list in one spectrum. Numbers that do not apply
// are NaN.
type Result struct {
	Name     string
	RestWave float64 // vacuum Angstrom
	Kind     string

	EWRest, EWRestErr float64 // rest frame, from the profile fit, Angstrom, positive in absorption
	EWSum, EWSumErr   float64 // rest frame, direct sum over +-SumHalfWidth sigma
	Flux, FluxErr     float64 // unit of the arm's flux times observed Angstrom, positive in emission
	// OffsetKms is the center against Options.Z. OffsetErr is NaN when the
	// offset was taken over from a stronger line. A limit has no offset.
	OffsetKms, OffsetErr float64
	// WidthKms is the Gaussian sigma: of the source where the resolution is
	// known (0 when the line is no broader than the instrument), else as
	// observed. WidthErr is the step to its upper 1-sigma bound, NaN when the
	// width was taken over from a stronger line or from Options.
	WidthKms, WidthErr float64
	// Shape has h3 and h4 of a Hermite profile, or the Lorentzian half width
	// in km/s of a Voigt profile; NaN for Gaussians.
	Shape, ShapeErr [2]float64
	SNR             float64 // |Flux| / FluxErr
	Continuum       float64 // at the line, with the local straight line
	// UpperLimit is |EWRest| + 3 EWRestErr of a limit: the true |W| is below
	// it with a probability of at least 99.7 % for a line of the width given.
	UpperLimit float64

	Blend  string // names of the lines that overlap this one, joined by "+", itself included; empty when alone
	Pixels int    // good pixels in the sum
	Reason string // empty, or one of the Reason constants
	OnSky  bool   // a band of Options.Sky touches the core of the line
}

// SumHalfWidth is the half width of the direct sum in observed Gaussian sigma;
// 3.5 leaves 0.05 % of a Gaussian outside.
const SumHalfWidth = 3.5

// Options steers a measurement. The zero value of each field stands for its
// default.
type Options struct {
	Z    float64 // redshift
	ZErr float64 // its standard error; widens the search by three of it
	// Broad allows the widths and offsets of a quasar to permitted lines; the
	// forbidden ones and those only seen in absorption keep narrow ranges.
	Broad bool

	SearchKms  float64 // largest offset: 300; with Broad 3000, 1000 for narrow lines
	WidthMax   float64 // largest Gaussian sigma of the source, km/s: 1500; 10000 for broad lines
	WidthGuess float64 // sigma of the source assumed where no line of the spectrum tells, km/s: 100; ten times that for broad lines
	WindowKms  float64 // smallest half width of the fit window: 1200
	MinGood    float64 // smallest good fraction of a line's pixels: 0.7
	// ContinuumSlack is how far the local straight line may differ from the
	// continuum given, as a fraction of it: 0.05. It is the standard deviation
	// of a Gaussian prior, added in quadrature to ContErr and to 0.6 of the
	// noise of a pixel. A negative value means that the continuum is right
	// within ContErr; with ContErr nil it is then held fixed.
	ContinuumSlack float64

	// Profile is the form of lines that stand out: Gaussian unless asked for.
	Profile Profile

	// Stark says that hydrogen absorbs with the wings of Stark broadening, as in
	// hot stars: its lines then have the profile of starkCore.
	Stark bool

	// Expect says which lines objects of this kind have; the others are not
	// fitted, so that they take nothing from those that are there. nil: all, as in
	// galaxies and quasars; He II then only in emission. Lines of hydrogen that crowd at
	// the limit of their series, and He I of stars without it, go by expectation.
	Expect func(*linelist.Line) bool

	Sky []Band // wavelengths to be noted in Result.OnSky

	asked func(*linelist.Line) bool // Expect as it was given, see expectation
}

func (o Options) withDefaults() Options {
	def := func(v *float64, d float64) {
		if !(*v != 0) || math.IsNaN(*v) {
			*v = d
		}
	}
	def(&o.WidthGuess, 100)
	def(&o.WindowKms, 1200)
	def(&o.MinGood, 0.7)
	def(&o.ContinuumSlack, 0.05)
	if !(o.ZErr > 0) {
		o.ZErr = 0
	}
	return o
}

// guess returns the width assumed where no line tells: the broad lines of a
// quasar are ten times as wide as the narrow ones.
func (o *Options) guess(broad bool) float64 {
	if broad {
		return 10 * o.WidthGuess
	}
	return o.WidthGuess
}

// search returns the largest offset for a line, km/s.
func (o *Options) search(broad bool) float64 {
	v := o.SearchKms
	if !(v > 0) {
		switch {
		case broad:
			v = 3000
		case o.Broad:
			v = 1000
		default:
			v = 300
		}
	}
	return min(v+3*spectrum.SpeedOfLight*o.ZErr/(1+o.Z), 5000)
}

// widthMax returns the largest width of the source for a line, km/s.
func (o *Options) widthMax(l *line, broad bool) float64 {
	if o.WidthMax > 0 {
		return o.WidthMax
	}
	if o.Stark {
		switch l.ion {
		case hydrogenIon:
			return starkWidest
		case ionizedHelium:
			return starkHelium
		}
		return starkMetal
	}
	if broad {
		return 10000
	}
	return 1500
}

// Meter measures the lines of one list. It is immutable and may be shared.
type Meter struct {
	lines   []line
	sisters [][]int // indices of the lines that are at least as strong, for every line
	none    []byte  // inList for every line
	// diffuse is the same for what is no star: gas shines in He II, and only the
	// hottest stars absorb it, whose light other stars and iron drown in a galaxy.
	// flaring is that for stars too cool for helium whose hydrogen shines: so may He I, and
	// Ca II H beside hydrogen.
	diffuse, flaring *Meter
}

// line is a line of the list with what planning needs to know of it.
type line struct {
	linelist.Line
	ion     string  // element and stage without the brackets of forbidden lines
	narrow  bool    // forbidden, or only seen in absorption: never as broad as a quasar's permitted lines
	group   int     // index of the list's group, -1 for none
	doublet int     // index into fixedRatios, -1 for none
	wings   string  // name of the broader component, where there are two
	share   float64 // strength within a doublet, or relative to lines of the ion when unresolved
}

// fixedRatio is a doublet whose flux ratio is fixed by atomic physics because
// both lines leave the same upper level.
type fixedRatio struct {
	ion          string
	strong, weak float64 // vacuum wavelengths, Angstrom
	ratio        float64
}

// The ratios of [O III] and [N II] follow Storey & Zeippen 2000, MNRAS 312, 813,
// that of [O I] the transition rates of Galavis, Mendoza & Zeippen 1997, A&AS
// 123, 159 (both from memory).
var fixedRatios = []fixedRatio{
	{"O III", 5008.240, 4960.295, 2.98},
	{"N II", 6585.27, 6549.86, 3.05},
	{"O I", 6302.046, 6365.536, 3.1},
}

// NewMeter returns the meter of a list. It panics when list is nil.
func NewMeter(list *linelist.List) *Meter {
	groups := map[string]int{}
	m := &Meter{}
	for _, l := range list.Lines() {
		forbidden := strings.HasPrefix(l.Ion, "[")
		e := line{Line: l, ion: plainIon(l.Ion), narrow: forbidden || l.Seen == Absorption, group: -1, doublet: -1, share: 1, wings: l.Name + wingsSuffix}
		if l.Group != "" {
			g, ok := groups[l.Group]
			if !ok {
				g = len(groups)
				groups[l.Group] = g
			}
			e.group = g
		}
		if l.F > 0 {
			// Between the thin limit (ratio of f) and saturation (1).
			e.share = math.Sqrt(l.F)
		}
		for k, r := range fixedRatios {
			if !forbidden || e.ion != r.ion {
				continue
			}
			if math.Abs(l.Wave-r.strong) < 0.3 {
				e.doublet, e.share = k, r.ratio
			} else if math.Abs(l.Wave-r.weak) < 0.3 {
				e.doublet, e.share = k, 1
			}
		}
		m.lines = append(m.lines, e)
	}
	// A forbidden line that shares its group with a permitted one of the ion,
	// such as [C III] with C III], goes with that.
	for i := range m.lines {
		for j := range m.lines {
			a, b := &m.lines[i], &m.lines[j]
			if a.group >= 0 && a.group == b.group && a.ion == b.ion && !b.narrow {
				a.narrow = false
			}
		}
	}
	m.findSisters()
	m.none = make([]byte, len(m.lines))
	m.diffuse, m.flaring = m.shining(ionizedHelium), m.shining(helium)
	for i := range m.flaring.lines {
		if l := &m.flaring.lines[i]; l.chromospheric() {
			l.Seen = "both"
		}
	}
	return m
}

// shining returns the meter of a list in which an ion is only seen in emission.
func (m *Meter) shining(ion string) *Meter {
	d := *m
	d.lines = slices.Clone(m.lines)
	for i := range d.lines {
		if l := &d.lines[i]; l.ion == ion && l.Seen != Absorption || ion == ionizedHelium && crowds(&l.Line) == 3 {
			l.Seen = Emission
		}
	}
	return &d
}

const hydrogenIon, helium, ionizedHelium = "H I", "He I", "He II"

// starkHelium is the largest sigma, km/s, of He II in hot stars: it has one electron and the
// linear Stark effect of hydrogen, but is weaker. Open spectra of hot subdwarfs have up to 530.
const starkHelium = 600.0

// plainIon strips what does not name the ion: brackets and fine-structure stars.
func plainIon(s string) string {
	return strings.Trim(s, "[]*")
}

// Measure appends one Result to dst for every line of the list whose center
// lies inside the coverage of an arm, in list order, and returns the extended
// slice. Lines in several arms are fitted in all of them at once.
//
// It never fails: bad data ends in Kind unmeasured with a Reason. An arm whose
// slices differ in length is a caller's bug and panics, as does a redshift of
// -1 or less. With a scratch that has seen spectra of the same size, and dst of
// enough capacity, nothing is allocated, but with Options.Expect a little. A scratch serves one call at a time;
// nil makes a new one.
func (m *Meter) Measure(dst []Result, arms []Arm, opt Options, scratch *Scratch) []Result {
	if !(opt.Z > -1) || math.IsInf(opt.Z, 0) {
		panic("lines: redshift must be finite and above -1")
	}
	for k := range arms {
		arms[k].check()
	}
	if scratch == nil {
		scratch = &Scratch{}
	}
	s := scratch
	if s.labels == nil || s.labeled != m {
		s.labels, s.labeled = map[labelKey]string{}, m
	}
	s.meter, s.arms, s.opt = m, arms, opt.withDefaults()
	if opt.Expect == nil {
		s.meter = m.diffuse
	}
	s.opt.asked = opt.Expect
	s.opt.Expect = s.expectation(false, 0)
	s.bar = append(s.bar[:0], m.none...)
	s.round(false)
	again := s.weigh(false)
	if s.flares() {
		again, s.meter = true, m.flaring
	}
	if again {
		s.round(true)
		s.weigh(true)
		s.recall()
	}
	for i := range s.tracks {
		t := &s.tracks[i]
		for _, r := range t.parts() {
			if r.Kind == Limit {
				r.bound()
			}
		}
		if dst = append(dst, t.result); t.second.Name != "" {
			dst = append(dst, t.second)
		}
	}
	s.meter, s.arms = nil, nil
	return dst
}

// bound sets the upper limit, of whatever reason the row is none.
func (r *Result) bound() { r.UpperLimit = math.Abs(r.EWRest) + 3*r.EWRestErr }

func (a *Arm) check() {
	n := len(a.Wave)
	if len(a.Flux) != n || len(a.Ivar) != n || len(a.Cont) != n || (a.ContErr != nil && len(a.ContErr) != n) {
		panic("lines: slices of an arm differ in length")
	}
	if k := len(a.Resolution); k > 1 && k != n {
		panic("lines: resolution must be empty, one value, or one per pixel")
	}
}
