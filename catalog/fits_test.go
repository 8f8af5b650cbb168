package catalog

import (
	"bytes"
	"encoding/json"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"duskline/internal/fitsout"
	"duskline/internal/outside"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"
)

var someProvenance = NewProvenance(Origin{Program: "1.2.3", Build: "go9.9", Run: "feed", Settings: "[run]\nblock_size = 5\n",
	Keys: []string{"run.block_size = 5"}, Digests: map[string]string{
		"settings": "00112233", "recipes": "44556677", "line list": "8899aabb"}})

func writeFITS(t interface{ Fatal(...any) }, objects []Object, lines []Line, absorbers ...Absorber) []byte {
	var w Widths
	for i := range objects {
		w.AddObject(&objects[i])
	}
	for i := range lines {
		w.AddLine(&lines[i])
	}
	for i := range absorbers {
		w.AddAbsorber(&absorbers[i])
	}
	var m fitsout.Memory
	f, err := NewFITS(&m, someProvenance, &w)
	if err != nil {
		t.Fatal(err)
	}
	for i := range objects {
		if err := f.WriteObject(&objects[i]); err != nil {
			t.Fatal(err)
		}
	}
	for i := range lines {
		if err := f.WriteLine(&lines[i]); err != nil {
			t.Fatal(err)
		}
	}
	for i := range absorbers {
		if err := f.WriteAbsorber(&absorbers[i]); err != nil {
			t.Fatal(err)
		}
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	return m.Bytes()
}

func saveFITS(t *testing.T, objects []Object, lines []Line, absorbers ...Absorber) string {
	path := filepath.Join(t.TempDir(), "catalog.fits")
	if err := os.WriteFile(path, writeFITS(t, objects, lines, absorbers...), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestFITSVerify(t *testing.T) {
	program := outside.Program(t, "fitsverify")
	for name, path := range map[string]string{
		"rows":    saveFITS(t, someObjects(), someLines(), someAbsorbers()...),
		"no rows": saveFITS(t, nil, nil),
	} {
		// It can hang on some files.
		out, err := exec.Command("timeout", "60", program, path).CombinedOutput()
		if err != nil || !strings.Contains(string(out), "0 warning(s) and 0 error(s)") {
			t.Errorf("%s: fitsverify: %v\n%s", name, err, out)
		}
	}
}

type readback struct {
	Tables map[string]struct {
		Columns []struct{ Name, Unit, UCD, Display, Description string }
		Rows    [][]any
		Flags   []string
		Rowsn   int               `json:"table_rows"`
		Units   map[string]string `json:"table_units"`
	}
	States   [][2]int
	Primary  map[string]any
	Refused  []string
	Warnings []string
}

// TestFITSInAstropy holds names, units, UCDs and every value against what an
// independent reader finds. Numbers are compared bit by bit.
func TestFITSInAstropy(t *testing.T) {
	python := outside.Python(t, "astropy")
	objects, lines, absorbers := someObjects(), someLines(), someAbsorbers()
	out, err := exec.Command("timeout", "60", python, filepath.Join("testdata", "readback.py"), saveFITS(t, objects, lines, absorbers...)).Output()
	if err != nil {
		var exit *exec.ExitError
		if errors.As(err, &exit) {
			t.Fatalf("astropy: %v\n%s", err, exit.Stderr)
		}
		t.Fatal(err)
	}
	var r readback
	if err := json.Unmarshal(out, &r); err != nil {
		t.Fatal(err)
	}
	if len(r.Warnings) > 0 || len(r.Refused) > 0 {
		t.Errorf("astropy warns %q and refuses the UCDs or units %q", r.Warnings, r.Refused)
	}
	// 1 says that the checksum is there and right.
	if d := cmp.Diff([][2]int{{1, 1}, {1, 1}, {1, 1}, {1, 1}}, r.States); d != "" {
		t.Errorf("checksum and datasum states:\n%s", d)
	}
	for _, f := range someProvenance {
		if f.Keyword == "" {
			continue
		}
		if r.Primary[f.Keyword] != f.Value {
			t.Errorf("%s = %v, want %q", f.Keyword, r.Primary[f.Keyword], f.Value)
		}
	}
	for bit, name := range FlagNames() {
		if got := r.Tables["OBJECTS"].Flags[bit]; got != name {
			t.Errorf("FLAG%d = %q, want %q", bit, got, name)
		}
	}
	compareTable(t, r, objects)
	compareTable(t, r, lines)
	compareTable(t, r, absorbers)
}

func compareTable[T Row](t *testing.T, r readback, rows []T) {
	table := tableOf[T]()
	got := r.Tables[table.name]
	if len(got.Columns) != len(table.columns) || len(got.Rows) != len(rows) || got.Rowsn != len(rows) {
		t.Fatalf("%s: %d columns, %d rows, want %d and %d", table.name, len(got.Columns), len(got.Rows), len(table.columns), len(rows))
	}
	for i, c := range table.columns {
		g := got.Columns[i]
		if g.Name != c.Name || g.Unit != c.Unit || g.UCD != c.UCD || g.Display != c.Display || g.Description != c.Description {
			t.Errorf("%s: column %+v, want %+v", table.name, g, c.Column)
		}
		// astropy writes km/s as km / s.
		if u := strings.ReplaceAll(got.Units[c.Name], " ", ""); u != c.Unit {
			t.Errorf("%s: unit of %s in the table is %q, want %q", table.name, c.Name, u, c.Unit)
		}
		for j := range rows {
			field, value := c.field(&rows[j]), got.Rows[j][i]
			var same bool
			switch c.Type {
			case "text":
				same = value == fitsout.ASCII(textOf(field))
			case "float64":
				v, err := strconv.ParseFloat(value.(string), 64)
				want := *field.(*float64)
				same = err == nil && (v == want || v != v && want != want)
			default:
				same = value == float64(intOf(field))
			}
			if !same {
				t.Errorf("%s: row %d, %s: %v", table.name, j, c.Name, value)
			}
		}
	}
}

func TestFITSOrderAndWidths(t *testing.T) {
	o, l := someObjects()[0], someLines()[0]
	var w Widths
	w.AddObject(&o)
	w.AddLine(&l)
	f, err := NewFITS(&fitsout.Memory{}, nil, &w)
	if err != nil {
		t.Fatal(err)
	}
	if err := f.WriteLine(&l); err != nil {
		t.Fatal(err)
	}
	if err := f.WriteObject(&o); !errors.Is(err, ErrOrder) {
		t.Errorf("object after a line: error %v", err)
	}
	if err := f.WriteAbsorber(&Absorber{}); !errors.Is(err, ErrRow) {
		t.Errorf("absorber without an object: error %v", err)
	}
	if err := f.WriteLine(&l); !errors.Is(err, ErrOrder) {
		t.Errorf("line after an absorber: error %v", err)
	}
	if f, err = NewFITS(&fitsout.Memory{}, nil, &w); err != nil {
		t.Fatal(err)
	}
	long := l
	long.Blend += "+"
	if err := f.WriteLine(&long); !errors.Is(err, fitsout.ErrCell) {
		t.Errorf("text wider than announced: error %v", err)
	}
	bad := Provenance{{"too long a keyword", "x", "y", ""}}
	if _, err := NewFITS(&fitsout.Memory{}, bad, &w); !errors.Is(err, fitsout.ErrHeader) {
		t.Errorf("keyword that is none: error %v", err)
	}
}

// Whatever a row holds, the file can be written, and it is the same twice.
func TestFITSTakesAnyRow(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		objects, lines := []Object{drawObject(t)}, []Line{drawLine(t)}
		if !bytes.Equal(writeFITS(t, objects, lines), writeFITS(t, objects, lines)) {
			t.Error("two writings differ")
		}
	})
}
