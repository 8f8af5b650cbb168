package absorbers

import (
	"math"

	"duskline/spectrum"
)

// reportHydrogen appends the systems found, by redshift.
func (s *Scratch) reportHydrogen(dst []System, f *Finder, opt Options) []System {
	d := &s.damp
	for i := 1; i < len(d.found); i++ {
		for k := i; k > 0 && d.found[k].x < d.found[k-1].x; k-- {
			d.found[k], d.found[k-1] = d.found[k-1], d.found[k]
		}
	}
	for _, c := range d.found {
		sys := blank(Hydrogen)
		sys.Z = math.Expm1(c.x / spectrum.SpeedOfLight)
		sys.ZErr = (1 + sys.Z) * c.xErr / spectrum.SpeedOfLight
		sys.LogN, sys.LogErr = c.logN, math.Hypot(c.nErr, columnFloor)
		if c.bErr < 0.5*lnBPrior {
			sys.B = math.Exp(c.lnB)
			sys.BErr = sys.B * c.bErr
		}
		sys.EW = f.series[0].EquivalentWidth(math.Pow(10, c.logN), math.Exp(c.lnB))
		sys.EWErr = 0.5 * math.Ln10 * sys.LogErr * sys.EW
		sys.Significance = math.Sqrt(max(0, c.gain))
		for l := range c.lines {
			if l > 0 {
				sys.Lines += "+"
			}
			sys.Lines += f.names[l]
		}
		for _, t := range []struct {
			set  bool
			flag Flags
		}{
			{c.nErr > 0.3, FlatPart}, {c.chi2 > poorFrom*c.dof, PoorFit}, {c.bound, AtBound}, {c.lines == 1, OneLine}, {c.lap, Overlaps},
			{spectrum.SpeedOfLight*math.Log1p(opt.Z)-c.x < proximateKms, Proximate}, {c.hidden, PartlyHidden},
		} {
			if t.set {
				sys.Flags |= t.flag
			}
		}
		dst = append(dst, sys)
	}
	return dst
}
