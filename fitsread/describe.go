package fitsread

import (
	"fmt"
	"math"
	"strings"
)

// Description tells people what is in a file and how it is read.
type Description struct {
	File    string
	Bytes   int64 // unpacked
	Gzipped bool
	HDUs    []HDUInfo
	Layout  string // name of the layout in use
	Why     string // why it was chosen
	Spectra int
	Parts   []PartInfo // where the arrays of the first spectrum stand
	Skipped []string   // what looks like spectra and is not read, with the reason
	Medium  string     // of the first spectrum, and why
	Frame   string     // of the first spectrum, and why
	First   string     // summary of the first spectrum
	Assumed []string   // warnings of the first spectrum
}

// HDUInfo describes one HDU.
type HDUInfo struct {
	Index   int
	Name    string
	Kind    string
	Shape   string // such as "4096 x 5" pixels or "8 columns, 4600 rows"
	Problem string // "" when it can be used
	Used    bool
	Columns []ColumnInfo
}

// ColumnInfo describes one table column.
type ColumnInfo struct {
	Name, Format, Unit, UCD, Utype, Role string
}

// PartInfo says where the arrays of an arm come from; empty for none.
type PartInfo struct {
	Name, Wavelength, WaveUnit, Flux, FluxUnit, Weight, WeightKind, Mask, Resolution string
}

// Describe reports on the file. It reads the first spectrum; where that fails
// the reason stands in First.
func (f *File) Describe() (d Description) {
	d = Description{File: f.path, Bytes: f.src.size, Gzipped: f.src.gzipped, Layout: f.plan.layout,
		Why: f.plan.why, Spectra: f.Count(), Skipped: f.plan.skipped}
	used := map[place]bool{}
	for i := range f.plan.groups[0].arms {
		a := &f.plan.groups[0].arms[i]
		p := PartInfo{Name: a.name, Wavelength: a.wave.String(), WaveUnit: a.wave.unit.String(), Flux: a.flux.String(),
			FluxUnit: a.fluxUnit, Weight: a.weight.String(), Resolution: a.resolution.String()}
		if a.kernel.isSet() {
			p.Resolution = "widths of " + a.kernel.String()
		}
		if !a.wave.unitKnown {
			p.WaveUnit = "not stated"
		}
		if a.weight.isSet() {
			p.WeightKind = weightName(a.weightRole)
		}
		var masks []string
		for _, m := range a.masks {
			masks = append(masks, m.at.String())
			used[m.at] = true
		}
		p.Mask = strings.Join(masks, ", ")
		for _, pl := range []place{a.wave.values, a.wave.start, a.wave.step, a.flux, a.weight, a.upper, a.resolution, a.kernel} {
			used[pl] = true
		}
		d.Parts = append(d.Parts, p)
	}
	for _, h := range f.hdus {
		d.HDUs = append(d.HDUs, h.info(used))
	}
	s, err := f.Read(0)
	if err != nil {
		d.First = err.Error()
		return d
	}
	obs, w := &f.plan.groups[0].obs, &f.plan.groups[0].arms[0].wave
	why := "assumed"
	switch {
	case w.mediumKnown:
		why = w.mediumWhy
	case obs.mediumKnown:
		why = obs.mediumWhy
	}
	d.Medium = fmt.Sprintf("%s (%s)", s.Medium, why)
	d.Frame = fmt.Sprintf("%s (%s)", s.Frame, obs.frameWhy)
	pixels, good := 0, 0
	for i := range s.Segments {
		pixels += s.Segments[i].Len()
		good += s.Segments[i].Good()
	}
	d.First = fmt.Sprintf("%s: %d pixels in %d segments, %d good, %s", s.ObjectID, pixels, len(s.Segments), good, coverage(s.Segments))
	for _, warning := range s.Warnings {
		d.Assumed = append(d.Assumed, warning.Text)
	}
	return d
}

func (h *hdu) info(used map[place]bool) HDUInfo {
	info := HDUInfo{Index: h.index, Name: h.name, Kind: h.kind.String()}
	switch h.kind {
	case kindTable, kindASCII:
		info.Shape = fmt.Sprintf("%d columns, %d rows", len(h.columns), h.axes[1])
		if h.packed != nil {
			info.Shape += ", compressed in tiles"
		}
	default:
		sizes := make([]string, len(h.axes))
		for i, a := range h.axes {
			sizes[i] = fmt.Sprint(a)
		}
		if info.Shape = strings.Join(sizes, " x "); info.Shape == "" {
			info.Shape = "no data"
		}
		if h.tiles != nil {
			info.Shape += ", compressed by " + h.tiles.method
		}
	}
	switch {
	case h.broken != nil:
		info.Problem = h.broken.Msg
	case h.missing > 0:
		info.Problem = "cut short"
	}
	inUse := map[int]bool{}
	for p := range used {
		if p.hdu == h {
			info.Used = true
			if p.col != nil {
				inUse[p.col.number] = true
			}
		}
	}
	for i := range h.columns {
		c := &h.columns[i]
		ci := ColumnInfo{Name: c.name, Format: c.form, Unit: c.unit, UCD: c.ucd, Utype: c.utype}
		if inUse[c.number] {
			ci.Role = "used"
		}
		info.Columns = append(info.Columns, ci)
	}
	return info
}

// Most that an error names of what a file has.
const (
	mostHDUs    = 5
	mostColumns = 12
)

// contents names the HDUs, in few words, for an error about a file without a spectrum.
func (f *File) contents() string {
	var parts []string
	for _, h := range f.hdus[:min(mostHDUs, len(f.hdus))] {
		parts = append(parts, h.brief())
	}
	if more := len(f.hdus) - mostHDUs; more > 0 {
		parts = append(parts, fmt.Sprintf("%d more", more))
	}
	text := strings.Join(parts, ", ")
	if len(f.hdus) == 1 && f.hdus[0].length == 0 {
		text += fmt.Sprintf(" and nothing after it (%d bytes)", f.src.size)
	}
	return text
}

// brief names an HDU with its shape and, of a table, its columns.
func (h *hdu) brief() string {
	info := h.info(nil)
	name := ""
	if h.name != "" {
		name = fmt.Sprintf(" %q", h.name)
	}
	text := fmt.Sprintf("HDU %d%s (%s, %s", h.index, name, info.Kind, info.Shape)
	if len(info.Columns) > 0 {
		var names []string
		for _, c := range info.Columns[:min(mostColumns, len(info.Columns))] {
			names = append(names, oneLine(c.Name))
		}
		text += ": " + strings.Join(names, " ")
		if more := len(info.Columns) - mostColumns; more > 0 {
			text += fmt.Sprintf(" and %d more", more)
		}
	}
	switch {
	case h.kind == kindImage && h.length > 0:
		if ctype := h.header.text("CTYPE1"); ctype != "" {
			text += fmt.Sprintf("; CTYPE1 is %q", ctype)
		} else {
			text += "; no CTYPE1"
		}
	case h.kind != kindTable && h.kind != kindASCII:
	case h.axes[1] == 0:
		text += "; it is empty"
	case h.axes[1] < minTableRows:
		text += fmt.Sprintf("; a spectrum with a row a pixel has at least %d", minTableRows)
	}
	return text + ")"
}

// String names the unit.
func (u spectralUnit) String() string {
	base := ""
	for _, name := range []string{"Angstrom", "nm", "micron", "m", "cm", "mm", "pm", "Hz", "kHz", "MHz", "GHz", "THz", "eV", "keV", "MeV", "J", "erg",
		"cm-1", "m-1", "um-1", "m/s", "km/s"} {
		if v, _ := parseUnit(name); v.quantity == u.quantity && v.factor == u.factor {
			base = name
			break
		}
	}
	if si := map[quantity]string{wavelength: "m", frequency: "Hz", energy: "J", wavenumber: "m-1"}[u.quantity]; base == "" && si != "" {
		base = fmt.Sprintf("10**(%d) %s", int(math.Round(math.Log10(u.factor))), si)
	}
	if base == "" {
		base = "SI"
	}
	switch u.scale {
	case log10:
		return "log10(" + base + ")"
	case ln:
		return "ln(" + base + ")"
	}
	return base
}
