package synth

import (
	"bytes"
	"math"
	"reflect"
	"strings"
	"testing"

	"duskline/catalog"

	"pgregory.net/rapid"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

func TestTruthRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		digits := func(label string, lo, hi int, unit float64) float64 {
			if rapid.Bool().Draw(t, label+" missing") {
				return math.NaN()
			}
			return float64(rapid.IntRange(lo, hi).Draw(t, label)) / unit
		}
		var rows []Truth
		for range rapid.IntRange(0, 4).Draw(t, "rows") {
			rows = append(rows, Truth{
				File: rapid.StringMatching(`[a-z0-9, "']{1,12}`).Draw(t, "file"), Row: rapid.IntRange(0, 99).Draw(t, "row"),
				ObjectID: rapid.StringMatching(`[A-Za-z"0-9-]*`).Draw(t, "id"), Class: "galaxy", Kind: "faint, odd", Layout: VOSpectrum,
				Redshift: digits("z", -2000, 7e6, 1e6), SNR: digits("snr", 0, 3000, 100),
				AbsorberZ: digits("za", 2e6, 4e6, 1e6), LogNHI: digits("n", 2030, 2200, 100)})
		}
		var b bytes.Buffer
		if err := WriteTruth(&b, rows); err != nil {
			t.Fatal(err)
		}
		back, err := ReadTruth(&b)
		if err != nil {
			t.Fatal(err)
		}
		if len(back) != len(rows) {
			t.Fatalf("%d rows came back, want %d", len(back), len(rows))
		}
		for i := range rows {
			a, b := rows[i], back[i]
			for _, p := range []*Truth{&a, &b} { // NaN is not equal to itself
				for _, v := range []*float64{&p.Redshift, &p.SNR, &p.AbsorberZ, &p.LogNHI} {
					if math.IsNaN(*v) {
						*v = -99
					}
				}
			}
			if !reflect.DeepEqual(a, b) {
				t.Fatalf("%+v came back as %+v", a, b)
			}
		}
	})
}

func TestReadTruthErrors(t *testing.T) {
	head := strings.Join(truthColumns, ",") + "\n"
	for name, c := range map[string]struct{ text, want string }{
		"empty":      {"", "truth table"},
		"columns":    {strings.Replace(head, "redshift", "speed", 1), "line 1"},
		"row":        {head + "a.fits,x,,galaxy,,0.1,2,,,\n", `line 2, column row: "x"`},
		"number":     {head + "a.fits,0,,galaxy,,much,2,,,\n", `line 2, column redshift: "much"`},
		"too short":  {head + "a.fits,0\n", "line 2"},
		"late error": {head + "a.fits,0,,galaxy,,0.1,2,,,\nb.fits,0,,galaxy,,0.1,2,,,x\n", `line 3, column absorber_log_nhi: "x"`},
	} {
		if _, err := ReadTruth(strings.NewReader(c.text)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one with %q", name, err, c.want)
		}
	}
}

func TestScore(t *testing.T) {
	nan := math.NaN()
	truth := []Truth{
		{File: "p01/a.fits", Class: catalog.Galaxy, Redshift: 0.5},
		{File: "p01/b.fits", Class: catalog.Galaxy, Redshift: 0.5},
		{File: "p01/c.fits", Class: catalog.Galaxy, Redshift: 0.5},
		{File: "p05/m.fits", Row: 0, Class: catalog.Quasar, Redshift: 2},
		{File: "p05/m.fits", Row: 1, Class: catalog.Star, Redshift: 0},
		{File: "p05/m.fits", Row: 2, Class: Sky, Redshift: nan},
		{File: "p05/m.fits", Row: 3, Class: Sky, Redshift: nan},
		{File: "p07/x.fits", Class: Broken, Redshift: nan},
		{File: "p07/y.fits", Class: Broken, Redshift: nan},
	}
	row := func(file string, n int64, class string, z float64, verdict string) catalog.Object {
		return catalog.Object{SourceFile: file, SourceRow: n, Class: class, Redshift: z, RedshiftErr: 0.0025, Verdict: verdict}
	}
	// 1000 km/s at z = 0.5 is 0.0050035 in z, 3000 km/s at z = 2 is 0.030021.
	objects := []catalog.Object{
		row("/data/night/p01/a.fits", 0, catalog.Galaxy, 0.5050, catalog.Secure),  // within
		row("/data/night/p01/b.fits", 0, catalog.Quasar, 0.5051, catalog.Secure),  // beyond
		row("/data/night/p01/c.fits", 0, catalog.Galaxy, 0.5, catalog.None),       // no answer
		row("night/p05/m.fits", 0, catalog.Galaxy, 2.0300, catalog.Uncertain),     // within, class wrong
		row("night/p05/m.fits", 1, catalog.Star, nan, catalog.Uncertain),          // no number
		row("night/p05/m.fits", 2, catalog.Unknown, nan, catalog.None),            // rightly nothing
		row("night/p05/m.fits", 3, catalog.Galaxy, 0.7, catalog.Secure),           // false
		row("night/p07/x.fits", 0, catalog.Unknown, nan, catalog.None),            // rightly nothing
		row("elsewhere/z.fits", 0, catalog.Galaxy, 0.7, catalog.Secure),           // stranger
		row("/data/night/copy/a.fits", 0, catalog.Galaxy, 0.9999, catalog.Secure), // second row of a file
		row("night/p05/m.fits", 17, catalog.Galaxy, 0.9999, catalog.Uncertain),    // no such row
	}
	got := Score(truth, objects)
	want := []Tally{
		{Class: catalog.Galaxy, Objects: 3, Right: 1, Secure: 2, SecureRight: 1, ClassRight: 2, Pull: 2}, // 0.0050 over 0.0025
		{Class: catalog.Quasar, Objects: 1, Right: 1, Pull: nan},
		{Class: catalog.Star, Objects: 1, ClassRight: 1, Pull: nan},
		{Class: Sky, Objects: 2, Right: 1, Secure: 1, Pull: nan},
		{Class: Broken, Objects: 1, Right: 1, Pull: nan},
	}
	want = append(want, Tally{Objects: 8, Right: 4, Secure: 3, SecureRight: 1, ClassRight: 3, Pull: 2})
	near := cmpopts.EquateApprox(0, 1e-9) // rounding of 0.5050 - 0.5
	if d := cmp.Diff(want, append(got.Classes, got.Total), cmpopts.EquateNaNs(), near); d != "" {
		t.Errorf("tallies and their total (-want +got)\n%s", d)
	}
	if got.Missing != 1 || got.Strangers != 3 {
		t.Errorf("%d missing, %d strangers; want 1 and 3", got.Missing, got.Strangers)
	}
	if len(got.Misses) != 2 || got.Misses[0].Truth.File != "p01/b.fits" || got.Misses[1].Truth.Row != 3 {
		t.Errorf("misses %+v", got.Misses)
	}
	if n := Score(nil, nil); len(n.Classes) != 5 || n.Missing != 0 {
		t.Errorf("nothing scored gives %+v", n)
	}
}
