package pipeline

import (
	"duskline/absorbers"
	"duskline/catalog"
	"duskline/redshift"
)

// sightline is a worker's search for absorbers in front of quasars.
type sightline struct {
	scratch absorbers.Scratch
	arms    []absorbers.Arm
	found   []absorbers.System
}

// absorb returns the absorbers in front of a quasar, none for other objects. It
// reads the arms that measure has filled.
func (b *Bench) absorb(res *redshift.Result) []catalog.Absorber {
	if res.Class != catalog.Quasar || !b.level.ready {
		return nil
	}
	l := &b.sight
	l.arms = l.arms[:0]
	for i := range b.arms {
		l.arms = append(l.arms, absorbers.Arm(b.arms[i]))
	}
	l.found = b.chain.absorbers.Find(l.found[:0], l.arms, absorbers.Options{Z: res.Redshift, ZErr: res.RedshiftErr}, &l.scratch)
	if len(l.found) == 0 {
		return nil
	}
	rows := make([]catalog.Absorber, len(l.found))
	for i, s := range l.found {
		rows[i] = catalog.Absorber{
			ZAbs: s.Z, ZAbsErr: s.ZErr, LogNHI: s.LogN, LogNHIErr: s.LogErr, BKms: s.B, BErr: s.BErr, LinesUsed: s.Lines,
			Flags: absorberFlags(s.Flags), Kind: s.Kind, EWRest: s.EW, EWRestErr: s.EWErr, EWSecond: s.Second, EWSecondErr: s.SecondErr,
			Significance: s.Significance,
		}
	}
	return rows
}

// absorberFlags gives the remarks of package absorbers the bits of the catalog.
func absorberFlags(f absorbers.Flags) (out catalog.AbsorberFlags) {
	for _, k := range [...]struct {
		from absorbers.Flags
		to   catalog.AbsorberFlags
	}{
		{absorbers.FlatPart, catalog.FlatPart}, {absorbers.PoorFit, catalog.PoorFit}, {absorbers.AtBound, catalog.AtBound},
		{absorbers.OneLine, catalog.OneLine}, {absorbers.BreakOnly, catalog.BreakOnly}, {absorbers.LowerLimit, catalog.LowerLimit},
		{absorbers.Overlaps, catalog.Overlaps}, {absorbers.RatioOff, catalog.RatioOff}, {absorbers.Saturated, catalog.Saturated},
		{absorbers.Proximate, catalog.Proximate}, {absorbers.InForest, catalog.InForest}, {absorbers.PartlyHidden, catalog.PartlyHidden},
	} {
		if f&k.from != 0 {
			out |= k.to
		}
	}
	return out
}
