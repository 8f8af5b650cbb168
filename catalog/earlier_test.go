package catalog

import (
	"bytes"
	"io"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
)

// A table written before the last columns were appended is read: what it lacks
// is not known. One whose columns are others is still refused.
func TestTablesOfEarlierPrograms(t *testing.T) {
	early := tableOf[Line]()
	lost := 3
	for _, c := range early.columns[len(early.columns)-lost:] {
		if c.Type == "text" {
			t.Fatalf("column %s is text: take another number of columns", c.Name)
		}
	}
	early.columns = early.columns[:len(early.columns)-lost]
	row := Line{ObjectID: "a", Line: "Ha", RestWave: 6564.6, Kind: "emission", EWRest: -3, EWRestErr: 0.5}
	whole := tableOf[Line]()
	for _, c := range whole.columns[len(whole.columns)-lost:] {
		*c.field(&row).(*float64) = 7 // must not come back
	}
	want := row
	for _, c := range whole.columns[len(whole.columns)-lost:] {
		*c.field(&want).(*float64) = math.NaN()
	}

	var file bytes.Buffer
	w, err := newParquet(&file, early, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Write(&row); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	r, err := OpenParquet[Line](bytes.NewReader(file.Bytes()), int64(file.Len()))
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	got := row // as left by an earlier use
	if err := r.Next(&got); err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("Parquet (-want +got):\n%s", d)
	}
	if err := r.Next(&got); err != io.EOF {
		t.Errorf("after the last row: %v", err)
	}

	text := strings.Split(strings.TrimRight(string(writeCSV(t, []Line{row})), "\r\n"), "\r\n")
	for i := range text {
		fields := strings.Split(text[i], ",")
		text[i] = strings.Join(fields[:len(fields)-lost], ",") + "\r\n"
	}
	rows, err := readCSV[Line](strings.NewReader(strings.Join(text, "")))
	if err != nil {
		t.Fatal(err)
	}
	if d := cmp.Diff([]Line{want}, rows, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("CSV (-want +got):\n%s", d)
	}

	other := early
	other.columns = append([]column[Line](nil), early.columns...)
	other.columns[4], other.columns[5] = other.columns[5], other.columns[4]
	file.Reset()
	if w, err = newParquet(&file, other, nil); err != nil {
		t.Fatal(err)
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	if _, err := OpenParquet[Line](bytes.NewReader(file.Bytes()), int64(file.Len())); err == nil {
		t.Error("a table with columns in another order was read")
	}
}
