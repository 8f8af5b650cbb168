package catalog

import (
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/parquet-go/parquet-go"
)

// ErrParquet is wrapped by every error about a Parquet table that is cut
// short, damaged or not of the columns expected.
var ErrParquet = errors.New("catalog Parquet")

// ParquetReader reads back what Parquet wrote, a row at a time, holding one
// batch of rows.
type ParquetReader[T Row] struct {
	table[T]
	have   int // columns in the file; those after were appended since it was written
	file   *parquet.File
	groups []parquet.RowGroup
	rows   parquet.Rows
	batch  []parquet.Row
	left   []parquet.Row // of the batch, not handed out
	read   int64
	words  map[string]string
}

// batchRows is how many rows are decoded at a time.
const batchRows = 64

// maxWords bounds the texts that are kept to be shared by rows.
const maxWords = 4096

// OpenParquet opens a table of size bytes. It reads the file once to see that
// no byte differs from what was written, then checks that its columns are
// those of T, or the first of them: columns are only ever appended, and a
// table of an earlier program lacks the last. Close the reader after use.
func OpenParquet[T Row](r io.ReaderAt, size int64) (*ParquetReader[T], error) {
	t := tableOf[T]()
	if err := checkSeal(r, size); err != nil {
		return nil, fmt.Errorf("%w: table %s: %w", ErrParquet, t.name, err)
	}
	file, err := parquet.OpenFile(r, size, parquet.SkipPageIndex(true), parquet.SkipBloomFilters(true))
	if err != nil {
		return nil, fmt.Errorf("%w: table %s: %w", ErrParquet, t.name, err)
	}
	have := len(file.Schema().Columns())
	if got, want := file.Schema(), t.schema(min(have, len(t.columns))); !parquet.EqualNodes(got, want) {
		return nil, fmt.Errorf("%w: table %s: the columns are %s, want %s", ErrParquet, t.name, got, want)
	}
	return &ParquetReader[T]{table: t, have: have, file: file, groups: file.RowGroups(),
		batch: make([]parquet.Row, batchRows), words: map[string]string{}}, nil
}

// Next reads one row; io.EOF after the last. A row that fails Check is an
// error.
func (r *ParquetReader[T]) Next(row *T) error {
	for len(r.left) == 0 {
		if err := r.fill(); err != nil {
			return err
		}
	}
	values := r.left[0]
	r.left = r.left[1:]
	r.read++
	for i := range r.columns {
		if i >= r.have {
			forget(r.columns[i].field(row))
			continue
		}
		if err := r.store(r.columns[i].field(row), values[i]); err != nil {
			return fmt.Errorf("%w: table %s, row %d, column %s: %w", ErrParquet, r.name, r.read, r.columns[i].Name, err)
		}
	}
	if err := r.verify(row); err != nil {
		return fmt.Errorf("%w: row %d: %w", ErrParquet, r.read, err)
	}
	return nil
}

// fill decodes the next batch.
func (r *ParquetReader[T]) fill() error {
	if r.rows == nil {
		if len(r.groups) == 0 {
			return io.EOF
		}
		r.rows, r.groups = r.groups[0].Rows(), r.groups[1:]
	}
	n, err := r.rows.ReadRows(r.batch)
	r.left = r.batch[:n]
	switch {
	case n > 0 && (err == nil || errors.Is(err, io.EOF)):
		return nil
	case errors.Is(err, io.EOF):
		return r.closeGroup()
	case err == nil:
		err = io.ErrNoProgress
	}
	r.left = nil
	return fmt.Errorf("%w: table %s, after row %d: %w", ErrParquet, r.name, r.read, err)
}

func (r *ParquetReader[T]) closeGroup() error {
	if r.rows == nil {
		return nil
	}
	err := r.rows.Close()
	r.rows = nil
	if err != nil {
		return fmt.Errorf("%w: table %s: %w", ErrParquet, r.name, err)
	}
	return nil
}

// forget sets the field of a column that a table does not have: NaN, 0 or no
// text.
func forget(field any) {
	switch p := field.(type) {
	case *float64:
		*p = math.NaN()
	case *string:
		*p = ""
	default:
		setInt(field, 0)
	}
}

func (r *ParquetReader[T]) store(field any, v parquet.Value) error {
	switch p := field.(type) {
	case *float64:
		*p = math.NaN()
		if !v.IsNull() {
			*p = v.Double()
		}
		return nil
	case *int32, *Flags, *AbsorberFlags:
		setInt(field, int64(v.Int32()))
		return nil
	case *int64:
		*p = v.Int64()
		return nil
	}
	return setText(field, r.word(v.ByteArray()))
}

// word returns a string of b's content. Most texts of a table repeat: those
// are shared.
func (r *ParquetReader[T]) word(b []byte) string {
	if s, ok := r.words[string(b)]; ok {
		return s
	}
	if len(r.words) >= maxWords {
		clear(r.words)
	}
	s := string(b)
	r.words[s] = s
	return s
}

// Close releases the buffers of the reader. It does not close the underlying
// file.
func (r *ParquetReader[T]) Close() error { return r.closeGroup() }
