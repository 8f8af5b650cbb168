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
	// leastDepth is the least depth that is reported: a shallower break may as
	// well be a fault of the level, see levelDoubt.
	leastDepth = 0.5
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
	if last < limitLeast || fo.mean[min(last, n-1)] < leastMean {
		return dst
	}
	s.prepareLimit()
	bestGain, at, depth := limitGain, -1, 0.0
	// First with wide steps and few depths, then around the best with all.
	try := func(i, by int) {
		null, blue, red := s.limitNull(i)
		if blue < limitLeast || red < limitLeast {
			return
		}
		for d := by / 2; d < limitDepths; d += by {
			if gain := null - s.limitCost(i, 0, s.limit.dim[d]); gain > bestGain {
				bestGain, at, depth = gain, i, limitFirst*math.Pow(limitGrowth, float64(d))
			}
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
	if depth < leastDepth {
		return dst
	}
	sys := blank(Hydrogen)
	sys.Z = fo.waves[at]/hydrogen.LymanLimit - 1
	sys.ZErr = limitShift / spectrum.SpeedOfLight * (1 + sys.Z)
	for _, c := range s.damp.found {
		if math.Abs(c.x-spectrum.SpeedOfLight*math.Log1p(sys.Z)) < 3*limitShift {
			return dst
		}
	}
	// The spread of the likelihood over the depths gives the error.
	var w, sum, square float64
	least := s.limitCost(at, depth, nil)
	for d := -30; d <= 30; d++ {
		x := math.Log10(depth * math.Pow(limitGrowth, float64(d)/10))
		p := math.Exp(0.5 * (least - s.limitCost(at, math.Pow(10, x), nil)))
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

// limits is the state of the search for breaks.
type limits struct {
	thin []float64              // cube of wavelength over the edge's, by bins below the edge
	dim  [limitDepths][]float64 // transmission of the depths that are tried, likewise
	sum  [4][]float64           // running sums over bins with undimmed level of what limitSums has
	good []int                  // running number of bins with data
}

// limitSums is what the best gain of a level and its likelihood follow from.
type limitSums struct{ num, den, base, logs float64 }

// value returns -2 ln likelihood for the best gain within levelDoubt.
func (l limitSums) value() float64 {
	const prior = 1 / (levelDoubt * levelDoubt)
	num, den := l.num+prior, l.den+prior
	return l.base + prior - num*num/den + l.logs
}

// prepareLimit lays out the running sums and, once, the transmissions.
func (s *Scratch) prepareLimit() {
	l, fo := &s.limit, &s.forest
	if l.thin == nil {
		bins := int(-math.Log(1-limitSpan)*spectrum.SpeedOfLight/binKms) + 1
		for k := range bins {
			l.thin = append(l.thin, math.Exp(-3*float64(k)*binKms/spectrum.SpeedOfLight))
		}
		for d := range l.dim {
			depth := limitFirst * math.Pow(limitGrowth, float64(d))
			for _, t := range l.thin {
				l.dim[d] = append(l.dim[d], math.Exp(-depth*t))
			}
		}
	}
	n := len(fo.flux)
	for k := range l.sum {
		l.sum[k] = resize(l.sum[k], n+1)
	}
	if cap(l.good) < n+1 {
		l.good = make([]int, n+1, n+n/2+1)
	}
	l.good = l.good[:n+1]
	l.good[0] = 0
	for i := range n {
		var t limitSums
		if l.good[i+1] = l.good[i]; fo.noise[i] > 0 {
			l.good[i+1]++
			m := s.damp.level[i]
			sd := fo.scatter * m
			variance := fo.noise[i] + sd*sd*fo.memory
			t = limitSums{m * fo.flux[i] / variance, m * m / variance, fo.flux[i] * fo.flux[i] / variance, math.Log(variance)}
		}
		for k, v := range [...]float64{t.num, t.den, t.base, t.logs} {
			l.sum[k][i+1] = l.sum[k][i] + v
		}
	}
}

// limitSpans returns the bins that a break at bin i is judged on: from blue to i,
// and from red to end.
func (s *Scratch) limitSpans(i int) (blue, red, end int) {
	fo := &s.forest
	edge := fo.waves[i]
	return max(0, i+1-len(s.limit.thin)), index(fo.waves, edge*crowdEnd/hydrogen.LymanLimit), index(fo.waves, edge*(crowdEnd/hydrogen.LymanLimit+limitSpan))
}

// limitNull returns -2 ln likelihood without a break at bin i, and the bins with data
// on either side.
func (s *Scratch) limitNull(i int) (cost float64, blue, red int) {
	l := &s.limit
	lo, from, end := s.limitSpans(i)
	var t limitSums
	for k, v := range [...]*float64{&t.num, &t.den, &t.base, &t.logs} {
		*v = l.sum[k][i+1] - l.sum[k][lo] + l.sum[k][end] - l.sum[k][from]
	}
	return t.value(), l.good[i+1] - l.good[lo], l.good[end] - l.good[from]
}

// limitCost returns -2 ln likelihood with a break at bin i, of transmission dim by
// bins below the edge, or of optical depth tau at the edge where dim is nil.
func (s *Scratch) limitCost(i int, tau float64, dim []float64) float64 {
	l, fo := &s.limit, &s.forest
	lo, from, end := s.limitSpans(i)
	var t limitSums
	for k, v := range [...]*float64{&t.num, &t.den, &t.base, &t.logs} {
		*v = l.sum[k][end] - l.sum[k][from]
	}
	// The logarithm of a product costs less than those of its factors.
	norm, product, factors := 1/(fo.scale*fo.scale), 1.0, 0.0
	for b := lo; b <= i; b++ {
		if fo.noise[b] == 0 {
			continue
		}
		m := s.damp.level[b]
		if dim != nil {
			m *= dim[i-b]
		} else {
			m *= math.Exp(-tau * l.thin[i-b])
		}
		sd := fo.scatter * m
		variance := fo.noise[b] + sd*sd*fo.memory
		v := m / variance
		t.num += v * fo.flux[b]
		t.den += v * m
		t.base += fo.flux[b] * fo.flux[b] / variance
		product *= variance * norm
		factors++
		if product < 1e-200 || product > 1e200 {
			t.logs += math.Log(product)
			product = 1
		}
	}
	t.logs += math.Log(product) - factors*math.Log(norm)
	return t.value()
}
