package pipeline

import (
	"math"

	"duskline/redshift"
)

// equalError is the least error, as a fraction of the continuum, that a pixel of
// an object has in a composite: brighter objects count alike, so that none of
// them becomes the composite.
const equalError = 0.05

// The rest-frame grid of composites.
var stackFirst, stackPixels = func() (float64, int) {
	first, last := redshift.CompositeRange()
	start := math.Round(math.Log10(first)/redshift.CompositeStep) * redshift.CompositeStep
	return start, int((math.Log10(last) - start) / redshift.CompositeStep)
}()

// shift brings the grid to rest: a pixel is shared between the two pixels of
// the composite that it covers. A pixel that is covered by less than half says
// nothing.
func (r *restSpectrum) shift(by float64) {
	r.flux, r.weight, r.cover = resized(r.flux, stackPixels), resized(r.weight, stackPixels), resized(r.cover, stackPixels)
	clear(r.flux)
	clear(r.weight)
	clear(r.cover)
	ratio := r.grid.Step / redshift.CompositeStep // at most 1
	r.lo, r.hi = stackPixels, 0
	for i, w := range r.grid.Ivar {
		if !(w > 0) {
			continue
		}
		p := (r.grid.LogWave(i) - by - stackFirst) / redshift.CompositeStep
		j := int(math.Floor(p))
		if j < 0 || j+1 >= stackPixels {
			continue
		}
		w = 1 / (1/w + equalError*equalError)
		u := p - float64(j)
		for k, share := range [2]float64{1 - u, u} {
			r.flux[j+k] += share * w * r.grid.Flux[i]
			r.weight[j+k] += share * w
			r.cover[j+k] += share * ratio
		}
		r.lo, r.hi = min(r.lo, j), max(r.hi, j+2)
	}
	for j := r.lo; j < r.hi; j++ {
		if r.cover[j] < 0.5 {
			r.flux[j], r.weight[j] = 0, 0
			continue
		}
		r.flux[j] /= r.weight[j]
	}
}

// stackSums holds the sums over objects for each rest-frame pixel.
type stackSums struct {
	w, wf, wff    []float64 // of weight, times flux, times its square
	v, vf, vff    []float64 // the same of the squared weight
	n             []int32
	mean, scatter []float64 // of the round before, nil in the first
	clip          float64
	seen, clipped int64
}

func newStackSums() *stackSums {
	s := &stackSums{n: make([]int32, stackPixels)}
	for _, p := range []*[]float64{&s.w, &s.wf, &s.wff, &s.v, &s.vf, &s.vff} {
		*p = make([]float64, stackPixels)
	}
	return s
}

// reference sets what pixels are held against.
func (s *stackSums) reference(before *stackSums, clip float64) {
	s.mean, s.scatter, s.clip = make([]float64, stackPixels), make([]float64, stackPixels), clip
	for j := range s.mean {
		s.mean[j], s.scatter[j] = before.at(j)
	}
}

// at returns the weighted mean and the weighted standard deviation of the
// objects about it.
func (s *stackSums) at(j int) (mean, scatter float64) {
	if s.w[j] == 0 {
		return math.NaN(), math.NaN()
	}
	mean = s.wf[j] / s.w[j]
	return mean, math.Sqrt(math.Max(0, s.wff[j]/s.w[j]-mean*mean))
}

// errorOf returns the standard error of the mean: that of the weights or that
// of the scatter, sqrt(sum w^2 (f-m)^2) / sum w, whichever is larger.
func (s *stackSums) errorOf(j int) float64 {
	m := s.wf[j] / s.w[j]
	spread := math.Max(0, s.vff[j]-2*m*s.vf[j]+m*m*s.v[j])
	return math.Max(1/math.Sqrt(s.w[j]), math.Sqrt(spread)/s.w[j])
}

// add adds an object.
func (s *stackSums) add(r *restSpectrum) {
	for j := r.lo; j < r.hi; j++ {
		w, f := r.weight[j], r.flux[j]
		if w <= 0 {
			continue
		}
		s.seen++
		if s.mean != nil && math.Abs(f-s.mean[j]) > s.clip*math.Sqrt(1/w+s.scatter[j]*s.scatter[j]) {
			s.clipped++
			continue
		}
		s.w[j] += w
		s.wf[j] += w * f
		s.wff[j] += w * f * f
		s.v[j] += w * w
		s.vf[j] += w * w * f
		s.vff[j] += w * w * f * f
		s.n[j]++
	}
}

// known reports whether a pixel has enough objects and little enough noise. The
// scatter does not count here: it is large where the features are.
func (s *stackSums) known(j, least int, most float64) bool {
	return int(s.n[j]) >= max(1, least) && s.w[j]*most*most >= 1
}

// trim returns the half-open range of pixels from the first to the last that
// is known.
func (s *stackSums) trim(least int, most float64) (first, last int) {
	first, last = stackPixels, 0
	for j := range s.n {
		if s.known(j, least, most) {
			first, last = min(first, j), j+1
		}
	}
	return first, last
}

// wave returns the rest wavelength of a pixel in Angstrom.
func (s *stackSums) wave(j int) float64 {
	return math.Pow(10, stackFirst+float64(j)*redshift.CompositeStep)
}
