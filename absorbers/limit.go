package absorbers

import (
	"math"

	"duskline/hydrogen"
	"duskline/spectrum"
)

const (
	// Optical depths at the Lyman limit that are tried.
	limitFirst, limitGrowth = 0.25, 1.4
	limitDepths             = 11
	// Lines of the series crowd from the limit to crowdEnd, rest Angstrom;
	// these pixels are left out, as are those of the last limitSpan below.
	crowdEnd, limitSpan = 926.0, 0.09
	// limitGain is what the likelihood must gain: twice its logarithm.
	limitGain = 30.0
	// opaque is the depth from which only a lower limit is known.
	opaque = 3.0
	// Fewest bins below the limit and above it.
	limitLeast = 12
	// limitShift is how well a break alone places a system, km/s: the lines
	// that crowd to it hide where it begins; common practice, no source.
	limitShift = 1000.0
	// limitFloor is the standard error of log N from what the level beyond
	// the limit of the background may do; common practice, no source.
	limitFloor = 0.05
	// levelDoubt is the standard error of the level carried beyond the limit
	// of the background, as a fraction.
	levelDoubt = 0.2
)

// findLimit looks for one break at the Lyman limit of an absorber, where the
// coverage goes that far, and appends it unless a system found by its lines is
// there and explains it.
//
// Below 912 Angstrom in its frame a system dims the light by exp(-N sigma), with
// the cross section falling as the cube of wavelength, which the exact one does
// to 3 % over limitSpan. The gain and the depth are judged on
// bins from limitSpan of the wavelength below the break to as much above it; the
// level there is known to levelDoubt.
func (s *Scratch) findLimit(dst []System, f *Finder, opt Options) []System {
	fo := &s.forest
	n := len(fo.flux)
	last := int((spectrum.SpeedOfLight*math.Log(hydrogen.LymanLimit*(1+opt.Z)*(1+aheadKms/spectrum.SpeedOfLight)) - fo.x0) / fo.step)
	bestGain, at, depth := limitGain, -1, 0.0
	var span [2]int
	// First with wide steps and few depths, then around the best with all.
	try := func(i, by int) {
		edge := fo.wave(i)
		lo, hi := i, i
		for lo > 0 && fo.wave(lo-1) > edge*(1-limitSpan) {
			lo--
		}
		for hi < n && fo.wave(hi) < edge*(crowdEnd/hydrogen.LymanLimit+limitSpan) {
			hi++
		}
		var blue, red int
		null := s.limitCost(lo, hi, edge, 0, &blue, &red)
		if blue < limitLeast || red < limitLeast {
			return
		}
		tau := limitFirst
		for d := range limitDepths {
			if d%by != by/2 {
				tau *= limitGrowth
				continue
			}
			if gain := null - s.limitCost(lo, hi, edge, tau, nil, nil); gain > bestGain {
				bestGain, at, depth, span = gain, i, tau, [2]int{lo, hi}
			}
			tau *= limitGrowth
		}
	}
	for i := limitLeast; i <= min(last, n-1); i += 9 {
		try(i, 4)
	}
	if at < 0 {
		return dst
	}
	for i, center := max(limitLeast, at-9), at; i <= min(center+9, last, n-1); i += 3 {
		try(i, 1)
	}
	sys := blank(Hydrogen)
	sys.Z = fo.wave(at)/hydrogen.LymanLimit - 1
	sys.ZErr = limitShift / spectrum.SpeedOfLight * (1 + sys.Z)
	for _, c := range s.damp.found {
		if math.Abs(c.x-spectrum.SpeedOfLight*math.Log1p(sys.Z)) < 3*limitShift {
			return dst
		}
	}
	// The spread of the likelihood over the depths gives the error.
	var w, sum, square float64
	edge := fo.wave(at)
	least := s.limitCost(span[0], span[1], edge, depth, nil, nil)
	for d := -30; d <= 30; d++ {
		x := math.Log10(depth * math.Pow(limitGrowth, float64(d)/10))
		p := math.Exp(0.5 * (least - s.limitCost(span[0], span[1], edge, math.Pow(10, x), nil, nil)))
		w, sum, square = w+p, sum+p*x, square+p*x*x
	}
	mean := sum / w
	sys.LogN = mean - math.Log10(hydrogen.LymanLimitCrossSection(hydrogen.LymanLimit))
	sys.LogErr = math.Hypot(math.Sqrt(max(0, square/w-mean*mean)), limitFloor)
	sys.Significance = math.Sqrt(bestGain)
	sys.Flags |= BreakOnly
	if depth > opaque {
		sys.Flags |= LowerLimit
		sys.LogN, sys.LogErr = math.Log10(opaque/hydrogen.LymanLimitCrossSection(hydrogen.LymanLimit)), math.NaN()
	}
	if spectrum.SpeedOfLight*(math.Log1p(opt.Z)-math.Log1p(sys.Z)) < proximateKms {
		sys.Flags |= Proximate
	}
	return append(dst, sys)
}

// limitCost returns -2 ln likelihood of the bins from lo to hi with a break of
// depth tau at edge, for the best gain of the level within levelDoubt, and counts
// the bins on either side.
func (s *Scratch) limitCost(lo, hi int, edge, tau float64, blue, red *int) float64 {
	fo := &s.forest
	// The best gain of a model m: weights from the model itself with gain 1.
	num, den, logs, base := 1/(levelDoubt*levelDoubt), 1/(levelDoubt*levelDoubt), 0.0, 1/(levelDoubt*levelDoubt)
	for i := lo; i < hi; i++ {
		w := fo.wave(i)
		if fo.noise[i] == 0 || w > edge && w < edge*crowdEnd/hydrogen.LymanLimit {
			continue
		}
		m := s.damp.level[i]
		if w <= edge {
			if blue != nil {
				*blue++
			}
			x := w / edge
			m *= math.Exp(-tau * x * x * x)
		} else if red != nil {
			*red++
		}
		sd := fo.scatter * m
		v := 1 / (fo.noise[i] + sd*sd*fo.memory)
		num += m * fo.flux[i] * v
		den += m * m * v
		base += fo.flux[i] * fo.flux[i] * v
		logs -= math.Log(v)
	}
	return base - num*num/den + logs
}
