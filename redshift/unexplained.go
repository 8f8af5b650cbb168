package redshift

import (
	"cmp"
	"math"
	"slices"

	"duskline/spectrum"
)

// Narrow emission that the winning model leaves tells of a second object in the
// aperture: another galaxy, or one behind.
const (
	leftSigma  = 2   // pixels, Gaussian, of what is looked for: 140 km/s
	leftHalf   = 12  // pixels to either side, whose mean is no feature
	leftSNR    = 7.0 // of a feature, in units of the scatter of all pixels, if above 1
	leftAround = 60  // pixels to either side, which it stands above
	leftApart  = 15  // pixels from one feature to the next
	// A line that an object at the redshift may have explains what lies within ownKms of it,
	// in quasars ownBroadKms: strong lines have wings and broad bases.
	ownKms, ownBroadKms = 500.0, 2500.0
)

// leftovers returns the observed wavelengths of narrow emission features in the residual s.tmp
// that belong to no line of any family at the redshift, nor to the air, strongest first: as
// many as there are more of them than features just as strong in absorption, for the sky's subtraction
// and models of cool stars leave both. The weights are those before tempering, which
// takes weight just where the model fails.
func (f *Finder) leftovers(s *Scratch, g *spectrum.Grid, p *peak) []float64 {
	l := &s.full
	var profile [2*leftHalf + 1]float64
	for j := range profile {
		x := float64(j-leftHalf) / leftSigma
		profile[j] = math.Exp(-0.5 * x * x)
	}
	s.filtered = grow(s.filtered, l.n)
	s.aside = s.aside[:0]
	clear(s.filtered)
	for k := leftHalf; k < l.n-leftHalf; k++ {
		weight, resid := s.weight[k-leftHalf:k+leftHalf+1], s.tmp[k-leftHalf:k+leftHalf+1]
		var w, wg, wgg, wr, wrg float64
		for j, v := range weight {
			q := v * profile[j]
			w, wg, wgg = w+v, wg+q, wgg+q*profile[j]
			wr, wrg = wr+v*resid[j], wrg+q*resid[j]
		}
		// Lines want data on the core and on both sides.
		if weight[leftHalf] > 0 && weight[leftHalf-2] > 0 && weight[leftHalf+2] > 0 {
			if norm := wgg - wg*wg/w; norm > 0.2*wgg {
				s.filtered[k] = (wrg - wg*wr/w) / math.Sqrt(norm)
				s.aside = append(s.aside, math.Abs(s.filtered[k]))
			}
		}
	}
	if len(s.aside) == 0 {
		return nil
	}
	f.hideOwn(s, g, p)
	// The median of |x| of a Gaussian is 0.6745.
	least := leftSNR * math.Max(1, spectrum.Median(s.aside)/0.6745)
	var emission []int
	absorption := 0
	for k, v := range s.filtered {
		if math.Abs(v) < least || !s.strongest(k) {
			continue
		}
		if v < 0 {
			absorption++
		} else if s.tops(k) {
			emission = append(emission, k)
		}
	}
	slices.SortStableFunc(emission, func(a, b int) int { return cmp.Compare(s.filtered[b], s.filtered[a]) })
	var waves []float64
	for _, k := range emission[:max(0, len(emission)-absorption)] {
		waves = append(waves, math.Pow(10, g.LogWave(k)))
	}
	return waves
}

// strongest reports whether no pixel within leftApart, where strong features have lobes of the other sign, has more.
func (s *Scratch) strongest(k int) bool {
	v := math.Abs(s.filtered[k])
	for i := max(0, k-leftApart); i < min(s.full.n, k+leftApart+1); i++ {
		if u := math.Abs(s.filtered[i]); u > v || u == v && i < k {
			return false
		}
	}
	return true
}

// tops reports whether the flux at a pixel is above nearly all around it: what stands between
// absorption lines, as the light between the last Balmer lines of a star, is not.
func (s *Scratch) tops(k int) bool {
	s.aside = s.aside[:0]
	for i := max(0, k-leftAround); i < min(s.full.n, k+leftAround+1); i++ {
		if s.weight[i] > 0 {
			s.aside = append(s.aside, s.scaled[i])
		}
	}
	slices.Sort(s.aside)
	return 3*s.aside[9*len(s.aside)/10] < s.scaled[k-1]+s.scaled[k]+s.scaled[k+1]
}

// hideOwn clears s.filtered about all emission lines that a family or the line list has at the redshift, in the forest, and in all bands of the air.
func (f *Finder) hideOwn(s *Scratch, g *spectrum.Grid, p *peak) {
	l := &s.full
	own := ownKms
	if p.family.Class == "quasar" {
		own = ownBroadKms
	}
	half := own / (speedOfLight * ln10)
	hide := func(from, to float64) {
		if lo, hi := pixelRange(g, from, to); lo < hi {
			clear(s.filtered[lo:hi])
		}
	}
	for _, fam := range f.families {
		for c := range fam.components {
			if fam.components[c].absorption {
				continue
			}
			for _, t := range fam.components[c].terms {
				hide(t.logWave+p.shift-half, t.logWave+p.shift+half)
			}
		}
	}
	for _, wave := range f.opt.Lines {
		x := math.Log10(wave) + p.shift
		hide(x-half, x+half)
	}
	if p.family.forested {
		hide(l.start, forestEdgeLog+p.shift)
	}
	for _, bands := range [][][2]float64{f.opt.SkyBands, f.opt.SkyLines, f.opt.TelluricBands, f.opt.WaterBands} {
		for _, b := range bands {
			hide(math.Log10(b[0])-3*leftSigma*l.step, math.Log10(b[1])+3*leftSigma*l.step)
		}
	}
}
