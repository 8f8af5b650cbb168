package lines

import (
	"math"

	"duskline/spectrum"
)

// formTies gives every line of a blend its ion's offset and width to start
// from. The ion with the most significant box is the main one. An ion far from
// it, or of the other class of width, starts from its own box; one close to it
// from the main ion, because neighbors spoil boxes. A blend in which nothing
// stands out takes offset and width from the rest of the spectrum.
func (s *Scratch) formTies(b *blend) (main int) {
	q := &s.prob
	q.ties, q.comps = q.ties[:0], q.comps[:0]
	main = -1
	for _, ti := range s.member[b.first : b.first+b.count] {
		t := &s.tracks[ti]
		k := 0
		for k < len(q.ties) && q.ties[k].ion != t.line.ion {
			k++
		}
		if k == len(q.ties) {
			q.ties = append(q.ties, tie{ion: t.line.ion, sres: t.sres, lead: ti})
		}
		e := &q.ties[k]
		e.broad = e.broad || t.broad
		if math.Abs(t.snr) > math.Abs(e.snr) {
			e.snr, e.lead = t.snr, ti
		}
		q.comps = append(q.comps, component{track: ti, tie: k, lam0: t.lam0})
	}
	for k := range q.ties {
		e := &q.ties[k]
		t := &s.tracks[e.lead]
		e.v, e.s = t.v, t.s
		e.vmax = s.opt.search(e.broad)
		e.smin = max(0.35*t.pix, 0.7*e.sres)
		e.smax = math.Hypot(s.opt.widthMax(t.line, e.broad), e.sres)
		if e.stark = s.opt.Stark && e.ion == hydrogenIon && e.snr < 0; e.stark && s.wings.snr > 0 {
			// Boxes end where neighbors begin.
			e.v, e.s = s.wings.v, math.Hypot(s.wings.source, e.sres)
		}
		e.s = min(max(e.s, e.smin), e.smax)
		if t.seen() && !b.faint && (main < 0 || math.Abs(e.snr) > math.Abs(q.ties[main].snr)) {
			main = k
		}
	}
	for k := range q.ties {
		e := &q.ties[k]
		e.like = s.kin(e)
		switch {
		case main < 0:
			s.borrow(e)
		case k == main || e.stark && s.tracks[e.lead].seen():
			e.own = true
		case s.tracks[e.lead].seen() && (!s.akin(k, main) || s.clear(k, main)):
			e.own = true
		default:
			s.follow(k, main)
		}
	}
	return main
}

const (
	// Narrow emission lines of one object come from the same gas, more or less:
	// those weaker than the strongest differ from it by so much in offset, km/s
	// and fraction of its width, and in the logarithm of the width. Common
	// practice, no source: narrow lines of active galaxies differ by up to two.
	kinOffset, kinOffsetShare = 50.0, 0.3
	kinWidth                  = 0.35
	kinWidthLeast             = 0.1 // where the instrument makes the width
)

// kin returns the prior that the strongest narrow emission line of the spectrum
// gives to another.
func (s *Scratch) kin(e *tie) kinship {
	a := s.anchor[0][0]
	if e.broad || e.snr <= 0 || a.snr <= e.snr {
		return kinship{}
	}
	total := math.Hypot(a.source, e.sres)
	return kinship{v: a.v, dv: math.Hypot(kinOffset, kinOffsetShare*total), s: max(total, e.smin),
		dlns: max(kinWidthLeast, kinWidth*a.source*a.source/(total*total))}
}

// akin reports whether tie k may take offset and width from tie main: both of
// the same class of width, and not known to be of different sign.
func (s *Scratch) akin(k, main int) bool {
	q := &s.prob
	e, m := &q.ties[k], &q.ties[main]
	if e.broad != m.broad {
		return false
	}
	lead := s.tracks[e.lead]
	if lead.seen() {
		return sign(e.snr) == sign(m.snr)
	}
	switch lead.line.Seen {
	case Emission:
		return m.snr > 0
	case Absorption:
		return m.snr < 0
	}
	return true
}

// follow gives tie k the offset and width of the main tie, or borrows them
// when the two are not akin.
func (s *Scratch) follow(k, main int) {
	q := &s.prob
	e := &q.ties[k]
	e.own = false
	if !s.akin(k, main) {
		s.borrow(e)
		return
	}
	e.v, e.s = q.ties[main].v, q.ties[main].s
}

// clear reports whether no line of tie k overlaps one of tie m.
func (s *Scratch) clear(k, m int) bool {
	q := &s.prob
	for i := range q.comps {
		for j := range q.comps {
			if q.comps[i].tie == k && q.comps[j].tie == m {
				d := s.apart(&s.tracks[q.comps[i].track], &s.tracks[q.comps[j].track])
				if d < overlapWithin*(q.ties[k].s+q.ties[m].s)+s.opt.search(false) {
					return false
				}
			}
		}
	}
	return true
}

// borrow takes offset and width from the strongest line seen in the spectrum
// of the same class of width, of the kind in which this one usually appears
// when there is a choice; else it falls back on zero and Options.WidthGuess.
// Hydrogen in quasars takes them from hydrogen first: in active galaxies its lines may be
// narrow beside a broad Mg II.
func (s *Scratch) borrow(e *tie) {
	e.own, e.borrowed = false, true
	e.v, e.s = 0, math.Hypot(s.opt.guess(e.broad), e.sres)
	class := 0
	if e.broad {
		class = 1
	}
	from := s.anchor[class]
	if e.broad && e.ion == hydrogenIon && s.series != [2]kinematics{} {
		from = s.series
	}
	first, second := from[0], from[1]
	if s.tracks[e.lead].line.Seen == Absorption {
		first, second = second, first
	}
	if first.snr == 0 {
		first = second
	}
	if first.snr > 0 {
		e.v, e.s = first.v, math.Hypot(first.source, e.sres)
	}
	e.s = min(max(e.s, e.smin), e.smax)
	e.v = min(max(e.v, -e.vmax), e.vmax)
}

// assignAmplitudes numbers the amplitudes: one for a doublet of fixed ratio,
// one for each run of lines of an ion that the width does not resolve.
func (s *Scratch) assignAmplitudes() {
	q := &s.prob
	q.n = 0
	for i := range q.comps {
		c := &q.comps[i]
		l := s.tracks[c.track].line
		c.amp, c.share, c.assumed = -1, 1, false
		for j := i - 1; j >= 0 && c.amp < 0; j-- {
			d := &q.comps[j]
			if d.tie != c.tie {
				continue
			}
			o := s.tracks[d.track].line
			switch {
			case l.doublet >= 0 && o.doublet == l.doublet:
				c.amp, c.share, d.share = d.amp, l.share, o.share
			case s.apart(&s.tracks[c.track], &s.tracks[d.track]) < mergeSame*q.ties[c.tie].s:
				c.amp, c.assumed, d.assumed = d.amp, true, true
			}
		}
		if c.amp < 0 {
			c.amp = q.n
			q.n++
		}
	}
	for a := range q.n {
		known := true
		for i := range q.comps {
			if q.comps[i].amp == a && q.comps[i].assumed {
				known = known && s.tracks[q.comps[i].track].line.F > 0
			}
		}
		for i := range q.comps {
			if c := &q.comps[i]; c.amp == a && c.assumed {
				c.share = 1
				if known {
					c.share = s.tracks[c.track].line.share
				}
			}
		}
	}
}

// build lays out windows, pixels and parameters for the present offsets and
// widths.
func (s *Scratch) build(main int) {
	q := &s.prob
	s.assignAmplitudes()
	for k := range q.ties {
		e := &q.ties[k]
		e.pv, e.ps, e.pa, e.pb = -1, -1, -1, -1
		if e.own {
			e.pv, e.ps = q.n, q.n+1
			q.n += 2
			if s.opt.Profile != Gaussian && math.Abs(e.snr) >= shapeFrom {
				e.pa = q.n
				q.n++
				if s.opt.Profile == Hermite {
					e.pb = q.n
					q.n++
				}
			}
		}
	}
	for k := range q.ties {
		if e := &q.ties[k]; !e.own && !e.borrowed && main >= 0 {
			m := &q.ties[main]
			e.pv, e.ps, e.pa, e.pb = m.pv, m.ps, m.pa, m.pb
		}
	}
	q.profileAs = s.opt.Profile
	s.layWindows()
	q.act = q.act[:0]
	for i := range q.windows {
		w := &q.windows[i]
		w.base = q.n
		q.n += 2
		w.act0 = len(q.act)
		q.act = append(q.act, w.base, w.base+1)
		for _, kin := range [2]bool{false, true} {
			for ci := range q.comps {
				c := &q.comps[ci]
				e := &q.ties[c.tie]
				reach := c.lam0 / spectrum.SpeedOfLight * (e.vmax + 2*profileReach*e.s)
				if c.lam0 < w.mid-w.half-reach || c.lam0 > w.mid+w.half+reach {
					continue
				}
				if !kin {
					q.act = appendNew(q.act, w.act0, c.amp)
				} else {
					q.act = appendNew(appendNew(q.act, w.act0, e.pv), w.act0, e.ps)
					q.act = appendNew(appendNew(q.act, w.act0, e.pa), w.act0, e.pb)
				}
			}
			if !kin {
				w.nAmp = len(q.act) - w.act0 - 2
			}
		}
		w.act1 = len(q.act)
	}
	s.lm.reset(q.n)
	for k := range q.ties {
		e := &q.ties[k]
		if e.own {
			s.lm.p[e.pv], s.lm.lo[e.pv], s.lm.hi[e.pv] = e.v, -e.vmax, e.vmax
			s.lm.p[e.ps], s.lm.lo[e.ps], s.lm.hi[e.ps] = e.s, e.smin, e.smax
			switch {
			case e.pb >= 0:
				s.lm.p[e.pa], s.lm.lo[e.pa], s.lm.hi[e.pa] = e.a, -hermiteMost, hermiteMost
				s.lm.p[e.pb], s.lm.lo[e.pb], s.lm.hi[e.pb] = e.b, -hermiteMost, hermiteMost
			case e.pa >= 0:
				s.lm.p[e.pa], s.lm.lo[e.pa], s.lm.hi[e.pa] = max(e.a, 0.2*e.s), 0, 5*e.smax
			}
		}
	}
	for i := range q.windows {
		if w := &q.windows[i]; w.prior == 0 {
			s.lm.fixed[w.base], s.lm.fixed[w.base+1] = true, true
		}
	}
}

func appendNew(list []int, from, v int) []int {
	if v < 0 || find(list[from:], v) >= 0 {
		return list
	}
	return append(list, v)
}
