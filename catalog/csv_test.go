package catalog

import (
	"bytes"
	"errors"
	"flag"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

var update = flag.Bool("update", false, "write golden files anew")

// golden holds text against a file in which every byte counts.
func golden(t *testing.T, path, got string) {
	t.Helper()
	if *update {
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(got), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if string(want) != got {
		t.Errorf("%s differs; if that is meant, run the test with -update and review the change. Now:\n%s", path, got)
	}
}

func writeCSV[T Row](t interface{ Fatal(...any) }, rows []T) []byte {
	var b bytes.Buffer
	w, err := NewCSV[T](&b)
	if err != nil {
		t.Fatal(err)
	}
	writeRows(t, w, rows)
	return b.Bytes()
}

// writeRows writes rows and closes the table.
func writeRows[T Row](t interface{ Fatal(...any) }, w interface {
	Write(*T) error
	Close() error
}, rows []T) {
	for i := range rows {
		if err := w.Write(&rows[i]); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
}

func readCSV[T Row](r io.Reader) ([]T, error) {
	in, err := NewCSVReader[T](r)
	if err != nil {
		return nil, err
	}
	var rows []T
	for {
		var row T
		if err := in.Next(&row); err == io.EOF {
			return rows, nil
		} else if err != nil {
			return rows, err
		}
		rows = append(rows, row)
	}
}

func TestCSVGolden(t *testing.T) {
	golden(t, filepath.Join("testdata", "objects.csv"), string(writeCSV(t, someObjects())))
	golden(t, filepath.Join("testdata", "lines.csv"), string(writeCSV(t, someLines())))
}

func TestDocsGolden(t *testing.T) {
	golden(t, filepath.Join("..", "docs", "columns.md"), markdownColumns())
}

// rounded is v with the decimals of its column, half a unit of the last place
// away at most (and half an ulp, for numbers with more digits than a double).
func near(v, got float64, display string) bool {
	if math.IsNaN(v) || math.IsNaN(got) {
		return math.IsNaN(v) == math.IsNaN(got)
	}
	layout, n := decimals(display)
	half := 0.5 * math.Pow(10, -float64(n))
	if layout == 'e' {
		half *= math.Pow(10, math.Floor(math.Log10(math.Abs(v)))+1e-9)
		if v == 0 {
			half = 0
		}
	}
	// 1e-9 of slack for the rounding of this very sum.
	return math.Abs(v-got) <= half*(1+1e-9)+1e-15*math.Abs(v)
}

func csvRoundTrip[T Row](t *rapid.T, draw func(*rapid.T) T) {
	want := draw(t)
	rows, err := readCSV[T](bytes.NewReader(writeCSV(t, []T{want})))
	if err != nil || len(rows) != 1 {
		t.Fatalf("%d rows, error %v", len(rows), err)
	}
	want, got := cleaned(want), rows[0]
	for _, c := range tableOf[T]().columns {
		if p, ok := c.field(&want).(*float64); ok {
			q := c.field(&got).(*float64)
			if !near(*p, *q, c.Display) {
				t.Errorf("%s: %v came back as %v", c.Name, *p, *q)
			}
			*p, *q = 0, 0
		}
	}
	if d := diff(want, got); d != "" {
		t.Errorf("row (-want +got):\n%s", d)
	}
}

func TestCSVRoundTrip(t *testing.T) {
	t.Run("objects", rapid.MakeCheck(func(t *rapid.T) { csvRoundTrip(t, drawObject) }))
	t.Run("lines", rapid.MakeCheck(func(t *rapid.T) { csvRoundTrip(t, drawLine) }))
}

func TestCSVRefusals(t *testing.T) {
	good := string(writeCSV(t, someObjects()[:1]))
	for _, c := range []struct{ name, old, new, want string }{
		{"no header", good, "", "header"},
		{"other column", "source_row", "source_line", `column 3 is "source_line"`},
		{"column missing", ",input_digest", "", "column "},
		{"number with letters", ",0.1234567", ",0.12z", "column redshift"},
		{"row of wrong length", "0123456789abcdef", "0123,4567", "wrong number of fields"},
		{"integer too large", ",7,", ",3000000000,", "column lines_seen"},
		{"flag names against flags", "lone_line|", "tied|", "column flag_names"},
		{"undefined verdict", "secure", "sure", "verdict"},
		{"infinite number", "43.125", "Inf", "gap"},
		{"open quote", "topocentric", `"topocentric`, "quote"},
	} {
		_, err := readCSV[Object](strings.NewReader(strings.Replace(good, c.old, c.new, 1)))
		if !errors.Is(err, ErrCSV) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one that says %q", c.name, err, c.want)
		}
	}
	bad := someObjects()[0]
	bad.Gap = math.Inf(1)
	w, err := NewCSV[Object](io.Discard)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Write(&bad); !errors.Is(err, ErrRow) {
		t.Errorf("writing an infinite number: error %v", err)
	}
}
