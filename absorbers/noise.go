package absorbers

import (
	"math"
	"slices"
)

// The scatter is looked at in stretches of several lengths in pixels, and believed
// where it exceeds the stated errors by excess: two to three standard errors of the
// look, which in simulation are 1.4 over the root of the pixels. Many pixels tell a
// small fault, few tell where a large one ends, and lines are as long as few.
var noiseLooks = [...]struct {
	pixels int
	excess float64
}{{512, 1.15}, {128, 1.25}, {48, 1.7}}

const (
	// noiseLags is the most pixels over which noise is taken to be correlated.
	noiseLags = 3
	// memoryLeast is the fewest pixels that tell a correlation.
	memoryLeast = 200
	// A pixel lies on a sky line where its error is skyError times the median.
	skyError = 1.3
	// leastLooks is the fewest pixels that tell of errors.
	leastLooks = 16
)

// distrustErrors lowers the weights of the pixels from first on where neighbors
// scatter by more than their errors: residue of sky lines and of telluric bands.
// Pixels on sky lines, of large stated errors, are judged apart from those between,
// whose errors are better.
func (s *Scratch) distrustErrors(first int) {
	t := &s.track
	n := len(t.x)
	s.stated = append(s.stated[:0], t.weight...)
	for _, l := range noiseLooks {
		for lo := first; lo < n; {
			hi := lo + l.pixels
			if n-hi < l.pixels/2 {
				hi = n
			}
			look := s.looks[:0]
			for _, w := range s.stated[lo:hi] {
				if w > 0 {
					look = append(look, w)
				}
			}
			s.looks = look
			if len(look) > l.pixels/3 {
				slices.Sort(look)
				dim := look[len(look)/2] / (skyError * skyError)
				excess := (l.excess - 1) * math.Sqrt(float64(l.pixels))
				s.distrust(lo, hi, 0, dim, excess)
				s.distrust(lo, hi, dim, math.Inf(1), excess)
			}
			lo = hi
		}
	}
}

// distrust divides the weights of the pixels from lo to hi whose stated weights are
// between least and most by the square of what these scatter beyond their errors,
// where that is more than excess over the root of their number. Scatter is that of
// 2 f_i - f_(i-2) - f_(i+2), of which the median tells nothing of the continuum and
// little of lines (Stoehr et al. 2008).
func (s *Scratch) distrust(lo, hi int, least, most, excess float64) {
	t := &s.track
	look := s.looks[:0]
	for i := max(lo, 2); i < min(hi, len(t.x)-2); i++ {
		a, b, c := t.weight[i-2], t.weight[i], t.weight[i+2]
		// A pixel beside a sky line tells of that line.
		if s.stated[i] >= least && s.stated[i] < most && min(a, b, c) > 0 && min(s.stated[i-2], s.stated[i+2]) >= least {
			look = append(look, math.Abs(2*t.flux[i]-t.flux[i-2]-t.flux[i+2])/math.Sqrt(1/a+4/b+1/c))
		}
	}
	s.looks = look
	if len(look) < leastLooks {
		return
	}
	slices.Sort(look)
	// The median of the modulus of a standard normal deviate is 0.6745.
	ratio := look[len(look)/2] / 0.6745
	if ratio < 1+excess/math.Sqrt(float64(len(look))) {
		return
	}
	for i := lo; i < hi; i++ {
		if w := s.stated[i]; w >= least && w < most {
			t.weight[i] /= ratio * ratio
		}
	}
}

// noiseMemory returns the factor by which correlation of neighboring pixels
// raises the variance of a mean of many: 1 + 2 (rho_1 + ... + rho_3), from first
// on. Rebinned spectra have it. Half the mean square of differences at a lag is
// sigma^2 (1 - rho); at the lags from 4 to 6 rho is taken to be 0. Pixels that
// hold the continuum tell: lines are correlated by themselves.
func (s *Scratch) noiseMemory(first int) float64 {
	t, e := &s.track, &s.red
	var square, pairs [2*noiseLags + 1]float64
	pull := func(i int) float64 { return (t.flux[i] - e.level[i]) * math.Sqrt(t.weight[i]) }
	for i := first; i < len(t.x); i++ {
		if !e.keep[i] || math.IsNaN(e.level[i]) {
			continue
		}
		r := pull(i)
		for k := 1; k <= min(2*noiseLags, i-first); k++ {
			if j := i - k; e.keep[j] && !math.IsNaN(e.level[j]) {
				d := r - pull(j)
				square[k] += d * d
				pairs[k]++
			}
		}
	}
	var near, far float64
	for k := 1; k <= noiseLags; k++ {
		if pairs[k] < memoryLeast || pairs[k+noiseLags] < memoryLeast {
			return 1
		}
		near += square[k] / pairs[k]
		far += square[k+noiseLags] / pairs[k+noiseLags]
	}
	if !(far > 0) {
		return 1
	}
	// Less what chance does: one standard error, from 2/n of a mean square of n
	// normal deviates.
	excess := 2*noiseLags*(1-near/far) - 2*noiseLags*math.Sqrt(2*2/(noiseLags*pairs[1]))
	return 1 + min(max(excess, 0), 2*noiseLags)
}
