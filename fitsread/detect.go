package fitsread

import (
	"fmt"
	"strings"

	"duskline/spectrum"
)

// The names of the built-in layouts, in order of trust.
const (
	layoutClass  = "ivoa-spectrum" // tables that VOCLASS calls spectra
	layoutIVOA   = "ivoa-columns"  // columns told by IVOA utypes or UCDs
	layoutNamed  = "named-columns" // columns told by their names
	layoutImages = "named-images"  // images told by their EXTNAME
	layoutAxis   = "spectral-axis" // image with a spectral axis in its header
	layoutGuess  = "guessed"       // columns told by position and content
)

var builtins = []struct {
	name string
	find func(*File) (*plan, error)
}{
	{layoutClass, (*File).findClassed},
	{layoutIVOA, (*File).findIVOA},
	{layoutNamed, (*File).findNamed},
	{layoutImages, (*File).findImages},
	{layoutAxis, (*File).findAxis},
	{layoutGuess, (*File).findGuess},
}

// minTableRows keeps lists of lines, a row a line, from passing for spectra with
// a row a pixel.
const minTableRows = 32

// choose settles how the file is read: the forced layout, the user's layouts in
// their order, the built-in ones in order of trust.
func (f *File) choose() error {
	var unfit error // why a layout that is for any file does not fit this one
	var unused []string
	for i := range f.opts.Layouts {
		l := &f.opts.Layouts[i]
		forced := f.opts.Force == l.Name
		if f.opts.Force != "" && !forced || !forced && l.hasMatch() && !l.matches(f.hdus) {
			continue
		}
		p, err := f.planFor(l)
		if err != nil && !forced && !l.hasMatch() {
			if unfit == nil {
				unfit = err
			}
			why := err.Error()
			if re, ok := err.(*ReadError); ok {
				why = re.Msg
			}
			unused = append(unused, fmt.Sprintf("layout %s: %s", l.Name, why))
			continue
		}
		if err != nil {
			return err
		}
		p.skipped = append(unused, p.skipped...)
		f.plan = p
		return f.settle()
	}
	var firstErr error
	known := f.opts.Force == ""
	for _, b := range builtins {
		if f.opts.Force != "" && f.opts.Force != b.name {
			continue
		}
		known = true
		p, err := b.find(f)
		if err != nil && firstErr == nil {
			firstErr = err
		}
		if p != nil {
			p.layout = b.name
			p.skipped = append(unused, p.skipped...)
			f.plan = p
			return f.settle()
		}
	}
	switch {
	case !known:
		return fault(ErrLayout, -1, "name one of the settings' layouts or a built-in one", "there is no layout %q", f.opts.Force)
	case unfit != nil:
		return unfit
	case firstErr != nil:
		return firstErr
	}
	return f.nothingFound()
}

// nothingFound says why, as well as it can be told.
func (f *File) nothingFound() error {
	for _, h := range f.hdus {
		switch {
		case h.broken != nil:
			return h.broken
		case h.missing > 0:
			return fault(ErrTruncated, h.index, hintCopy, "the file ends inside this HDU, and no spectrum comes before it")
		case h.kind == kindCompressed, h.kind == kindPacked:
			return compressedFault(h)
		}
	}
	if err := f.otherClass(); err != nil {
		return err
	}
	hint := "write a layout that names HDU and columns (see configs/layouts/example.toml)"
	if len(f.hdus) == 1 && f.hdus[0].length == 0 {
		hint = "check that the file is whole"
	}
	return fault(ErrNoSpectrum, -1, hint,
		"no spectrum was recognized: looked for a table with wavelength and flux, or an image with a spectral axis; the file has %s", f.contents())
}

func compressedFault(h *hdu) *ReadError {
	if h.kind == kindPacked {
		return fault(ErrCompressed, h.index, unpackHint, "the table %q is compressed in tiles by a method, or holds arrays on the heap, that are not read here", h.name)
	}
	return fault(ErrCompressed, h.index, unpackHint, "the image %q is compressed by the method %s, which is not read here",
		h.name, h.header.text("ZCMPTYPE"))
}

// settle checks the plan's columns with the decoder and finds out what headers
// and target tables say about all spectra.
func (f *File) settle() error {
	p := f.plan
	used := map[*hdu][]*column{}
	var order []*hdu
	note := func(pl place) {
		if pl.hdu == nil || pl.col == nil || pl.hdu.kind != kindTable || !pl.col.numeric() || pl.col.code == 'X' {
			return
		}
		for _, c := range used[pl.hdu] {
			if c == pl.col {
				return
			}
		}
		if used[pl.hdu] == nil {
			order = append(order, pl.hdu)
		}
		used[pl.hdu] = append(used[pl.hdu], pl.col)
	}
	for gi := range p.groups {
		for ai := range p.groups[gi].arms {
			a := &p.groups[gi].arms[ai]
			for _, pl := range []place{a.wave.values, a.flux, a.weight, a.upper, a.resolution, a.powerWave} {
				note(pl)
			}
			for _, m := range a.masks {
				note(m.at)
			}
		}
	}
	for _, h := range order {
		if err := confirm(h, used[h]); err != nil {
			return err
		}
	}
	for i := range p.groups {
		g := &p.groups[i]
		g.headers = []*hdu{g.arms[0].flux.hdu}
		if f.hdus[0] != g.headers[0] {
			g.headers = append(g.headers, f.hdus[0])
		}
		g.obs = observe(g.headers, &g.arms[0].wave)
		if p.frame != nil {
			g.obs.frame, g.obs.frameDoubt, g.obs.frameWhy = *p.frame, "", "layout "+p.layout
			if *p.frame == spectrum.RestFrame {
				g.obs.frameDoubt = spectrum.RestFrameStated
			}
		}
	}
	f.findTargets()
	return nil
}

// candidate is a table or image set that holds a spectrum by itself or as an arm.
type candidate struct {
	name   string // EXTNAME, or the common prefix of an image set
	base   string // the name without the arm's
	shape  string // what it is made of: only likes are read side by side
	arm    arm
	rows   int64
	orders int64
}

// armWords are the names instruments give to arms, in lower case.
var armWords = map[string]bool{}

func init() {
	for _, w := range strings.Fields("b r z g v i h j k u n blue red green uvb vis nir ir mir uv fuv nuv opt1 opt2 " +
		"arm1 arm2 arm3 arm4 ch1 ch2 ch3 ch4 chan1 chan2 chan3 chan4 sw lw short long bluearm redarm") {
		armWords[w] = true
	}
}

// splitArm takes an arm's name off the start or end of an extension name:
// "Horne-B" is base "horne", arm "B". Without an arm's name arm is empty.
func splitArm(name string) (base, armName string) {
	cut := func(r rune) bool { return strings.ContainsRune("-_. :", r) }
	tokens := strings.FieldsFunc(name, cut)
	if len(tokens) == 0 {
		return strings.ToLower(name), ""
	}
	last := len(tokens) - 1
	switch {
	case armWords[strings.ToLower(tokens[last])]:
		return strings.ToLower(strings.Join(tokens[:last], "-")), tokens[last]
	case armWords[strings.ToLower(tokens[0])]:
		return strings.ToLower(strings.Join(tokens[1:], "-")), tokens[0]
	}
	return strings.ToLower(strings.Join(tokens, "-")), ""
}

func hasAny(s string, words ...string) bool {
	for _, w := range words {
		if strings.Contains(s, w) {
			return true
		}
	}
	return false
}

// arrange makes spectra of candidates, in file order:
//
//   - where one is named as a coadd or merged spectrum, it alone;
//   - otherwise the first and those made of the same columns, since a file's main
//     product comes first and exposures or models differ from it;
//   - arms of the same base name become segments of one spectrum;
//   - of versions named by their extraction the optimal one is read, else the
//     first; every other base name is a spectrum of its own.
func arrange(cands []candidate) (groups []group, skipped []string) {
	skip := func(c candidate, why string) {
		skipped = append(skipped, fmt.Sprintf("HDU %d (%s): %s", c.arm.flux.hdu.index, c.name, why))
	}
	var kept []candidate
	for _, c := range cands {
		if hasAny(strings.ToLower(c.name), "coadd", "combined", "merged", "stack") {
			kept = append(kept, c)
		}
	}
	if coadded := len(kept) > 0; !coadded {
		for _, c := range cands {
			if c.shape == cands[0].shape {
				kept = append(kept, c)
				continue
			}
			skip(c, "made of other columns than the first spectrum")
		}
	} else {
		for _, c := range cands {
			if !hasAny(strings.ToLower(c.name), "coadd", "combined", "merged", "stack") {
				skip(c, "the coadded spectrum is read instead")
			}
		}
	}
	var bases []string
	byBase := map[string][]candidate{}
	for _, c := range kept {
		if byBase[c.base] == nil {
			bases = append(bases, c.base)
		}
		byBase[c.base] = append(byBase[c.base], c)
	}
	if len(bases) > 1 {
		if best, ok := bestVersion(bases); ok {
			for _, b := range bases {
				if b != best {
					for _, c := range byBase[b] {
						skip(c, "another extraction of the same spectrum, "+best+", is read")
					}
				}
			}
			bases = []string{best}
		}
	}
	for _, b := range bases {
		groups = append(groups, joinArms(b, byBase[b])...)
	}
	return groups, skipped
}

// joinArms makes one group of candidates that are distinct arms, else one each.
func joinArms(base string, cs []candidate) []group {
	seen := map[string]bool{}
	areArms := len(cs) > 1
	for _, c := range cs {
		if c.arm.name == "" || seen[c.arm.name] || c.rows != cs[0].rows || c.orders > 0 {
			areArms = false
		}
		seen[c.arm.name] = true
	}
	if areArms {
		g := group{name: base, rows: cs[0].rows}
		for _, c := range cs {
			g.arms = append(g.arms, c.arm)
		}
		return []group{g}
	}
	var out []group
	for _, c := range cs {
		out = append(out, group{name: c.name, arms: []arm{c.arm}, rows: c.rows, orders: c.orders})
	}
	return out
}

// bestVersion picks among extractions of the same spectrum, told by words for
// optimal (Horne 1986, PASP 98, 609) and for boxcar extraction. ok is false when
// the names speak of neither.
func bestVersion(bases []string) (best string, ok bool) {
	rank := func(b string) int {
		switch {
		case hasAny(b, "horne", "optimal") || hasToken(b, "opt"):
			return 0
		case hasAny(b, "boxcar", "bxspf", "aperture") || hasToken(b, "box"):
			return 2
		}
		return 1
	}
	found := false
	for _, b := range bases {
		if rank(b) != 1 {
			found = true
		}
		if best == "" || rank(b) < rank(best) || rank(b) == rank(best) && len(b) < len(best) {
			best = b
		}
	}
	return best, found
}

func hasToken(s, word string) bool {
	for _, t := range strings.FieldsFunc(s, func(r rune) bool { return r == '-' || r == '_' }) {
		if t == word {
			return true
		}
	}
	return false
}
