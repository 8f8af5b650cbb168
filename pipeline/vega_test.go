package pipeline_test

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
)

// TestVegaBalmerLines takes the public CALSPEC spectrum of Vega (alpha_lyr_stis_005,
// the excerpt that package lines carries) through the whole chain and holds the
// equivalent widths of its rows against those computed from the same spectrum
// with a straight continuum between sidebands: 12.80 and 17.00 Angstrom for
// H-alpha and H-beta in +-60 Angstrom, 17.3 and 16.2 for H-gamma and H-delta in
// +-50 and +-40. Tolerances are those of the definition: the spline runs a few
// percent below the true continuum at broad lines, which takes a tenth of them,
// and dips where the wings of neighbors meet.
func TestVegaBalmerLines(t *testing.T) {
	f, err := os.Open(filepath.Join("..", "lines", "testdata", "vega_calspec_excerpt.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	r.FieldsPerRecord = -1
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var seg spectrum.Segment
	for _, row := range rows {
		wave, err1 := strconv.ParseFloat(row[0], 64)
		flux, err2 := strconv.ParseFloat(row[1], 64)
		if err1 != nil || err2 != nil {
			continue // the header
		}
		seg.Wave, seg.Flux = append(seg.Wave, wave), append(seg.Flux, flux)
		seg.Ivar = append(seg.Ivar, 1/(0.005*flux*0.005*flux)) // half a percent, as calibrated spectra have
	}
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	out := chain.NewWorker().Process(&spectrum.Spectrum{RA: math.NaN(), Dec: math.NaN(), BaryVelocity: math.NaN(), Segments: []spectrum.Segment{seg}})
	if o := out.Object; o.Class != catalog.Star || math.Abs(o.Redshift) > 3e-4 {
		t.Fatalf("Vega is a %s (%s) at %.5f", o.Class, o.Family, o.Redshift)
	}
	want := map[string]struct{ ew, tolerance float64 }{"Ha": {12.80, 0.12}, "Hb": {17.00, 0.12}, "Hg": {17.3, 0.25}, "Hd": {16.2, 0.25}}
	for _, l := range out.Lines {
		w, ok := want[l.Line]
		if !ok {
			if l.Kind == "absorption" && (l.Line == "NII_6583" || l.Line == "NII_6548") {
				t.Errorf("[N II] %s in absorption, %.2f Angstrom", l.Line, l.EWRest)
			}
			continue
		}
		delete(want, l.Line)
		if l.Kind != "absorption" || math.Abs(l.EWRest/w.ew-1) > w.tolerance {
			t.Errorf("%s: %s of %.2f +- %.2f Angstrom, want %.2f within %.0f %%", l.Line, l.Kind, l.EWRest, l.EWRestErr, w.ew, 100*w.tolerance)
		}
	}
	for name := range want {
		t.Errorf("no row for %s", name)
	}
}
