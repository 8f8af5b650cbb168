package spectrum

import (
	"math"
	"sort"
)

// Grid is a spectrum on pixels that are uniform in log10 wavelength: pixel i
// is centered at 10^(Start + i*Step) Angstrom. Ivar is the inverse variance,
// zero for pixels without data.
type Grid struct {
	Start float64 // log10 Angstrom of the center of pixel 0
	Step  float64 // dex a pixel
	Flux  []float64
	Ivar  []float64
	// Independent is the number of pixels with data that are independent:
	// rebinning to narrower pixels makes more pixels, not more data.
	Independent float64
}

// Len returns the number of pixels.
func (g *Grid) Len() int { return len(g.Flux) }

// LogWave returns log10 of the wavelength of pixel i.
func (g *Grid) LogWave(i int) float64 { return g.Start + float64(i)*g.Step }

// Good returns the number of pixels with data and the first and last of them.
// Without any it returns 0, 0, -1.
func (g *Grid) Good() (n, first, last int) {
	first, last = 0, -1
	for i, w := range g.Ivar {
		if w > 0 {
			if n == 0 {
				first = i
			}
			last = i
			n++
		}
	}
	return n, first, last
}

// Gridder lays spectra on a logarithmic grid. It keeps its buffers from one
// spectrum to the next and is not safe for concurrent use.
type Gridder struct {
	// Step is the pixel in dex.
	Step float64
	// MinWave and MaxWave bound the grid in Angstrom.
	MinWave, MaxWave float64

	length, info, flux, count []float64 // sums of one segment
	share                     []float64 // input pixels in each grid pixel
}

// Grid writes s onto g, reusing the slices of g.
//
// A single segment that is uniform in log10 with the step of the gridder keeps
// its own pixels and phase: nothing is resampled. Every other segment is
// rebinned: a pixel's flux is the mean over the length that good input pixels
// cover, which conserves flux, and its inverse variance is
//
//	L^2 / sum_i(l_i d_i / w_i)
//
// with l_i the overlap with input pixel i of width d_i and weight w_i and
// L = sum l_i, which conserves the summed information whether pixels get wider
// or narrower (the covariance of neighbors is folded into the variance). An
// input pixel ends half-way to its neighbors, beside a hole as far from its
// center on that side as on the other.
// Pixels that are covered by less than half weigh zero. Segments that overlap
// are joined by their inverse variances.
func (gr *Gridder) Grid(g *Grid, s *Spectrum) {
	lo, hi := math.Inf(1), math.Inf(-1)
	for k := range s.Segments {
		seg := &s.Segments[k]
		if n := seg.Len(); n > 0 && (seg.Wave[0] < gr.MinWave || seg.Wave[n-1] > gr.MaxWave) {
			s.Warn(CoverageCut, "wavelengths outside %g to %g Angstrom are not used", gr.MinWave, gr.MaxWave)
		}
		i, j := gr.span(seg)
		if i < j {
			lo = math.Min(lo, math.Log10(seg.Wave[i]))
			hi = math.Max(hi, math.Log10(seg.Wave[j-1]))
		}
	}
	g.Step, g.Independent = gr.Step, 0
	if !(hi > lo) {
		g.Start, g.Flux, g.Ivar = 0, g.Flux[:0], g.Ivar[:0]
		return
	}
	g.Start = lo
	n := int(math.Round((hi-lo)/gr.Step)) + 1
	g.Flux, g.Ivar = resize(g.Flux, n), resize(g.Ivar, n)
	clear(g.Flux)
	clear(g.Ivar)
	if len(s.Segments) == 1 && gr.keepsPixels(&s.Segments[0]) {
		seg := &s.Segments[0]
		i, j := gr.span(seg)
		for p := i; p < j; p++ {
			if seg.Ivar[p] > 0 {
				q := int(math.Round((math.Log10(seg.Wave[p]) - lo) / gr.Step))
				g.Flux[q], g.Ivar[q] = seg.Flux[p], seg.Ivar[p]
				g.Independent++
			}
		}
		return
	}
	gr.share = resize(gr.share, n)
	clear(gr.share)
	for k := range s.Segments {
		gr.rebin(g, &s.Segments[k])
	}
	for i, w := range g.Ivar {
		if w > 0 {
			g.Flux[i] /= w
			g.Independent += math.Min(1, gr.share[i])
		}
	}
}

// span returns the half-open range of pixels of seg inside the wavelength
// bounds, with the outermost pixels without weight cut off.
func (gr *Gridder) span(seg *Segment) (int, int) {
	i := sort.SearchFloat64s(seg.Wave, gr.MinWave)
	j := sort.Search(len(seg.Wave), func(k int) bool { return seg.Wave[k] > gr.MaxWave })
	for i < j && seg.Ivar[i] == 0 {
		i++
	}
	for j > i && seg.Ivar[j-1] == 0 {
		j--
	}
	return i, j
}

// keepsPixels reports whether the pixels of seg lie on a grid of the gridder's
// step to a tenth of a pixel; pixels may be missing.
func (gr *Gridder) keepsPixels(seg *Segment) bool {
	i, j := gr.span(seg)
	if j-i < 2 {
		return false
	}
	l0 := math.Log10(seg.Wave[i])
	prev := -1
	for p := i; p < j; p++ {
		q := (math.Log10(seg.Wave[p]) - l0) / gr.Step
		r := math.Round(q)
		if math.Abs(q-r) > 0.1 || int(r) == prev {
			return false
		}
		prev = int(r)
	}
	// A coarser grid whose nodes happen to coincide is not this grid.
	return float64(prev+1) <= 1.5*float64(j-i)
}

func (gr *Gridder) rebin(g *Grid, seg *Segment) {
	n := g.Len()
	gr.length, gr.info, gr.flux = resize(gr.length, n), resize(gr.info, n), resize(gr.flux, n)
	gr.count = resize(gr.count, n)
	clear(gr.count)
	clear(gr.length)
	clear(gr.info)
	clear(gr.flux)
	i0, i1 := gr.span(seg)
	m := len(seg.Wave)
	if m < 2 {
		return
	}
	for p := i0; p < i1; p++ {
		if seg.Ivar[p] == 0 {
			continue
		}
		// Edges half-way to the neighbors. A neighbor more than twice as far as
		// the other one stands across a hole: the pixel does not reach into it.
		below, above := math.Inf(1), math.Inf(1)
		if p > 0 {
			below = seg.Wave[p] - seg.Wave[p-1]
		}
		if p < m-1 {
			above = seg.Wave[p+1] - seg.Wave[p]
		}
		if below > 2*above {
			below = above
		}
		if above > 2*below {
			above = below
		}
		left, right := seg.Wave[p]-0.5*below, seg.Wave[p]+0.5*above
		if left <= 0 {
			left = 0.5 * seg.Wave[p]
		}
		a := (math.Log10(left)-g.Start)/g.Step + 0.5
		b := (math.Log10(right)-g.Start)/g.Step + 0.5
		d := b - a
		first, last := max(0, int(math.Floor(a))), min(n-1, int(math.Floor(b)))
		for q := first; q <= last; q++ {
			l := math.Min(b, float64(q+1)) - math.Max(a, float64(q))
			if l <= 0 {
				continue
			}
			gr.length[q] += l
			gr.count[q] += l / d
			gr.flux[q] += l * seg.Flux[p]
			gr.info[q] += l * d / seg.Ivar[p]
		}
	}
	for q, l := range gr.length {
		if l < 0.5 {
			continue
		}
		w := l * l / gr.info[q]
		gr.share[q] += gr.count[q]
		g.Flux[q] += w * gr.flux[q] / l
		g.Ivar[q] += w
	}
}

func resize(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}

// RescaleArms brings overlapping segments to one flux level: where two
// neighbors share at least minShared pixels of signal, the later one is
// multiplied by the ratio of their summed fluxes over the shared range when
// that ratio differs from 1 by more than 2 percent and by more than 3 sigma.
// It works on copies of the fluxes and warns with ArmsRescaled when it changed
// any.
func (s *Spectrum) RescaleArms(minShared int) {
	for k := 1; k < len(s.Segments); k++ {
		a, b := &s.Segments[k-1], &s.Segments[k]
		if a.Len() == 0 || b.Len() == 0 {
			continue
		}
		lo, hi := math.Max(a.Wave[0], b.Wave[0]), math.Min(a.Wave[a.Len()-1], b.Wave[b.Len()-1])
		fa, va, na := a.meanIn(lo, hi)
		fb, vb, nb := b.meanIn(lo, hi)
		if na < minShared || nb < minShared || !(fa > 0) || !(fb > 0) || fa*fa < 100*va || fb*fb < 100*vb {
			continue
		}
		ratio := fa / fb
		sigma := ratio * math.Sqrt(va/(fa*fa)+vb/(fb*fb))
		if math.Abs(ratio-1) < 0.02 || math.Abs(ratio-1) < 3*sigma || ratio > 5 || ratio < 0.2 {
			continue
		}
		flux, ivar := make([]float64, b.Len()), make([]float64, b.Len())
		for i := range flux {
			flux[i], ivar[i] = b.Flux[i]*ratio, b.Ivar[i]/(ratio*ratio)
		}
		b.Flux, b.Ivar = flux, ivar
		s.Warn(ArmsRescaled, "arm %d multiplied by %.3f to meet arm %d where they overlap", k+1, ratio, k)
	}
}

// meanIn returns the mean flux of good pixels between lo and hi with its
// variance and the number of pixels.
func (s *Segment) meanIn(lo, hi float64) (mean, variance float64, n int) {
	for i := sort.SearchFloat64s(s.Wave, lo); i < s.Len() && s.Wave[i] <= hi; i++ {
		if s.Ivar[i] > 0 {
			mean += s.Flux[i]
			variance += 1 / s.Ivar[i]
			n++
		}
	}
	if n > 0 {
		mean /= float64(n)
		variance /= float64(n) * float64(n)
	}
	return mean, variance, n
}
