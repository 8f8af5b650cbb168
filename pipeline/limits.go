package pipeline

import (
	"fmt"
	"math"

	"duskline/catalog"
	"duskline/redshift"
	"duskline/spectrum"
)

// find finds the redshift of the spectrum on the grid, with templates as wide as
// its instrument makes lines, within its limits, and judges it. What fits better outside them is
// said in beyond; unless that is none it has its flag, and an answer at another redshift than that
// is not secure.
func (b *Bench) find(s *spectrum.Spectrum) (res redshift.Result, beyond string, flags catalog.Flags) {
	finder := b.chain.finder.Resolved(s.InstrumentSigma(b.middle()))
	judge := func(r *redshift.Result) {
		r.Normalized = normalized(&b.grid, s.FluxUnit, b.x)
		b.chain.thresholds.Judge(r)
	}
	if s.Limits == nil {
		res = finder.Find(&b.grid, b.scratch)
		judge(&res)
		return res, "", 0
	}
	res = finder.Within(*s.Limits).Find(&b.grid, b.scratch)
	judge(&res)
	free := finder.Find(&b.grid, b.scratch)
	judge(&free)
	if !free.Found || s.Limits.Holds(free.Class, free.Redshift) {
		return res, "", 0
	}
	more := finder.Drop(b.scratch, &free) - finder.Drop(b.scratch, &res)
	switch {
	case !res.Found:
		beyond = fmt.Sprintf("nothing was found within the manifest's limits (%s)", limitsText(s.Limits))
	case more < leastBeyond:
		return res, "", 0
	default:
		beyond = fmt.Sprintf("the manifest's limits (%s) do not hold the best fit", limitsText(s.Limits))
	}
	if free.Verdict != redshift.None {
		flags = catalog.OutsideLimits
		if res.Verdict == redshift.Secure && !redshift.Same(&res, &free) {
			res.Verdict = redshift.Uncertain
		}
	}
	return res, fmt.Sprintf("%s; outside them %s at z = %.5f (%s) lowers chi2 by %.0f more",
		beyond, free.Class, free.Redshift, free.Verdict, more), flags
}

// middle returns the wavelength in the middle of the grid's pixels with weight, NaN
// for none.
func (b *Bench) middle() float64 {
	n, first, last := b.grid.Good()
	if n == 0 {
		return math.NaN()
	}
	return math.Pow(10, 0.5*(b.grid.LogWave(first)+b.grid.LogWave(last)))
}

// leastBeyond is by how much more an answer outside the limits must lower chi^2
// to be told: what two free parameters more gain by chance in one of ten thousand
// objects (chi^2 of two degrees of freedom, 2 ln 10^4).
const leastBeyond = 18.4
