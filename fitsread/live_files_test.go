package fitsread

import (
	"encoding/binary"
	"math"
	"os/exec"
	"path/filepath"
	"testing"

	"duskline/internal/outside"
)

// answers is the stream that testdata/live_files.py writes.
type answers struct {
	t   *testing.T
	raw []byte
}

func (a *answers) count() int {
	if len(a.raw) < 8 {
		a.t.Fatal("the answers end too early")
	}
	n := int(binary.BigEndian.Uint64(a.raw))
	a.raw = a.raw[8:]
	return n
}

func (a *answers) word() string {
	n := a.count()
	s := string(a.raw[:n])
	a.raw = a.raw[n:]
	return s
}

func (a *answers) array() []float64 {
	v := make([]float64, a.count())
	for i := range v {
		v[i] = math.Float64frombits(binary.BigEndian.Uint64(a.raw[8*i:]))
	}
	a.raw = a.raw[8*len(v):]
	return v
}

// Files that astropy writes over all layouts and types are read as astropy reads
// them: fluxes bit for bit, a missing one weighs zero; weights to 1e-12, the
// rounding of a square and a quotient; wavelengths to 1e-9, the project's figure
// for spectral axes.
func TestFilesOfAstropy(t *testing.T) {
	python := outside.Python(t, "astropy")
	dir := t.TempDir()
	raw, err := exec.Command(python, filepath.Join("testdata", "live_files.py"), dir).Output()
	if err != nil {
		t.Fatal(err)
	}
	a := &answers{t, raw}
	files := 0
	for len(a.raw) > 0 {
		name := a.word()
		files++
		t.Run(name, func(t *testing.T) { compareFile(t, a, filepath.Join(dir, name)) })
	}
	if files < 60 {
		t.Errorf("only %d files", files)
	}
	t.Logf("%d files", files)
}

// compareFile takes all answers of one file, whatever is wrong with it.
func compareFile(t *testing.T, a *answers, path string) {
	spectra := a.count()
	f, err := Open(path, Options{})
	if err != nil {
		t.Error(err)
	} else {
		defer f.Close()
		if f.Count() != spectra {
			t.Errorf("%d spectra, want %d (layout %s)", f.Count(), spectra, f.plan.layout)
		}
		checkDraft(t, path, Options{})
	}
	for i := range spectra {
		segments := a.count()
		for k := range segments {
			wave, flux, ivar := a.array(), a.array(), a.array()
			if err != nil || i >= f.Count() {
				continue
			}
			s := read(t, f, i)
			if len(s.Segments) != segments || s.Segments[k].Len() != len(wave) {
				t.Fatalf("spectrum %d: %d segments, the first of %d pixels; want %d of %d", i, len(s.Segments), s.Segments[0].Len(), segments, len(wave))
			}
			seg := &s.Segments[k]
			wrong, weighed := 0, 0
			for p := range wave {
				near := math.Abs(seg.Wave[p]-wave[p]) <= 1e-9*wave[p]
				if seg.Ivar[p] > 0 {
					weighed++
					near = near && seg.Flux[p] == flux[p] && (len(ivar) == 0 || math.Abs(seg.Ivar[p]-ivar[p]) <= 1e-12*ivar[p])
				} else {
					near = near && (flux[p] != flux[p] || len(ivar) > 0 && ivar[p] == 0)
				}
				if !near {
					wrong++
					if wrong == 1 {
						t.Errorf("spectrum %d, pixel %d: %.12g %g %g, astropy %.12g %g", i, p, seg.Wave[p], seg.Flux[p], seg.Ivar[p], wave[p], flux[p])
					}
				}
			}
			if wrong > 0 || weighed < len(wave)/2 {
				t.Errorf("spectrum %d segment %d: %d of %d pixels differ, %d have weight", i, k, wrong, len(wave), weighed)
			}
		}
	}
}
