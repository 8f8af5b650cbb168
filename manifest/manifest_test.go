package manifest

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
)

func readAll(t *testing.T, text string) *Manifest {
	t.Helper()
	m, err := ReadCSV("night.csv", strings.NewReader(text))
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func all(t testing.TB, m *Manifest) (out []Entry) {
	t.Helper()
	if err := m.Each(func(e *Entry) error { out = append(out, *e); return nil }); err != nil || len(out) != m.Len() {
		t.Fatalf("%d of %d entries, %v", len(out), m.Len(), err)
	}
	return out
}

func find(t testing.TB, m *Manifest, path string, row int, id string) *Entry {
	t.Helper()
	e, err := m.Find(path, row, id)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// A manifest of more entries than are kept in memory, and more keys, answers as a
// small one does.
func TestLargeManifest(t *testing.T) {
	const n = 120_000
	var b strings.Builder
	b.WriteString("file,row,object_id,ra,dec,magnitude,expected_class,redshift_min,redshift_max,exclude\n")
	for i := range n {
		switch i % 3 {
		case 0:
			fmt.Fprintf(&b, "n%d/spec.fits,,LR %d,%d,-1.5,20.25,galaxy,0.5,,\n", i, i, i%360)
		case 1:
			fmt.Fprintf(&b, "many.fits,%d,,,,,,,,yes\n", i)
		case 2:
			fmt.Fprintf(&b, ",,LR %d,,,,star,,0.01,\n", i)
		}
	}
	m := readAll(t, b.String())
	if m.entries.file == nil || m.Len() != n {
		t.Fatalf("%d entries are in memory: the test is blind", m.Len())
	}
	for i, e := range all(t, m) {
		if e.Number != i || e.Line != i+2 {
			t.Fatalf("entry %d is %+v", i, e)
		}
		if i%101 != 0 {
			continue
		}
		path, row, id := fmt.Sprintf("/data/n%d/spec.fits.gz", i), 7, "nobody"
		switch i % 3 {
		case 1:
			path, row = "many.fits", i
		case 2:
			path, id = "other.fits", fmt.Sprintf("LR %d", i)
		}
		got := find(t, m, path, row, id)
		if got == nil || fmt.Sprintf("%+v", *got) != fmt.Sprintf("%+v", e) {
			t.Errorf("%s row %d, id %q: %+v, want %+v", path, row, id, got, e)
		}
	}
	if e := all(t, m)[99_999]; e.RA != 279 || e.Dec != -1.5 || e.Magnitude != 20.25 || e.ExpectedClass != "galaxy" || e.RedshiftMin != 0.5 ||
		!math.IsNaN(e.RedshiftMax) || e.Exclude || e.ObjectID != "LR 99999" || e.File != "n99999/spec.fits" || e.Row != AllRows {
		t.Errorf("%+v", e)
	}
	if find(t, m, "many.fits", 2, "") != nil || find(t, m, "spec.fits", 0, "LR 1") != nil {
		t.Error("something was found that is not there")
	}
	if _, err := ReadCSV("night.csv", strings.NewReader(b.String()+",,LR 119999,,,,,,,\n")); err == nil || !strings.Contains(err.Error(), "line 120002: it names the same object as line 120001") {
		t.Error(err)
	}
}

func TestReadCSV(t *testing.T) {
	m := readAll(t, "\xef\xbb\xbf# Lantern Ridge, 2031-03-14\n"+
		"File, Object ID,ra,DEC,magnitude,expected-class,redshift_min,redshift_max,exclude,fiber\n"+
		"a.fits,LR 1,10:30:00,-00:30:00,21.5,Galaxy,0.1,0.9,no,7\n"+
		"\"b,c.fits\",,,,,,,,yes,\n")
	entries := all(t, m)
	if len(entries) != 2 || len(m.Ignored) != 1 || m.Ignored[0] != "fiber" || m.ByName() {
		t.Fatalf("%+v", m)
	}
	e := entries[0]
	if e.Line != 3 || e.Row != AllRows || e.ObjectID != "LR 1" || e.RA != 157.5 || e.Dec != -0.5 || e.Magnitude != 21.5 ||
		e.ExpectedClass != "galaxy" || e.RedshiftMin != 0.1 || e.RedshiftMax != 0.9 || e.Exclude || !e.Restricts() {
		t.Errorf("%+v", e)
	}
	e = entries[1]
	if e.File != "b,c.fits" || !math.IsNaN(e.RA) || !math.IsNaN(e.RedshiftMin) || !e.Exclude || e.Restricts() {
		t.Errorf("%+v", e)
	}
}

func TestFind(t *testing.T) {
	m := readAll(t, "file,row,object_id\n"+
		"a.fits,,one\n"+ // 0
		"night2/a.fits,,two\n"+ // 1
		"a.fits,3,three\n"+ // 2
		"/data/a.fits,,four\n"+ // 3
		"./x/../b.fits.gz,,five\n"+ // 4
		",,LR 9\n") // 5
	for _, tt := range []struct {
		path string
		row  int
		id   string
		want int
	}{
		{"a.fits", 0, "", 0},
		{"night1/a.fits", 0, "LR 9", 0}, // the file counts before the name
		{"night1/night2/a.fits", 0, "", 1},
		{"knight2/a.fits", 0, "", 0}, // folders are whole words
		{"a.fits", 3, "", 2},
		{"night2/a.fits", 3, "", 1}, // the longer name before the row
		{"/data/a.fits", 0, "", 3},
		{"/more/data/a.fits", 0, "", 0},
		{"b.fits", 7, "", 4},
		{"night/b.fits.gz", 0, "", 4},
		{"night/b.fits.fz", 0, "", 4},
		{"other.fits", 0, "LR 9", 5},
		{"other.fits", 0, "", -1},
		{"aa.fits", 0, "", -1},
	} {
		got := -1
		if e := find(t, m, tt.path, tt.row, tt.id); e != nil {
			got = e.Number
		}
		if got != tt.want {
			t.Errorf("%s row %d, id %q: entry %d, want %d", tt.path, tt.row, tt.id, got, tt.want)
		}
	}
	if !m.ByName() {
		t.Error("an entry is joined by name")
	}
}

// Every problem names line and column, and all are told at once.
func TestProblems(t *testing.T) {
	for text, wants := range map[string][]string{
		"":                                  {"empty"},
		"file,ra\nx,1\n":                    {"line 1, column ra: it needs a column dec"},
		"fiber,plate\n1,2\n":                {"line 1: there is no column file or object_id"},
		"file,redshift_mim\nx,1\n":          {"column redshift_mim", "redshift_min is meant?"},
		"file,exclude,exclude\nx,1,1\n":     {"stands twice"},
		"file,row\nx,-1\ny,one\n,2\n":       {"line 2, column row", "line 3, column row", "line 4, column row: it belongs to a file"},
		"file\nx\nx\n":                      {"line 3: it names the same object as line 2"},
		"file\nx,y\n":                       {"line 2: it has 2 cells and the first line 1"},
		"file\n\"x\ny\n":                    {"line 2"},
		"object_id,expected_class\na,dog\n": {"line 2, column expected_class: \"dog\""},
		"file,redshift_min,redshift_max\nx,2,1\ny,NaN,\nz,five,99\n": {
			"line 2, column redshift_max: 1 is below", "line 4, column redshift_min", "line 4, column redshift_max"},
		"file,ra,dec\nx,400,0\ny,1,\nz,12:70:00,91\n": {"line 2, column ra", "line 3, column ra: ra and dec", "line 4, column ra", "line 4, column dec"},
		"file,exclude,magnitude\nx,maybe,bright\n":    {"column exclude", "column magnitude"},
	} {
		_, err := ReadCSV("night.csv", strings.NewReader(text))
		var problems *Error
		if !errors.As(err, &problems) {
			t.Errorf("%q: %v", text, err)
			continue
		}
		for _, want := range wants {
			if !strings.Contains(err.Error(), "night.csv "+want) && !strings.Contains(err.Error(), want) {
				t.Errorf("%q: %v\ndoes not say %q", text, err, want)
			}
		}
	}
	many := "file,row\n" + strings.Repeat("x,bad\n", 50)
	if _, err := ReadCSV("night.csv", strings.NewReader(many)); strings.Count(err.Error(), "\n") != maxProblems ||
		!strings.Contains(err.Error(), "and 30 more problems") {
		t.Error(err)
	}
}

func TestFromTable(t *testing.T) {
	table := func(cell string) func(header, row func([]string)) error {
		return func(header, row func([]string)) error {
			header([]string{"FILE", "REDSHIFT_MAX"})
			row([]string{"a.fits", cell})
			return nil
		}
	}
	m, err := FromTable("night.fits", table("0.5"))
	if err != nil || all(t, m)[0].RedshiftMax != 0.5 || find(t, m, "a.fits", 0, "").Number != 0 {
		t.Fatalf("%+v, %v", m, err)
	}
	_, err = FromTable("night.fits", table("x"))
	if err == nil || !strings.HasPrefix(err.Error(), "night.fits row 1, column redshift_max") {
		t.Error(err)
	}
}

// FuzzReadCSV: any text is a manifest or an *Error; entries keep their promises.
func FuzzReadCSV(f *testing.F) {
	f.Add("file,row,object_id,ra,dec,magnitude,expected_class,redshift_min,redshift_max,exclude\na.fits,1,x,1,2,3,star,0,1,f\n")
	f.Add("object_id\nLR 1\n")
	f.Add("file\n/a /\n")    // a blank that only shows when the slash is gone
	f.Add("file\nx.gz.fz\n") // packed twice
	f.Fuzz(func(t *testing.T, text string) {
		m, err := ReadCSV("fuzz.csv", strings.NewReader(text))
		var problems *Error
		if err != nil {
			if !errors.As(err, &problems) {
				t.Fatal(err)
			}
			return
		}
		for _, e := range all(t, m) {
			if e.File == "" && e.ObjectID == "" || e.RedshiftMin > e.RedshiftMax || e.RA < 0 || math.Abs(e.Dec) > 90 {
				t.Fatalf("%+v", e)
			}
			if find(t, m, e.File, max(e.Row, 0), e.ObjectID) == nil {
				t.Fatalf("%+v does not find itself", e)
			}
		}
	})
}
