package catalog

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"

	"duskline/internal/fitsout"
)

// ErrOrder is returned by FITS for a row after the first one of a later table.
var ErrOrder = errors.New("catalog: objects, lines, absorbers and indices must be written in this order")

// Widths gathers what a FITS table must know before its first row: the widths
// of its text columns. Show it every row that will be written, in any order,
// then give it to NewFITS. The zero value has seen no row.
type Widths struct {
	objects widths[Object]
	lines   widths[Line]
	absorb  widths[Absorber]
	indices widths[Index]
}

// AddObject takes account of an object.
func (w *Widths) AddObject(o *Object) { w.objects.add(o) }

// AddLine takes account of a line.
func (w *Widths) AddLine(l *Line) { w.lines.add(l) }

// AddAbsorber takes account of an absorber.
func (w *Widths) AddAbsorber(a *Absorber) { w.absorb.add(a) }

// AddIndex takes account of an index.
func (w *Widths) AddIndex(i *Index) { w.indices.add(i) }

// Merge takes account of every row that o has seen.
func (w *Widths) Merge(o *Widths) {
	w.objects.merge(o.objects.size)
	w.lines.merge(o.lines.size)
	w.absorb.merge(o.absorb.size)
	w.indices.merge(o.indices.size)
}

// LengthenIDs makes room for n more bytes in every object_id.
func (w *Widths) LengthenIDs(n int) {
	for _, size := range [][]int{w.objects.size, w.lines.size, w.absorb.size, w.indices.size} {
		if size != nil {
			size[0] += n
		}
	}
}

// widthsJSON is the form of Widths in JSON: bytes of every column of a table,
// null where no row was seen.
type widthsJSON struct {
	Objects   []int `json:"objects"`
	Lines     []int `json:"lines"`
	Absorbers []int `json:"absorbers"`
	Indices   []int `json:"indices,omitempty"`
}

// MarshalJSON writes the sizes of all columns, in their order.
func (w *Widths) MarshalJSON() ([]byte, error) {
	return json.Marshal(widthsJSON{w.objects.size, w.lines.size, w.absorb.size, w.indices.size})
}

// UnmarshalJSON replaces w by what MarshalJSON wrote. Sizes of other columns
// than today's are an error.
func (w *Widths) UnmarshalJSON(text []byte) error {
	var sizes widthsJSON
	if err := json.Unmarshal(text, &sizes); err != nil {
		return err
	}
	*w = Widths{}
	return errors.Join(w.objects.set(sizes.Objects), w.lines.set(sizes.Lines), w.absorb.set(sizes.Absorbers), w.indices.set(sizes.Indices))
}

// widths holds the largest size of every text column in bytes.
type widths[T Row] struct {
	table[T]
	size []int
}

func (w *widths[T]) prepare() {
	if w.size == nil {
		w.table = tableOf[T]()
		w.size = make([]int, len(w.columns))
	}
}

func (w *widths[T]) add(row *T) {
	w.prepare()
	for i := range w.columns {
		if w.columns[i].Type == "text" {
			w.size[i] = max(w.size[i], len(fitsout.ASCII(textOf(w.columns[i].field(row)))))
		}
	}
}

func (w *widths[T]) merge(size []int) {
	if size == nil {
		return
	}
	w.prepare()
	for i, n := range size {
		w.size[i] = max(w.size[i], n)
	}
}

func (w *widths[T]) set(size []int) error {
	if size == nil {
		return nil
	}
	w.prepare()
	if len(size) != len(w.size) {
		return fmt.Errorf("widths of %d columns for table %s, which has %d", len(size), w.name, len(w.size))
	}
	copy(w.size, size)
	return nil
}

// FITS writes a catalog as one FITS file: an empty primary HDU with the
// provenance, then the binary tables OBJECTS, LINES and ABSORBERS, and INDICES
// where it is asked for. Text is held as ASCII;
// other characters are written as escapes such as \u00e9. NaN is the null of
// numbers. Bytes depend on rows, widths and provenance only.
type FITS struct {
	out     *fitsout.Writer
	widths  *Widths
	objects *fitsTable[Object]
	lines   *fitsTable[Line]
	absorb  *fitsTable[Absorber]
	indices *fitsTable[Index]
}

// NewFITS begins a file at the current position of out. The widths must have
// seen every row that will be written: a longer text is an error.
func NewFITS(out io.WriteSeeker, p Provenance, w *Widths) (*FITS, error) {
	fw, err := fitsout.NewWriter(out)
	if err != nil {
		return nil, err
	}
	if err := fw.Empty(p.header()); err != nil {
		return nil, err
	}
	h := &fitsout.Header{}
	for bit, f := range flagTable {
		h.Text(fmt.Sprintf("FLAG%d", bit), f.name, f.says)
	}
	h.Comment("FLAGn names bit n of the column flags. NaN stands for a number that is not known.")
	objects, err := newFITSTable(fw, h, &w.objects)
	if err != nil {
		return nil, err
	}
	return &FITS{out: fw, widths: w, objects: objects}, nil
}

// WriteObject adds a row to OBJECTS.
func (f *FITS) WriteObject(o *Object) error {
	if f.lines != nil {
		return ErrOrder
	}
	return f.objects.write(o)
}

// WriteLine adds a row to LINES; no object can follow.
func (f *FITS) WriteLine(l *Line) error {
	if f.absorb != nil {
		return ErrOrder
	}
	if err := f.beginLines(); err != nil {
		return err
	}
	return f.lines.write(l)
}

func (f *FITS) beginLines() error {
	if f.lines != nil {
		return nil
	}
	if err := f.objects.out.Close(); err != nil {
		return err
	}
	h := &fitsout.Header{}
	h.Comment("The column object_id points to the table OBJECTS. NaN stands for a number that is not known.")
	lines, err := newFITSTable(f.out, h, &f.widths.lines)
	if err != nil {
		return err
	}
	f.lines = lines
	return nil
}

// WriteAbsorber adds a row to ABSORBERS; no object or line can follow.
func (f *FITS) WriteAbsorber(a *Absorber) error {
	if f.indices != nil {
		return ErrOrder
	}
	if err := f.beginAbsorbers(); err != nil {
		return err
	}
	return f.absorb.write(a)
}

func (f *FITS) beginAbsorbers() error {
	if f.absorb != nil {
		return nil
	}
	if err := f.beginLines(); err != nil {
		return err
	}
	if err := f.lines.out.Close(); err != nil {
		return err
	}
	h := &fitsout.Header{}
	for bit, a := range absorberFlagTable {
		h.Text(fmt.Sprintf("FLAG%d", bit), a.name, a.says)
	}
	h.Comment("The column object_id points to the table OBJECTS. NaN stands for a number that is not known.")
	absorb, err := newFITSTable(f.out, h, &f.widths.absorb)
	if err != nil {
		return err
	}
	f.absorb = absorb
	return nil
}

// WriteIndex adds a row to INDICES; no row of another table can follow.
func (f *FITS) WriteIndex(i *Index) error {
	if err := f.BeginIndices(); err != nil {
		return err
	}
	return f.indices.write(i)
}

// BeginIndices makes the table INDICES, which is not there otherwise.
func (f *FITS) BeginIndices() error {
	if f.indices != nil {
		return nil
	}
	if err := f.beginAbsorbers(); err != nil {
		return err
	}
	if err := f.absorb.out.Close(); err != nil {
		return err
	}
	h := &fitsout.Header{}
	h.Comment("The column object_id points to the table OBJECTS. NaN stands for a number that is not known.")
	indices, err := newFITSTable(f.out, h, &f.widths.indices)
	if err != nil {
		return err
	}
	f.indices = indices
	return nil
}

// Close completes all tables, also where they have no rows, and the file. It
// does not close the underlying file.
func (f *FITS) Close() error {
	if err := f.beginAbsorbers(); err != nil {
		return err
	}
	var err error
	if f.indices != nil {
		err = f.indices.out.Close()
	} else {
		err = f.absorb.out.Close()
	}
	if err != nil {
		return err
	}
	return f.out.Close()
}

type fitsTable[T Row] struct {
	table[T]
	out *fitsout.Table
}

func newFITSTable[T Row](fw *fitsout.Writer, h *fitsout.Header, w *widths[T]) (*fitsTable[T], error) {
	w.prepare()
	cols := make([]fitsout.Column, len(w.columns))
	for i, c := range w.columns {
		cols[i] = fitsout.Column{Name: c.Name, Unit: c.Unit, UCD: c.UCD, Display: c.Display, Comment: c.Description}
		switch c.Type {
		case "text":
			cols[i].Kind, cols[i].Repeat = fitsout.Text, max(w.size[i], 1)
		case "int32":
			cols[i].Kind = fitsout.Int32
		case "int64":
			cols[i].Kind = fitsout.Int64
		default:
			cols[i].Kind = fitsout.Float64
		}
	}
	out, err := fw.Table(h, w.name, cols)
	if err != nil {
		return nil, err
	}
	return &fitsTable[T]{w.table, out}, nil
}

func (t *fitsTable[T]) write(row *T) error {
	if err := t.verify(row); err != nil {
		return err
	}
	for i := range t.columns {
		field := t.columns[i].field(row)
		switch t.columns[i].Type {
		case "text":
			t.out.Text(fitsout.ASCII(textOf(field)))
		case "float64":
			t.out.Float(*field.(*float64))
		default:
			t.out.Int(intOf(field))
		}
	}
	return t.out.EndRow()
}
