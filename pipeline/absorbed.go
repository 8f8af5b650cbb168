package pipeline

import (
	"math"

	"duskline/absorbers"
	"duskline/catalog"
	"duskline/redshift"
)

// sightline is a worker's search for absorbers in front of an object.
type sightline struct {
	scratch absorbers.Scratch
	arms    []absorbers.Arm
	found   []absorbers.System
}

// mostOwnBalmer is the equivalent width of H-beta, Angstrom, up to which the Lyman alpha
// of a hot star is taken for interstellar. That of white dwarfs and of stars later
// than about B1 is their own and as wide as a damped one (Diplas & Savage 1994 leave
// such stars out; the width that goes with B1 is from memory).
const mostOwnBalmer = 5.0

// background says what kind of light an object is for the search for absorbers; ok is
// false where there is none to look for.
func (b *Bench) background(res *redshift.Result) (kind absorbers.Background, ok bool) {
	switch res.Class {
	case catalog.Quasar:
		return absorbers.BeforeQuasar, true
	case catalog.Galaxy:
		return absorbers.BeforeGalaxy, true
	case catalog.Star:
		if res.Family != "hot" && res.Family != "helium" {
			return 0, false
		}
		for i := range b.results {
			// Where H-beta is not seen the result is a limit, and as good.
			if r := &b.results[i]; r.Name == "Hb" && r.Reason == "" {
				return absorbers.BeforeStar, math.Abs(r.EWRest)+2*r.EWRestErr < mostOwnBalmer
			}
		}
	}
	return 0, false
}

// absorb returns the absorbers in front of a quasar, a galaxy or a hot star, none for
// other objects. It reads the arms and results that measure has filled.
func (b *Bench) absorb(res *redshift.Result) []catalog.Absorber {
	if !b.level.ready {
		return nil
	}
	before, ok := b.background(res)
	if !ok {
		return nil
	}
	l := &b.sight
	l.arms = l.arms[:0]
	for i := range b.arms {
		l.arms = append(l.arms, absorbers.Arm(b.arms[i]))
	}
	l.found = b.chain.absorbers.Find(l.found[:0], l.arms, absorbers.Options{Z: res.Redshift, ZErr: res.RedshiftErr, Before: before}, &l.scratch)
	if len(l.found) == 0 {
		return nil
	}
	rows := make([]catalog.Absorber, len(l.found))
	for i, s := range l.found {
		rows[i] = catalog.Absorber{
			ZAbs: s.Z, ZAbsErr: s.ZErr, LogNHI: s.LogN, LogNHIErr: s.LogErr, BKms: s.B, BErr: s.BErr, LinesUsed: s.Lines,
			Flags: catalog.AbsorberFlags(s.Flags), Kind: s.Kind, EWRest: s.EW, EWRestErr: s.EWErr, EWSecond: s.Second, EWSecondErr: s.SecondErr,
			Significance: s.Significance,
		}
	}
	return rows
}

// The remarks of package absorbers have the bits of the catalog: an index out of
// range here does not compile.
var _ = [1]struct{}{}[uint32(absorbers.FlatPart)^uint32(catalog.FlatPart)|uint32(absorbers.PoorFit)^uint32(catalog.PoorFit)|
	uint32(absorbers.AtBound)^uint32(catalog.AtBound)|uint32(absorbers.OneLine)^uint32(catalog.OneLine)|
	uint32(absorbers.BreakOnly)^uint32(catalog.BreakOnly)|uint32(absorbers.LowerLimit)^uint32(catalog.LowerLimit)|
	uint32(absorbers.Overlaps)^uint32(catalog.Overlaps)|uint32(absorbers.RatioOff)^uint32(catalog.RatioOff)|
	uint32(absorbers.Saturated)^uint32(catalog.Saturated)|uint32(absorbers.Proximate)^uint32(catalog.Proximate)|
	uint32(absorbers.PartlyHidden)^uint32(catalog.PartlyHidden)]
