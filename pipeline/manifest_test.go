package pipeline

import (
	"bytes"
	"context"
	"errors"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/internal/fitsout"
	"duskline/spectrum"
)

// namedFile is a file of words that tells names and takes others.
type namedFile struct{ *wordFile }

func (f namedFile) Identity(i int) (fitsread.Identity, error) {
	return fitsread.Identity{ObjectID: f.words[i], RA: 10, Dec: 20}, nil
}

func (f namedFile) ReadAs(i int, who fitsread.Identity) (*spectrum.Spectrum, error) {
	s, err := f.Read(i)
	if err != nil {
		return nil, err
	}
	if who.ObjectID != "" {
		s.ObjectID = who.ObjectID
	}
	if !math.IsNaN(who.RA) {
		s.RA, s.Dec = who.RA, who.Dec
	}
	return s, nil
}

func openNamed(path string) (SpectrumFile, error) {
	f, err := openWords(path)
	if err != nil {
		return nil, err
	}
	return namedFile{f.(*wordFile)}, nil
}

// limitWorker puts the limits that reached it into the family's name.
type limitScience struct{ wordScience }

type limitWorker struct{ wordWorker }

func (limitScience) NewWorker() Worker { return &limitWorker{} }

func (w *limitWorker) Process(s *spectrum.Spectrum) Outcome {
	out := w.wordWorker.Process(s)
	out.Object.ObjectID = s.ObjectID
	if s.Limits != nil {
		out.Object.Family = limitsText(s.Limits)
	}
	return out
}

const smallManifest = `file,row,object_id,ra,dec,expected_class,redshift_min,redshift_max,exclude
a.fits,,Renamed,30,-40,,,,
b.fits,,,,,,,,
b.fits,0,,,,,,,yes
night/b.fits,4,,,,,,,yes
c.fits,,Known,31,-41,,,,
d.fits,,,,,,,,true
e1.fit,,,,,quasar,1.5,3,
,,g3,,,,,,yes
,,g4,,,star,,0.1,
g.fits.gz,0,,,,,0.2,,
e2.FTS,,,,,,,,yes
nobody.fits,,,,,,,,yes
`

func manifestJob(t *testing.T, text string) Job {
	t.Helper()
	job := smallJob(t)
	job.Open, job.Processor = openNamed, limitScience{wordScience{"0123"}}
	path := filepath.Join(job.Base, "known.csv")
	if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
		t.Fatal(err)
	}
	var err error
	if job.Manifest, err = ReadManifest(path, "known.csv"); err != nil {
		t.Fatal(err)
	}
	return job
}

func TestManifest(t *testing.T) {
	job := manifestJob(t, smallManifest)
	finish(t, job)
	rows := readObjects(t, job)
	// 26 objects less rows 0 and 4 of b, d, two of e2, and g3.
	if len(rows) != smallNightObjects-6 {
		t.Fatalf("%d rows", len(rows))
	}
	find := func(file string, row int64) *catalog.Object {
		for i := range rows {
			if filepath.Base(rows[i].SourceFile) == file && rows[i].SourceRow == row {
				return &rows[i]
			}
		}
		return nil
	}
	for _, gone := range []struct {
		file string
		row  int64
	}{{"b.fits", 0}, {"d.fits", 0}, {"e2.FTS", 0}, {"e2.FTS", 1}, {"g.fits", 2}} {
		if find(gone.file, gone.row) != nil {
			t.Errorf("%s row %d is there", gone.file, gone.row)
		}
	}
	if o := find("a.fits", 0); o.ObjectID != "Renamed" || o.RA != 30 || o.Dec != -40 {
		t.Errorf("%+v", o)
	}
	if o := find("c.fits", 0); o.ObjectID != "Known" || o.RA != 31 || !o.Flags.Has(catalog.Unreadable) {
		t.Errorf("unreadable: %+v", o)
	}
	if find("b.fits", 4) != nil || find("b.fits", 8) == nil {
		t.Error("the wrong row of b.fits was left out")
	}
	for file, want := range map[string]string{"e1.fit": "quasar, redshift 1.5 to 3", "a.fits": ""} {
		if o := find(file, 0); o.Family != want {
			t.Errorf("%s: limits %q, want %q", file, o.Family, want)
		}
	}
	if o := find("g.fits", 3); o.Family != "star, redshift up to 0.1" {
		t.Errorf("joined by name: %q", o.Family)
	}
	if o := find("g.fits", 0); o.Family != "redshift from 0.2" {
		t.Errorf("g.fits: %q", o.Family)
	}

	// What the manifest says changes the digest of its objects alone.
	plain := smallJob(t)
	plain.Open = openNamed
	finish(t, plain)
	for _, o := range readObjects(t, plain) {
		if mine := find(filepath.Base(o.SourceFile), o.SourceRow); mine != nil && o.InputDigest != "" {
			told := slices.Contains([]string{"a.fits", "e1.fit"}, filepath.Base(o.SourceFile)) || filepath.Base(o.SourceFile) == "b.fits" ||
				filepath.Base(o.SourceFile) == "g.fits" && (o.SourceRow == 0 || o.SourceRow == 3)
			if (mine.InputDigest != o.InputDigest) != told && o.ObjectID != "trap" && filepath.Base(o.SourceFile) != "c.fits" {
				t.Errorf("%s row %d: digest %s and without manifest %s", o.SourceFile, o.SourceRow, mine.InputDigest, o.InputDigest)
			}
		}
	}
}

// The run goes on with the same command, with the copy in its folder, and not with
// another manifest; the bytes do not depend on the workers.
func TestManifestGoesOn(t *testing.T) {
	job := manifestJob(t, smallManifest)
	finish(t, job)
	want := snapshot(t, job)
	if err := os.RemoveAll(filepath.Join(job.Base, job.Out, blocksName, "000001")); err != nil {
		t.Fatal(err)
	}
	job.Settings.Run.Workers = 1
	finish(t, job)
	sameFiles(t, snapshot(t, job), want, "the same command")

	planned, err := Recall(job.Base, job.Out)
	if err != nil || filepath.Base(planned.Manifest) != "manifest.csv" {
		t.Fatalf("%+v, %v", planned, err)
	}
	again := job
	again.Paths = nil
	if again.Manifest, err = ReadManifest(planned.Manifest, "copy"); err != nil {
		t.Fatal(err)
	}
	finish(t, again)
	sameFiles(t, snapshot(t, job), want, "without any path")

	var mismatch *MismatchError
	job.Manifest = nil
	if _, err := Prepare(context.Background(), job); !errors.As(err, &mismatch) || !strings.Contains(err.Error(), "manifest changed") {
		t.Errorf("without the manifest: %v", err)
	}
}

func TestManifestProblems(t *testing.T) {
	path := filepath.Join(t.TempDir(), "known.csv")
	var input *InputError
	if _, err := ReadManifest(path, "known.csv"); !errors.As(err, &input) {
		t.Errorf("no file: %v", err)
	}
	if err := os.WriteFile(path, []byte("file,row\na.fits,x\nb.fits,-2\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	_, err := ReadManifest(path, "known.csv")
	if !errors.As(err, &input) || len(input.Problems) != 2 || !strings.HasPrefix(input.Problems[1], "known.csv line 3, column row") {
		t.Errorf("%v", err)
	}
	if err := os.WriteFile(path, []byte("SIMPLE  = not really"), 0o666); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadManifest(path, "known.fits"); !errors.As(err, &input) || !strings.Contains(err.Error(), "known.fits") {
		t.Errorf("damaged FITS: %v", err)
	}
}

// The same entries as a FITS table.
func TestManifestInFITS(t *testing.T) {
	var file fitsout.Memory
	w, err := fitsout.NewWriter(&file)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Empty(nil); err != nil {
		t.Fatal(err)
	}
	table, err := w.Table(nil, "KNOWN", []fitsout.Column{{Name: "FILE", Kind: fitsout.Text, Repeat: 20},
		{Name: "RA", Kind: fitsout.Float64}, {Name: "DEC", Kind: fitsout.Float64}, {Name: "EXCLUDE", Kind: fitsout.Logical}})
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range []struct {
		file    string
		ra, dec float64
		exclude bool
	}{{"a.fits", 33, -44, false}, {"b.fits", math.NaN(), math.NaN(), true}} {
		table.Text(row.file)
		table.Float(row.ra)
		table.Float(row.dec)
		table.Bool(row.exclude)
		if err := table.EndRow(); err != nil {
			t.Fatal(err)
		}
	}
	if err := errors.Join(table.Close(), w.Close()); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(t.TempDir(), "known.fits")
	if err := os.WriteFile(path, file.Bytes(), 0o666); err != nil {
		t.Fatal(err)
	}
	m, err := ReadManifest(path, "known.fits")
	if err != nil {
		t.Fatal(err)
	}
	if e, err := m.find("x/a.fits", 0, ""); err != nil || e == nil || e.RA != 33 || e.Dec != -44 || e.Exclude {
		t.Errorf("%+v", e)
	}
	if e, err := m.find("x/b.fits", 5, ""); err != nil || e == nil || !e.Exclude {
		t.Errorf("%+v, %v", e, err)
	}
	folder := t.TempDir()
	if err := m.keep(folder); err != nil {
		t.Fatal(err)
	}
	if kept, err := os.ReadFile(filepath.Join(folder, "manifest.fits")); err != nil || !bytes.Equal(kept, file.Bytes()) {
		t.Errorf("the copy has %d bytes of %d, %v", len(kept), len(file.Bytes()), err)
	}
	// A manifest that changes between its reading and the copy is no longer the same.
	if err := os.WriteFile(path, append(file.Bytes(), 0), 0o666); err != nil {
		t.Fatal(err)
	}
	if err := m.keep(t.TempDir()); err == nil || !strings.Contains(err.Error(), "known.fits was written to") {
		t.Errorf("a manifest that changed: %v", err)
	}
}

// mute is a file whose names cannot be read any more.
type mute struct{ namedFile }

func (mute) Identity(int) (fitsread.Identity, error) {
	return fitsread.Identity{}, &fitsread.ReadError{File: "x", HDU: 1, Row: -1, Msg: "stale", Hint: "look at the disk", Err: fs.ErrInvalid}
}

// A disk that gives no names must not undo an exclusion: what is asked for by name
// cannot be told from the rest, and the file is a row that says why.
func TestManifestWithoutNames(t *testing.T) {
	job := manifestJob(t, "object_id,exclude\nnobody,yes\n")
	job.Open = func(path string) (SpectrumFile, error) {
		f, err := openNamed(path)
		if err == nil && filepath.Base(path) == "b.fits" {
			f = mute{f.(namedFile)}
		}
		return f, err
	}
	finish(t, job)
	n := 0
	for _, o := range readObjects(t, job) {
		if filepath.Base(o.SourceFile) == "b.fits" {
			n++
			if !o.Flags.Has(catalog.Unreadable) || !strings.Contains(o.Reason, "stale") {
				t.Errorf("%+v", o)
			}
		}
	}
	if n != 1 {
		t.Errorf("%d rows of b.fits", n)
	}
}
