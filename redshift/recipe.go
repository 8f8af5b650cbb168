package redshift

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"duskline/hydrogen"
	"duskline/linelist"
)

// Recipe is the TOML form of a template family: what it is made of, where each
// number comes from, and over which redshifts it is tried.
type Recipe struct {
	Name     string    `toml:"name"`
	Class    string    `toml:"class"`
	Summary  string    `toml:"summary"`
	Redshift []float64 `toml:"redshift"` // first and last redshift
	Widths   []float64 `toml:"widths"`   // Gaussian sigma of the lines, km/s; the family is tried with each
	// Floor is the least one-sigma error of a redshift in km/s: what line
	// shifts, blends and shapes leave however good the spectrum is.
	Floor float64 `toml:"floor_kms"`
	// Scatter names lines whose velocities differ from that of their object.
	Scatter []ScatterRecipe `toml:"scatter"`
	// Expected names the lines that should stand out when the family is right
	// and the lines are covered.
	Expected []string `toml:"expected"`
	// Needs names components of which at least one must be there for a
	// spectrum to belong to the family: what sets it apart from others.
	Needs      []string          `toml:"needs"`
	Components []ComponentRecipe `toml:"component"`
}

// ComponentRecipe is one component: shapes with fixed ratios and one free,
// non-negative amplitude.
type ComponentRecipe struct {
	Name string `toml:"name"`
	// Kind is "emission" (adds to the continuum) or "absorption" (multiplies
	// it; its shapes are depths).
	Kind       string  `toml:"kind"`
	Width      float64 `toml:"width"`       // Gaussian sigma in km/s; the family's when 0
	WidthScale float64 `toml:"width_scale"` // factor on the family's width; 1 when 0
	// Most bounds what nature makes: for absorption the largest depth as a
	// fraction of the continuum, for emission the largest peak of the strongest
	// line inside the coverage over the continuum there. No bound when 0.
	Most float64 `toml:"most"`
	// Least is the amplitude from which the component counts as there for Needs.
	Least  float64      `toml:"least"`
	Source string       `toml:"source"`
	Lines  []lineRatio  `toml:"lines"`
	CaseB  *caseBRecipe `toml:"case_b"`
	Bumps  []bump       `toml:"bumps"`
	Edges  []edge       `toml:"edges"`
	Heads  []head       `toml:"heads"`
	Stark  *starkRecipe `toml:"stark"`
	Forest bool         `toml:"forest"`
	// Proximity moves the edges of the forest blueward, km/s: so far a quasar
	// thins the gas around it (Bajtlik, Duncan & Ostriker 1988).
	Proximity float64 `toml:"proximity_kms"`
	// Stack is the path of a dense rest-frame spectrum divided by its
	// continuum, relative to the recipe. It multiplies the continuum, with both
	// signs, so that its kind is "absorption".
	Stack string `toml:"stack"`
}

type lineRatio struct {
	Line  string  `toml:"line"`
	Ratio float64 `toml:"ratio"`
	// Shift moves the line against the family's redshift, km/s, as outflows do.
	Shift float64 `toml:"shift"`
}

// caseBRecipe asks for hydrogen recombination lines of the Balmer series at
// their Case B ratios.
type caseBRecipe struct {
	Temperature float64 `toml:"temperature"`
	Density     float64 `toml:"density"`
	Upper       []int   `toml:"upper"`
}

type bump struct {
	Wave   float64 `toml:"wave"`   // vacuum Angstrom
	Width  float64 `toml:"width"`  // Gaussian sigma, km/s
	Height float64 `toml:"height"` // relative
}

type edge struct {
	Wave   float64 `toml:"wave"`
	Width  float64 `toml:"width"`  // Angstrom, of the logistic step
	Height float64 `toml:"height"` // depth on the blue side
	From   float64 `toml:"from"`   // blue end of the step, Angstrom; 0 for none
}

type head struct {
	Wave  float64 `toml:"wave"`
	Depth float64 `toml:"depth"`
	Tail  float64 `toml:"tail"` // e-folding length of the band, Angstrom
	Blue  bool    `toml:"blue"` // band degrades to the blue
}

// headedRange is the longest redshift range of a family with band heads.
const headedRange = 0.05

// maxWidth is the largest Gaussian sigma of a line or bump, km/s.
const maxWidth = 30000.0

// positive reports whether all numbers are finite and above zero.
func positive(values ...float64) bool {
	for _, v := range values {
		if !(v > 0) || math.IsInf(v, 0) {
			return false
		}
	}
	return true
}

var classes = map[string]bool{"galaxy": true, "quasar": true, "star": true, "nebula": true}

// ParseRecipe reads a family recipe and compiles it against the line list.
// Every problem found is reported, each with the file and key it stands in.
func ParseRecipe(file string, text []byte, list *linelist.List) (*Family, error) {
	return ParseRecipeWith(file, text, list, nil)
}

// Stacks gives the composite that a recipe names by its path.
type Stacks func(path string) (*Composite, error)

// ParseRecipeWith is ParseRecipe for recipes that may have dense components.
// Their digests are part of the family's.
func ParseRecipeWith(file string, text []byte, list *linelist.List, stacks Stacks) (*Family, error) {
	r, errs := decodeRecipe(file, text)
	if r == nil {
		return nil, errors.Join(errs...)
	}
	bad := func(format string, args ...any) {
		errs = append(errs, fmt.Errorf("%s: %s", file, fmt.Sprintf(format, args...)))
	}
	if r.Name == "" {
		bad("name is missing")
	}
	if !classes[r.Class] {
		bad("class = %q, want galaxy, quasar, star or nebula", r.Class)
	}
	if len(r.Redshift) != 2 || !(r.Redshift[0] < r.Redshift[1]) || r.Redshift[0] <= -0.5 || r.Redshift[1] > 12 {
		bad("redshift = %v, want [first, last] with -0.5 < first < last <= 12", r.Redshift)
	}
	if len(r.Widths) == 0 {
		bad("widths is empty, want at least one Gaussian sigma in km/s")
	}
	for _, w := range r.Widths {
		if !(w >= 10 && w <= maxWidth) {
			bad("widths: %g is outside 10 to %g km/s", w, maxWidth)
		}
	}
	if !(r.Floor >= 0 && r.Floor <= 3000) {
		bad("floor_kms = %g, want 0 to 3000", r.Floor)
	}
	if len(r.Components) == 0 || len(r.Components) >= maxComponents {
		bad("%d components, want 1 to %d", len(r.Components), maxComponents-1)
	}
	f := &Family{Name: r.Name, Class: r.Class, Summary: r.Summary, Widths: r.Widths, floor: r.Floor, scatters: r.Scatter}
	for _, p := range checkScatters(r.Scatter, list) {
		bad("%s", p)
	}
	if len(r.Redshift) == 2 {
		f.ZMin, f.ZMax = r.Redshift[0], r.Redshift[1]
	}
	for _, name := range r.Expected {
		if l, ok := list.Find(name); ok {
			f.expected = append(f.expected, expectedLine{name, math.Log10(l.Wave)})
		} else {
			bad("expected: no line %q in the line list", name)
		}
	}
	for i := range r.Components {
		c, problems := compile(&r.Components[i], list, stacks)
		for _, p := range problems {
			bad("component %q: %s", r.Components[i].Name, p)
		}
		f.components = append(f.components, c)
		f.forested = f.forested || c.forest
		if p := r.Components[i].Proximity; !(p >= 0 && p <= 10000) || p > 0 && !c.forest {
			bad("component %q: proximity_kms = %g, want 0 to 10000, beside a forest", r.Components[i].Name, p)
		} else if p > 0 {
			f.proximity = math.Log10(1 + p/speedOfLight)
		}
	}
	for _, name := range r.Needs {
		k := slices.IndexFunc(r.Components, func(c ComponentRecipe) bool { return c.Name == name })
		if k < 0 {
			bad("needs: no component %q", name)
			continue
		}
		f.needs = append(f.needs, k)
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	if f.headed() && f.ZMax-f.ZMin > headedRange {
		return nil, fmt.Errorf("%s: redshift = %v: a family with band heads is tried as a whole and may span %g at most", file, r.Redshift, headedRange)
	}
	f.Digest = digest(text, f.components)
	return f, nil
}

func compile(r *ComponentRecipe, list *linelist.List, stacks Stacks) (component, []string) {
	var problems []string
	bad := func(format string, args ...any) { problems = append(problems, fmt.Sprintf(format, args...)) }
	c := component{name: r.Name, source: r.Source, width: r.Width, scale: r.WidthScale, most: r.Most, least: r.Least}
	if c.scale == 0 {
		c.scale = 1
	}
	if !(c.scale > 0 && c.scale <= 100) || !(r.Width >= 0 && r.Width <= maxWidth) {
		bad("width = %g, width_scale = %g, want up to %g km/s and 100, not negative", r.Width, r.WidthScale, maxWidth)
	}
	switch r.Kind {
	case "emission":
	case "absorption":
		c.absorption = true
	default:
		bad("kind = %q, want emission or absorption", r.Kind)
	}
	if !(r.Least >= 0) || r.Most > 0 && r.Least > r.Most {
		bad("least = %g, want 0 or more, and no more than most", r.Least)
	}
	if !(r.Most >= 0) {
		bad("most = %g, want a positive bound, or 0 for none", r.Most)
	}
	if r.Source == "" {
		bad("source is missing: say where the ratios come from")
	}
	for _, l := range r.Lines {
		found, ok := list.Find(l.Line)
		if !ok {
			bad("lines: no line %q in the line list", l.Line)
			continue
		}
		if !positive(l.Ratio) {
			bad("lines: %s: ratio = %g, want a positive number", l.Line, l.Ratio)
		}
		if !(math.Abs(l.Shift) <= 30000) {
			bad("lines: %s: shift = %g, want -30000 to 30000 km/s", l.Line, l.Shift)
		}
		shift := math.Log10(1 + l.Shift/speedOfLight)
		c.terms = append(c.terms, term{name: l.Line, logWave: math.Log10(found.Wave) + shift, moved: l.Shift, amp: l.Ratio})
	}
	if b := r.CaseB; b != nil {
		if len(b.Upper) == 0 {
			bad("case_b: upper is empty, want upper levels from 3 on")
		}
		for _, n := range b.Upper {
			t, err := hydrogen.NewTransition(2, n)
			if err != nil {
				bad("case_b: %v", err)
				continue
			}
			ratio := hydrogen.CaseB(b.Temperature, b.Density, n)
			if !positive(ratio) {
				bad("case_b: no ratio for upper level %d", n)
				continue
			}
			c.terms = append(c.terms, term{name: lineNear(list, t.Wave), logWave: math.Log10(t.Wave), amp: ratio})
		}
	}
	for _, b := range r.Bumps {
		if !positive(b.Wave, b.Width, b.Height) || b.Width > maxWidth {
			bad("bumps: wave, width and height must be positive, width up to %g km/s", maxWidth)
			continue
		}
		c.terms = append(c.terms, term{logWave: math.Log10(b.Wave), width: b.Width, amp: b.Height})
	}
	for _, e := range r.Edges {
		if !positive(e.Wave, e.Width, e.Height) {
			bad("edges: wave, width and height must be positive")
			continue
		}
		c.edges = append(c.edges, e)
	}
	for _, h := range r.Heads {
		if !positive(h.Wave, h.Depth, h.Tail) {
			bad("heads: wave, depth and tail must be positive")
			continue
		}
		c.heads = append(c.heads, h)
	}
	c.forest = r.Forest
	c.dense = newTable(c.edges, c.heads)
	if s := r.Stark; s != nil {
		c.stark = s
		if err := s.add(&c, list); err != nil {
			bad("stark: %v", err)
		}
	}
	if r.Stack != "" {
		var err error
		switch {
		case stacks == nil:
			bad("stack = %q: only a recipe in a folder can have one", r.Stack)
		case !c.absorption:
			bad("stack = %q multiplies the continuum: kind must be absorption", r.Stack)
		default:
			if c.stack, err = stacks(r.Stack); err != nil {
				bad("stack = %q: %v", r.Stack, err)
			}
		}
	}
	if len(r.Lines)+len(r.Bumps)+len(r.Edges)+len(r.Heads) == 0 && r.CaseB == nil && r.Stark == nil && !r.Forest && r.Stack == "" {
		bad("has no lines, case_b, stark, bumps, edges, heads, forest or stack")
	}
	if !c.absorption && (c.dense != nil || r.Stark != nil) {
		bad("edges, heads and stark are depths: kind must be absorption")
	}
	if c.forest && !c.absorption {
		bad("a forest absorbs: kind must be absorption")
	}
	return c, problems
}

// lineNear names the listed line within 30 km/s of a wavelength, if any.
func lineNear(list *linelist.List, wave float64) string {
	for _, l := range list.Lines() {
		if math.Abs(l.Wave/wave-1) < 1e-4 && l.Ion == "H I" {
			return l.Name
		}
	}
	return ""
}
