package fitsread

import (
	"encoding/binary"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"duskline/internal/outside"
)

// liveScript reads the arrays of one file of every dataset with astropy and
// writes them as doubles: for every part, the count, wavelengths, fluxes and weights.
const liveScript = `
import sys, struct, numpy as np
from astropy.io import fits
def put(*arrays):
    out = sys.stdout.buffer
    for a in arrays:
        a = np.asarray(a, dtype='>f8').ravel()
        out.write(struct.pack('>q', a.size)); out.write(a.tobytes())
def dump(kind, h):
    if kind == 'loglam':
        d = h[1].data; put(10.0**np.asarray(d['loglam'], 'f8'), d['flux'], d['ivar'])
    elif kind == 'sigma':
        d = h[1].data; n = d.names
        put(d[n[0]], d[n[1]], 1/np.asarray(d[n[2]], 'f8')**2)
    elif kind == 'noerror':
        d = h[1].data; n = d.names; put(d[n[0]], d[n[1]], [])
    elif kind == 'horne':
        for k in ('Horne-B', 'Horne-R'):
            d = h[k].data[0]; put(d['LAMBDA'], d['SPEC'], d['IVAR'])
    elif kind == 'arms':
        for k in 'BRZ':
            put(h[k+'_WAVELENGTH'].data, h[k+'_FLUX'].data[2], h[k+'_IVAR'].data[2])
    elif kind in ('lamost', 'spspec', 'axis1'):
        d, hd = h[0].data, h[0].header
        x = np.arange(hd['NAXIS1'])
        if kind == 'axis1':
            put(10.0**(hd['CRVAL1'] + hd['CDELT1']*x), d, [])
        else:
            w = 10.0**(hd['COEFF0'] + hd['COEFF1']*x)
            put(w, d[0], d[1] if kind == 'lamost' else 1/np.asarray(d[2], 'f8')**2)
    elif kind == 'orders':
        for d in sorted(h[1].data, key=lambda r: r['WAVELENGTH'][0]):
            put(d['WAVELENGTH'], d['FLUX'], 1/np.asarray(d['ERROR'], 'f8')**2)
for kind, path in zip(sys.argv[1::2], sys.argv[2::2]):
    with np.errstate(all='ignore'), fits.open(path, memmap=False) as h:
        dump(kind, h)
`

// Array equality with astropy, one file of each dataset: fluxes bit for bit,
// wavelengths and weights within the rounding of a few operations (1e-13).
// Pixels that weigh zero here are compared in wavelength only.
func TestAgainstAstropy(t *testing.T) {
	dir := outside.Spectra(t)
	python := outside.Python(t, "astropy")
	cases := []struct{ pattern, kind, path string }{
		{"calspec/alpha*", "sigma", ""}, {"deep2/*", "horne", ""}, {"desi_mini/coadd-sv3*", "arms", ""}, {"dla_highres/UM669*", "axis1", ""},
		{"hst_stis/*", "orders", ""}, {"ism_textbook/m51*", "sigma", ""}, {"lamost_dr1/*", "lamost", ""}, {"pickles/*uk_9*", "noerror", ""},
		{"sdss_boss_qso/*", "loglam", ""}, {"sdss_misc/*.gz", "loglam", ""}, {"sdss_random100/*", "loglam", ""}, {"sdss_sky/*", "loglam", ""},
		{"sdss_spspec/*", "spspec", ""}, {"vandels/*", "sigma", ""}, {"xqr30/*", "sigma", ""},
	}
	args := []string{"-c", liveScript}
	for i, tt := range cases {
		paths, _ := filepath.Glob(filepath.Join(dir, tt.pattern)) // sorted
		if len(paths) == 0 {
			t.Fatalf("no file %s", tt.pattern)
		}
		cases[i].path = paths[0]
		args = append(args, tt.kind, paths[0])
	}
	cmd := exec.Command(python, args...)
	cmd.Stderr = os.Stderr
	raw, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	next := func() []float64 {
		n := int(binary.BigEndian.Uint64(raw))
		v := make([]float64, n)
		for i := range v {
			v[i] = math.Float64frombits(binary.BigEndian.Uint64(raw[8+8*i:]))
		}
		raw = raw[8+8*n:]
		return v
	}
	for _, tt := range cases {
		f, err := Open(tt.path, Options{})
		if err != nil {
			t.Fatal(err)
		}
		row := 0
		if tt.kind == "arms" {
			row = 2
		}
		s := read(t, f, row)
		f.Close()
		for k := range s.Segments {
			seg := &s.Segments[k]
			wave, flux, ivar := next(), next(), next()
			if seg.Len() != len(wave) {
				t.Errorf("%s segment %d: %d pixels, astropy %d", tt.pattern, k, seg.Len(), len(wave))
				continue
			}
			wrong := 0
			for i := range wave {
				same := math.Abs(seg.Wave[i]-wave[i]) <= 1e-13*wave[i]
				if seg.Ivar[i] > 0 {
					same = same && seg.Flux[i] == flux[i] && (len(ivar) == 0 || math.Abs(seg.Ivar[i]-ivar[i]) <= 1e-13*ivar[i])
				}
				if !same {
					wrong++
				}
			}
			if wrong > 0 {
				t.Errorf("%s segment %d: %d of %d pixels differ", tt.pattern, k, wrong, len(wave))
			}
		}
	}
	if len(raw) > 0 {
		t.Errorf("astropy has %d bytes of segments more", len(raw))
	}
}
