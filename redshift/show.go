package redshift

import (
	"math"

	"duskline/hydrogen"
)

// ComponentView is a component of a family as people are shown it.
type ComponentView struct {
	Name       string
	Absorption bool
	Source     string
	Most       float64 // bound of the amplitude, 0 for none
	Least      float64 // amplitude from which it is there for what the family needs
	Shapes     []ShapeView
}

// ShapeView is one shape of a component.
type ShapeView struct {
	Kind  string  // "line", "bump", "edge", "head", "stark", "jump", "forest" or "stack"
	Name  string  // of a line in the line list; digest of a stack
	Wave  float64 // vacuum Angstrom, with the shift of the line; first of a stack, 0 for forest and stark
	Rest  float64 // of a line or bump: the same without the shift
	Shift float64 // of a line, km/s against the redshift of the object, negative blueward
	Last  float64 // last wavelength of a stack
	Ratio float64 // relative height or depth
	Width float64 // Gaussian sigma in km/s; of an edge and the tail of a head in Angstrom
	// Of "stark" and "jump": electrons a cm^3, temperature in K, strength of the
	// Balmer continuum, last upper level. The lines that follow are Gaussians that stand for those of the atmosphere.
	Density, Temperature, Strength float64
	Upper                          int
}

// View describes the components for a width of the family in km/s.
func (f *Family) View(width float64) []ComponentView {
	out := make([]ComponentView, len(f.components))
	for i := range f.components {
		c := &f.components[i]
		v := ComponentView{Name: c.name, Absorption: c.absorption, Source: c.source, Most: c.most, Least: c.least}
		if q := c.stark; q != nil {
			s := ShapeView{Kind: "stark", Ratio: 1, Width: q.sigma(c), Density: q.Density, Temperature: q.Temperature, Strength: q.Strength, Upper: q.Upper}
			if q.Jump {
				s.Kind, s.Wave = "jump", hydrogen.BalmerLimit
			}
			v.Shapes = append(v.Shapes, s)
		}
		for j := range c.terms {
			t := &c.terms[j]
			s := ShapeView{Kind: "line", Name: t.name, Wave: math.Pow(10, t.logWave), Shift: t.moved, Ratio: t.amp, Width: c.sigmaKms(t, width)}
			s.Rest = s.Wave / (1 + t.moved/speedOfLight)
			if t.width > 0 && !t.shadow {
				s.Kind = "bump"
			}
			v.Shapes = append(v.Shapes, s)
		}
		for _, e := range c.edges {
			v.Shapes = append(v.Shapes, ShapeView{Kind: "edge", Wave: e.Wave, Ratio: e.Height, Width: e.Width})
		}
		for _, h := range c.heads {
			v.Shapes = append(v.Shapes, ShapeView{Kind: "head", Wave: h.Wave, Ratio: h.Depth, Width: h.Tail})
		}
		if c.stack != nil {
			first, last := c.stack.Range()
			v.Shapes = append(v.Shapes, ShapeView{Kind: "stack", Name: c.stack.Digest, Wave: first, Last: last, Ratio: 1})
		}
		if c.forest {
			v.Shapes = append(v.Shapes, ShapeView{Kind: "forest", Ratio: 1})
		}
		out[i] = v
	}
	return out
}

// Expected names the lines that should stand out in a member of the family.
func (f *Family) Expected() []string {
	names := make([]string, len(f.expected))
	for i, e := range f.expected {
		names[i] = e.name
	}
	return names
}

// Floor is the least error of a redshift in km/s.
func (f *Family) Floor() float64 { return f.floor }

// Needs names the components of which one must be there, none if the family needs nothing.
func (f *Family) Needs() []string {
	names := make([]string, len(f.needs))
	for i, c := range f.needs {
		names[i] = f.components[c].name
	}
	return names
}

// Proximity is by how many km/s the edges of the forest are moved blueward.
func (f *Family) Proximity() float64 { return speedOfLight * (math.Pow(10, f.proximity) - 1) }

// Forested reports whether the family has the forest of Lyman-alpha, whose
// depth depends on the redshift.
func (f *Family) Forested() bool { return f.forested }

// Span returns the rest wavelengths in Angstrom between which all shapes lie,
// the forest from the Lyman limit on.
func (f *Family) Span(width float64) (first, last float64) {
	first, last = math.Inf(1), 0
	add := func(lo, hi float64) { first, last = math.Min(first, lo), math.Max(last, hi) }
	for i := range f.components {
		c := &f.components[i]
		for j := range c.terms {
			t := &c.terms[j]
			w, q := math.Pow(10, t.logWave), reach*c.sigmaKms(t, width)/speedOfLight
			add(w*math.Max(0.5, 1-q), w*(1+q))
		}
		for _, e := range c.edges {
			add(e.Wave-20*e.Width, e.Wave+20*e.Width)
		}
		for _, h := range c.heads {
			if h.Blue {
				add(h.Wave-4*h.Tail, h.Wave+4*headBlur)
			} else {
				add(h.Wave-4*headBlur, h.Wave+4*h.Tail)
			}
		}
		if c.stark != nil && c.stark.Jump {
			add(jumpShown[0], jumpShown[1])
		}
		if c.stack != nil {
			add(c.stack.Range())
		}
		if c.forest {
			add(880, forestEdge)
		}
	}
	return first, last
}

// Curve draws component i alone at a redshift on n rest wavelengths from first
// to last in Angstrom, uniform in their logarithm: what its amplitude of 1 adds
// to the continuum or, in absorption, its fraction of the continuum with its
// sign.
func (f *Family) Curve(i int, z, width, first, last float64, n int) []float64 {
	var d, veil drawing
	var row []float64
	shift, start := math.Log10(1+z), math.Log10(first)
	step := (math.Log10(last) - start) / float64(n-1)
	c := &f.components[i]
	c.draw(&d, n, start+shift, step, shift, width)
	if !f.forested {
		return d.values
	}
	veil.reset(n)
	forest().draw(&veil, &row, n, start+f.proximity, step, z)
	for k, v := range veil.values {
		switch {
		case c.forest:
			d.values[k] += v
		case !c.absorption:
			d.values[k] *= 1 + v
		}
	}
	return d.values
}
