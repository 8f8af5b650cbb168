package fitsread

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"duskline/spectrum"
)

// exampleFile is a file of the kind that configs/layouts/example.toml describes.
func exampleFile() []byte {
	n, rows := 40, 2
	warn := constant(n*rows, 0)
	warn[4], warn[5] = 2, 8
	blue := table("LR_BLUE", rows, []tcol{
		{name: "TARGET", form: "6A", text: []string{"LR 1", "LR 2"}}, {name: "RA", form: "D", data: []float64{11, 12}},
		{name: "DEC", form: "D", data: []float64{-41, -42}},
		{name: "LOGW", form: "40D", data: append(ramp(n, 3.6, 1e-4), ramp(n, 3.61, 1e-4)...)},
		{name: "COUNTS", form: "40E", data: noisy(n*rows, 3)}, {name: "NOISE", form: "40E", data: constant(n*rows, 3)},
		{name: "WARN", form: "40J", data: warn}, {name: "WIDTH", form: "40E", data: constant(n*rows, 2)}})
	red := table("LR_RED", rows, []tcol{{name: "W0", form: "D", data: []float64{600, 610}}, {name: "DW", form: "D", data: []float64{0.1, 0.2}},
		{name: "COUNTS", form: "40E", data: noisy(n*rows, 3)}, {name: "NOISE", form: "40E", data: constant(n*rows, 3)}})
	return join(empty(kv("TELESCOP", "Lantern Ridge 4 m"), kv("SPECSYS", "BARYCENT")), blue, red)
}

func example(t testing.TB) Layout {
	t.Helper()
	text, err := os.ReadFile(filepath.Join("..", "configs", "layouts", "example.toml"))
	if err != nil {
		t.Fatal(err)
	}
	l, err := ParseLayout("example", text)
	if err != nil {
		t.Fatal(err)
	}
	return l
}

func TestExampleLayout(t *testing.T) {
	l := example(t)
	f := open(t, exampleFile(), Options{Layouts: []Layout{l}})
	if f.Count() != 2 {
		t.Fatalf("%d spectra", f.Count())
	}
	s := read(t, f, 1)
	if s.Layout != "example" || s.ObjectID != "LR 2" || s.RA != 12 || s.Dec != -42 || len(s.Segments) != 2 {
		t.Errorf("%s, %s at %g %g, %d segments", s.Layout, s.ObjectID, s.RA, s.Dec, len(s.Segments))
	}
	if s.Medium != spectrum.Air || s.Frame != spectrum.Topocentric || s.FluxUnit != "ct" || len(s.Warnings) != 0 {
		t.Errorf("%v, %v, %q, doubts %q", s.Medium, s.Frame, s.FluxUnit, codes(s))
	}
	blue, red := &s.Segments[0], &s.Segments[1]
	near(t, "blue", blue.Wave[0], math.Pow(10, 3.61), 1e-14)
	near(t, "red", red.Wave[1], 6102, 1e-14)
	near(t, "weight", red.Ivar[0], 1.0/9, 1e-15)
	near(t, "resolution", blue.Resolution[0], math.Pow(10, 3.61)/2, 1e-14)
	s = read(t, f, 0)
	if blue = &s.Segments[0]; blue.Ivar[4] != 0 || blue.Ivar[5] == 0 {
		t.Error("bit 1 is bad, bit 3 is not, by bits = 3")
	}
	// Another telescope: [match] fails, and no built-in layout knows these names.
	other := strings.Replace(string(exampleFile()), "Lantern Ridge 4 m", "Lantern Ridge 9 m", 1)
	if _, err := Open(save(t, []byte(other)), Options{Layouts: []Layout{l}}); !errors.Is(err, ErrNoSpectrum) {
		t.Errorf("the layout was used although its card differs: %v", err)
	}
	f2 := open(t, []byte(other), Options{Layouts: []Layout{l}, Force: "example"})
	if f2.plan.layout != "example" {
		t.Error("a forced layout needs no match")
	}
	d1, _ := f.Digest(0)
	d2, _ := f.Digest(1)
	if d1 == d2 {
		t.Error("two rows have one digest")
	}
}

// The layout of lines and axis cards of an image.
func TestLayoutOfLines(t *testing.T) {
	n := 64
	data := image(true, -64, []int{n, 3}, stack(ramp(n, 7, 0), noisy(n, 2), constant(n, 4)), kv("CRVAL1", 500), kv("CDELT1", 1))
	l, err := ParseLayout("lines", []byte(`
[wavelength]
hdu = 0
axis = true
unit = "nm"
medium = "vacuum"
[flux]
hdu = 0
line = 2
[weight]
hdu = 0
line = 3
kind = "variance"
[frame]
velocity = "rest"
`))
	if err != nil {
		t.Fatal(err)
	}
	s := read(t, open(t, data, Options{Layouts: []Layout{l}, Force: "lines"}), 0)
	near(t, "wave", s.Segments[0].Wave[1], 5010, 1e-14)
	near(t, "ivar", s.Segments[0].Ivar[0], 0.25, 1e-15)
	if s.Frame != spectrum.RestFrame || !s.Has(spectrum.RestFrameStated) {
		t.Errorf("%v, %s", s.Frame, codes(s))
	}
}

// Every problem of a layout file is named by its key.
func TestLayoutProblems(t *testing.T) {
	const good = "[wavelength]\nhdu = 1\ncolumn = 'w'\n[flux]\nhdu = 1\ncolumn = 'f'\n"
	if _, err := ParseLayout("ok", []byte(good)); err != nil {
		t.Fatal(err)
	}
	for text, wants := range map[string][]string{
		"redshift = 1\n" + good:                    {"redshift"},
		good + "sigma = 'e'\n":                     {"flux.sigma"},
		"rows = 'many'\n" + good:                   {"rows"},
		good + "[weight]\nhdu = 1\ncolumn = 'e'\n": {"weight.kind"},
		good + "[mask]\nhdu = -1\nbad = 'odd'\n":   {"mask.hdu", "mask.bad"},
		"[flux]\nhdu = 1\n":                        {"wavelength and flux are needed"},
		good + "[object]\nhdu = 0\nra = 'RA'\n":    {"object.ra"},
		good + "[frame]\nvelocity = 'solar'\n":     {"frame.velocity", "heliocentric"},
		"[[arm]]\nname = 'b'\n" + good:             {"every arm"},
		"[wavelength]\nhdu = 1\nstart = 'w'\nunit = 'furlong'\nscale = 'log2'\nmedium = 'water'\n[flux]\nhdu = true\n": {
			"wavelength.start", "wavelength.unit", "wavelength.scale", "wavelength.medium", "flux.hdu"},
		"[wavelength\n": {"layout x"},
	} {
		_, err := ParseLayout("x", []byte(text))
		for _, want := range wants {
			if err == nil || !strings.Contains(err.Error(), want) {
				t.Errorf("%q: error %v does not name %q", text, err, want)
			}
		}
	}
	if _, err := ParseLayout(layoutAxis, []byte(good)); err == nil {
		t.Error("the name of a built-in layout was accepted")
	}
}

// A forced layout that does not fit is an error that says where.
func TestLayoutDoesNotFit(t *testing.T) {
	parse := func(text string) Layout {
		l, err := ParseLayout("mine", []byte(text))
		if err != nil {
			t.Fatal(err)
		}
		return l
	}
	for _, text := range []string{
		"[wavelength]\nhdu = 9\ncolumn = 'w'\n[flux]\nhdu = 1\ncolumn = 'FLUX'\n",
		"[wavelength]\nhdu = 1\ncolumn = 'w'\n[flux]\nhdu = 1\ncolumn = 'FLUX'\n",
		"[wavelength]\nhdu = 1\n[flux]\nhdu = 1\ncolumn = 'FLUX'\n",
		"[wavelength]\nhdu = 1\naxis = true\n[flux]\nhdu = 1\ncolumn = 'FLUX'\n",
	} {
		_, err := Open(save(t, pixelTable(64)), Options{Layouts: []Layout{parse(text)}, Force: "mine"})
		var re *ReadError
		if !errors.Is(err, ErrLayout) || !errors.As(err, &re) || re.Hint == "" {
			t.Errorf("%q: %v", text, err)
		}
	}
	_, err := Open(save(t, pixelTable(64)), Options{Force: "nobody"})
	if !errors.Is(err, ErrLayout) {
		t.Errorf("unknown layout: %v", err)
	}
	if f := open(t, pixelTable(64), Options{Force: layoutGuess}); f.plan.layout != layoutGuess {
		t.Errorf("forced %s, got %s", layoutGuess, f.plan.layout)
	}
}

func TestDescribe(t *testing.T) {
	f := open(t, exampleFile(), Options{Layouts: []Layout{example(t)}})
	d := f.Describe()
	if d.Layout != "example" || d.Spectra != 2 || len(d.HDUs) != 3 || len(d.Parts) != 2 || !d.HDUs[1].Used || d.HDUs[0].Used {
		t.Errorf("%+v", d)
	}
	if p := d.Parts[0]; p.Wavelength != "column LOGW of HDU 1" || p.WaveUnit != "log10(Angstrom)" || p.WeightKind != "sigma" {
		t.Errorf("%+v", p)
	}
	if !strings.Contains(d.Medium, "air (the layout)") || !strings.Contains(d.First, "80 pixels in 2 segments") {
		t.Errorf("medium %q, first %q", d.Medium, d.First)
	}
}

// FuzzParseLayout: any text is a layout or an error that names it, and a layout
// reads any file or says why not.
func FuzzParseLayout(f *testing.F) {
	files, _ := filepath.Glob(filepath.Join("..", "configs", "layouts", "*.toml"))
	for _, file := range files {
		text, err := os.ReadFile(file)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	f.Add([]byte("[wavelength]\nhdu = 0\naxis = true\n[flux]\nhdu = 0\nplane = 1\n[resolution]\ntable = [[1.0, 2.0]]\n"))
	var inputs [][]byte
	for _, name := range []string{"pixels", "cells", "lines", "arms", "example", "rice"} {
		inputs = append(inputs, samples()[name])
	}
	f.Fuzz(func(t *testing.T, text []byte) {
		l, err := ParseLayout("fuzz", text)
		if err != nil {
			if !strings.Contains(err.Error(), "layout fuzz: ") {
				t.Fatalf("%v", err)
			}
			return
		}
		for _, data := range inputs {
			tryBytes(t, data, Options{MaxPixels: 1 << 16, MaxUnpacked: 1 << 22, Layouts: []Layout{l}, Force: "fuzz"})
		}
	})
}
