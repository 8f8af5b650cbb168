package catalog

import (
	"errors"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/internal/fitsout"
	"duskline/internal/outside"
)

func someIndices() []Index {
	return []Index{
		{"a", "Hbeta", "Angstrom", 1.5, 0.1}, {"a", "Mg_2", "mag", 0.21, 0.01}, {"b", "Break4000", "ratio", math.NaN(), math.NaN()},
	}
}

// writeIndices writes objects and indices, nothing between; the table INDICES is
// there where rows is not nil.
func writeIndices(t *testing.T, rows []Index) string {
	t.Helper()
	var w Widths
	objects := someObjects()
	for i := range objects {
		w.AddObject(&objects[i])
	}
	for i := range rows {
		w.AddIndex(&rows[i])
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
	if rows != nil {
		if err := f.BeginIndices(); err != nil {
			t.Fatal(err)
		}
	}
	for i := range rows {
		if err := f.WriteIndex(&rows[i]); err != nil {
			t.Fatal(err)
		}
	}
	if rows != nil {
		absorber := someAbsorbers()[0]
		if err := f.WriteAbsorber(&absorber); !errors.Is(err, ErrOrder) {
			t.Errorf("an absorber after the indices: %v, want ErrOrder", err)
		}
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "catalog.fits")
	if err := os.WriteFile(path, m.Bytes(), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// The table INDICES as fitsverify (live) sees it, with rows, without rows, and
// not there.
func TestIndicesVerify(t *testing.T) {
	program := outside.Program(t, "fitsverify")
	for name, rows := range map[string][]Index{"rows": someIndices(), "no rows": {}, "no table": nil} {
		out, err := exec.Command("timeout", "60", program, writeIndices(t, rows)).CombinedOutput()
		if err != nil || !strings.Contains(string(out), "0 warning(s) and 0 error(s)") || strings.Contains(string(out), "INDICES") != (rows != nil) {
			t.Errorf("%s: fitsverify: %v\n%s", name, err, out)
		}
	}
}

func TestIndexColumns(t *testing.T) {
	var names []string
	for _, c := range indexColumnsTold() {
		names = append(names, c.Name)
	}
	if got := strings.Join(names, " "); got != "object_id index index_unit value value_err" {
		t.Errorf("index columns: %s", got)
	}
}

// What a row must not hold.
func TestCheckIndex(t *testing.T) {
	for _, row := range someIndices() {
		if err := Check(&row); err != nil {
			t.Error(err)
		}
	}
	for _, row := range []Index{
		{"", "Hbeta", "Angstrom", 1, 1}, {"a", "", "mag", 1, 1}, {"a", "Hbeta", "km", 1, 1}, {"a", "Hbeta", "mag", 1, -1}, {"a", "Hbeta", "mag", math.Inf(1), 1},
	} {
		if err := Check(&row); !errors.Is(err, ErrRow) {
			t.Errorf("%+v: %v, want ErrRow", row, err)
		}
	}
}
