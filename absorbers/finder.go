package absorbers

import (
	"math"

	"duskline/hydrogen"
	"duskline/linelist"
	"duskline/spectrum"
)

// The kinds of a System.
const (
	Hydrogen = "hydrogen"
	MgII     = "MgII"
	CIV      = "CIV"
	SiIV     = "SiIV"
	AlIII    = "AlIII"
)

// Flags are remarks on one system.
type Flags uint32

// The flags, low bit first, with the bits and meanings of the absorber table.
const (
	FlatPart     Flags = 1 << iota // column density and Doppler parameter cannot be told apart
	PoorFit                        // the profile describes the pixels badly
	AtBound                        // a parameter ended at the limit of its range
	OneLine                        // a single line carries the system
	BreakOnly                      // the column density comes from the Lyman limit alone
	LowerLimit                     // the column density is at least the value given
	Overlaps                       // fitted together with another system whose lines overlap
	RatioOff                       // the doublet ratio is outside what atomic physics allows
	Saturated                      // the doublet ratio is that of saturated lines
	Proximate                      // within 3,000 km/s of the object
	_                              // in the forest: no search of this version sets it
	PartlyHidden                   // pixels of its lines are masked or outside the coverage
)

// System is one absorption system. Numbers that do not apply are NaN.
type System struct {
	Kind         string
	Z, ZErr      float64
	LogN, LogErr float64 // neutral hydrogen, log10 cm^-2
	B, BErr      float64 // Doppler parameter, km/s, where the lines fix it
	Lines        string  // names of the lines that carry it, joined by "+"
	// EW is the rest equivalent width of Lyman alpha, by the fitted profile,
	// or of the stronger line of the doublet, by direct sum; Second that of
	// the weaker line.
	EW, EWErr         float64
	Second, SecondErr float64
	// Significance is the square root of the likelihood gain of a hydrogen
	// system (twice the logarithm), or of the sum of squares of the
	// equivalent widths over their errors for a doublet.
	Significance float64
	Flags        Flags
}

// Background says what light the absorbers stand in front of.
type Background int

const (
	// BeforeQuasar: hydrogen and doublets up to the object and a little beyond.
	BeforeQuasar Background = iota
	// BeforeGalaxy: interstellar and stellar lines of its own are left out of the
	// forest, systems lie ownKms in front of it, hydrogen ownHydrogenKms and from
	// ownLogN on, and no Lyman limit is looked for: galaxies have their own.
	BeforeGalaxy
	// BeforeStar: hydrogen of the interstellar medium at the velocity of the star,
	// without Lyman limit and doublets. It is the caller's to know that the star
	// has no broad Lyman alpha of its own.
	BeforeStar
)

// Options steers a search.
type Options struct {
	Z, ZErr float64 // redshift of the background
	Before  Background
}

// last returns c ln(1+z) of the farthest doublet that is looked for.
func (o Options) last() float64 {
	x := spectrum.SpeedOfLight * math.Log1p(o.Z)
	if o.Before == BeforeGalaxy {
		return x - ownKms
	}
	return x + behindKms
}

// lastHydrogen returns c ln(1+z) of the farthest hydrogen.
func (o Options) lastHydrogen() float64 {
	x := spectrum.SpeedOfLight * math.Log1p(o.Z)
	if o.Before == BeforeGalaxy {
		return x - ownHydrogenKms
	}
	return x + aheadKms + 3*spectrum.SpeedOfLight*max(0, o.ZErr)/(1+o.Z)
}

// doublet is a resonance doublet of the line list.
type doublet struct {
	kind         string
	strong, weak linelist.Line
	split        float64 // km/s between the two, in logarithm of wavelength
	ratio        float64 // of f lambda: the equivalent widths of thin lines
	names        string
}

// Finder looks for the systems of one line list. It is immutable and may be
// shared.
type Finder struct {
	doublets []doublet
	series   []hydrogen.AbsorptionLine // Lyman alpha first
	own      []float64                 // see ownLines
	names    []string
}

// seriesLines is how many Lyman lines take part in fits: alpha to epsilon.
const seriesLines = 5

// NewFinder returns the finder of a list. Doublets whose two lines are in the
// list with oscillator strengths are looked for; hydrogen is computed.
func NewFinder(list *linelist.List) *Finder {
	f := &Finder{own: ownWaves(list)}
	for _, d := range []struct{ kind, strong, weak string }{
		{MgII, "MgII_2796", "MgII_2803"}, {CIV, "CIV_1548", "CIV_1550"},
		{SiIV, "SiIV_1393", "SiIV_1402"}, {AlIII, "AlIII_1854", "AlIII_1862"},
	} {
		strong, ok1 := list.Find(d.strong)
		weak, ok2 := list.Find(d.weak)
		if !ok1 || !ok2 || !(strong.F > 0) || !(weak.F > 0) {
			continue
		}
		f.doublets = append(f.doublets, doublet{kind: d.kind, strong: strong, weak: weak, names: d.strong + "+" + d.weak,
			split: spectrum.SpeedOfLight * math.Log(weak.Wave/strong.Wave),
			ratio: strong.F * strong.Wave / (weak.F * weak.Wave)})
	}
	for k, name := range [seriesLines]string{"Lya", "Lyb", "Lyg", "Lyd", "Lye"} {
		t, err := hydrogen.NewTransition(1, k+2)
		if err != nil {
			panic(err) // the quantum numbers are constants of this function
		}
		f.series, f.names = append(f.series, t.Absorption()), append(f.names, name)
	}
	return f
}

// Scratch holds the buffers of Find. The zero value is ready for use.
type Scratch struct {
	track track
	order []int
	red   envelope
	metal metals
	// Scatter of pixels, in order, and the weights as stated.
	looks, stated []float64

	forest                             forest
	limit                              limits
	damp                               damped
	joint                              joint
	darkFrom, darkOwn, lightOwn, empty []float64
	inRun                              []bool
	refused                            []bool    // bins where no further system is looked for
	through                            []float64 // transmission of one line
	blur                               []float64
	saved                              []cloud
	startX                             []float64 // of the members of a joint fit
}

// Find appends the systems in front of a background at Options.Z to dst, first
// hydrogen, then doublets in the order Mg II, C IV, Si IV, Al III, each by
// redshift, and returns the extended slice.
//
// It never fails: where nothing can be looked for, nothing is found. An arm
// whose slices differ in length, and a redshift that is not above -1, are a
// caller's bug and panic. A scratch serves one call at a time; nil makes a new
// one.
func (f *Finder) Find(dst []System, arms []Arm, opt Options, scratch *Scratch) []System {
	if !(opt.Z > -1) || math.IsInf(opt.Z, 0) {
		panic("absorbers: redshift must be finite and above -1")
	}
	if scratch == nil {
		scratch = &Scratch{}
	}
	s := scratch
	s.lay(arms)
	if len(s.track.x) < 2*envelopeLeast {
		return dst
	}
	s.forest.own, s.forest.alpha = f.own, f.series[0].Wave
	if s.forest.fill(&s.track, opt.Z) && s.forest.follow(opt) {
		s.findDamped(f, opt)
		dst = s.reportHydrogen(dst, f, opt)
		if opt.Before == BeforeQuasar {
			dst = s.findLimit(dst, f, opt)
		}
	}
	if opt.Before == BeforeStar {
		return dst
	}
	// Doublets are looked for redward of Lyman alpha of the background.
	first := index(s.track.x, spectrum.SpeedOfLight*math.Log(f.series[0].Wave*(1+opt.Z))+behindKms)
	// Beyond the last place of any doublet only the continuum needs a little more.
	end := 0.0
	for _, d := range f.doublets {
		end = max(end, opt.last()+spectrum.SpeedOfLight*math.Log(d.weak.Wave)+2*envelopeHalf)
	}
	s.track.truncate(index(s.track.x, end))
	if len(s.track.x)-first < 2*envelopeLeast {
		return dst
	}
	s.distrustErrors(first)
	s.red.fit(&s.track, first)
	s.metal.memory = s.noiseMemory(first)
	return s.findDoublets(dst, f, opt, first)
}

func blank(kind string) System {
	nan := math.NaN()
	return System{Kind: kind, Z: nan, ZErr: nan, LogN: nan, LogErr: nan, B: nan, BErr: nan, EW: nan, EWErr: nan,
		Second: nan, SecondErr: nan, Significance: nan}
}
