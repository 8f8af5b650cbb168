package fitsout

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// longText has no quote before a blank and no two in a row: astropy 5.2 ends a
// continued string at the first and halves the second. TestTableProperty covers
// both by the rules of the standard.
var longText = "It isn't a short string, it's" + strings.Repeat("'s", 50) + "one that runs over " +
	strings.Repeat("several records ", 9) + "and ends."

// sample is a file with one of everything.
func sample(t *testing.T, out *Memory) {
	t.Helper()
	w, err := NewWriter(out)
	must(t, err)
	h := &Header{}
	h.Text("OBSERVER", "O'Hara & Co", "quote and ampersand")
	h.Text("LONGTEXT", longText, "continued")
	h.Text("EMPTY", "", "")
	h.Text("EXACT68", strings.Repeat("x", 68), "no room for this")
	h.Text("OVER69", strings.Repeat("y", 69), "")
	h.Int("COUNT", -42, "an integer")
	h.Int("BIGGEST", math.MinInt64, "")
	h.Float("TENTH", 0.1, "a number")
	h.Float("WHOLE", 5, "a whole number")
	h.Float("TINY", -1.25e-300, strings.Repeat("long comment ", 9))
	h.Bool("YES", true, "")
	h.Bool("NO", false, "")
	h.Comment(strings.Repeat("A comment that must be broken between words. ", 5))
	h.History("made for a test")
	must(t, WriteImage(w, h, "", []int{3, 2}, []float32{1, -2.5, float32(math.NaN()), 0, 1e30, 7}))
	must(t, WriteImage(w, nil, "B8", []int{3}, []uint8{0, 1, 255}))
	must(t, WriteImage(w, nil, "I16", []int{2}, []int16{-32768, 32767}))
	must(t, WriteImage(w, nil, "I32", []int{2, 1, 1}, []int32{-1 << 31, 1<<31 - 1}))
	must(t, WriteImage(w, nil, "I64", []int{1}, []int64{-1 << 63}))
	must(t, WriteImage(w, nil, "F64", []int{2}, []float64{math.Pi, math.Inf(1)}))
	null := int64(-99)
	th := &Header{}
	th.Text("ORIGIN", "a test", "")
	tab, err := w.Table(th, "EVERYTHING", []Column{
		{Name: "flag", Kind: Logical, Comment: "a logical"},
		{Name: "byte", Kind: Byte},
		{Name: "short", Kind: Int16, Null: &null},
		{Name: "int", Kind: Int32, Display: "I8"},
		{Name: "long", Kind: Int64},
		{Name: "single", Kind: Float32, Unit: "Angstrom", Display: "F9.3"},
		{Name: "double", Kind: Float64, Unit: "km/s", UCD: "spect.dopplerVeloc", Utype: "Spectrum.Derived.Redshift.Value", Display: "E15.7"},
		{Name: "text", Kind: Text, Repeat: 7, UCD: "meta.id;meta.main"},
		{Name: "wave", Kind: Float32, Repeat: 3},
		{Name: "grid", Kind: Float64, Repeat: 4, Dim: []int{2, 2}},
		{Name: "counts", Kind: Int16, Repeat: 2, Comment: strings.Repeat("words ", 20) + "end"},
	})
	must(t, err)
	for i := range 3 {
		tab.Bool(i%2 == 0)
		tab.Int(int64(i))
		tab.Int(int64(100*i) - 99)
		tab.Int(-5)
		tab.Int(1 << 40)
		tab.Float(0.5)
		tab.Float([]float64{math.Pi, math.NaN(), -1e-300}[i])
		tab.Text([]string{"", "ab c", "seventy"}[i])
		tab.Floats([]float64{1, 2, 3})
		tab.Floats([]float64{1, 2, 3, float64(i)})
		tab.Ints([]int64{7, int64(-i)})
		must(t, tab.EndRow())
	}
	must(t, tab.Close())
	empty, err := w.Table(nil, "NOROWS", []Column{{Name: "a", Kind: Int32}})
	must(t, err)
	must(t, empty.Close())
	must(t, w.Close())
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func TestSampleIsRepeatableAndSumsToMinusZero(t *testing.T) {
	var a, b Memory
	sample(t, &a)
	sample(t, &b)
	if !bytes.Equal(a.Bytes(), b.Bytes()) {
		t.Error("two writings of the same content differ")
	}
	checkHDUs(t, a.Bytes(), 8)
}

// TestReadBack holds every value against an independent reader.
func TestReadBack(t *testing.T) {
	var m Memory
	sample(t, &m)
	path := filepath.Join(t.TempDir(), "sample.fits")
	must(t, os.WriteFile(path, m.Bytes(), 0o644))
	verifyFITS(t, path)
	r := readAstropy(t, path)
	if len(r.HDUs) != 8 {
		t.Fatalf("%d HDUs, want 8", len(r.HDUs))
	}
	p := r.HDUs[0]
	for key, want := range map[string]any{
		"OBSERVER": "O'Hara & Co", "LONGTEXT": longText, "EMPTY": "",
		"EXACT68": strings.Repeat("x", 68), "OVER69": strings.Repeat("y", 69),
		"COUNT": -42., "BIGGEST": float64(math.MinInt64), "TENTH": "0.1", "WHOLE": "5.0",
		"TINY": "-1.25e-300", "YES": true, "NO": false,
	} {
		if diff := cmp.Diff(want, p.Cards[key]); diff != "" {
			t.Errorf("%s: %s", key, diff)
		}
	}
	if got := p.Comments["COUNT"]; got != "an integer" {
		t.Errorf("comment of COUNT = %q", got)
	}
	wantComment := strings.TrimSpace(strings.Repeat("A comment that must be broken between words. ", 5))
	if got := strings.Join(p.Comment, " "); got != wantComment {
		t.Errorf("COMMENT = %q", got)
	}
	type pixels struct {
		Name, Dtype string
		Shape       []int
		Pixels      []any
	}
	var images []pixels
	for _, h := range r.HDUs[:6] {
		images = append(images, pixels{h.Name, h.Dtype, h.Shape, h.Pixels})
	}
	want := []pixels{
		{"PRIMARY", "float32", []int{2, 3}, []any{"1.0", "-2.5", "nan", "0.0", "1.0000000150474662e+30", "7.0"}},
		{"B8", "uint8", []int{3}, []any{0., 1., 255.}},
		{"I16", "int16", []int{2}, []any{-32768., 32767.}},
		{"I32", "int32", []int{1, 1, 2}, []any{-2147483648., 2147483647.}},
		{"I64", "int64", []int{1}, []any{-9223372036854775808.}},
		{"F64", "float64", []int{2}, []any{"3.141592653589793", "inf"}},
	}
	if diff := cmp.Diff(want, images); diff != "" {
		t.Errorf("images (-want +got):\n%s", diff)
	}
	tab := r.HDUs[6]
	for key, want := range map[string]any{
		"TTYPE7": "double", "TFORM7": "1D", "TUNIT7": "km/s", "TUCD7": "spect.dopplerVeloc",
		"TUTYP7": "Spectrum.Derived.Redshift.Value", "TDISP7": "E15.7", "TNULL3": -99., "TDIM10": "(2,2)",
		"TCOMM1": "a logical", "TCOMM11": strings.Repeat("words ", 20) + "end", "NAXIS2": 3., "ORIGIN": "a test",
	} {
		if diff := cmp.Diff(want, tab.Cards[key]); diff != "" {
			t.Errorf("%s: %s", key, diff)
		}
	}
	vec := []any{"1.0", "2.0", "3.0"}
	wantRows := [][]any{
		{true, 0., -99., -5., 1099511627776., "0.5", "3.141592653589793", "", vec, []any{[]any{"1.0", "2.0"}, []any{"3.0", "0.0"}}, []any{7., 0.}},
		{false, 1., 1., -5., 1099511627776., "0.5", "nan", "ab c", vec, []any{[]any{"1.0", "2.0"}, []any{"3.0", "1.0"}}, []any{7., -1.}},
		{true, 2., 101., -5., 1099511627776., "0.5", "-1e-300", "seventy", vec, []any{[]any{"1.0", "2.0"}, []any{"3.0", "2.0"}}, []any{7., -2.}},
	}
	if diff := cmp.Diff(wantRows, tab.Rows); diff != "" {
		t.Errorf("rows (-want +got):\n%s", diff)
	}
	if n := r.HDUs[7].Cards["NAXIS2"]; n != 0. {
		t.Errorf("NAXIS2 of the empty table = %v", n)
	}
}
