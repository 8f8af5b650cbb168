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
	binFrom     = 9  // widths from this rung on are filtered on binned pixels
	binFactor   = 4
)

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
	source   [2][2][]float64 // kind, num/den
	binned   [2][2][]float64
	tmp      []float64
}

func (r *responses) reset(l *level) {
	r.have = [ladderSize][2]bool{}
	for kind := 0; kind < 2; kind++ {
		for q := 0; q < 2; q++ {
			r.source[kind][q] = grow(r.source[kind][q], l.n)
		}
	}
	for i := 0; i < l.n; i++ {
		w, c := l.weight[i], l.cont[i]
		wr := w * l.resid[i]
		r.source[0][0][i], r.source[0][1][i] = wr, w
		r.source[1][0][i], r.source[1][1][i] = -wr*c, w*c*c
	}
	nb := (l.n + binFactor - 1) / binFactor
	for kind := 0; kind < 2; kind++ {
		for q := 0; q < 2; q++ {
			b := grow(r.binned[kind][q], nb)
			clear(b)
			for i, v := range r.source[kind][q] {
				b[i/binFactor] += v
			}
			r.binned[kind][q] = b
		}
	}
}

// get returns the responses of a rung and kind, made at first use.
func (r *responses) get(k, kind int) (num, den []float64) {
	if !r.have[k][kind] {
		n := len(r.source[kind][0])
		r.num[k][kind], r.den[k][kind] = grow(r.num[k][kind], n), grow(r.den[k][kind], n)
		sigma := rungSigma(k)
		if k < binFrom {
			r.filter(r.num[k][kind], r.source[kind][0], sigma)
			r.filter(r.den[k][kind], r.source[kind][1], sigma/math.Sqrt2)
		} else {
			r.filterBinned(r.num[k][kind], r.binned[kind][0], sigma)
			r.filterBinned(r.den[k][kind], r.binned[kind][1], sigma/math.Sqrt2)
		}
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
// their centers.
func (r *responses) filterBinned(dst, src []float64, sigma float64) {
	r.tmp = grow(r.tmp, len(src))
	r.filter(r.tmp, src, sigma/binFactor)
	last := len(src) - 1
	for i := range dst {
		p := (float64(i)+0.5)/binFactor - 0.5
		j := max(0, min(last-1, int(math.Floor(p))))
		if last == 0 {
			dst[i] = r.tmp[0]
			continue
		}
		u := max(0, min(1, p-float64(j)))
		dst[i] = (1-u)*r.tmp[j] + u*r.tmp[j+1]
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
			s.addDrops()
		}
		if len(comp.terms) == 0 {
			continue
		}
		clear(s.num)
		clear(s.den)
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
			s.gather(s.num, num, int(math.Round(p))+kmin, t.amp)
			s.gather(s.den, den, int(math.Round(p))+kmin, t.amp*t.amp*surv[k])
			// Cross terms with overlapping lines of the component: the product
			// of two equal Gaussians is one between them.
			for j := i + 1; j < len(comp.terms); j++ {
				u := &comp.terms[j]
				d := (u.logWave - t.logWave) / l.step
				x := math.Exp(-0.25 * d * d / (sp * sp))
				if x < 0.02 {
					continue
				}
				s.gather(s.den, den, int(math.Round(p+0.5*d))+kmin, 2*t.amp*u.amp*x*surv[k])
			}
		}
		s.addDrops()
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

// addDrops adds what the component at hand takes off chi^2 at each lag.
func (s *scanner) addDrops() {
	for i, v := range s.num {
		if v > 0 && s.den[i] > 0 {
			s.drop[i] += v * v / s.den[i]
		}
	}
}

// gather adds amp*resp[p+j] to dst[j] for all j where p+j is inside resp.
func (s *scanner) gather(dst, resp []float64, p int, amp float64) {
	lo, hi := max(0, -p), min(len(dst), len(resp)-p)
	if lo < hi {
		floats.AddScaled(dst[lo:hi], amp, resp[p+lo:p+hi])
	}
}
