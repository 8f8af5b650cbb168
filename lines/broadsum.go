package lines

import (
	"math"
	"slices"

	"duskline/spectrum"
)

const (
	// tradeFrom is the correlation of the errors of two broad lines, taken negative, from
	// which they trade light: half of the variance of each is what the other has.
	tradeFrom = 0.5
	// tradeGain is by how much the sum of a seen line and one that is not must be better
	// known than the line alone to be told in its place.
	tradeGain = 2.0
)

// leads are the lines that carry the sums of their neighbors in quasars: the strongest of
// each blend in the mean of many (Vanden Berk et al. 2001, AJ 122, 549, from memory).
var leads = []string{"Lya", "SiIV_1393", "CIV_1548", "HeII_1640", "CIII_1908", "MgII_2796", "Hb", "Hg", "Hd"}

// sumBroad puts broad lines that trade light, so that none of them is seen though all
// together are, into lots, which are reported as one sum. Unlike narrow ones
// they keep the amplitudes of the fit, whose covariance tells the error of the sum: iron and
// the continuum doubt each of them by more than the noise. It starts with those
// that trade most.
func (s *Scratch) sumBroad() {
	q := &s.prob
	s.sums = s.sums[:0]
	for i := range q.comps {
		if c := &q.comps[i]; c.lot == 0 && q.ties[c.tie].broad && q.ties[c.tie].pv >= 0 && s.holder(c.amp) == i {
			s.sums = append(s.sums, i)
		}
	}
	if len(s.sums) < 2 {
		return
	}
	scale, fresh := s.errorScale(), 0
	for i := range q.comps {
		fresh = max(fresh, q.comps[i].lot)
	}
	first := fresh + 1
	for _, i := range s.sums {
		fresh++
		for k := range q.comps {
			if q.comps[k].amp == q.comps[i].amp {
				q.comps[k].lot = fresh
			}
		}
	}
	for {
		a, b, most := -1, -1, -tradeFrom
		for n, i := range s.sums {
			for _, j := range s.sums[:n] {
				if r := s.trade(i, j); r < most && s.sumsBetter(i, j, scale) {
					a, b, most = i, j, r
				}
			}
		}
		if a < 0 {
			break
		}
		s.joinLots(a, b, q.comps[a].lot)
		s.sums = slices.DeleteFunc(s.sums, func(i int) bool { return i == b })
	}
	for lot := first; lot <= fresh; lot++ {
		s.dissolve(lot, scale)
	}
}

// holder returns the first component with an amplitude.
func (s *Scratch) holder(amp int) int {
	return slices.IndexFunc(s.prob.comps, func(c component) bool { return c.amp == amp })
}

// dissolve takes apart a lot of one amplitude, or whose sum is not seen either.
func (s *Scratch) dissolve(lot int, scale float64) {
	q := &s.prob
	i := slices.IndexFunc(q.comps, func(c component) bool { return c.lot == lot })
	if i < 0 {
		return
	}
	several := slices.ContainsFunc(q.comps, func(c component) bool { return c.lot == lot && c.amp != q.comps[i].amp })
	if several && s.lotSNR(i, scale) >= seenFrom {
		return
	}
	for k := range q.comps {
		if q.comps[k].lot == lot {
			q.comps[k].lot = 0
		}
	}
}

// trade returns the correlation of the errors of two lots.
func (s *Scratch) trade(i, j int) float64 {
	q, m := &s.prob, &s.lm
	_, v := s.lotFlux(i, nil, 0)
	_, w := s.lotFlux(j, nil, 0)
	both := 0.0
	for k := range q.comps {
		for l := range q.comps {
			if q.inLot(i, k) && q.inLot(j, l) {
				a, b := &q.comps[k], &q.comps[l]
				both += a.share * b.share * m.cov[a.amp*m.n+b.amp]
			}
		}
	}
	return both / math.Sqrt(v*w)
}

// sumsBetter reports whether the sum of two lots tells more than they do: neither of them is
// seen, or one of them and the sum is far better known.
func (s *Scratch) sumsBetter(i, j int, scale float64) bool {
	x, y := s.lotSNR(i, scale), s.lotSNR(j, scale)
	if max(-x, -y) >= seenFrom || min(x, y) >= seenFrom {
		return false // seen, or seen to absorb
	}
	return max(x, y) < seenFrom || s.jointSNR(i, j, scale) > tradeGain*max(x, y)
}

// jointSNR is lotSNR of two lots as one.
func (s *Scratch) jointSNR(i, j int, scale float64) float64 {
	q := &s.prob
	lot, other := q.comps[i].lot, q.comps[j].lot
	moved := s.moved[:0]
	for k := range q.comps {
		if q.comps[k].lot == other {
			q.comps[k].lot = lot
			moved = append(moved, k)
		}
	}
	snr := s.lotSNR(i, scale)
	for _, k := range moved {
		q.comps[k].lot = other
	}
	s.moved = moved
	return snr
}

// lotSNR returns the signed S/N of what a component reports with its lot.
func (s *Scratch) lotSNR(ci int, scale float64) float64 {
	flux, v := s.lotFlux(ci, nil, 0)
	if !(v > 0) {
		return 0
	}
	return flux / math.Hypot(scale*math.Sqrt(v), s.lotDoubt(ci))
}

// lotDoubt returns the error of the flux of a lot that comes from broadDoubt: of one line with the
// shape P of the sum. A continuum wrong by d makes it wrong by d / integral of P^2, which
// for a Gaussian is 2 sqrt(pi) sigma d.
func (s *Scratch) lotDoubt(ci int) float64 {
	q, m := &s.prob, &s.lm
	given := s.continuumGiven(ci)
	if !q.ties[q.comps[ci].tie].broad || !(given > 0) {
		return 0
	}
	total, square := 0.0, 0.0
	for k := range q.comps {
		if !q.inLot(ci, k) {
			continue
		}
		a := &q.comps[k]
		fa, e := math.Abs(a.share*m.p[a.amp]), &q.ties[a.tie]
		total += fa
		for l := range q.comps {
			if !q.inLot(ci, l) {
				continue
			}
			b := &q.comps[l]
			g := &q.ties[b.tie]
			width := math.Hypot(a.lam0*e.s, b.lam0*g.s) / spectrum.SpeedOfLight
			d := (a.lam0 - b.lam0 + (a.lam0*e.v-b.lam0*g.v)/spectrum.SpeedOfLight) / width
			square += fa * math.Abs(b.share*m.p[b.amp]) * invSqrt2Pi / width * math.Exp(-0.5*d*d)
		}
	}
	if !(square > 0) {
		return 0
	}
	return broadDoubt * given * total * total / square
}

// leadOf returns the component of a lot of broad lines that is the strongest of its
// blend in quasars, -1 where there is none.
func (s *Scratch) leadOf(lot int) int {
	q := &s.prob
	for _, name := range leads {
		for k := range q.comps {
			if c := &q.comps[k]; c.lot == lot && q.ties[c.tie].broad && c.part == 0 && s.tracks[c.track].line.Name == name {
				return k
			}
		}
	}
	return -1
}

// openBroad ends the lots of broad lines, which are for the report alone.
func (s *Scratch) openBroad() {
	for k := range s.prob.comps {
		if c := &s.prob.comps[k]; s.prob.ties[c.tie].broad {
			c.lot = 0
		}
	}
}
