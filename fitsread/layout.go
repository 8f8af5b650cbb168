package fitsread

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"reflect"
	"sort"
	"strings"

	"duskline/spectrum"

	"github.com/pelletier/go-toml/v2"
)

// Layout is a description of a kind of file, read from TOML by ParseLayout. The
// package documentation gives the format.
type Layout struct {
	Name   string
	doc    layoutDoc
	digest string
}

// Digest identifies the text of the layout: 16 hexadecimal digits of its SHA-256.
func (l *Layout) Digest() string { return l.digest }

type layoutDoc struct {
	Description string     `toml:"description"`
	Rows        string     `toml:"rows"`
	Match       matchDoc   `toml:"match"`
	Wavelength  *waveDoc   `toml:"wavelength"`
	Flux        *fluxDoc   `toml:"flux"`
	Weight      *weightDoc `toml:"weight"`
	Mask        *maskDoc   `toml:"mask"`
	Masks       []maskDoc  `toml:"masks"`
	Resolution  *resDoc    `toml:"resolution"`
	Frame       *frameDoc  `toml:"frame"`
	Object      *objectDoc `toml:"object"`
	Arm         []armDoc   `toml:"arm"`
}

type matchDoc struct {
	HDU     any               `toml:"hdu"`
	Columns []string          `toml:"columns"`
	Cards   map[string]string `toml:"cards"`
}

type armDoc struct {
	Name       string     `toml:"name"`
	Wavelength *waveDoc   `toml:"wavelength"`
	Flux       *fluxDoc   `toml:"flux"`
	Weight     *weightDoc `toml:"weight"`
	Mask       *maskDoc   `toml:"mask"`
	Masks      []maskDoc  `toml:"masks"`
	Resolution *resDoc    `toml:"resolution"`
}

// placeDoc says where an array stands.
type placeDoc struct {
	HDU    any    `toml:"hdu"`
	Column string `toml:"column"`
	Line   int64  `toml:"line"`
	Plane  int64  `toml:"plane"`
}

type waveDoc struct {
	placeDoc
	Axis   bool   `toml:"axis"`
	Start  string `toml:"start"`
	Step   string `toml:"step"`
	Unit   string `toml:"unit"`
	Scale  string `toml:"scale"`
	Medium string `toml:"medium"`
}

type fluxDoc struct {
	placeDoc
	Unit   string `toml:"unit"`
	Points string `toml:"points"`
}

type weightDoc struct {
	placeDoc
	Kind  string `toml:"kind"`
	Upper string `toml:"upper"`
}

type maskDoc struct {
	placeDoc
	Bad  string `toml:"bad"`
	Bits int64  `toml:"bits"`
}

type resDoc struct {
	placeDoc
	Kind       string       `toml:"kind"`
	Power      float64      `toml:"power"`
	Table      [][2]float64 `toml:"table"`
	Wavelength string       `toml:"wavelength"`
}

type frameDoc struct {
	Velocity string `toml:"velocity"`
}

type objectDoc struct {
	HDU any    `toml:"hdu"`
	ID  string `toml:"id"`
	RA  string `toml:"ra"`
	Dec string `toml:"dec"`
}

var (
	weightKinds = map[string]role{"sigma": roleSigma, "variance": roleVariance, "inverse_variance": roleIvar}
	resKinds    = map[string]role{"power": rolePower, "fwhm": roleFWHM, "pixels": roleDisp, "kernel": roleKernel}
	badKinds    = map[string]role{"nonzero": roleQuality, "zero": roleGood}
	scaleKinds  = map[string]scale{"linear": linear, "log10": log10, "ln": ln}
	mediumKinds = map[string]spectrum.Medium{"air": spectrum.Air, "vacuum": spectrum.Vacuum}
	frameKinds  = map[string]spectrum.Frame{"barycentric": spectrum.Barycentric, "heliocentric": spectrum.Heliocentric,
		"geocentric": spectrum.Geocentric, "topocentric": spectrum.Topocentric, "rest": spectrum.RestFrame}
)

// ParseLayout reads a layout file. name is what -- and Options.Force -- call it.
// Unknown keys are refused by name, and every other problem found is reported,
// joined into one error.
func ParseLayout(name string, text []byte) (Layout, error) {
	var doc layoutDoc
	if err := toml.NewDecoder(bytes.NewReader(text)).DisallowUnknownFields().Decode(&doc); err != nil {
		var strict *toml.StrictMissingError
		if errors.As(err, &strict) {
			var keys []string
			for _, e := range strict.Errors {
				keys = append(keys, strings.Join(e.Key(), "."))
			}
			return Layout{}, fmt.Errorf("layout %s: unknown keys: %s", name, strings.Join(keys, ", "))
		}
		return Layout{}, fmt.Errorf("layout %s: %w", name, err)
	}
	var errs []error
	bad := func(format string, args ...any) { errs = append(errs, fmt.Errorf("layout "+name+": "+format, args...)) }
	if name == "" {
		bad("it has no name")
	}
	if doc.Rows != "" && doc.Rows != "spectra" && doc.Rows != "orders" {
		bad("rows = %q, want spectra or orders", doc.Rows)
	}
	for _, b := range builtins {
		if b.name == name {
			bad("the name is that of a built-in layout")
		}
	}
	if doc.Match.HDU != nil {
		checkHDU(bad, "match", doc.Match.HDU)
	}
	one := armDoc{Wavelength: doc.Wavelength, Flux: doc.Flux, Weight: doc.Weight, Mask: doc.Mask, Masks: doc.Masks, Resolution: doc.Resolution}
	if len(doc.Arm) == 0 {
		doc.Arm = []armDoc{one}
	} else if !reflect.DeepEqual(one, armDoc{}) {
		bad("wavelength, flux, weight, mask and resolution stand either at the top or in every arm")
	}
	for i := range doc.Arm {
		doc.Arm[i].check(bad, i)
	}
	if doc.Frame != nil {
		oneOf(bad, "frame.velocity", doc.Frame.Velocity, frameKinds)
	}
	if doc.Object != nil {
		checkHDU(bad, "object", doc.Object.HDU)
		if (doc.Object.RA == "") != (doc.Object.Dec == "") {
			bad("object.ra and object.dec belong together")
		}
	}
	if len(errs) > 0 {
		return Layout{}, errors.Join(errs...)
	}
	sum := sha256.Sum256(text)
	return Layout{Name: name, doc: doc, digest: hex.EncodeToString(sum[:8])}, nil
}

type complain func(format string, args ...any)

func oneOf[T any](bad complain, key, value string, allowed map[string]T) {
	if _, ok := allowed[value]; ok {
		return
	}
	words := make([]string, 0, len(allowed))
	for w := range allowed {
		words = append(words, w)
	}
	sort.Strings(words)
	bad("%s = %q, want one of %s", key, value, strings.Join(words, ", "))
}

func checkHDU(bad complain, key string, hdu any) {
	switch v := hdu.(type) {
	case string:
		if v != "" {
			return
		}
	case int64:
		if v >= 0 {
			return
		}
	}
	bad("%s.hdu = %v, want a number from 0 or an EXTNAME", key, hdu)
}

func (d *placeDoc) check(bad complain, key string) {
	checkHDU(bad, key, d.HDU)
	if d.Column != "" && (d.Line != 0 || d.Plane != 0) {
		bad("%s: column belongs to a table, line and plane to an image", key)
	}
	if d.Line != 0 && d.Plane != 0 {
		bad("%s: give line or plane", key)
	}
	if d.Line < 0 {
		bad("%s.line = %d, want a number from 1, or nothing for the object's own line", key, d.Line)
	}
	if d.Plane < 0 {
		bad("%s.plane = %d, want a number from 1", key, d.Plane)
	}
}

func (a *armDoc) check(bad complain, i int) {
	if a.Wavelength == nil || a.Flux == nil {
		bad("arm %d: wavelength and flux are needed", i+1)
		return
	}
	w := a.Wavelength
	w.check(bad, "wavelength")
	ways := 0
	for _, way := range []bool{w.Column != "", w.Line != 0, w.Axis, w.Start != "" || w.Step != ""} {
		if way {
			ways++
		}
	}
	if ways > 1 {
		bad("wavelength: give one of column, line, axis, start with step")
	}
	if (w.Start == "") != (w.Step == "") {
		bad("wavelength.start and wavelength.step belong together")
	}
	if w.Unit != "" {
		if _, ok := parseUnit(w.Unit); !ok {
			bad("wavelength.unit = %q is not a unit of wavelength, frequency, energy or wavenumber", w.Unit)
		}
	}
	if w.Scale != "" {
		oneOf(bad, "wavelength.scale", w.Scale, scaleKinds)
	}
	if w.Medium != "" {
		oneOf(bad, "wavelength.medium", w.Medium, mediumKinds)
	}
	a.Flux.check(bad, "flux")
	if a.Weight != nil {
		a.Weight.check(bad, "weight")
		oneOf(bad, "weight.kind", a.Weight.Kind, weightKinds)
		if a.Weight.Upper != "" && (a.Weight.Column == "" || a.Weight.Kind != "sigma") {
			bad("weight.upper belongs to a weight.column of kind sigma")
		}
	}
	for _, m := range a.masks() {
		m.check(bad, "mask")
		oneOf(bad, "mask.bad", m.Bad, badKinds)
	}
	if a.Resolution != nil {
		a.Resolution.checkAll(bad)
	}
}

// masks returns [mask] and [[masks]] as one list.
func (a *armDoc) masks() []maskDoc {
	if a.Mask == nil {
		return a.Masks
	}
	return append([]maskDoc{*a.Mask}, a.Masks...)
}

func (r *resDoc) checkAll(bad complain) {
	ways := 0
	for _, way := range []bool{r.Power != 0, len(r.Table) > 0, r.HDU != nil} {
		if way {
			ways++
		}
	}
	if ways != 1 {
		bad("resolution: give one of power, table, or hdu with kind")
		return
	}
	switch {
	case r.HDU != nil:
		r.check(bad, "resolution")
		oneOf(bad, "resolution.kind", r.Kind, resKinds)
		if r.Wavelength != "" && (r.Column == "" || resKinds[r.Kind] == roleDisp) {
			bad("resolution.wavelength goes with a column of power or fwhm")
		}
	case r.Power != 0 && !(r.Power > 1):
		bad("resolution.power = %g, want a resolving power above 1", r.Power)
	}
	for i, p := range r.Table {
		if !(p[0] > 0 && p[1] > 1) || i > 0 && p[0] <= r.Table[i-1][0] {
			bad("resolution.table: pair %d, [%g, %g]: want wavelengths in Angstrom that increase and resolving powers above 1", i+1, p[0], p[1])
		}
	}
}
