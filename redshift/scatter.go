package redshift

import (
	"fmt"
	"math"
	"slices"

	"duskline/linelist"
)

// ScatterRecipe names lines that move together against the redshift of their
// object, and by how much they do from one object to the next.
type ScatterRecipe struct {
	Lines  []string `toml:"lines"`
	Kms    float64  `toml:"kms"` // standard deviation
	Source string   `toml:"source"`
}

// Scatters returns the groups of lines that move against the redshift.
func (f *Family) Scatters() []ScatterRecipe { return f.scatters }

// checkScatters returns what is wrong with the groups of a recipe.
func checkScatters(groups []ScatterRecipe, list *linelist.List) []string {
	var problems []string
	seen := map[string]bool{}
	for i, g := range groups {
		bad := func(format string, args ...any) {
			problems = append(problems, fmt.Sprintf("scatter %d: %s", i+1, fmt.Sprintf(format, args...)))
		}
		if len(g.Lines) == 0 {
			bad("lines is empty, want names of the line list")
		}
		for _, name := range g.Lines {
			if _, ok := list.Find(name); !ok {
				bad("lines: no line %q in the line list", name)
			}
			if seen[name] {
				bad("lines: %s stands in two groups", name)
			}
			seen[name] = true
		}
		if !(g.Kms > 0 && g.Kms <= 5000) {
			bad("kms = %g, want above 0, up to 5000", g.Kms)
		}
		if g.Source == "" {
			bad("source is missing: say where the scatter comes from")
		}
	}
	return problems
}

// lineDoubt is the error in km/s that a redshift owes to lines that do not stand
// at rest in their object. With D the derivative of the model to the shift,
// D_g that of the lines of group g alone and W the weights, a displacement of
// the group by v moves the least-squares redshift by v times
//
//	share_g = (D_g^T W D) / (D^T W D)
//
// and groups count in quadrature. The continuum, which hardly takes up a
// derivative of a line, is left out, and so is the forest, whose doubt is edgeDoubt.
func (s *Scratch) lineDoubt(p *peak) float64 {
	if len(p.family.scatters) == 0 {
		return 0
	}
	l := &s.full
	s.slope = grow(s.slope, l.n)
	clear(s.slope)
	s.addSlope(s.slope, p, nil)
	all := 0.0
	for i, d := range s.slope {
		all += l.weight[i] * d * d
	}
	if !(all > 0) {
		return 0
	}
	sum := 0.0
	s.part = grow(s.part, l.n)
	for _, g := range p.family.scatters {
		clear(s.part)
		s.addSlope(s.part, p, g.Lines)
		share := 0.0
		for i, d := range s.part {
			share += l.weight[i] * d * s.slope[i]
		}
		share /= all
		sum += share * share * g.Kms * g.Kms
	}
	return math.Sqrt(sum)
}

// addSlope adds the change of the model over a pixel of shift, of all but the forest or of
// the lines named.
func (s *Scratch) addSlope(dst []float64, p *peak, names []string) {
	l := &s.full
	for c := range p.family.components {
		comp := &p.family.components[c]
		if p.fit.amp[c] == 0 {
			continue
		}
		for _, side := range [2]float64{-0.5, 0.5} {
			if names == nil {
				comp.draw(&s.single, l.n, l.start, l.step, p.shift+side*l.step, p.width)
			} else {
				s.drawNamed(comp, names, (p.shift-l.start)/l.step+side, p.width)
			}
			for _, r := range s.single.runs {
				for i := r.lo; i < r.hi; i++ {
					v := 2 * side * p.fit.amp[c] * s.single.values[i]
					if comp.absorption {
						v *= l.cont[i]
					}
					dst[i] += v
				}
			}
		}
	}
}

// drawNamed draws the lines of a component that are named, moved by a number of pixels.
func (s *Scratch) drawNamed(comp *component, names []string, move, width float64) {
	l := &s.full
	sign := 1.0
	if comp.absorption {
		sign = -1
	}
	s.single.reset(l.n)
	for i := range comp.terms {
		t := &comp.terms[i]
		if slices.Contains(names, t.name) {
			sigma := comp.sigmaKms(t, width) / (speedOfLight * ln10 * l.step)
			gaussian(&s.single, l.n, t.logWave/l.step+move, sigma, sign*t.amp)
		}
	}
}
