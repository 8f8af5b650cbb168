package fitsread

import (
	"math"
	"sort"

	"duskline/spectrum"
)

// flatRun is the number of pixels in a row that only padding leaves equal, or
// smooth.
const flatRun = 5

// blankEnds takes the weight from padding at both ends: runs of five or more
// pixels of exactly equal flux whose errors are equal too, absent or zero; and,
// where the spectrum scatters as its errors say, runs that are smooth to a
// hundredth of their errors (padding that went through a flux calibration).
func blankEnds(seg *spectrum.Segment, hasErrors bool) {
	n := len(seg.Flux)
	flat := func(i, j int) bool {
		return seg.Flux[i] == seg.Flux[j] &&
			(!hasErrors || seg.Flux[i] == 0 || seg.Ivar[i] == 0 || seg.Ivar[j] == 0 || seg.Ivar[i] == seg.Ivar[j])
	}
	smooth := func(i int) bool { // pixel i against its neighbors
		d := 2*seg.Flux[i] - seg.Flux[i-1] - seg.Flux[i+1]
		return seg.Ivar[i] == 0 || d*d*seg.Ivar[i] < 1e-4
	}
	first, last := 1, n-1
	for first < n && flat(first-1, first) {
		first++
	}
	for last > 0 && flat(last-1, last) {
		last--
	}
	if hasErrors {
		i, j := 1, n-2
		for i+1 < n && smooth(i) {
			i++
		}
		for j > 0 && smooth(j) {
			j--
		}
		if (i >= flatRun || n-j-1 >= flatRun) && typicalRatio(seg) > 0.1 {
			first, last = max(first, i), min(last, j+1)
		}
	}
	if first >= flatRun {
		clear(seg.Ivar[:first])
	}
	if n-last >= flatRun {
		clear(seg.Ivar[last:])
	}
}

// typicalRatio is the median of |2 f(i) - f(i-1) - f(i+1)| over its error.
func typicalRatio(seg *spectrum.Segment) float64 {
	var q []float64
	for i := 1; i+1 < len(seg.Flux); i++ {
		if w := seg.Ivar[i]; w > 0 {
			if r := math.Abs(2*seg.Flux[i]-seg.Flux[i-1]-seg.Flux[i+1]) * math.Sqrt(w); r-r == 0 {
				q = append(q, r)
			}
		}
	}
	return medianOf(q)
}

// applyMask takes the weight from pixels that flags call bad.
//
// Flags whose meaning is standard always count: "good" columns and logicals, IVOA
// Quality, and bits that the header declares to be serious. Other integers with
// many bits flag much that is harmless; they count only where the errors do not
// mark bad pixels themselves (marksBad), and not where they would take more than
// half of the pixels that are left.
func applyMask(ivar, flags []float64, m maskPlan, marksBad bool) {
	if !m.counts(ivar, flags, marksBad) {
		return
	}
	for i, v := range flags {
		if m.isBad(v) {
			ivar[i] = 0
		}
	}
}

func (m maskPlan) isBad(v float64) bool {
	switch {
	case v != v:
		return true // null flag
	case m.role == roleGood:
		return v == 0
	case m.bits != 0:
		return int64(v)&m.bits != 0
	}
	return v != 0
}

// counts reports whether a mask is to be applied.
func (m maskPlan) counts(ivar, flags []float64, marksBad bool) bool {
	binary := true
	left, lost := 0, 0
	for i, v := range flags {
		if v != 0 && v != 1 && v == v {
			binary = false
		}
		if ivar[i] > 0 {
			left++
			if m.isBad(v) {
				lost++
			}
		}
	}
	standard := m.stated || m.role == roleGood || m.bits != 0 || m.role == roleQuality && binary || m.isIVOA()
	return (standard || !marksBad && 2*lost <= left) && (m.stated || lost < left)
}

// isIVOA reports a column that is the data model's quality by utype, UCD or name.
func (m maskPlan) isIVOA() bool {
	c := m.at.col
	if c == nil || m.role != roleQuality {
		return false
	}
	r, _ := roleOfUCD(c.utype, c.ucd)
	return r == roleQuality || bare(c.name) == "quality"
}

// sigmaToFWHM is 2 sqrt(2 ln 2).
const sigmaToFWHM = 2.3548200450309493

// resolvingPower turns what the file says about the resolution into R = lambda /
// FWHM per pixel. Values that are missing take the nearest good one; nil when
// none is good.
func resolvingPower(seg *spectrum.Segment, v []float64, a *arm) []float64 {
	n := len(seg.Wave)
	if v == nil {
		switch {
		case a.power > 0:
			return []float64{a.power}
		case len(a.powers) == 0:
			return nil
		}
		v = make([]float64, n)
		for i, w := range seg.Wave {
			v[i] = between(a.powers, w)
		}
		return v
	}
	kind, scale := a.resolutionUnit(v)
	good := false
	for i, x := range v {
		r := x
		switch kind {
		case roleFWHM:
			r = seg.Wave[i] / (x * scale)
		case roleDisp:
			lo, hi := max(i-1, 0), min(i+1, n-1)
			pixel := (seg.Wave[hi] - seg.Wave[lo]) / float64(hi-lo)
			r = seg.Wave[i] / (sigmaToFWHM * x * pixel)
		}
		if !(x > 0 && r > 1 && r < 1e7) {
			r = 0
		}
		v[i] = r
		good = good || r > 0
	}
	if !good {
		return nil
	}
	last := 0.0
	for i := range v {
		if v[i] > 0 {
			last = v[i]
		} else {
			v[i] = last
		}
	}
	for i := n - 1; i >= 0; i-- {
		if v[i] > 0 {
			last = v[i]
		} else {
			v[i] = last
		}
	}
	return v
}

// isLength reports a column in a unit of wavelength, and the unit in Angstrom.
func (c *column) isLength() (scale float64, ok bool) {
	u, ok := parseUnit(c.unit)
	return u.factor / angstrom, ok && u.quantity == wavelength && u.scale == linear
}

// resolutionUnit settles whether the numbers of a resolution are powers or FWHM,
// and the unit of the latter in Angstrom: the column's own, else Angstrom. The data
// model's Data.SpectralAxis.Resolution is an FWHM in the unit of the spectral axis,
// while many columns of that utype hold lambda / FWHM; without a unit those with a
// median above 30 do (common practice, no source).
func (a *arm) resolutionUnit(v []float64) (kind role, scale float64) {
	c := a.resolution.col
	switch {
	case c == nil:
	case a.resRole == roleFWHM:
		if scale, ok := c.isLength(); ok {
			return roleFWHM, scale
		}
	case a.resRole == rolePower && modelPath(c.utype) == "data.spectralaxis.resolution" && medianPositive(v) < 30 && a.wave.unit.quantity == wavelength:
		return roleFWHM, a.wave.unit.factor / angstrom
	}
	return a.resRole, 1
}

// between interpolates linearly in pairs of increasing first number; beyond the
// ends the last value holds.
func between(pairs [][2]float64, x float64) float64 {
	k := sort.Search(len(pairs), func(i int) bool { return pairs[i][0] >= x })
	switch k {
	case 0:
		return pairs[0][1]
	case len(pairs):
		return pairs[k-1][1]
	}
	a, b := pairs[k-1], pairs[k]
	return a[1] + (x-a[0])/(b[0]-a[0])*(b[1]-a[1])
}

// ownResolution reads a resolution that has wavelengths of its own and returns it
// for the wavelengths of the segment, NaN where it says nothing.
func (f *File) ownResolution(a *arm, row int64, wave []float64) ([]float64, error) {
	x, err := f.array(a.powerWave, row)
	if err != nil {
		return nil, err
	}
	v, err := f.array(a.resolution, row)
	if err != nil {
		return nil, err
	}
	w := columnWave(a.powerWave.hdu, a.powerWave.col)
	w.unit.toAngstrom(x, math.NaN())
	var pairs [][2]float64
	for i := range min(len(x), len(v)) {
		if x[i] > 0 && v[i] > 0 && !math.IsInf(x[i], 0) && !math.IsInf(v[i], 0) {
			pairs = append(pairs, [2]float64{x[i], v[i]})
		}
	}
	sort.Slice(pairs, func(i, j int) bool { return pairs[i][0] < pairs[j][0] })
	if len(pairs) == 0 {
		return nil, nil
	}
	out := make([]float64, len(wave))
	for i, w := range wave {
		out[i] = between(pairs, w)
	}
	return out, nil
}

// kernelSigma reads an object's plane of line spread functions, a line an offset
// in pixels, and returns their sigma in pixels, from the second moment of what is
// positive; NaN where that is no width.
func (f *File) kernelSigma(p place, row int64) ([]float64, error) {
	n, offsets := p.hdu.axes[0], p.hdu.axes[1]
	if p.hdu.axes[2] == 1 {
		row = 0
	}
	v, err := f.imageLine(p.hdu, row*n*offsets, n*offsets)
	if err != nil {
		return nil, err
	}
	sigma := make([]float64, n)
	for i := range sigma {
		var sum, first, second float64
		for k := range offsets {
			if w := v[k*n+int64(i)]; w > 0 {
				x := float64(k)
				sum, first, second = sum+w, first+w*x, second+w*x*x
			}
		}
		mean := first / sum
		sigma[i] = math.Sqrt(second/sum - mean*mean)
	}
	return sigma, nil
}
