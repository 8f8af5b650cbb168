package pipeline

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"iter"
	"math"
	"os"
	"path/filepath"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/manifest"
	"duskline/spectrum"
)

// Manifest is a table of what the user knows about the objects of a run: see
// package manifest.
type Manifest struct {
	table *manifest.Manifest
	path  string
	sum   string // SHA-256 of its bytes
	copy  string // name of its copy in the run folder
	named string // as the user called it
}

// manifestDigest is the name of the manifest in the digests of a plan.
const manifestDigest = "manifest"

// ReadManifest reads a manifest, a table in CSV or FITS; name is what the user
// called it. The error is an *InputError with every problem.
func ReadManifest(path, name string) (*Manifest, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, inputError("the manifest %s cannot be read: %s", name, plain(err))
	}
	defer f.Close()
	m := &Manifest{path: path, copy: "manifest.csv", named: name}
	start := make([]byte, 9)
	n, _ := io.ReadFull(f, start)
	sum := sha256.New()
	if _, err = f.Seek(0, io.SeekStart); err == nil {
		_, err = io.Copy(sum, f)
	}
	if err == nil {
		_, err = f.Seek(0, io.SeekStart)
	}
	if err != nil {
		return nil, inputError("the manifest %s cannot be read: %s", name, plain(err))
	}
	m.sum = hex.EncodeToString(sum.Sum(nil))
	if bytes.HasPrefix(start[:n], []byte("SIMPLE  =")) || bytes.HasPrefix(start[:n], []byte("\x1f\x8b")) {
		m.copy = "manifest.fits"
		m.table, err = manifest.FromTable(name, func(header, row func([]string)) error {
			if err := fitsread.ReadTable(path, header, row); err != nil {
				return inputError("the manifest cannot be used: %s", readFault(err, name).reason)
			}
			return nil
		})
	} else {
		m.table, err = manifest.ReadCSV(name, f)
	}
	if err != nil {
		return nil, manifestProblems(err)
	}
	return m, nil
}

func manifestProblems(err error) error {
	var problems *manifest.Error
	var input *InputError
	switch {
	case errors.As(err, &problems):
		return &InputError{problems.Problems}
	case errors.As(err, &input):
		return input
	}
	return &InputError{[]string{err.Error()}}
}

func (m *Manifest) digest() string { return m.sum[:16] }

// keep puts a copy of the manifest into the run folder, for commands that go on
// with the run.
func (m *Manifest) keep(folder string) error {
	path := filepath.Join(folder, m.copy)
	if _, err := os.Stat(path); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return writeAtomic(path, func(w io.Writer) error {
		f, err := os.Open(m.path)
		if err != nil {
			return err
		}
		defer f.Close()
		sum := sha256.New()
		if _, err := io.Copy(io.MultiWriter(w, sum), f); err != nil {
			return err
		}
		if hex.EncodeToString(sum.Sum(nil)) != m.sum {
			return fmt.Errorf("%s was written to since it was read", m.named)
		}
		return nil
	})
}

// find returns the entry for an object, nil for none or without manifest.
func (m *Manifest) find(path string, row int, id string) (*manifest.Entry, error) {
	if m == nil {
		return nil, nil
	}
	e, err := m.table.Find(path, row, id)
	if err != nil {
		return nil, fmt.Errorf("the manifest %s cannot be looked up: %w", m.named, err)
	}
	return e, nil
}

// identifier is a SpectrumFile that tells names and takes others; *fitsread.File
// is one.
type identifier interface {
	Identity(i int) (fitsread.Identity, error)
	ReadAs(i int, who fitsread.Identity) (*spectrum.Spectrum, error)
}

// sift notes which spectra of an opened input the manifest leaves out, and which
// of its entries name something. path is the whole path of the input.
func (m *Manifest) sift(in *planInput, path string, f SpectrumFile) {
	if m == nil {
		return
	}
	names, _ := f.(identifier)
	for row := range in.Rows {
		id := ""
		if names != nil && m.table.ByName() {
			who, err := names.Identity(int(row))
			if err != nil { // the disk: it might be any
				bad := readFault(err, in.Path)
				in.Rows, in.Skip, in.entries, in.Trouble, in.Internal = 1, nil, nil, bad.reason, bad.internal
				m.siftUnopened(in, path)
				return
			}
			id = who.ObjectID
		}
		e, err := m.find(path, int(row), id)
		if err != nil {
			in.Rows, in.Skip, in.entries, in.Trouble = 1, nil, nil, err.Error()
			return
		}
		if e == nil {
			continue
		}
		if n := len(in.entries); n == 0 || in.entries[n-1] != e.Number {
			in.entries = append(in.entries, e.Number)
		}
		if e.Exclude {
			in.Skip = append(in.Skip, row)
		}
	}
	in.leaveOut()
}

// siftUnopened is sift for an input that cannot be opened, a single row.
func (m *Manifest) siftUnopened(in *planInput, path string) {
	if e, err := m.find(path, 0, ""); err == nil && e != nil {
		in.entries = []int{e.Number}
		if e.Exclude {
			in.Skip = []int64{0}
			in.leaveOut()
		}
	}
}

func (in *planInput) leaveOut() {
	in.Rows -= int64(len(in.Skip))
	if in.Rows == 0 {
		in.Skip, in.Excluded = nil, true
	}
}

// taken yields the rows of an input that belong to the plan, in order.
func (in *planInput) taken() iter.Seq[int64] {
	return func(yield func(int64) bool) {
		skip, row := in.Skip, int64(0)
		for range in.Rows {
			for len(skip) > 0 && skip[0] == row {
				skip, row = skip[1:], row+1
			}
			if !yield(row) {
				return
			}
			row++
		}
	}
}

// unusedYet has an element false for every entry.
func (m *Manifest) unusedYet() []bool {
	if m == nil {
		return nil
	}
	return make([]bool, m.table.Len())
}

// unused tells which entries of the manifest named no input.
func (m *Manifest) unused(used []bool) (number int, first string, err error) {
	err = m.table.Each(func(e *manifest.Entry) error {
		if !used[e.Number] {
			if number++; number == 1 {
				first = fmt.Sprintf("%s (line %d)", cmp.Or(e.File, e.ObjectID), e.Line)
			}
		}
		return nil
	})
	return number, first, err
}

// warnManifest says what of the manifest has no effect.
func (r *Run) warnManifest(used []bool) {
	m := r.job.Manifest
	if m == nil {
		return
	}
	n, first, err := m.unused(used)
	if err != nil {
		r.job.Log.Warn("the manifest cannot be looked through", "manifest", m.named, "error", err)
	}
	if n > 0 {
		r.job.Log.Warn("entries of the manifest name nothing among the inputs", "manifest", m.named, "entries", n, "first", first)
	}
	if len(m.table.Ignored) > 0 {
		r.job.Log.Warn("columns of the manifest mean nothing here and are passed over", "manifest", m.named, "columns", m.table.Ignored)
	}
}

// origin is what goes from input and manifest into a row past the science.
type origin struct {
	digest    string  // empty where the disk gives none
	magnitude float64 // NaN where the manifest has none
}

// readObject reads a spectrum with what the manifest knows about it, which also
// goes into the digest of its input.
func (r *Run) readObject(in *planInput, f SpectrumFile, row int) (s *spectrum.Spectrum, from origin, err error) {
	from.magnitude = math.NaN()
	e, names, err := r.known(in, f, row)
	if err != nil {
		return nil, from, err
	}
	if e == nil {
		s, err = f.Read(row)
	} else {
		s, err = names.ReadAs(row, fitsread.Identity{ObjectID: e.ObjectID, RA: e.RA, Dec: e.Dec})
	}
	if err == nil {
		from.digest = s.InputDigest
	} else if d, unknown := f.Digest(row); unknown == nil {
		from.digest = d
	}
	if e == nil {
		return s, from, err
	}
	from.magnitude = e.Magnitude
	if from.digest != "" {
		sum := sha256.Sum256([]byte(from.digest + " " + e.Key()))
		from.digest = hex.EncodeToString(sum[:8])
	}
	if err == nil && e.Restricts() {
		s.Limits = &spectrum.Limits{Class: e.ExpectedClass, ZMin: e.RedshiftMin, ZMax: e.RedshiftMax}
	}
	return s, from, err
}

// known returns what the manifest says about an object of a file that takes it,
// nil for nothing.
func (r *Run) known(in *planInput, f SpectrumFile, row int) (*manifest.Entry, identifier, error) {
	m := r.job.Manifest
	names, ok := f.(identifier)
	if m == nil || !ok {
		return nil, nil, nil
	}
	id := ""
	if m.table.ByName() {
		who, err := names.Identity(row)
		if err != nil {
			return nil, names, err
		}
		id = who.ObjectID
	}
	e, err := m.find(in.file(r.head.Folder), row, id)
	return e, names, err
}

// unreadObject is the row of an object that could not be read: what the manifest
// knows about it.
func (r *Run) unreadObject(in *planInput, row int) catalog.Object {
	o := blankObject()
	if e, err := r.job.Manifest.find(in.file(r.head.Folder), row, ""); err == nil && e != nil {
		o.ObjectID, o.RA, o.Dec, o.Magnitude = e.ObjectID, e.RA, e.Dec, e.Magnitude
	}
	return o
}

// limitsText writes limits for people.
func limitsText(l *spectrum.Limits) string {
	text := "any redshift"
	switch {
	case !math.IsNaN(l.ZMin) && !math.IsNaN(l.ZMax):
		text = fmt.Sprintf("redshift %g to %g", l.ZMin, l.ZMax)
	case !math.IsNaN(l.ZMin):
		text = fmt.Sprintf("redshift from %g", l.ZMin)
	case !math.IsNaN(l.ZMax):
		text = fmt.Sprintf("redshift up to %g", l.ZMax)
	}
	if l.Class != "" {
		text = l.Class + ", " + text
	}
	return text
}
