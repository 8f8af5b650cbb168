package spectrum

import (
	"math"
	"sort"
)

// fwhmToSigma is 1 / (2 sqrt(2 ln 2)).
const fwhmToSigma = 1 / 2.3548200450309493

// InstrumentSigma returns the Gaussian sigma of the instrument in km/s at a
// wavelength in Angstrom of the axis as it is now,
//
//	sigma = c / (R 2 sqrt(2 ln 2)),   R = wavelength / FWHM,
//
// of the segment that covers it; where several do, of the one that resolves most,
// and where none does, of the nearest. It adds in quadrature to the width of a line.
// NaN where the resolution is not known.
func (s *Spectrum) InstrumentSigma(wave float64) (kms float64) {
	best, nearest := 0.0, math.Inf(1)
	for k := range s.Segments {
		seg := &s.Segments[k]
		n := seg.Len()
		if n == 0 || len(seg.Resolution) == 0 {
			continue
		}
		away := max(0, seg.Wave[0]-wave, wave-seg.Wave[n-1])
		r := seg.Resolution[0]
		if len(seg.Resolution) == n {
			r = seg.Resolution[min(sort.SearchFloat64s(seg.Wave, wave), n-1)]
		}
		if r > 0 && (away < nearest || away == nearest && r > best) {
			best, nearest = r, away
		}
	}
	if best == 0 || math.IsNaN(wave) {
		return math.NaN()
	}
	return SpeedOfLight / best * fwhmToSigma
}
