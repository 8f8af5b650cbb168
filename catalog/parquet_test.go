package catalog

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/parquet-go/parquet-go"
	"pgregory.net/rapid"
)

func writeParquet[T Row](t interface{ Fatal(...any) }, rows []T) []byte {
	var b bytes.Buffer
	w, err := NewParquet[T](&b, someProvenance)
	if err != nil {
		t.Fatal(err)
	}
	writeRows(t, w, rows)
	return b.Bytes()
}

func readParquet[T Row](file []byte) (rows []T, err error) {
	r, err := OpenParquet[T](bytes.NewReader(file), int64(len(file)))
	if err != nil {
		return nil, err
	}
	defer func() { err = errors.Join(err, r.Close()) }()
	for {
		var row T
		if err := r.Next(&row); err == io.EOF {
			return rows, nil
		} else if err != nil {
			return rows, err
		}
		rows = append(rows, row)
	}
}

func parquetRoundTrip[T Row](t *rapid.T, draw func(*rapid.T) T) {
	var want []T
	for range rapid.IntRange(0, 5).Draw(t, "rows") {
		want = append(want, draw(t))
	}
	file := writeParquet(t, want)
	if !bytes.Equal(file, writeParquet(t, want)) {
		t.Error("two writings of the same rows differ")
	}
	got, err := readParquet[T](file)
	if err != nil {
		t.Fatal(err)
	}
	for i := range want {
		want[i] = cleaned(want[i])
	}
	if d := cmp.Diff(want, got, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("rows (-want +got):\n%s", d)
	}
}

func TestParquetRoundTrip(t *testing.T) {
	t.Run("objects", rapid.MakeCheck(func(t *rapid.T) { parquetRoundTrip(t, drawObject) }))
	t.Run("lines", rapid.MakeCheck(func(t *rapid.T) { parquetRoundTrip(t, drawLine) }))
}

// Row groups and batches must join without a seam.
func TestParquetManyRows(t *testing.T) {
	for _, n := range []int{batchRows, batchRows + 1, rowsPerGroup, rowsPerGroup + 1, 2*rowsPerGroup + batchRows - 1} {
		rows := make([]Line, n)
		for i := range rows {
			rows[i] = someLines()[i%2]
			rows[i].ObjectID = fmt.Sprint("object ", i/7)
			rows[i].Flux = float64(i)
		}
		got, err := readParquet[Line](writeParquet(t, rows))
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(rows, got, cmpopts.EquateNaNs()); d != "" {
			t.Errorf("%d rows (-want +got):\n%s", n, d)
		}
	}
}

func TestParquetMetadata(t *testing.T) {
	file := writeParquet(t, someObjects())
	r, err := OpenParquet[Object](bytes.NewReader(file), int64(len(file)))
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	if r.file.NumRows() != int64(len(someObjects())) {
		t.Errorf("%d rows", r.file.NumRows())
	}
	for _, f := range someProvenance {
		if f.Name == "" {
			continue
		}
		if got, ok := r.Facts()[f.Name]; !ok || got != f.Value {
			t.Errorf("%s = %q, want %q", f.Name, got, f.Value)
		}
	}
	described := r.Facts()["columns"]
	var columns []struct{ Name, Unit, UCD, Description string }
	if err := json.Unmarshal([]byte(described), &columns); err != nil {
		t.Fatal(err)
	}
	for i, c := range objectColumnsTold() {
		if got := columns[i]; got.Name != c.Name || got.Unit != c.Unit || got.UCD != c.UCD || got.Description != c.Description {
			t.Errorf("column %d described as %+v, want %+v", i, got, c)
		}
	}
	// The library's own name and version must not creep into the bytes.
	f, err := parquet.OpenFile(bytes.NewReader(file), int64(len(file)))
	if err != nil {
		t.Fatal(err)
	}
	if got := f.Metadata().CreatedBy; got != "duskline version 1(build catalog)" {
		t.Errorf("created by %q", got)
	}
	// NaN is null, for engines that would sort it above all numbers.
	index := -1
	for i, c := range objectColumnsTold() {
		if c.Name == "ra" {
			index = i
		}
	}
	rows := f.RowGroups()[0].Rows()
	defer rows.Close()
	batch := make([]parquet.Row, 2)
	if n, err := rows.ReadRows(batch); n != 2 || err != nil && err != io.EOF {
		t.Fatal(n, err)
	}
	if v := batch[1][index]; !math.IsNaN(someObjects()[1].RA) || !v.IsNull() {
		t.Errorf("unknown right ascension is held as %v, want null", v)
	}
}

func TestParquetRefusals(t *testing.T) {
	objects := writeParquet(t, someObjects())
	var unsealed bytes.Buffer
	objectTable := tableOf[Object]()
	foreign := parquet.NewGenericWriter[any](&unsealed, objectTable.schema(len(objectTable.columns)))
	if err := foreign.Close(); err != nil {
		t.Fatal(err)
	}
	for name, file := range map[string][]byte{
		"empty":         nil,
		"text":          []byte("object_id,source_file\n"),
		"cut at end":    objects[:len(objects)-1],
		"cut in middle": objects[:len(objects)/2],
		"not sealed":    unsealed.Bytes(),
		"other table":   writeParquet(t, someLines()),
	} {
		if _, err := readParquet[Object](file); !errors.Is(err, ErrParquet) {
			t.Errorf("%s: error %v", name, err)
		}
	}
	bad := someObjects()[0]
	bad.Class = "comet"
	w, err := NewParquet[Object](io.Discard, nil)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Write(&bad); !errors.Is(err, ErrRow) {
		t.Errorf("writing an undefined class: error %v", err)
	}
}

// A changed bit in any byte, and any cut, is noticed before anything is decoded.
func TestParquetDamage(t *testing.T) {
	file := writeParquet(t, someObjects()[:1])
	if _, err := readParquet[Object](file); err != nil {
		t.Fatal(err)
	}
	refused := func(damaged []byte) bool {
		_, err := OpenParquet[Object](bytes.NewReader(damaged), int64(len(damaged)))
		return errors.Is(err, ErrParquet)
	}
	damaged := bytes.Clone(file)
	for i := range file {
		damaged[i] ^= 1 << (i % 8)
		if !refused(damaged) {
			t.Errorf("byte %d changed: not refused", i)
		}
		damaged[i] = file[i]
		if i%7 == 0 && !refused(file[:i]) {
			t.Errorf("cut after %d bytes: not refused", i)
		}
	}
}
