package lines

import (
	"math"

	"duskline/spectrum"
)

// layWindows collects the pixels around the lines of the blend, on every arm.
// Windows of one arm that touch become one. A window reaches 8 sigma of the
// line (6 of a broad one), and never less than Options.WindowKms or 12 pixels.
func (s *Scratch) layWindows() {
	q := &s.prob
	q.windows = q.windows[:0]
	q.narms = len(s.arms)
	q.dsig = resize(q.dsig, len(q.comps)*q.narms)
	for ci := range q.comps {
		c := &q.comps[ci]
		e := &q.ties[c.tie]
		t := &s.tracks[c.track]
		times := 8.0
		if e.broad {
			times = 6
		}
		half := max(s.opt.WindowKms, times*e.s, 12*t.pix)
		if e.stark {
			half = min(half, starkWindow*s.nextHydrogen(t))
		}
		mu := c.lam0 * (1 + e.v/spectrum.SpeedOfLight)
		d := c.lam0 * half / spectrum.SpeedOfLight
		for k := range s.arms {
			a := &s.arms[k]
			n := len(a.Wave)
			if n < 2 || mu < a.Wave[0] || mu > a.Wave[n-1] {
				continue
			}
			if r := a.sigmaKms(a.nearest(mu)); r > 0 && e.sres > 0 {
				q.dsig[ci*q.narms+k] = r*r - e.sres*e.sres
			}
			s.addWindow(k, a.index(mu-d), a.index(mu+d))
		}
	}
	q.lam, q.width, q.y, q.w, q.cont, q.count = q.lam[:0], q.width[:0], q.y[:0], q.w[:0], q.cont[:0], q.count[:0]
	for i := range q.windows {
		s.fillWindow(&q.windows[i])
	}
	n := len(q.lam)
	q.root, q.yroot, q.slope = resize(q.root, n), resize(q.yroot, n), resize(q.slope, n)
	for i := range q.windows {
		q.finish(&q.windows[i])
	}
}

// finish computes what the fit needs of the weights of a window.
func (q *problem) finish(w *window) {
	root, yroot, slope, y := q.root[w.lo:w.hi], q.yroot[w.lo:w.hi], q.slope[w.lo:w.hi], q.y[w.lo:w.hi]
	lam, inv := q.lam[w.lo:w.hi], 1/w.half
	w.line = [3]float64{}
	for i, v := range q.w[w.lo:w.hi] {
		r, x := math.Sqrt(v), (lam[i]-w.mid)*inv
		root[i], yroot[i], slope[i] = r, r*y[i], r*x
		w.line[0] += v
		w.line[1] += v * x
		w.line[2] += v * x * x
	}
}

// starkWindow is how far the window of a line of hydrogen with wide wings
// reaches, in distances of the next one: beyond the middle the neighbor rules.
const starkWindow = 0.5

// nextHydrogen returns the distance to the nearest other line of hydrogen, km/s.
func (s *Scratch) nextHydrogen(t *track) float64 {
	d := math.Inf(1)
	for i := range s.meter.lines {
		if l := &s.meter.lines[i]; l.ion == t.line.ion && i != t.index {
			d = min(d, spectrum.SpeedOfLight*math.Abs(l.Wave/t.line.Wave-1))
		}
	}
	return d
}

func (s *Scratch) addWindow(arm, lo, hi int) {
	q := &s.prob
	for i := range q.windows {
		w := &q.windows[i]
		if w.arm == arm && lo <= w.pixLimit && hi >= w.pix0 {
			w.pix0, w.pixLimit = min(w.pix0, lo), max(w.pixLimit, hi)
			return
		}
	}
	q.windows = append(q.windows, window{arm: arm, pix0: lo, pixLimit: hi})
}

// noiseSlack is the part of a pixel's noise that the straight line may always
// use. At a S/N of 3 a pixel, 0.3 makes the errors of a strong line of 12
// pixels up to 7 % too large: the prior tells what the pixels do not. 0.6
// leaves 3 %, 1 leaves 2 % but costs as much on faint broad lines.
const noiseSlack = 0.6

// fillWindow copies the pixels of a window, without weight where a line
// outside the blend stands, and sets the prior of its straight line.
func (s *Scratch) fillWindow(w *window) {
	q := &s.prob
	a := &s.arms[w.arm]
	w.lo = len(q.lam)
	var cont, contErr, weight, good float64
	s.markBins(w)
	for i := w.pix0; i < w.pixLimit; {
		n := s.binFrom(w, i)
		first := len(q.lam)
		s.addPixel(w.arm, i, i+n)
		if g := q.w[first]; g > 0 {
			cont += math.Abs(q.cont[first])
			weight += g
			good++
			if a.ContErr != nil {
				if ce := a.ContErr[i]; ce > 0 && !math.IsInf(ce, 0) {
					contErr += ce
				}
			}
		}
		i += n
	}
	w.hi = len(q.lam)
	if good == 0 {
		w.mid, w.half, w.prior = 0, 1, 0
		if w.hi > w.lo {
			w.mid = q.lam[w.lo]
		}
		return
	}
	w.mid = 0.5 * (q.lam[w.lo] + q.lam[w.hi-1])
	w.half = max(0.5*(q.lam[w.hi-1]-q.lam[w.lo]), 0.5*q.width[w.lo])
	w.prior = contErr / good
	if s.opt.ContinuumSlack > 0 {
		w.prior = math.Hypot(w.prior, math.Hypot(s.opt.ContinuumSlack*cont/good, noiseSlack/math.Sqrt(weight/good)))
	}
	s.maskOutsiders(w)
}

// maskOutsiders takes the weight from pixels within 2.5 sigma of a clearly
// seen line of another blend, unless they are as near to a line of this one.
func (s *Scratch) maskOutsiders(w *window) {
	q := &s.prob
	for i := range s.tracks {
		lo, hi, ok := s.outsider(i)
		if !ok || hi < q.lam[w.lo] || lo > q.lam[w.hi-1] {
			continue
		}
		for k := w.lo; k < w.hi; k++ {
			if q.lam[k] > lo && q.lam[k] < hi && !s.nearOwn(q.lam[k]) {
				q.w[k] = 0
			}
		}
	}
}

// partFrom is the S/N of the box from which a line in the corner of a bin spoils a fit. Common practice, no source.
const partFrom = 50.0

// partOutsiders lets no bin reach over the limits of what maskOutsiders takes for a strong
// narrow line: one whose middle is outside would have most of that line.
func (s *Scratch) partOutsiders(w *window) {
	a := &s.arms[w.arm]
	for i := range s.tracks {
		lo, hi, ok := s.outsider(i)
		if !ok || s.tracks[i].broad || math.Abs(s.tracks[i].snr) < partFrom || hi < a.Wave[w.pix0] || lo > a.Wave[w.pixLimit-1] {
			continue
		}
		// A bin of one pixel ends those beside it.
		for _, k := range [2]int{a.index(lo), a.index(hi) - 1} {
			if k >= w.pix0 && k < w.pixLimit {
				s.bins[k-w.pix0] = 1
			}
		}
	}
}

// outsider returns the wavelengths that a clearly seen line of another blend takes.
func (s *Scratch) outsider(i int) (lo, hi float64, ok bool) {
	t := &s.tracks[i]
	if !t.usable || math.Abs(t.snr) < 5 || s.root(i) == s.root(s.prob.comps[0].track) {
		return 0, 0, false
	}
	mu := t.lam0 * (1 + t.v/spectrum.SpeedOfLight)
	d := joinWithin * t.s * t.lam0 / spectrum.SpeedOfLight
	return mu - d, mu + d, true
}

// nearOwn reports whether a wavelength lies within 2.5 sigma of a line of the
// blend.
func (s *Scratch) nearOwn(lam float64) bool {
	q := &s.prob
	for i := range q.comps {
		c := &q.comps[i]
		e := &q.ties[c.tie]
		scale := c.lam0 / spectrum.SpeedOfLight
		if math.Abs(lam-c.lam0-scale*e.v) < joinWithin*scale*e.s {
			return true
		}
	}
	return false
}

// addPixel appends the pixels from i to j, of which all or none are good, as
// one: the mean over wavelength of flux and continuum, with the weight of that
// mean.
func (s *Scratch) addPixel(arm, i, j int) {
	q, a, o := &s.prob, &s.arms[arm], s.first[arm]
	var width, y, cont, variance, center float64
	for k := i; k < j; k++ {
		lo, hi := pixelEdges(a.Wave, k)
		d := hi - lo
		width += d
		center += d * 0.5 * (lo + hi)
		if c := a.Cont[k]; !math.IsNaN(c) && !math.IsInf(c, 0) {
			cont += d * c
		}
		if g := s.weight[o+k]; g > 0 {
			y += d * s.resid[o+k]
			variance += d * d / g
		}
	}
	weight := 0.0
	if variance > 0 {
		weight = width * width / variance
	}
	q.lam, q.width = append(q.lam, center/width), append(q.width, width)
	q.y, q.w, q.cont = append(q.y, y/width), append(q.w, weight), append(q.cont, cont/width)
	q.count = append(q.count, j-i)
}

const (
	// binSigma is how many bins a sigma keeps; the fit then loses less than
	// 1 % of the information, and profiles are averaged over the bins.
	binSigma = 4.0
	// binBroad is the same for broad lines of quasars: 0.1 of a bin's variance
	// in units of the line's, and the doubt of the continuum weighs more.
	binBroad = 3.0
	// maxBin bounds the pixels of a bin.
	maxBin = 32
)

// markBins writes for every pixel of the window how many pixels a bin there
// may have, as the widths of the lines around allow. Wide lines on fine pixels
// cost no more than narrow ones that way.
func (s *Scratch) markBins(w *window) {
	q := &s.prob
	a := &s.arms[w.arm]
	n := w.pixLimit - w.pix0
	if cap(s.bins) < n {
		s.bins = make([]int, 2*n)
	}
	s.bins = s.bins[:n]
	for i := range s.bins {
		s.bins[i] = maxBin
	}
	for ci := range q.comps {
		c := &q.comps[ci]
		e := &q.ties[c.tie]
		scale := c.lam0 / spectrum.SpeedOfLight
		mu, sigma := c.lam0+scale*e.v, scale*e.s
		bins := binSigma
		if e.broad {
			bins = binBroad
		}
		most := max(1, int(e.s/(bins*s.tracks[c.track].pix)))
		far := 6.0
		if e.stark {
			far = starkReach
		}
		lo := max(a.index(mu-far*sigma), w.pix0)
		hi := min(a.index(mu+far*sigma), w.pixLimit)
		for i := lo; i < hi; i++ {
			s.bins[i-w.pix0] = min(s.bins[i-w.pix0], most)
		}
	}
	s.partOutsiders(w)
}

// binFrom returns how many pixels from pixel i on form one bin.
func (s *Scratch) binFrom(w *window, i int) int {
	if s.good(w.arm, i) == 0 {
		return 1
	}
	most := s.bins[i-w.pix0]
	n := 1
	for n < most && i+n < w.pixLimit && s.good(w.arm, i+n) > 0 {
		most = min(most, s.bins[i+n-w.pix0])
		if n < most {
			n++
		}
	}
	return n
}
