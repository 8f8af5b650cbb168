package absorbers

import (
	"math"

	"duskline/spectrum"
)

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

// drawBack moves the end v of the range of a doublet at x back toward least, to where
// what lies outside contradicts the ratio of the two lines most, if it does so by
// drawFrom of its error: then another line begins there.
func (s *Scratch) drawBack(x float64, d *doublet, v, least, step float64) float64 {
	end, worst := v, drawFrom
	if least < 0 {
		step = -step
	}
	// Excess of either line over what the other allows, summed inward.
	var strong, weak, strongVar, weakVar, n float64
	// depthAt means two pixels, so that variances of its sum are twice as large.
	double := 2 * s.metal.memory
	for u := v; (u-least)*step > 0; u -= step {
		a, ea := s.depthAt(x + u)
		b, eb := s.depthAt(x + u + d.split)
		if math.IsInf(ea, 1) || math.IsInf(eb, 1) {
			continue
		}
		n++
		strong += a - d.ratio*b
		weak += b - a
		strongVar += ea*ea + d.ratio*d.ratio*eb*eb
		weakVar += ea*ea + eb*eb
		floor := n * contFloor * d.ratio
		if p := max(strong/math.Hypot(math.Sqrt(double*strongVar), floor), weak/math.Hypot(math.Sqrt(double*weakVar), floor)); p > worst {
			end, worst = u-step, p
		}
	}
	return end
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
		w := 1 / (ea*ea + d.ratio*eb*eb)
		wrong += w * max(0, b-a-math.Hypot(ea, eb), a-d.ratio*b-math.Hypot(ea, d.ratio*eb))
		all += w * math.Abs(a)
	}
	if all == 0 {
		return 1
	}
	return wrong / all
}

// depthAt returns the mean depth over the width of two pixels around x, because one is
// noisy, with its error. Pixels at the ends count by parts, so that both lines
// of a doublet are compared at the same velocities.
func (s *Scratch) depthAt(x float64) (depth, err float64) {
	t, m := &s.track, &s.metal
	i := min(index(t.x, x), len(t.x)-1)
	half := t.dx[i]
	var variance, n float64
	for k := max(0, i-3); k <= min(len(t.x)-1, i+2); k++ {
		part := min(t.x[k]+0.5*t.dx[k], x+half) - max(t.x[k]-0.5*t.dx[k], x-half)
		if part > 0 && m.weight[k] > 0 {
			depth += part * m.depth[k]
			variance += part * part / m.weight[k]
			n += part
		}
	}
	if n == 0 {
		return 0, math.Inf(1)
	}
	return depth / n, math.Hypot(math.Sqrt(variance)/n, contFloor)
}

// measureDoublet sums both lines of a candidate over one range of velocity. It
// refuses what an accepted system already explains.
func (s *Scratch) measureDoublet(f *Finder, c candidate, opt Options) (sys measured, ok bool) {
	t := &s.track
	d := &f.doublets[c.doublet]
	i := index(t.x, c.x)
	step := t.dx[min(i, len(t.dx)-1)]
	// Outward from the fitted place, and as much more as the instrument spreads.
	most := 0.5 * d.split
	margin := max(step, 1.7*t.sres[min(i, len(t.sres)-1)])
	least := max(step, leastRange*c.fit.sigma)
	low, high := s.outward(c.x, d.split, -least, -step, most), s.outward(c.x, d.split, least, step, most)
	low, high = s.drawBack(c.x, d, low, -least, step), s.drawBack(c.x, d, high, least, step)
	low, high = max(low-margin, -most), min(high+margin, most)
	if s.mismatch(c.x, d, low, high, step) > mostMismatch {
		return sys, false
	}
	return s.sumDoublet(f, c.doublet, c.x, low, high, opt)
}

// sumDoublet sums both lines of a doublet at x from low to high.
func (s *Scratch) sumDoublet(f *Finder, doublet int, x, low, high float64, opt Options) (sys measured, ok bool) {
	d := &f.doublets[doublet]
	a, b := s.sumLine(x, low, high, d.split, d.ratio), s.sumLine(x+d.split, low, high, -d.split, 1)
	sys = measured{System: blank(d.kind), doublet: doublet, low: x + low, high: x + high}
	if a.taken > 0.3 || b.taken > 0.3 || a.good < 0.7 || b.good < 0.5 || !(a.ew > sumFrom*a.err) || !(b.ew > 0) {
		return sys, false
	}
	// Centers weigh by their errors; the ratio of errors of a and b follows
	// from the equivalent widths.
	wa, wb := 1/(a.centerErr*a.centerErr), 1/(b.centerErr*b.centerErr)
	center := (a.center*wa + (b.center-d.split)*wb) / (wa + wb)
	z := math.Expm1(center/spectrum.SpeedOfLight - math.Log(d.strong.Wave))
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
	// Whether something else lies on a line is told by the sums without limits.
	ra, rb := s.sumLine(x, low, high, 0, 0), s.sumLine(x+d.split, low, high, 0, 0)
	raw := ra.ew * d.strong.Wave / (rb.ew * d.weak.Wave)
	if e := raw * math.Hypot(ra.err/ra.ew, rb.err/rb.ew); rb.ew <= 0 || raw < 1-2*e || raw > d.ratio+2*e {
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
	return sys, true
}

// unlikely reports whether an Al III doublet stands against what else the
// spectrum shows of that gas: C IV or Mg II is covered and none of them is as
// strong. Aluminum is too rare for that (common practice, no source).
func (s *Scratch) unlikely(f *Finder, sys *measured, first int) bool {
	if sys.Kind != AlIII {
		return false
	}
	t := &s.track
	covered := false
	own := spectrum.SpeedOfLight * (math.Log(f.doublets[sys.doublet].strong.Wave) + math.Log1p(sys.Z))
	for k := range f.doublets {
		d := &f.doublets[k]
		if d.kind != CIV && d.kind != MgII {
			continue
		}
		x := spectrum.SpeedOfLight * (math.Log(d.strong.Wave) + math.Log1p(sys.Z))
		low, high := sys.low-own, sys.high-own
		if first >= len(t.x) || x+low < t.x[first] || x+high > t.x[len(t.x)-1] {
			continue
		}
		sum := s.sumLine(x, low, high, 0, 0)
		if sum.good < 0.7 {
			continue
		}
		covered = true
		toRest := d.strong.Wave / spectrum.SpeedOfLight
		if sum.ew*toRest+2*math.Hypot(sum.err*toRest, sys.EWErr) > sys.EW {
			return false
		}
	}
	return covered
}

// lineSum is a line summed over a range of velocity.
type lineSum struct {
	ew, err           float64 // km/s
	center, centerErr float64 // c ln wave
	good              float64 // part of the range
	taken             float64 // part of the absorption that an accepted system explains
}

// sumLine sums the depth from low to high around x. Masked pixels count with
// the mean of the good ones. The error has the noise of the pixels, and as one
// factor of the whole range that of the continuum and contFloor.
func (s *Scratch) sumLine(x, low, high, other, most float64) lineSum {
	t, m := &s.track, &s.metal
	var r lineSum
	var width, good, variance, moment, second, cont, used, whole float64
	for i := max(0, index(t.x, x+low)-1); i < len(t.x); i++ {
		d := min(t.x[i]+0.5*t.dx[i], x+high) - max(t.x[i]-0.5*t.dx[i], x+low)
		if t.x[i]-0.5*t.dx[i] > x+high {
			break
		}
		if d <= 0 {
			continue
		}
		width += d
		if m.weight[i] == 0 {
			continue
		}
		if part := d * max(m.depth[i], 0); m.taken[i] {
			used += part
			whole += part
		} else {
			whole += part
		}
		good += d
		depth, noise := m.depth[i], 1/m.weight[i]
		if allowed, err, foreign := s.foreign(i, other, most); foreign {
			depth, noise = allowed, err*err
		}
		r.ew += d * depth
		variance += d * d * noise
		moment += d * depth * t.x[i]
		cont += d * (1 - depth) * math.Hypot(s.red.err[i]/s.red.level[i], contFloor)
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
	r.centerErr = max(math.Sqrt(m.memory*second)/math.Abs(r.ew), 0.02*(high-low))
	full := (high - low) / good
	r.good, r.taken = good/(high-low), used/max(whole, 1e-9)
	r.ew *= full
	r.err = full * math.Sqrt(m.memory*variance+cont*cont)
	return r
}

// foreign reports whether pixel i is deeper than most times the depth at the
// offset other, by foreignFrom of their errors: then another line lies on it.
// allowed is what the doublet can have there, with its error.
func (s *Scratch) foreign(i int, other, most float64) (allowed, err float64, yes bool) {
	if most == 0 {
		return 0, 0, false
	}
	t, m := &s.track, &s.metal
	x := t.x[i] + other
	k := index(t.x, x)
	if k < 1 || k >= len(t.x) || m.weight[k-1] == 0 || m.weight[k] == 0 {
		return 0, 0, false
	}
	q := (x - t.x[k-1]) / (t.x[k] - t.x[k-1])
	depth := (1-q)*m.depth[k-1] + q*m.depth[k]
	err = most * math.Sqrt((1-q)*(1-q)/m.weight[k-1]+q*q/m.weight[k])
	allowed = max(most*depth, 0)
	return allowed, err, m.depth[i]-allowed > foreignFrom*math.Hypot(math.Hypot(err, contFloor), 1/math.Sqrt(m.weight[i]))
}
