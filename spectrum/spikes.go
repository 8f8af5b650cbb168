package spectrum

import "math"

// MaskSpikes takes the weight from single pixels that stand above both their
// neighbors by more than sigmas times their error while neither neighbor rises
// by a quarter of that over the pixels next to it. A line of a spectrograph
// that samples its profile with two pixels or more puts at least half its peak
// into the nearer neighbors, so only what is narrower than the instrument is
// taken: cosmic rays that a reduction left in. Pixels next to ones without
// weight are not judged. Weights are changed on copies. It returns the number
// of pixels taken.
func (s *Spectrum) MaskSpikes(sigmas float64) int {
	taken := 0
	for k := range s.Segments {
		seg := &s.Segments[k]
		f, w := seg.Flux, seg.Ivar
		copied := false
		for i := 2; i+2 < seg.Len(); i++ {
			if w[i-2] <= 0 || w[i-1] <= 0 || w[i] <= 0 || w[i+1] <= 0 || w[i+2] <= 0 {
				continue
			}
			rise := f[i] - math.Max(f[i-1], f[i+1])
			if !(rise > sigmas/math.Sqrt(w[i])) {
				continue
			}
			if f[i-1]-f[i-2] > 0.25*rise || f[i+1]-f[i+2] > 0.25*rise {
				continue
			}
			if !copied {
				w = append([]float64(nil), w...)
				seg.Ivar, copied = w, true
			}
			w[i] = 0
			taken++
			i += 2
		}
	}
	return taken
}
