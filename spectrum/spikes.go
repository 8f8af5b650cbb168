package spectrum

import "math"

// MaskSpikes takes the weight from one or two neighboring pixels that stand
// above the pixels on both sides by more than sigmas times their error while
// those pixels hardly rise themselves: by less than a quarter of that for one
// pixel, 0.15 for two. A line of a spectrograph that samples its profile with
// two pixels or more puts more than that into the pixels beside its peak, so
// only what is narrower than the instrument is taken: cosmic rays that a
// reduction left in. Pixels near ones without weight are not judged. Weights
// are changed on copies. It returns the number of pixels taken.
func (s *Spectrum) MaskSpikes(sigmas float64) int {
	taken := 0
	for k := range s.Segments {
		seg := &s.Segments[k]
		copied := false
		for i := 2; i+2 < seg.Len(); i++ {
			width := seg.spike(i, sigmas)
			if width == 0 {
				continue
			}
			if !copied {
				seg.Ivar, copied = append([]float64(nil), seg.Ivar...), true
			}
			for j := i; j < i+width; j++ {
				seg.Ivar[j] = 0
			}
			taken += width
			i += width + 1
		}
	}
	return taken
}

// spike returns the width, 1 or 2, of a spike that starts at pixel i, else 0.
func (s *Segment) spike(i int, sigmas float64) int {
	f, w := s.Flux, s.Ivar
	for width, rest := range []float64{1: 0.25, 2: 0.15} {
		if width == 0 || i+width+1 >= len(f) {
			continue
		}
		low, weight := math.Inf(1), math.Inf(1)
		for j := i; j < i+width; j++ {
			low, weight = math.Min(low, f[j]), math.Min(weight, w[j])
		}
		beside := math.Min(math.Min(w[i-2], w[i-1]), math.Min(w[i+width], w[i+width+1]))
		if weight <= 0 || beside <= 0 {
			continue
		}
		rise := low - math.Max(f[i-1], f[i+width])
		if rise > sigmas/math.Sqrt(weight) && f[i-1]-f[i-2] <= rest*rise && f[i+width]-f[i+width+1] <= rest*rise {
			return width
		}
	}
	return 0
}
