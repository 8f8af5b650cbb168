package absorbers

import (
	"math"
	"sort"

	"duskline/spectrum"
)

const (
	// Significance that the stronger line, the weaker line, and both together
	// must have in the boxes of the search.
	strongFrom, weakFrom, bothFrom = 3.5, 2.0, 5.5
	// contFloor is the standard error of the continuum that no fit of a
	// straight line knows of, as a fraction; common practice, no source.
	contFloor = 0.01
	// Range of the boxes' half widths, km/s, and their growth.
	boxFirst, boxLast, boxGrowth = 30.0, 300.0, 1.5
	// An equivalent width is summed outward from the center while the two
	// lines together stand above edgeFrom of their error, over gaps of up to
	// bridgeKms beyond which they stand above bridgeFrom.
	edgeFrom   = 2.5
	bridgeKms  = 50
	bridgeFrom = 3.0
	// leastRange is the half range of a sum at least, in half widths of the
	// best box.
	leastRange = 0.8
	// mostMismatch is the part of the absorption that may contradict a ratio.
	mostMismatch = 0.3
	// proximateKms is how near to the object a system is called proximate.
	proximateKms = 3000.0
	// behindKms is how far redward of the object a system may lie.
	behindKms = 3000.0
)

// metals is the state of the doublet search.
type metals struct {
	depth, weight []float64    // 1 - flux/continuum, and its inverse variance
	sum           [2][]float64 // running sums of weight and weight*depth
	box           []float64    // significance of the box around every pixel
	found         []candidate
	taken         []bool // pixels that an accepted system explains
}

type candidate struct {
	doublet int
	x       float64 // c ln wave of the stronger line
	half    float64
	score   float64
}

// findDoublets looks for pairs of absorption lines redward of Lyman alpha.
func (s *Scratch) findDoublets(dst []System, f *Finder, opt Options) []System {
	t, m := &s.track, &s.metal
	s.normalize()
	m.found = m.found[:0]
	first := index(t.x, spectrum.SpeedOfLight*math.Log(f.series[0].Wave*(1+opt.Z))+behindKms)
	end := spectrum.SpeedOfLight*math.Log1p(opt.Z) + behindKms
	for half := boxFirst; half <= boxLast; half *= boxGrowth {
		s.boxes(half)
		for i := first; i < len(t.x); i++ {
			if m.box[i] < strongFrom || i > 0 && m.box[i-1] > m.box[i] || i+1 < len(t.x) && m.box[i+1] > m.box[i] {
				continue
			}
			for d := range f.doublets {
				db := &f.doublets[d]
				if t.x[i]-spectrum.SpeedOfLight*math.Log(db.strong.Wave) > end || half > 0.5*db.split {
					continue
				}
				j := index(t.x, t.x[i]+db.split)
				if j < 1 || j+1 >= len(t.x) {
					continue
				}
				if weak := max(m.box[j-1], m.box[j], m.box[j+1]); weak > weakFrom && weak < 1.6*m.box[i] {
					if score := math.Hypot(m.box[i], weak); score > bothFrom {
						m.found = append(m.found, candidate{d, t.x[i], half, score})
					}
				}
			}
		}
	}
	sort.SliceStable(m.found, func(i, j int) bool { return m.found[i].score > m.found[j].score })
	start := len(dst)
	for _, c := range m.found {
		if sys, ok := s.measureDoublet(f, c, opt); ok {
			dst = append(dst, sys)
		}
	}
	out := dst[start:]
	rank := func(kind string) int {
		for d := range f.doublets {
			if f.doublets[d].kind == kind {
				return d
			}
		}
		return -1
	}
	sort.SliceStable(out, func(i, j int) bool {
		if a, b := rank(out[i].Kind), rank(out[j].Kind); a != b {
			return a < b
		}
		return out[i].Z < out[j].Z
	})
	return dst
}

// normalize fills depth, weight and their running sums.
func (s *Scratch) normalize() {
	t, m := &s.track, &s.metal
	n := len(t.x)
	m.depth, m.weight, m.box = resize(m.depth, n), resize(m.weight, n), resize(m.box, n)
	for k := range m.sum {
		m.sum[k] = resize(m.sum[k], n+1)
	}
	if cap(m.taken) < n {
		m.taken = make([]bool, n+n/2)
	}
	m.taken = m.taken[:n]
	clear(m.taken)
	for i := range n {
		c := s.red.level[i]
		if t.weight[i] > 0 && c > 0 && c > 3*s.red.err[i] {
			m.depth[i], m.weight[i] = 1-t.flux[i]/c, t.weight[i]*c*c
		}
		m.sum[0][i+1] = m.sum[0][i] + m.weight[i]
		m.sum[1][i+1] = m.sum[1][i] + m.weight[i]*m.depth[i]
	}
}

// boxes fills box with the mean depth within half of every pixel over its
// error: pixel noise, continuum and contFloor. 0 where pixels lack.
func (s *Scratch) boxes(half float64) {
	t, m := &s.track, &s.metal
	lo, hi := 0, 0
	for i := range t.x {
		for hi < len(t.x) && t.x[hi] <= t.x[i]+half {
			hi++
		}
		for t.x[lo] < t.x[i]-half {
			lo++
		}
		m.box[i] = 0
		w := m.sum[0][hi] - m.sum[0][lo]
		if w > 0 && m.weight[i] > 0 {
			rel := s.red.err[i] / s.red.level[i]
			m.box[i] = (m.sum[1][hi] - m.sum[1][lo]) / w / math.Sqrt(1/w+rel*rel+contFloor*contFloor)
		}
	}
}

// deepest returns the offset within half of x at which both lines together are
// deepest, where they are in a ratio that they can have.
func (s *Scratch) deepest(x, split, half, step float64) float64 {
	best, at := 0.0, 0.0
	for v := -half; v <= half; v += step {
		a, _ := s.depthAt(x + v)
		b, _ := s.depthAt(x + v + split)
		if a+b > best && s.pairSeen(x, split, v, edgeFrom) {
			best, at = a+b, v
		}
	}
	return at
}

// outward moves an end of the range of a doublet at x to where absorption ends,
// but not beyond most from x.
func (s *Scratch) outward(x, split, v, step, most float64) float64 {
	for math.Abs(v+step) < most {
		if s.pairSeen(x, split, v+step, edgeFrom) {
			v += step
			continue
		}
		far := v
		for u := v + 2*step; math.Abs(u-v) <= bridgeKms && math.Abs(u) < most; u += step {
			if s.pairSeen(x, split, u, bridgeFrom) {
				far = u
			}
		}
		if far == v {
			break
		}
		v = far
	}
	return v
}

// pairSeen reports whether both lines at offset v from x absorb together by
// more than from of their error, in a ratio that they can have.
func (s *Scratch) pairSeen(x, split, v, from float64) bool {
	a, ea := s.depthAt(x + v)
	b, eb := s.depthAt(x + v + split)
	return a+b > from*math.Hypot(ea, eb) && a > 0 && b > 0 && b-a < 1.5*math.Hypot(ea, eb) && a-2.2*b < 1.5*math.Hypot(ea, 2.2*eb)
}

// mismatch returns how much of the absorption of a pair from low to high cannot
// be that of one ion: depth of the weaker line beyond that of the stronger, or
// of the stronger beyond the ratio of thin lines, by more than the error. Chance
// pairs of unlike lines have much of it.
func (s *Scratch) mismatch(x float64, d *doublet, low, high, step float64) float64 {
	var wrong, all float64
	for v := low; v <= high; v += step {
		a, ea := s.depthAt(x + v)
		b, eb := s.depthAt(x + v + d.split)
		if math.IsInf(ea, 1) || math.IsInf(eb, 1) {
			continue
		}
		wrong += max(0, b-a-math.Hypot(ea, eb), a-d.ratio*b-math.Hypot(ea, d.ratio*eb))
		all += math.Abs(a)
	}
	if all == 0 {
		return 1
	}
	return wrong / all
}

// depthAt returns the mean depth of the three pixels around x, because one is
// noisy, with its error.
func (s *Scratch) depthAt(x float64) (depth, err float64) {
	t, m := &s.track, &s.metal
	i := index(t.x, x)
	if i > 0 && (i == len(t.x) || x-t.x[i-1] < t.x[i]-x) {
		i--
	}
	var variance, n float64
	for k := max(0, i-1); k <= min(len(t.x)-1, i+1); k++ {
		if m.weight[k] > 0 {
			depth += m.depth[k]
			variance += 1 / m.weight[k]
			n++
		}
	}
	if n == 0 {
		return 0, math.Inf(1)
	}
	return depth / n, math.Hypot(math.Sqrt(variance)/n, contFloor)
}

// measureDoublet sums both lines of a candidate over one range of velocity and
// checks the ratio. It refuses what an accepted system already explains.
func (s *Scratch) measureDoublet(f *Finder, c candidate, opt Options) (System, bool) {
	t := &s.track
	d := &f.doublets[c.doublet]
	i := index(t.x, c.x)
	step := t.dx[min(i, len(t.dx)-1)]
	// The deepest place of both lines, outward from there, and as much more as
	// the instrument spreads.
	c.x += s.deepest(c.x, d.split, c.half, step)
	most := 0.5 * d.split
	margin := max(step, 1.7*t.sres[min(i, len(t.sres)-1)])
	least := max(step, leastRange*c.half)
	low := max(s.outward(c.x, d.split, -least, -step, most)-margin, -most)
	high := min(s.outward(c.x, d.split, least, step, most)+margin, most)
	a, b := s.sumLine(c.x, low, high), s.sumLine(c.x+d.split, low, high)
	sys := blank(d.kind)
	if a.taken > 0.3 || b.taken > 0.3 || a.good < 0.7 || b.good < 0.5 || !(a.ew > strongFrom*a.err) || !(b.ew > weakFrom*b.err) {
		return sys, false
	}
	if s.mismatch(c.x, d, low, high, step) > mostMismatch {
		return sys, false
	}
	// Centers weigh by their errors; the ratio of errors of a and b follows
	// from the equivalent widths.
	wa, wb := 1/(a.centerErr*a.centerErr), 1/(b.centerErr*b.centerErr)
	x := (a.center*wa + (b.center-d.split)*wb) / (wa + wb)
	z := math.Expm1(x/spectrum.SpeedOfLight - math.Log(d.strong.Wave))
	sys.Z, sys.ZErr = z, (1+z)/math.Sqrt(wa+wb)/spectrum.SpeedOfLight
	toRest := d.strong.Wave / spectrum.SpeedOfLight
	sys.EW, sys.EWErr = a.ew*toRest, a.err*toRest
	toRest = d.weak.Wave / spectrum.SpeedOfLight
	sys.Second, sys.SecondErr = b.ew*toRest, b.err*toRest
	sys.Significance = math.Hypot(a.ew/a.err, b.ew/b.err)
	sys.Lines = d.names
	ratio := sys.EW / sys.Second
	err := ratio * math.Hypot(a.err/a.ew, b.err/b.ew)
	if ratio < 1-4*err-0.1 || ratio > d.ratio+4*err+0.3 {
		return sys, false
	}
	if ratio < 1-2*err || ratio > d.ratio+2*err {
		sys.Flags |= RatioOff
	}
	if ratio-1 < 0.2 && math.Abs(ratio-1) < 2*err {
		sys.Flags |= Saturated
	}
	if a.good < 0.99 || b.good < 0.99 {
		sys.Flags |= PartlyHidden
	}
	if spectrum.SpeedOfLight*math.Log((1+opt.Z)/(1+z)) < proximateKms {
		sys.Flags |= Proximate
	}
	s.take(c.x, low, high)
	s.take(c.x+d.split, low, high)
	return sys, true
}

// lineSum is a line summed over a range of velocity.
type lineSum struct {
	ew, err           float64 // km/s
	center, centerErr float64 // c ln wave
	good, taken       float64 // parts of the range
}

// sumLine sums the depth from low to high around x. Masked pixels count with
// the mean of the good ones. The error has the noise of the pixels, and as one
// factor of the whole range that of the continuum and contFloor.
func (s *Scratch) sumLine(x, low, high float64) lineSum {
	t, m := &s.track, &s.metal
	var r lineSum
	var width, good, variance, moment, second, cont, used float64
	for i := max(0, index(t.x, x+low)-1); i < len(t.x); i++ {
		d := min(t.x[i]+0.5*t.dx[i], x+high) - max(t.x[i]-0.5*t.dx[i], x+low)
		if t.x[i]-0.5*t.dx[i] > x+high {
			break
		}
		if d <= 0 {
			continue
		}
		width += d
		if m.taken[i] {
			used += d
		}
		if m.weight[i] == 0 {
			continue
		}
		good += d
		r.ew += d * m.depth[i]
		variance += d * d / m.weight[i]
		moment += d * m.depth[i] * t.x[i]
		cont += d * (1 - m.depth[i]) * math.Hypot(s.red.err[i]/s.red.level[i], contFloor)
	}
	if good == 0 || r.ew == 0 {
		return lineSum{err: math.Inf(1), centerErr: math.Inf(1)}
	}
	r.center = moment / r.ew
	for i := max(0, index(t.x, x+low)-1); i < len(t.x) && t.x[i] < x+high; i++ {
		if m.weight[i] > 0 {
			d := t.dx[i] * (t.x[i] - r.center)
			second += d * d / m.weight[i]
		}
	}
	r.centerErr = max(math.Sqrt(second)/math.Abs(r.ew), 0.02*(high-low))
	full := (high - low) / good
	r.good, r.taken = good/(high-low), used/(high-low)
	r.ew *= full
	r.err = full * math.Sqrt(variance+cont*cont)
	return r
}

// take marks the pixels of an accepted line.
func (s *Scratch) take(x, low, high float64) {
	t := &s.track
	for i := index(t.x, x+low); i < len(t.x) && t.x[i] <= x+high; i++ {
		s.metal.taken[i] = true
	}
}
