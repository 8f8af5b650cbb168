// Package manifest reads tables that tell what the user knows about the objects
// of a night: names, positions, expected class and redshift, what to leave out.
//
// A manifest has one row an object and columns by name, in any order:
//
//	file            name of the input file, see Manifest.Find for how it joins
//	row             spectrum in that file, from 0; empty for all of them
//	object_id       name of the object, instead of the file's
//	ra, dec         position, ICRS: degrees, or hh:mm:ss and dd:mm:ss
//	magnitude       stands in the catalog, for plots of success against it
//	expected_class  galaxy, quasar, star or nebula
//	redshift_min    lowest redshift to be tried
//	redshift_max    highest redshift to be tried
//	exclude         true, yes, t, y or 1 to leave the object out of the run
//
// Every cell but those of the key may be empty. A row without file is joined by
// object_id. Other columns are passed over, except names so like one above that
// they can only be misspelled.
package manifest

import (
	"errors"
	"fmt"
	"math"
	"path"
	"strconv"
	"strings"

	"duskline/internal/spill"
)

// Entry is what a manifest says about one object. What it does not say is empty
// or NaN.
type Entry struct {
	Number        int    // of the entry, from 0
	Line          int    // of the manifest: line of a CSV file, row from 1 of a FITS table
	File          string // as written, cleaned
	Row           int    // AllRows where it is empty
	ObjectID      string
	RA, Dec       float64 // degrees
	Magnitude     float64
	ExpectedClass string
	RedshiftMin   float64
	RedshiftMax   float64
	Exclude       bool
}

// AllRows is the Row of an entry for every spectrum of its file.
const AllRows = -1

// Restricts reports whether the entry limits the search for the redshift.
func (e *Entry) Restricts() bool {
	return e.ExpectedClass != "" || !math.IsNaN(e.RedshiftMin) || !math.IsNaN(e.RedshiftMax)
}

// Key identifies what of the entry can change a row, for digests.
func (e *Entry) Key() string {
	return fmt.Sprintf("%q %v %v %v %q %v %v", e.ObjectID, e.RA, e.Dec, e.Magnitude, e.ExpectedClass, e.RedshiftMin, e.RedshiftMax)
}

// Manifest is a table of entries. It is immutable and may be shared; memory does
// not grow with their number.
type Manifest struct {
	// Ignored are the names of columns that mean nothing here.
	Ignored []string

	entries store
	places  spill.Map // of entries, by joining: reference and line
	byName  bool
}

// fileKey and nameKey are what entries are looked up by.
func fileKey(file string, row int) spill.Key {
	return spill.KeyOf(fmt.Sprintf("file %d %s", row, file))
}
func nameKey(id string) spill.Key { return spill.KeyOf("name " + id) }

// Len returns the number of entries.
func (m *Manifest) Len() int { return m.entries.n }

// Each visits the entries in order.
func (m *Manifest) Each(visit func(*Entry) error) error { return m.entries.each(visit) }

// ByName reports whether some entries are joined by object_id alone.
func (m *Manifest) ByName() bool { return m.byName }

// Error tells everything that is wrong with a manifest, a line each.
type Error struct{ Problems []string }

// Error returns the problems, one a line.
func (e *Error) Error() string { return strings.Join(e.Problems, "\n") }

// Find returns the entry for spectrum row of the file at path, whose object is
// called id by the file itself, nil for none. The error is of the file that a large
// manifest is held in.
//
// The file of an entry joins by name: a bare name fits a file of that name in any
// folder, one with folders fits a path that ends in them, one that begins with /
// is the whole path. ".gz" and ".fz" do not count. Of several that fit the longest wins,
// and of those an entry for the row before one for all rows. Entries without file
// join by object_id, where no entry names the file.
func (m *Manifest) Find(filePath string, row int, id string) (*Entry, error) {
	for rest, more := cleanFile(filePath), true; more; {
		for _, r := range [2]int{row, AllRows} {
			if e, err := m.at(fileKey(rest, r)); e != nil || err != nil {
				return e, err
			}
		}
		_, rest, more = strings.Cut(rest, "/") // of "/data/a": "data/a"
	}
	if !m.byName || id == "" {
		return nil, nil
	}
	return m.at(nameKey(id))
}

func (m *Manifest) at(key spill.Key) (*Entry, error) {
	v, ok, err := m.places.Get(key)
	if !ok || err != nil {
		return nil, err
	}
	return m.entries.get(v[0])
}

// cleanFile brings a name to the form that is compared: no "./" or doubled slashes,
// no suffix of packing. Cleaning twice changes nothing more.
func cleanFile(name string) string {
	for {
		short := path.Clean(name)
		for _, packed := range []string{".gz", ".fz"} {
			if n := len(short) - len(packed); n > 0 && strings.EqualFold(short[n:], packed) {
				short = short[:n]
			}
		}
		if short == name {
			return name
		}
		name = short
	}
}

// columns lists the names that mean something.
var columns = []string{"file", "row", "object_id", "ra", "dec", "magnitude", "expected_class", "redshift_min", "redshift_max", "exclude"}

// maxProblems bounds how many problems are told at once.
const maxProblems = 20

// builder makes a manifest out of rows of text.
type builder struct {
	name     string // of the file, for messages
	unit     string // what its numbered rows are called
	at       map[string]int
	m        *Manifest
	problems []string
	more     int
	broken   error // of the file that a large manifest is held in
}

func newBuilder(name, unit string) *builder {
	return &builder{name: name, unit: unit, at: map[string]int{}, m: &Manifest{entries: store{most: memoryMost}}}
}

func (b *builder) bad(line int, column, format string, args ...any) {
	if len(b.problems) == maxProblems {
		b.more++
		return
	}
	where := fmt.Sprintf("%s %s %d", b.name, b.unit, line)
	if column != "" {
		where += ", column " + column
	}
	b.problems = append(b.problems, where+": "+fmt.Sprintf(format, args...))
}

func (b *builder) err() error {
	if err := errors.Join(b.broken, b.m.entries.done()); err != nil {
		return fmt.Errorf("%s: %w", b.name, err)
	}
	if len(b.problems) == 0 {
		return nil
	}
	if b.more > 0 {
		b.problems = append(b.problems, fmt.Sprintf("%s: and %d more problems", b.name, b.more))
	}
	return &Error{b.problems}
}

// header takes the names of the columns.
func (b *builder) header(line int, names []string) {
	for i, raw := range names {
		name := strings.ToLower(strings.NewReplacer(" ", "_", "-", "_").Replace(strings.TrimSpace(raw)))
		_, twice := b.at[name]
		switch known, near := match(name); {
		case known && twice:
			b.bad(line, name, "the column stands twice; keep one")
		case known:
			b.at[name] = i
		case near != "":
			b.bad(line, raw, "this name is not one of a manifest; %s is meant?", near)
		default:
			b.m.Ignored = append(b.m.Ignored, raw)
		}
	}
	_, hasFile := b.at["file"]
	if _, hasID := b.at["object_id"]; !hasFile && !hasID {
		b.bad(line, "", "there is no column file or object_id to join by; the first line must name the columns")
	}
	for _, pair := range [][2]string{{"ra", "dec"}, {"row", "file"}} {
		_, first := b.at[pair[0]]
		if _, second := b.at[pair[1]]; first && !second {
			b.bad(line, pair[0], "it needs a column %s beside it", pair[1])
		}
	}
	if _, ok := b.at["dec"]; ok {
		if _, ok := b.at["ra"]; !ok {
			b.bad(line, "dec", "it needs a column ra beside it")
		}
	}
}

// match says whether a name is that of a column, or which one it misspells.
func match(name string) (known bool, near string) {
	least := 3
	for _, c := range columns {
		if c == name {
			return true, ""
		}
		if d := distance(name, c); len(c) > 4 && d < least {
			near, least = c, d
		}
	}
	return false, near
}

// distance is that of Levenshtein: insertions, deletions and replacements.
func distance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			change := diagonal
			if a[i] != b[j] {
				change++
			}
			diagonal = row[j+1]
			row[j+1] = min(change, row[j]+1, diagonal+1)
		}
	}
	return row[len(b)]
}

// add takes one row. line counts as people count.
func (b *builder) add(line int, cells []string) {
	cell := func(column string) string {
		i, ok := b.at[column]
		if !ok || i >= len(cells) {
			return ""
		}
		return strings.TrimSpace(cells[i])
	}
	before := len(b.problems) + b.more
	e := Entry{Line: line, Row: AllRows, ObjectID: cell("object_id"), RA: math.NaN(), Dec: math.NaN(),
		ExpectedClass: strings.ToLower(cell("expected_class"))}
	if s := cell("file"); s != "" {
		e.File = cleanFile(s)
	}
	if s := cell("row"); s != "" {
		n, err := strconv.Atoi(s)
		if err != nil || n < 0 {
			b.bad(line, "row", "%q is not a whole number from 0", s)
		}
		if e.Row = n; e.File == "" {
			b.bad(line, "row", "it belongs to a file, and none is given")
		}
	}
	if e.File == "" && e.ObjectID == "" {
		b.bad(line, "", "neither file nor object_id is given")
	}
	b.position(&e, line, cell("ra"), cell("dec"))
	e.Magnitude = b.number(line, "magnitude", cell("magnitude"), -50, 100)
	// Below -1 a wavelength would be negative; nothing is known beyond 20.
	e.RedshiftMin = b.number(line, "redshift_min", cell("redshift_min"), -0.1, 20)
	e.RedshiftMax = b.number(line, "redshift_max", cell("redshift_max"), -0.1, 20)
	if e.RedshiftMin > e.RedshiftMax {
		b.bad(line, "redshift_max", "%g is below redshift_min = %g", e.RedshiftMax, e.RedshiftMin)
	}
	switch e.ExpectedClass {
	case "", "galaxy", "quasar", "star", "nebula":
	default:
		b.bad(line, "expected_class", "%q is not galaxy, quasar, star or nebula", e.ExpectedClass)
	}
	switch s := strings.ToLower(cell("exclude")); s {
	case "", "false", "no", "f", "n", "0":
	case "true", "yes", "t", "y", "1":
		e.Exclude = true
	default:
		b.bad(line, "exclude", "%q is not true or false", s)
	}
	key := fileKey(e.File, e.Row)
	if e.File == "" {
		key = nameKey(e.ObjectID)
	}
	first, twice, err := b.m.places.Get(key)
	if twice {
		b.bad(line, "", "it names the same object as %s %d", b.unit, first[1])
	}
	if b.broken = errors.Join(b.broken, err); len(b.problems)+b.more > before || b.broken != nil {
		return
	}
	ref, err := b.m.entries.add(e)
	_, err2 := b.m.places.Put(key, spill.Value{ref, int64(line)})
	b.broken = errors.Join(err, err2)
	b.m.byName = b.m.byName || e.File == ""
}

func (b *builder) number(line int, column, s string, lo, hi float64) float64 {
	if s == "" || strings.EqualFold(s, "nan") {
		return math.NaN()
	}
	v, err := strconv.ParseFloat(s, 64)
	if err != nil || !(v >= lo && v <= hi) {
		b.bad(line, column, "%q is not a number from %g to %g", s, lo, hi)
		return math.NaN()
	}
	return v
}

func (b *builder) position(e *Entry, line int, ra, dec string) {
	if (ra == "") != (dec == "") {
		b.bad(line, "ra", "ra and dec are given both or not at all")
		return
	}
	if ra == "" || strings.EqualFold(ra, "nan") {
		return
	}
	var ok bool
	if e.RA, ok = degrees(ra, 15); !ok || e.RA < 0 || e.RA > 360 {
		b.bad(line, "ra", "%q is not degrees from 0 to 360 or hh:mm:ss", ra)
	}
	if e.Dec, ok = degrees(dec, 1); !ok || math.Abs(e.Dec) > 90 {
		b.bad(line, "dec", "%q is not degrees from -90 to 90 or dd:mm:ss", dec)
	}
}

// degrees reads a number of degrees, or one in sexagesimal form times unit.
func degrees(s string, unit float64) (float64, bool) {
	if v, err := strconv.ParseFloat(s, 64); err == nil {
		return v, !math.IsInf(v, 0) && !math.IsNaN(v)
	}
	rest, negative := strings.CutPrefix(strings.TrimPrefix(s, "+"), "-")
	parts := strings.FieldsFunc(rest, func(r rune) bool { return r == ':' || r == ' ' })
	if len(parts) < 2 || len(parts) > 3 {
		return 0, false
	}
	v, scale := 0.0, unit
	for i, p := range parts {
		x, err := strconv.ParseFloat(p, 64)
		if err != nil || !(x >= 0) || i > 0 && x >= 60 || math.IsInf(x, 0) {
			return 0, false
		}
		v += x * scale
		scale /= 60
	}
	if negative {
		v = -v
	}
	return v, true
}
