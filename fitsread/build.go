package fitsread

import (
	"fmt"
	"math"
	"sort"

	"duskline/spectrum"
)

// segment reads one arm of one spectrum and brings it to the Segment contract.
// Doubts are added to s.
func (f *File) segment(s *spectrum.Spectrum, a *arm, row int64) (spectrum.Segment, error) {
	arr, err := f.arrays(a, row)
	if err != nil {
		return spectrum.Segment{}, err
	}
	wave, uniform, err := f.wavelengths(s, a, row, arr.wave, len(arr.flux))
	if err != nil {
		return spectrum.Segment{}, err
	}
	fail := func(format string, args ...any) error {
		col := ""
		if a.flux.col != nil {
			col = a.flux.col.name
		}
		return fault(ErrBadData, a.flux.hdu.index, "check the file, or write a layout for it", format, args...).at(col, int(row))
	}
	seg := spectrum.Segment{Name: a.name, Wave: wave, Flux: arr.flux}
	if len(wave) != len(seg.Flux) {
		return seg, fail("%d wavelengths for %d fluxes", len(wave), len(seg.Flux))
	}
	hasErrors := false
	role := a.weightRole
	if arr.weight != nil {
		if len(arr.weight) != len(seg.Flux) {
			return seg, fail("%d weights for %d fluxes", len(arr.weight), len(seg.Flux))
		}
		if role == roleWeight {
			role, _ = weightByScatter(medianPositive(arr.weight), scatter(seg.Flux))
			s.Warn(spectrum.LayoutAssumed, "%s was taken for %s by its numbers", a.weight, weightName(role))
		}
		// Sigmas or variances of zero throughout say nothing; an inverse variance
		// of zero throughout says that there is no data.
		hasErrors = role == roleIvar || !allZero(arr.weight)
		if hasErrors {
			loseErrors(s, a, role, arr.flux, arr.weight)
		}
		toIvar(arr.weight, role)
		seg.Ivar = arr.weight
	}
	if !hasErrors {
		seg.Ivar = ones(seg.Ivar, len(seg.Flux))
	}
	s.Pixels += len(seg.Flux)
	unlit := 0
	for i, v := range seg.Flux {
		if v-v != 0 { // NaN or infinite
			seg.Ivar[i], seg.Flux[i] = 0, 0
			unlit++
		}
	}
	s.Lose("flux NaN or infinite", a.flux.String(), unlit)
	lost := losses{s, seg.Good()}
	marksBad := hasErrors && (role == roleIvar || hasZero(seg.Ivar))
	for k, m := range a.masks {
		if len(arr.masks[k]) != len(seg.Flux) {
			return seg, fail("%d flags for %d fluxes", len(arr.masks[k]), len(seg.Flux))
		}
		applyMask(seg.Ivar, arr.masks[k], m, marksBad)
		lost.since(&seg, "masked", m.at.String())
	}
	if n, ok := f.number(a.points, row); ok && n > 0 && n < float64(len(seg.Flux)) {
		for i := int(n); i < len(seg.Flux); i++ {
			seg.Ivar[i] = 0
		}
		lost.since(&seg, "beyond the stated number of pixels", a.points.String())
	}
	resolution := arr.resolution
	if a.kernel.isSet() {
		if resolution, err = f.kernelSigma(a.kernel, row); err != nil {
			return seg, err
		}
	}
	if a.powerWave.isSet() {
		if resolution, err = f.ownResolution(a, row, wave); err != nil {
			return seg, err
		}
	}
	if len(resolution) != len(seg.Flux) {
		resolution = nil
	}
	dropped, reordered := order(&seg, &resolution)
	lost.since(&seg, "wavelength impossible, repeated or out of order", a.wave.String())
	switch {
	case reordered:
		s.Warn(spectrum.PixelsDropped, "wavelengths out of order were sorted and %d pixels dropped", dropped)
	case dropped > 0:
		s.Warn(spectrum.PixelsDropped, "%d pixels with repeated, unordered or impossible wavelengths were dropped", dropped)
	}
	if len(seg.Wave) < 2 {
		return seg, noWavelengths(a, wave, row)
	}
	if n, largest := dropFarOff(&seg); n > 0 {
		s.Warn(spectrum.ValuesDropped, "the flux of %d pixels, up to %.2g, is more than %.0e times that of the others and not used", n, largest, farOff)
		lost.since(&seg, "flux impossibly far from the others", a.flux.String())
	}
	seg.LogUniform = uniform && dropped == 0 || isLogUniform(seg.Wave)
	if v, ok := sameFlux(&seg); ok {
		clear(seg.Ivar)
		lost.since(&seg, fmt.Sprintf("flux the same everywhere, %.6g", v), a.flux.String())
	}
	blankEnds(&seg, hasErrors)
	lost.since(&seg, "padding of constant flux at the ends", a.flux.String())
	if !hasErrors {
		estimateIvar(seg.Flux, seg.Ivar)
		lost.since(&seg, "no errors given and no scatter to estimate them from", a.flux.String())
		none := "the input has no errors"
		if a.weight.isSet() {
			none = fmt.Sprintf("the errors in %s are all zero", a.weight)
		}
		s.Warn(spectrum.NoiseEstimated, "%s; noise estimated from the scatter of the flux", none)
	} else if ratio, ok := scatterRatio(seg.Flux, seg.Ivar); ok {
		s.Warn(spectrum.WeightsSuspect, "the flux scatters by %.2g times its stated errors", ratio)
	}
	seg.Resolution = resolvingPower(&seg, resolution, a)
	if err := seg.Check(); err != nil {
		return seg, fail("%v", err)
	}
	return seg, nil
}

// rawArrays are the numbers of one arm as they stand in the file.
type rawArrays struct {
	wave, flux, weight, upper, resolution []float64
	masks                                 [][]float64
}

// arrays reads all arrays of an arm; columns of one table in a single pass.
func (f *File) arrays(a *arm, row int64) (rawArrays, error) {
	var arr rawArrays
	arr.masks = make([][]float64, len(a.masks))
	type want struct {
		at place
		to *[]float64
	}
	wants := []want{{a.flux, &arr.flux}, {a.weight, &arr.weight}, {a.upper, &arr.upper}}
	if !a.powerWave.isSet() {
		wants = append(wants, want{a.resolution, &arr.resolution})
	}
	if a.wave.fixed == nil {
		wants = append(wants, want{a.wave.values, &arr.wave})
	}
	for k := range a.masks {
		wants = append(wants, want{a.masks[k].at, &arr.masks[k]})
	}
	var cols []*column
	var to []*[]float64
	for _, w := range wants {
		switch {
		case !w.at.isSet():
		case w.at.col != nil && !w.at.col.isVector() && w.at.hdu == a.flux.hdu:
			cols, to = append(cols, w.at.col), append(to, w.to)
		default:
			v, err := f.array(w.at, row)
			if err != nil {
				return arr, err
			}
			*w.to = v
		}
	}
	if len(cols) > 0 {
		v, err := f.scalarColumns(a.flux.hdu, cols)
		if err != nil {
			return arr, err
		}
		for k := range to {
			*to[k] = v[k]
		}
	}
	if len(arr.upper) == len(arr.weight) {
		meanError(arr.weight, arr.upper)
	}
	return arr, nil
}

// meanError makes one error of the lower and the upper one, in place: their mean,
// or the one that is there. Lower errors may be written with a minus.
func meanError(low, high []float64) {
	for i := range low {
		a, b := math.Abs(low[i]), math.Abs(high[i])
		switch {
		case !(a > 0):
			a = b
		case !(b > 0):
			b = a
		}
		low[i] = (a + b) / 2
	}
}

// wavelengths returns an arm's wavelengths in Angstrom and whether they are
// uniform in log10 by their definition.
func (f *File) wavelengths(s *spectrum.Spectrum, a *arm, row int64, v []float64, n int) (wave []float64, uniform bool, err error) {
	w := &a.wave
	unit, rest := w.unit, math.NaN()
	switch {
	case w.fixed != nil:
		v = append([]float64(nil), w.fixed...)
	case w.axis != nil:
		var inMeters bool
		v, inMeters = w.axis.wavelengths(n)
		if inMeters {
			unit = spectralUnit{wavelength, 1, linear}
		}
		rest = w.axis.rest
		uniform = unit.scale != linear || w.axis.algorithm == "LOG" && unit.quantity == wavelength
	case w.start.isSet():
		start, ok1 := f.number(w.start, row)
		step, ok2 := f.number(w.step, row)
		if !ok1 || !ok2 || step == 0 {
			return nil, false, fault(ErrBadData, w.start.hdu.index, "check the file", "start or step of the wavelengths is missing").at("", int(row))
		}
		v = make([]float64, n)
		for i := range v {
			v[i] = start + step*float64(i)
		}
		uniform = unit.scale != linear
	}
	if !w.unitKnown {
		lo, hi := extent(v)
		var name string
		if unit, name = guessUnit(lo, hi); w.unit.quantity != wavelength {
			return nil, false, fault(ErrBadData, a.flux.hdu.index, "write a layout that gives the unit", "the spectral axis is no wavelength and has no unit")
		}
		s.Warn(spectrum.UnitAssumed, "wavelength unit not stated; %s assumed", name)
	}
	unit.toAngstrom(v, rest)
	return v, uniform, nil
}

// extent returns the smallest and largest positive finite value, 0 and 0 for none.
func extent(v []float64) (lo, hi float64) {
	for _, x := range v {
		if !(x > 0) || math.IsInf(x, 0) {
			continue
		}
		if lo == 0 || x < lo {
			lo = x
		}
		hi = math.Max(hi, x)
	}
	return lo, hi
}

// toIvar turns stated errors into inverse variances in place; what is no error,
// such as zero, NaN or a negative sigma, gets weight zero.
func toIvar(v []float64, r role) {
	for i, x := range v {
		if x > 0 {
			switch r {
			case roleSigma:
				x = 1 / (x * x)
			case roleVariance:
				x = 1 / x
			}
		}
		if !(x > 0) || math.IsInf(x, 0) {
			x = 0
		}
		v[i] = x
	}
}

func allZero(v []float64) bool {
	for _, x := range v {
		if x != 0 {
			return false
		}
	}
	return true
}

func weightName(r role) string {
	switch r {
	case roleSigma:
		return "sigma"
	case roleVariance:
		return "variance"
	case roleIvar:
		return "inverse variance"
	}
	return "weight"
}

func ones(v []float64, n int) []float64 {
	if v == nil {
		v = make([]float64, n)
	}
	for i := range v {
		v[i] = 1
	}
	return v
}

func hasZero(v []float64) bool {
	for _, x := range v {
		if x == 0 {
			return true
		}
	}
	return false
}

// order makes the wavelengths strictly increasing: it turns a decreasing axis
// round and drops pixels whose wavelength is not positive and finite or does not
// increase. Where that would cost more than a tenth of the pixels it sorts first.
// Padding, pixels without wavelength and without weight, is not counted as dropped.
func order(seg *spectrum.Segment, resolution *[]float64) (dropped int, reordered bool) {
	n := len(seg.Wave)
	usable := func(w float64) bool { return w > 0 && !math.IsInf(w, 0) }
	up, down, last := 0, 0, 0.0
	inOrder := true
	for _, w := range seg.Wave {
		if !usable(w) {
			inOrder = false
			continue
		}
		switch {
		case last == 0:
		case w > last:
			up++
		default:
			inOrder = false
			if w < last {
				down++
			}
		}
		last = w
	}
	if inOrder {
		return 0, false
	}
	index := make([]int, 0, n)
	for i, w := range seg.Wave {
		if usable(w) {
			index = append(index, i)
		} else if seg.Ivar[i] > 0 && seg.Flux[i] != 0 {
			dropped++
		}
	}
	if down > up {
		for i, j := 0, len(index)-1; i < j; i, j = i+1, j-1 {
			index[i], index[j] = index[j], index[i]
		}
		down = up
	}
	keep := increasing(seg.Wave, index)
	if len(index)-len(keep) > len(index)/10 && down > 0 {
		sort.SliceStable(index, func(a, b int) bool { return seg.Wave[index[a]] < seg.Wave[index[b]] })
		keep, reordered = increasing(seg.Wave, index), true
	}
	dropped += len(index) - len(keep)
	for _, p := range []*[]float64{&seg.Wave, &seg.Flux, &seg.Ivar, resolution} {
		if *p == nil {
			continue
		}
		out := make([]float64, len(keep))
		for k, i := range keep {
			out[k] = (*p)[i]
		}
		*p = out
	}
	return dropped, reordered
}

// increasing keeps of index those whose wavelength exceeds all before. A single
// pixel far above both neighbors is left out rather than all after it.
func increasing(wave []float64, index []int) []int {
	keep := make([]int, 0, len(index))
	last := 0.0
	for k, i := range index {
		w := wave[i]
		if w <= last {
			continue
		}
		if k+2 < len(index) && w > wave[index[k+1]] && wave[index[k+1]] > last && wave[index[k+2]] > wave[index[k+1]] && w > wave[index[k+2]] {
			continue
		}
		keep = append(keep, i)
		last = w
	}
	return keep
}

// isLogUniform reports whether wavelengths are uniform in log10 to a twentieth
// of a pixel. Four-byte log10 wavelengths are, to a hundredth.
func isLogUniform(wave []float64) bool {
	n := len(wave)
	if n < 3 {
		return false
	}
	first := math.Log10(wave[0])
	step := (math.Log10(wave[n-1]) - first) / float64(n-1)
	for i, w := range wave {
		if math.Abs(math.Log10(w)-first-step*float64(i)) > 0.05*step {
			return false
		}
	}
	return true
}

// coverage names the range of wavelengths for people.
func coverage(segs []spectrum.Segment) string {
	lo, hi := math.Inf(1), 0.0
	for i := range segs {
		lo = math.Min(lo, segs[i].Wave[0])
		hi = math.Max(hi, segs[i].Wave[segs[i].Len()-1])
	}
	return fmt.Sprintf("%.0f-%.0f Angstrom", lo, hi)
}
