package pipeline

import (
	"fmt"
	"math"

	"duskline/redshift"
	"duskline/spectrum"
)

// find finds the redshift of the spectrum on the grid, with templates as wide as
// its instrument makes lines, within its limits. What fits better outside them is
// said in beyond.
func (b *Bench) find(s *spectrum.Spectrum) (res redshift.Result, beyond string) {
	finder := b.chain.finder.Resolved(s.InstrumentSigma(b.middle()))
	if s.Limits == nil {
		return finder.Find(&b.grid, b.scratch), ""
	}
	free := finder.Find(&b.grid, b.scratch)
	b.chain.thresholds.Judge(&free)
	res = finder.Within(*s.Limits).Find(&b.grid, b.scratch)
	switch {
	case !res.Found && free.Found:
		beyond = fmt.Sprintf("nothing was found within the manifest's limits (%s)", limitsText(s.Limits))
	case !free.Found || s.Limits.Holds(free.Class, free.Redshift):
		return res, ""
	case free.Drop-res.Drop < leastBeyond:
		return res, ""
	}
	if beyond == "" {
		beyond = fmt.Sprintf("the manifest's limits (%s) do not hold the best fit", limitsText(s.Limits))
	}
	return res, fmt.Sprintf("%s; outside them %s at z = %.5f (%s) lowers chi2 by %.0f more", beyond,
		free.Class, free.Redshift, free.Verdict, free.Drop-math.Max(0, res.Drop))
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
