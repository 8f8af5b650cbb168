package fitsread

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"duskline/internal/outside"
	"duskline/spectrum"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// checkDraft drafts a layout from a file, forces it on the same file and compares
// all spectra of its first group with those read without.
func checkDraft(t testing.TB, path string, opts Options) {
	t.Helper()
	d, err := DraftLayout(path, opts)
	if err != nil || !d.Understood {
		t.Errorf("%s: understood %v, %v", path, d.Understood, err)
		return
	}
	l, err := ParseLayout("draft", []byte(d.Text))
	if err != nil {
		t.Errorf("%s: %v\n%s", path, err, d.Text)
		return
	}
	sameArrays(t, path, opts, Options{Layouts: []Layout{l}, Force: "draft"}, d.Text)
}

// sameArrays compares what two ways of reading a file give: segments, names,
// positions, medium and frame.
func sameArrays(t testing.TB, path string, opts, with Options, text string) {
	t.Helper()
	plain, err := Open(path, opts)
	if err != nil {
		t.Fatal(err)
	}
	defer plain.Close()
	forced, err := Open(path, with)
	if err != nil {
		t.Errorf("%v\n%s", err, text)
		return
	}
	defer forced.Close()
	n := int(plain.plan.groups[0].rows)
	if forced.Count() != n {
		t.Errorf("%s: %d spectra, want %d\n%s", path, forced.Count(), n, text)
		return
	}
	for i := range min(n, 4) {
		a, errA := plain.Read(i)
		b, errB := forced.Read(i)
		if (errA == nil) != (errB == nil) {
			t.Errorf("%s: without %v, with %v", path, errA, errB)
			continue
		}
		if errA != nil {
			continue
		}
		if !sameSegments(a.Segments, b.Segments) {
			t.Errorf("%s spectrum %d: %.600s\n%s", path, i, cmp.Diff(a.Segments, b.Segments, cmpopts.EquateNaNs()), text)
		}
		// A name made of the file's and the row depends on how many groups there are.
		sameName := a.ObjectID == b.ObjectID || strings.Contains(a.ObjectID, "#")
		if !sameName || a.Medium != b.Medium || a.Frame != b.Frame || !cmp.Equal([]float64{a.RA, a.Dec}, []float64{b.RA, b.Dec}, cmpopts.EquateNaNs()) {
			t.Errorf("%s spectrum %d: %s %s %s %g %g, with the layout %s %s %s %g %g", path, i,
				a.ObjectID, a.Medium, a.Frame, a.RA, a.Dec, b.ObjectID, b.Medium, b.Frame, b.RA, b.Dec)
		}
	}
}

// sameSegments compares bit for bit.
func sameSegments(a, b []spectrum.Segment) bool {
	same := func(x, y []float64) bool { return bytes.Equal(encode('D', x), encode('D', y)) }
	return slices.EqualFunc(a, b, func(x, y spectrum.Segment) bool {
		return x.Name == y.Name && x.LogUniform == y.LogUniform && same(x.Wave, y.Wave) && same(x.Flux, y.Flux) &&
			same(x.Ivar, y.Ivar) && same(x.Resolution, y.Resolution)
	})
}

func TestDraftOfSamples(t *testing.T) {
	for name, data := range samples() {
		t.Run(name, func(t *testing.T) {
			checkDraft(t, save(t, data), tightOptions(t))
		})
	}
}

// Of every real file the draft reads what the built-in rules read.
func TestDraftOfRealSpectra(t *testing.T) {
	dir := outside.Spectra(t)
	paths, err := filepath.Glob(filepath.Join(dir, "*", "*.fit*"))
	if err != nil || len(paths) < 200 {
		t.Fatalf("%d files, %v", len(paths), err)
	}
	for _, path := range paths {
		checkDraft(t, path, Options{})
	}
}

// What is not understood gets a draft whose lines to be looked at are marked; with
// these set right the file is read.
func TestDraftOfTheUnknown(t *testing.T) {
	n := 50
	cells := join(empty(), table("DATA", 1, []tcol{{name: "QQ", form: "50E", data: noisy(n, 1)}, {name: "XX", form: "50D", data: ramp(n, 500, 1)},
		{name: "ZZ", form: "50E", data: constant(n, 1)}}))
	lines := image(true, -32, []int{n, 2}, stack(noisy(n, 1), noisy(n, 2)))
	for name, data := range map[string][]byte{"cells": cells, "lines": lines} {
		path := save(t, data)
		if _, err := Open(path, Options{}); !errors.Is(err, ErrNoSpectrum) {
			t.Fatalf("%s: %v", name, err)
		}
		d, err := DraftLayout(path, Options{})
		if err != nil || d.Understood || !strings.Contains(d.Text, "# EDIT") {
			t.Fatalf("%s: %v\n%s", name, err, d.Text)
		}
		l, err := ParseLayout("draft", []byte(d.Text))
		if err != nil {
			t.Errorf("%s: %v\n%s", name, err, d.Text)
			continue
		}
		if name != "cells" {
			continue
		}
		s := read(t, open(t, data, Options{Layouts: []Layout{l}}), 0)
		if s.Segments[0].Wave[1] != 501 || s.Layout != "draft" {
			t.Errorf("%s: %v", s.Layout, s.Segments[0].Wave[:2])
		}
		l, err = ParseLayout("mine", []byte(strings.Replace(d.Text, `unit = "Angstrom"`, `unit = "nm"`, 1)))
		if err != nil {
			t.Fatal(err)
		}
		if s = read(t, open(t, data, Options{Layouts: []Layout{l}}), 0); s.Segments[0].Wave[1] != 5010 {
			t.Errorf("edited: %v", s.Segments[0].Wave[:2])
		}
	}
	for name, data := range map[string][]byte{"only a header": empty(), "text": []byte("wave flux\n")} {
		var re *ReadError
		if _, err := DraftLayout(save(t, data), Options{}); !errors.As(err, &re) || re.Hint == "" {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Resolution as one number, as pairs, as a column with wavelengths of its own.
func TestResolutionOfLayouts(t *testing.T) {
	const head = "[wavelength]\nhdu = 1\ncolumn = 'WAVE'\n[flux]\nhdu = 1\ncolumn = 'FLUX'\n[resolution]\n"
	n := 64 // wavelengths 4000 + 1.5 i
	data := join(pixelTable(n), table("LSF", 2, []tcol{{name: "WAVE", form: "D", unit: "nm", data: []float64{500, 400}}, {name: "FWHM", form: "D", data: []float64{4, 2}}}))
	for text, want := range map[string][2]float64{
		"power = 1800.0": {1800, 1800},
		"table = [[3000.0, 1000.0], [5000.0, 2000.0]]":                               {1500, 1500 + 0.5*94.5},
		"table = [[4090.0, 1000.0], [5000.0, 2000.0]]":                               {1000, 1000 + 1000*4.5/910},
		"hdu = 'LSF'\ncolumn = 'FWHM'\nwavelength = 'WAVE'\nkind = 'fwhm'":           {2000, 4094.5 / (2 + 2*94.5/1000)},
		"hdu = 1\ncolumn = 'ERR'\nkind = 'fwhm'":                                     {4000, 4094.5},
		"hdu = 1\ncolumn = '#3'\nkind = 'fwhm'\n[object]\nhdu = 0\nid = 'NOT THERE'": {},
	} {
		l, err := ParseLayout("x", []byte(head+text))
		if err != nil {
			t.Fatal(err)
		}
		f, err := Open(save(t, data), Options{Layouts: []Layout{l}, Force: "x"})
		if want[0] == 0 {
			if !errors.Is(err, ErrLayout) {
				t.Errorf("%s: %v", text, err)
			}
			continue
		}
		if err != nil {
			t.Fatal(err)
		}
		seg := read(t, f, 0).Segments[0]
		f.Close()
		last := len(seg.Resolution) - 1
		if k := 63; last > 0 {
			last = k
		}
		near(t, text, seg.Resolution[0], want[0], 1e-14)
		near(t, text, seg.Resolution[last], want[1], 1e-14)
	}
	for text, wants := range map[string]string{
		"power = 1.0":                           "resolution.power",
		"table = [[5.0, 100.0], [4.0, 100.0]]":  "resolution.table: pair 2",
		"power = 100.0\ntable = [[5.0, 100.0]]": "give one of",
		"kind = 'fwhm'":                         "give one of",
		"hdu = 1\ncolumn = 'x'\nwavelength = 'y'\nkind = 'pixels'": "resolution.wavelength",
	} {
		if _, err := ParseLayout("x", []byte(head+text)); err == nil || !strings.Contains(err.Error(), wants) {
			t.Errorf("%s: %v", text, err)
		}
	}
}

// Columns by number, utype and UCD; planes of a cube; two masks.
func TestPlacesOfLayouts(t *testing.T) {
	n := 64
	data := join(empty(), table("", n, []tcol{
		{name: "", form: "D", data: ramp(n, 4000, 1), more: []stem{{"TUTYP", "spec:Spectrum.Data.SpectralAxis.Value"}}},
		{name: "A", form: "E", data: noisy(n, 1), more: []stem{{"TUCD", "phot.flux.density;em.wl"}}},
		{name: "A", form: "I", data: append([]float64{1}, constant(n-1, 0)...)},
		{name: "B", form: "I", data: append([]float64{2, 5}, constant(n-2, 2)...)}}))
	l, err := ParseLayout("x", []byte("[wavelength]\nhdu = 1\ncolumn = 'utype:Data.SpectralAxis.Value'\nunit = 'nm'\n[flux]\nhdu = 1\ncolumn = 'ucd:phot.flux.density'\n"+
		"[mask]\nhdu = 1\ncolumn = '#3'\nbad = 'nonzero'\n[[masks]]\nhdu = 1\ncolumn = 'B'\nbad = 'nonzero'\nbits = 1\n"))
	if err != nil {
		t.Fatal(err)
	}
	seg := read(t, open(t, data, Options{Layouts: []Layout{l}}), 0).Segments[0]
	if seg.Wave[1] != 40010 || seg.Ivar[0] != 0 || seg.Ivar[1] != 0 || seg.Ivar[2] == 0 {
		t.Errorf("%v %v", seg.Wave[1], seg.Ivar[:3])
	}
	cube := image(true, -64, []int{n, 2, 2}, stack(noisy(n, 1), noisy(n, 2), constant(n, 4), constant(n, 9)), kv("CRVAL1", 500), kv("CDELT1", 1))
	l, err = ParseLayout("x", []byte("[wavelength]\nhdu = 0\naxis = true\nunit = 'nm'\n[flux]\nhdu = 0\nplane = 1\n[weight]\nhdu = 0\nplane = 2\nkind = 'variance'\n"))
	if err != nil {
		t.Fatal(err)
	}
	f := open(t, cube, Options{Layouts: []Layout{l}})
	if f.Count() != 2 {
		t.Fatalf("%d spectra", f.Count())
	}
	near(t, "variance of the second", read(t, f, 1).Segments[0].Ivar[5], 1.0/9, 1e-15)
}

// Layouts of configs/layouts read samples of their kind as the built-in rules do.
func TestLayoutFiles(t *testing.T) {
	files, err := filepath.Glob(filepath.Join("..", "configs", "layouts", "*.toml"))
	if err != nil || len(files) == 0 {
		t.Fatalf("%v, %v", files, err)
	}
	kinds := layoutSamples()
	for _, file := range files {
		name := strings.TrimSuffix(filepath.Base(file), ".toml")
		if name == "example" {
			continue // of an invented product, TestExampleLayout
		}
		t.Run(name, func(t *testing.T) {
			text, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			l, err := ParseLayout(name, text)
			if err != nil {
				t.Fatal(err)
			}
			data, ok := kinds[name]
			if !ok {
				t.Fatal("there is no sample of this kind of file")
			}
			delete(kinds, name)
			for _, sample := range data {
				sameArrays(t, save(t, sample), Options{}, Options{Layouts: []Layout{l}, Force: name}, string(text))
			}
		})
	}
	for name := range kinds {
		t.Errorf("there is a sample %s and no layout", name)
	}
}

// The same on a real file of every convention: each layout is of some of them, and
// what it reads is what the built-in rules read. Medium and frame may be stated by a
// layout where the file does not.
func TestLayoutFilesOfRealSpectra(t *testing.T) {
	dir := outside.Spectra(t)
	for pattern, name := range map[string]string{
		"sdss_random100/*": "loglam-rows", "sdss_sky/*": "loglam-rows", "sdss_boss_qso/*": "loglam-rows", "sdss_spspec/*": "sigma-lines", "lamost_dr1/*": "ivar-lines",
		"deep2/*": "arm-cells", "xqr30/*": "error-cells", "calspec/*": "staterror-rows", "dla_highres/UM669*": "axis-image", "hst_stis/*": "order-cells",
		"desi_mini/*": "arm-images", "vandels/*": "ivoa-ucds", "vandels/*2.fits": "error-rows", "pickles/*": "flux-rows", "ism_textbook/m51*": "error-rows", "sdss_misc/source3*": "flux-rows", "sdss_misc/3C433*": "axis-image",
	} {
		paths, err := filepath.Glob(filepath.Join(dir, pattern))
		if err != nil || len(paths) == 0 {
			t.Errorf("%s: no file, %v", pattern, err)
			continue
		}
		text, err := os.ReadFile(filepath.Join("..", "configs", "layouts", name+".toml"))
		if err != nil {
			t.Fatal(err)
		}
		l, err := ParseLayout(name, text)
		if err != nil {
			t.Fatal(err)
		}
		sameArrays(t, paths[0], Options{}, Options{Layouts: []Layout{l}, Force: name}, "")
	}
}
