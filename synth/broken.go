package synth

import (
	"fmt"
	"math"
	"os"
	"path"
	"path/filepath"

	"duskline/internal/fitsout"
)

// brokenFolder is where a night has its broken files.
const brokenFolder = "p07"

// brokenFiles lists what can be wrong, each with what makes the bytes out of a
// good exposure.
var brokenFiles = []struct {
	kind, suffix string
	content      func(e *exposure) ([]byte, error)
}{
	{"empty file", ".fits", func(*exposure) ([]byte, error) { return nil, nil }},
	{"text instead of FITS", ".fits", func(*exposure) ([]byte, error) {
		return []byte("The reduction of this fiber failed; see the night log.\n"), nil
	}},
	{"cut short", ".fits", func(e *exposure) ([]byte, error) {
		content, err := tableBytes(e)
		// Within a block, as when a disk was full.
		return content[:len(content)/2/2880*2880+1000], err
	}},
	{"compressed file cut short", ".fits.gz", func(e *exposure) ([]byte, error) {
		content, err := tableBytes(e)
		if err != nil {
			return nil, err
		}
		content, err = compress(content)
		return content[:len(content)/2], err
	}},
	{"flux all NaN", ".fits", func(e *exposure) ([]byte, error) {
		for i := range e.data[0].flux {
			e.data[0].flux[i] = math.NaN()
		}
		return tableBytes(e)
	}},
	{"weights all zero", ".fits", func(e *exposure) ([]byte, error) {
		for i := range e.data[0].ivar {
			e.data[0].ivar[i] = 0
		}
		return tableBytes(e)
	}},
}

func tableBytes(e *exposure) ([]byte, error) {
	return encode(func(w *fitsout.Writer) error { return writeTable(w, e) })
}

// writeBroken writes the broken files of a night.
func writeBroken(dir string, seed uint64) ([]Truth, error) {
	if err := os.MkdirAll(filepath.Join(dir, brokenFolder), 0o755); err != nil {
		return nil, err
	}
	p := plate{number: 7, layout: TableOfPixels, ra: 219.8, dec: 12.4}
	arms := logArm()
	var truth []Truth
	for i, b := range brokenFiles {
		e, _ := p.fiber(arms, seed, i)
		content, err := b.content(e)
		if err != nil {
			return nil, err
		}
		t := Truth{File: path.Join(brokenFolder, fmt.Sprintf("lr-20310314-p07-%03d%s", firstFiber+i, b.suffix)), Class: Broken,
			Kind: b.kind, Layout: TableOfPixels, Redshift: math.NaN(), SNR: math.NaN(), AbsorberZ: math.NaN(), LogNHI: math.NaN()}
		if b.kind == "flux all NaN" || b.kind == "weights all zero" {
			t.ObjectID = e.id
		}
		if err := os.WriteFile(filepath.Join(dir, filepath.FromSlash(t.File)), content, 0o644); err != nil {
			return nil, err
		}
		truth = append(truth, t)
	}
	return truth, nil
}
