package redshift

import (
	"math"
	"slices"

	"duskline/spectrum"
)

// Water of our air takes light in broad bands. Most reductions correct for it, some leave a tenth of the light or
// more, and beside a dip in the observed frame whatever is broad fits: featureless continua come out as
// quasars. How much was left is measured in the spectrum itself, for bands corrected well are as good as any.
const (
	waterShoulder = 0.006 // dex on either side of a band, from which its continuum is taken
	waterBin      = 10    // pixels; what is left of the lines of water is wider than noise
	waterSlope    = 1.5   // from one side of a band to the other: more is a break, no continuum
	waterBins     = 4     // of a band that are needed
	// waterReach is what the share is multiplied by: neighbors have it in common, and an
	// error that n pixels share counts like one sqrt(n) times as large that each has by
	// itself. It is the same over one bin at least; what is wider than some the spline takes up.
	waterReach = 3
)

// waterLeft sets s.left, the share of the light by which the spectrum departs in the bands
// from straight lines across them: of two bands or three the smallest, as lines of the
// object may lie in one, but water is in all; none where one of them has more light, not less.
// Flux and ivar are those of g in any unit.
func (s *Scratch) waterLeft(g *spectrum.Grid, flux, ivar []float64, bands [][2]float64) {
	s.left = math.Inf(1)
	n := 0
	for _, b := range bands {
		d, less, ok := s.departure(g, flux, ivar, b)
		if !ok {
			continue
		}
		if n++; !less {
			d = 0
		}
		s.left = math.Min(s.left, d)
	}
	if n < 2 {
		s.left = 0
	}
}

// departure returns the robust root mean square of flux over a straight line, less one, in a
// band, with that of the noise taken off, and whether most of it is less light. It reports
// false where the band or the continuum on either side is not covered or is no straight line.
func (s *Scratch) departure(g *spectrum.Grid, flux, ivar []float64, band [2]float64) (share float64, less, ok bool) {
	from, to := math.Log10(band[0]), math.Log10(band[1])
	blue, ok := s.beside(g, flux, ivar, from-waterShoulder, from)
	red, okRed := s.beside(g, flux, ivar, to, to+waterShoulder)
	if !ok || !okRed || !(blue > 0) || !(red > 0) || math.Max(blue, red) > waterSlope*math.Min(blue, red) {
		return 0, false, false
	}
	lo, hi := pixelRange(g, from, to)
	s.shares, s.errors = s.shares[:0], s.errors[:0]
	for k := lo; k+waterBin <= hi; k += waterBin {
		var w, wf float64
		for i := k; i < k+waterBin; i++ {
			w += ivar[i]
			wf += ivar[i] * flux[i]
		}
		if w <= 0 {
			continue
		}
		// Between the middles of the shoulders.
		x := (g.LogWave(k) + 0.5*(waterBin-1)*g.Step - from + 0.5*waterShoulder) / (to - from + waterShoulder)
		c := blue + x*(red-blue)
		s.shares = append(s.shares, wf/w/c-1)
		s.errors = append(s.errors, 1/(w*c*c))
	}
	n := len(s.shares)
	if n < waterBins {
		return 0, false, false
	}
	less = spectrum.Median(s.shares) < 0
	for i, u := range s.shares {
		s.shares[i] = u * u
	}
	// The third quartile of chi^2 with one degree of freedom is 1.323, and 1.83/sqrt(n) of
	// itself the standard deviation of that of n.
	slices.Sort(s.shares)
	doubt := 2 * 1.83 / math.Sqrt(float64(n))
	return math.Sqrt(math.Max(0, s.shares[3*n/4]/1.323-(1+doubt)*spectrum.Median(s.errors))), less, true
}

// beside returns the median flux of a range of log10 wavelength, false where less than half of it has weight.
func (s *Scratch) beside(g *spectrum.Grid, flux, ivar []float64, from, to float64) (float64, bool) {
	lo, hi := pixelRange(g, from, to)
	s.tmp = s.tmp[:0]
	for i := lo; i < hi; i++ {
		if ivar[i] > 0 {
			s.tmp = append(s.tmp, flux[i])
		}
	}
	if float64(len(s.tmp)) < 0.5*(to-from)/g.Step {
		return 0, false
	}
	return spectrum.Median(s.tmp), true
}

// pixelRange returns the pixels of g in a range of log10 wavelength.
func pixelRange(g *spectrum.Grid, from, to float64) (lo, hi int) {
	lo = int(math.Ceil((from - g.Start) / g.Step))
	hi = int(math.Floor((to-g.Start)/g.Step)) + 1
	return min(max(lo, 0), g.Len()), min(max(hi, 0), g.Len())
}

const (
	skyCore    = 1.5  // Gaussian sigmas of a line within which a night-sky line spoils it
	waterShows = 0.03 // share of the light left from which water passes for a line
	// narrowKms is the Gaussian sigma below which emission may be the sky's, which is unresolved,
	// and is none of water's.
	narrowKms = 400.0
)

// airMade reports whether a line may be what the night sky or water left: a narrow one on a line of the
// night sky, where residuals exceed others, unless it exceeds them as well; narrow
// emission on one of Options.SkyLines; anything else in a band of water, where water
// shows in the spectrum.
func (f *Finder) airMade(s *Scratch, e *LineEvidence) bool {
	half := skyCore * e.Width / speedOfLight * e.Wave
	if e.Width < narrowKms && s.night > 1 && e.SNR < s.night*SeenSNR && near(f.opt.Night, e.Wave-half, e.Wave+half) {
		return true
	}
	if !e.Absorption && e.Width < narrowKms {
		return touches(f.opt.SkyLines, e.Wave-half, e.Wave+half)
	}
	return s.left >= waterShows && touches(f.opt.WaterBands, e.Wave-half, e.Wave+half)
}

func touches(bands [][2]float64, from, to float64) bool {
	return slices.ContainsFunc(bands, func(b [2]float64) bool { return to >= b[0] && from <= b[1] })
}
