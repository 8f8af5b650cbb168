package catalog

import (
	"encoding/json"
	"fmt"
	"io"
	"math"
	"reflect"
	"strings"

	"github.com/parquet-go/parquet-go"
)

// rowsPerGroup bounds the memory of writing and reading: a row group is held
// whole. 8,192 rows of either table are about 2 MB.
const rowsPerGroup = 8192

// columnsKey is the metadata key of the description of all columns, a JSON
// list of objects with name, unit, ucd and description.
const columnsKey = "columns"

// Parquet writes rows as an Apache Parquet file. Numbers that are not known
// are null; text and whole numbers are required columns. The metadata holds
// the provenance, each fact under its name, the name of the table under
// "table" and what the columns mean under "columns" (JSON). Bytes depend on
// the rows and the provenance only.
type Parquet[T Row] struct {
	table[T]
	out    *parquet.GenericWriter[any]
	seal   *sealer
	values parquet.Row
	text   []byte // of the row, which values point into
}

// NewParquet begins a file.
func NewParquet[T Row](w io.Writer, p Provenance) (*Parquet[T], error) {
	return newParquet(w, tableOf[T](), p)
}

func newParquet[T Row](w io.Writer, t table[T], p Provenance) (*Parquet[T], error) {
	described, err := t.describe()
	if err != nil {
		return nil, err
	}
	options := []parquet.WriterOption{
		t.schema(len(t.columns)),
		// The library's own name would change with its version.
		parquet.CreatedBy("duskline", FormatVersion, "catalog"),
		parquet.MaxRowsPerRowGroup(rowsPerGroup),
		parquet.Compression(&parquet.Snappy),
		parquet.KeyValueMetadata("table", t.name),
		parquet.KeyValueMetadata(columnsKey, described),
	}
	options = append(options, parquet.KeyValueMetadata(sealKey, sealValue))
	for _, f := range p {
		if f.Name == "" {
			continue
		}
		options = append(options, parquet.KeyValueMetadata(f.Name, f.Value))
	}
	seal := newSealer(w)
	return &Parquet[T]{table: t, out: parquet.NewGenericWriter[any](seal, options...), seal: seal,
		values: make(parquet.Row, len(t.columns))}, nil
}

// schema makes the Parquet schema of the first n columns in their order, which a
// parquet.Group would sort by name.
func (t *table[T]) schema(n int) *parquet.Schema {
	fields := make([]reflect.StructField, n)
	for i, c := range t.columns[:n] {
		f := reflect.StructField{Name: fmt.Sprintf("F%d", i), Tag: reflect.StructTag(fmt.Sprintf(`parquet:"%s"`, c.Name))}
		switch c.Type {
		case "text":
			f.Type = reflect.TypeFor[string]()
		case "int32":
			f.Type = reflect.TypeFor[int32]()
		case "int64":
			f.Type = reflect.TypeFor[int64]()
		default:
			f.Type = reflect.TypeFor[float64]()
			f.Tag = reflect.StructTag(fmt.Sprintf(`parquet:"%s,optional"`, c.Name))
		}
		fields[i] = f
	}
	row := reflect.New(reflect.StructOf(fields)).Elem().Interface()
	return parquet.NewSchema(strings.ToLower(t.name), parquet.SchemaOf(row))
}

func (t *table[T]) describe() (string, error) {
	type entry struct {
		Name        string `json:"name"`
		Unit        string `json:"unit"`
		UCD         string `json:"ucd"`
		Description string `json:"description"`
	}
	entries := make([]entry, len(t.columns))
	for i, c := range t.columns {
		entries[i] = entry{c.Name, c.Unit, c.UCD, c.Description}
	}
	b, err := json.Marshal(entries)
	return string(b), err
}

// Write adds a row that passes Check.
func (w *Parquet[T]) Write(row *T) error {
	if err := w.verify(row); err != nil {
		return err
	}
	w.text = w.text[:0]
	for i := range w.columns {
		field := w.columns[i].field(row)
		var v parquet.Value
		defined := 0
		switch w.columns[i].Type {
		case "text":
			start := len(w.text)
			w.text = append(w.text, textOf(field)...)
			v = parquet.ByteArrayValue(w.text[start:])
		case "int32":
			v = parquet.Int32Value(int32(intOf(field)))
		case "int64":
			v = parquet.Int64Value(intOf(field))
		default:
			if x := *field.(*float64); !math.IsNaN(x) {
				v, defined = parquet.DoubleValue(x), 1
			}
		}
		w.values[i] = v.Level(0, defined, i)
	}
	if _, err := w.out.WriteRows([]parquet.Row{w.values}); err != nil {
		return fmt.Errorf("writing Parquet table %s: %w", w.name, err)
	}
	return nil
}

// Close completes the file. It does not close the underlying file.
func (w *Parquet[T]) Close() error {
	err := w.out.Flush()
	if err == nil {
		w.seal.hold()
		err = w.out.Close()
	}
	if err == nil {
		err = w.seal.finish()
	}
	if err != nil {
		return fmt.Errorf("writing Parquet table %s: %w", w.name, err)
	}
	return nil
}
