package redshift

import (
	"math"
	"slices"

	"duskline/continuum"

	"gonum.org/v1/gonum/floats"
)

// The scan nominates trial redshifts. For a component made of Gaussians the
// matched-filter sums over all trial redshifts are gathers from one response
// array a width: on a log grid a redshift is a shift, so the numerator
// sum_l a_l R(i_l + k) for all lags k is one scaled vector addition a line
// (the sum over lines of Glazebrook, Offer & Deeley 1998's correlation, taken
// apart because templates made of lines are sparse). Components count as
// independent here; the joint fit judges the nominees.

// ladder of Gaussian widths in pixels for which responses are made; a line
// uses the nearest.
const (
	ladderFirst = 1.0
	ladderRatio = 1.3
	ladderSize  = 19 // up to 112 pixels
	binFrom     = 6  // widths from this rung on are filtered on pixels binned by two
	binMoreFrom = 9  // and from this on by four
)

// binning returns how many pixels are binned to filter at rung k.
func binning(k int) int {
	switch {
	case k >= binMoreFrom:
		return 4
	case k >= binFrom:
		return 2
	}
	return 1
}

func rung(sigmaPixels float64) int {
	k := int(math.Round(math.Log(sigmaPixels/ladderFirst) / math.Log(ladderRatio)))
	return max(0, min(ladderSize-1, k))
}

func rungSigma(k int) float64 { return ladderFirst * math.Pow(ladderRatio, float64(k)) }

// responses holds, for each rung and kind (0 emission, 1 absorption), the
// matched-filter numerator sum w r t and denominator sum w t^2 for a unit
// Gaussian centered on each pixel.
type responses struct {
	have     [ladderSize][2]bool
	num, den [ladderSize][2][]float64
	// source holds the sums to be filtered by kind, numerator or denominator,
	// and the power of two of the binning.
	source [2][2][3][]float64
	tmp    []float64
}

func (r *responses) reset(l *level) {
	r.have = [ladderSize][2]bool{}
	for kind := range r.source {
		for q := range r.source[kind] {
			r.source[kind][q][0] = grow(r.source[kind][q][0], l.n)
		}
	}
	for i := 0; i < l.n; i++ {
		w, c := l.weight[i], l.cont[i]
		wr := w * l.resid[i]
		r.source[0][0][0][i], r.source[0][1][0][i] = wr, w
		r.source[1][0][0][i], r.source[1][1][0][i] = -wr*c, w*c*c
	}
	for kind := range r.source {
		for q := range r.source[kind] {
			s := &r.source[kind][q]
			s[1] = halve(s[1], s[0])
			s[2] = halve(s[2], s[1])
		}
	}
}

// halve writes the sums of two neighbors each.
func halve(dst, src []float64) []float64 {
	dst = grow(dst, (len(src)+1)/2)
	for j := range len(src) / 2 {
		dst[j] = src[2*j] + src[2*j+1]
	}
	if len(src)%2 == 1 {
		dst[len(dst)-1] = src[len(src)-1]
	}
	return dst
}

// get returns the responses of a rung and kind, made at first use.
func (r *responses) get(k, kind int) (num, den []float64) {
	if !r.have[k][kind] {
		n := len(r.source[kind][0][0])
		r.num[k][kind], r.den[k][kind] = grow(r.num[k][kind], n), grow(r.den[k][kind], n)
		sigma := rungSigma(k)
		r.filterBinned(r.num[k][kind], &r.source[kind][0], sigma, binning(k))
		r.filterBinned(r.den[k][kind], &r.source[kind][1], sigma/math.Sqrt2, binning(k))
		r.have[k][kind] = true
	}
	return r.num[k][kind], r.den[k][kind]
}

// filter convolves src with a Gaussian of peak 1.
func (r *responses) filter(dst, src []float64, sigma float64) {
	n := len(src)
	half := int(math.Ceil(3.5 * sigma))
	copy(dst, src)
	for j := 1; j <= half && j < n; j++ {
		g := math.Exp(-0.5 * float64(j*j) / (sigma * sigma))
		floats.AddScaled(dst[j:], g, src[:n-j])
		floats.AddScaled(dst[:n-j], g, src[j:])
	}
}

// filterBinned does the same on binned sums and interpolates linearly between
// their centers; outside of these the outermost holds.
func (r *responses) filterBinned(dst []float64, source *[3][]float64, sigma float64, factor int) {
	if factor == 1 {
		r.filter(dst, source[0], sigma)
		return
	}
	src := source[factor/2]
	m, half := len(src), factor/2
	r.tmp = grow(r.tmp, m)
	r.filter(r.tmp, src, sigma/float64(factor))
	for i := range min(half, len(dst)) {
		dst[i] = r.tmp[0]
	}
	// Pixels from the center of bin j to that of the next.
	var share [4]float64
	for i := range factor {
		share[i] = (float64(i) + 0.5) / float64(factor)
	}
	end := (m-1)*factor + half
	for j := 0; j+1 < m; j++ {
		a, d := r.tmp[j], r.tmp[j+1]-r.tmp[j]
		lo := j*factor + half
		part := dst[lo:min(lo+factor, len(dst))]
		for i := range part {
			part[i] = a + share[i]*d
		}
	}
	for i := min(end, len(dst)); i < len(dst); i++ {
		dst[i] = r.tmp[m-1]
	}
}

// survival is the fraction of the square norm of a Gaussian of each rung that
// is left when a spline of the given knot spacing (pixels) is projected out,
// averaged over its phase to the knots.
func survival(spacing float64) [ladderSize]float64 {
	var out [ladderSize]float64
	const intervals = 9
	n := int(intervals * spacing)
	basis := continuum.NewBasis(0, float64(n-1), spacing)
	var normal continuum.Normal
	normal.Reset(basis.Size())
	for i := 0; i < n; i++ {
		j, v := basis.Eval(float64(i))
		normal.Add(j, &v, 1)
	}
	normal.Ridge(1e-12)
	if !normal.Factor() {
		panic("redshift: spline of a full grid is singular")
	}
	y := make([]float64, basis.Size())
	rhs := make([]float64, basis.Size())
	for k := range out {
		sigma, sum := rungSigma(k), 0.0
		const phases = 5
		for p := 0; p < phases; p++ {
			center := float64(n)/2 + spacing*float64(p)/phases
			clear(y)
			norm := 0.0
			for i := 0; i < n; i++ {
				u := (float64(i) - center) / sigma
				g := math.Exp(-0.5 * u * u)
				norm += g * g
				j, v := basis.Eval(float64(i))
				for a := range v {
					y[j+a] += g * v[a]
				}
			}
			copy(rhs, y)
			normal.Solve(y)
			sum += (1 - floats.Dot(y, rhs)/norm) / phases
		}
		out[k] = math.Max(0.02, sum)
	}
	return out
}

// scanner keeps the arrays of a scan.
type scanner struct {
	resp     responses
	num, den []float64
	drop     []float64
	order    []int
	dense    denseScan
}

// reset readies the scanner for a level.
func (s *scanner) reset(l *level) {
	s.resp.reset(l)
	s.dense.reset()
}

// nominate scans family f at one width over its redshift range and appends up
// to limit trial shifts, best first, at least apart pixels from each other.
func (s *scanner) nominate(dst []float64, l *level, f *Family, width float64, surv *[ladderSize]float64, limit, apart int) []float64 {
	kmin := int(math.Ceil(math.Log10(1+f.ZMin) / l.step))
	kmax := int(math.Floor(math.Log10(1+f.ZMax) / l.step))
	if first, last, ok := f.lineSpan(); ok {
		// Elsewhere no line falls on the spectrum.
		kmin = max(kmin, int(math.Floor((l.start-last)/l.step)))
		kmax = min(kmax, int(math.Ceil((l.start-first)/l.step))+l.n)
	}
	lags := max(0, kmax-kmin+1)
	s.num, s.den, s.drop = grow(s.num, lags), grow(s.den, lags), grow(s.drop, lags)
	clear(s.drop)
	for c := range f.components {
		comp := &f.components[c]
		if comp.stack != nil {
			s.dense.correlate(s.num, s.den, l, comp.stack, float64(kmin)*l.step)
			addDrops(s.drop, s.num, s.den)
		}
		// Lags at which a line of the component falls on the spectrum.
		lo, hi := comp.lags(l, kmin, lags)
		if lo >= hi {
			continue
		}
		sumNum, sumDen := s.num[lo:hi], s.den[lo:hi]
		clear(sumNum)
		clear(sumDen)
		kind := 0
		if comp.absorption {
			kind = 1
		}
		for i := range comp.terms {
			t := &comp.terms[i]
			sp := comp.sigmaKms(t, width) / (speedOfLight * ln10 * l.step)
			k := rung(sp)
			num, den := s.resp.get(k, kind)
			p := (t.logWave - l.start) / l.step
			at := int(math.Round(p)) + kmin + lo
			gather(sumNum, num, at, t.amp)
			gather(sumDen, den, at, t.amp*t.amp*surv[k])
			// Cross terms with overlapping lines of the component: the product
			// of two equal Gaussians is one between them.
			for j := i + 1; j < len(comp.terms); j++ {
				u := &comp.terms[j]
				d := (u.logWave - t.logWave) / l.step
				x := math.Exp(-0.25 * d * d / (sp * sp))
				if x < 0.02 {
					continue
				}
				gather(sumDen, den, int(math.Round(p+0.5*d))+kmin+lo, 2*t.amp*u.amp*x*surv[k])
			}
		}
		addDrops(s.drop[lo:hi], sumNum, sumDen)
	}
	s.order = s.order[:0]
	for i, v := range s.drop {
		if v > 4 && (i == 0 || v >= s.drop[i-1]) && (i == lags-1 || v > s.drop[i+1]) {
			s.order = append(s.order, i)
		}
	}
	slices.SortFunc(s.order, func(a, b int) int {
		switch {
		case s.drop[a] > s.drop[b]:
			return -1
		case s.drop[a] < s.drop[b]:
			return 1
		}
		return a - b
	})
	found := len(dst)
	for _, i := range s.order {
		shift := float64(i+kmin) * l.step
		near := slices.ContainsFunc(dst[found:], func(q float64) bool {
			return math.Abs(q-shift) < (float64(apart)-0.5)*l.step
		})
		if near {
			continue
		}
		dst = append(dst, shift)
		if len(dst)-found >= limit {
			break
		}
	}
	return dst
}

// lineSpan returns the log10 wavelengths of the bluest and the reddest line; ok is
// false for a family with a composite, which may reach further.
func (f *Family) lineSpan() (first, last float64, ok bool) {
	first, last = math.Inf(1), math.Inf(-1)
	for i := range f.components {
		if f.components[i].stack != nil {
			return 0, 0, false
		}
		for j := range f.components[i].terms {
			w := f.components[i].terms[j].logWave
			first, last = math.Min(first, w), math.Max(last, w)
		}
	}
	return first, last, last >= first
}

// lags returns the range of lags from kmin, n of them, at which one of the lines
// falls on the level; empty for a component without lines.
func (c *component) lags(l *level, kmin, n int) (lo, hi int) {
	if len(c.terms) == 0 {
		return 0, 0
	}
	lo, hi = n, 0
	for i := range c.terms {
		p := int(math.Round((c.terms[i].logWave-l.start)/l.step)) + kmin
		lo, hi = min(lo, -p), max(hi, l.n-p)
	}
	return max(0, lo), min(n, hi)
}

// addDrops adds what a component takes off chi^2 at each lag: the matched filter
// num^2/den where num is positive.
func addDrops(drop, num, den []float64) {
	num, den = num[:len(drop)], den[:len(drop)]
	for i, v := range num {
		if d := den[i]; v > 0 && d > 0 {
			drop[i] += v * v / d
		}
	}
}

// gather adds amp*resp[p+j] to dst[j] for all j where p+j is inside resp.
func gather(dst, resp []float64, p int, amp float64) {
	lo, hi := max(0, -p), min(len(dst), len(resp)-p)
	if lo < hi {
		floats.AddScaled(dst[lo:hi], amp, resp[p+lo:p+hi])
	}
}
