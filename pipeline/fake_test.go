package pipeline

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/spectrum"
)

// The tests of the engine use files of words, one word a spectrum, and a
// science that obeys them.

// wordFile is an input of words. The word "broken" cannot be read, "trap"
// panics while it is read; the others are for wordWorker.
type wordFile struct {
	path  string
	words []string
}

func openWords(path string) (SpectrumFile, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	if bytes.Equal(text, []byte("closed")) {
		return nil, errors.New("this file opens for nobody")
	}
	if bytes.Equal(text, []byte("trapdoor")) {
		panic("the door is a trap")
	}
	return &wordFile{path, strings.Fields(string(text))}, nil
}

func (f *wordFile) Count() int   { return len(f.words) }
func (f *wordFile) Close() error { return nil }

func (f *wordFile) Digest(i int) (string, error) {
	sum := sha256.Sum256([]byte(f.words[i]))
	return hex.EncodeToString(sum[:8]), nil
}

func (f *wordFile) Read(i int) (*spectrum.Spectrum, error) {
	switch f.words[i] {
	case "broken":
		return nil, errors.New("this spectrum is broken")
	case "trap":
		panic("reading fell into a trap")
	}
	digest, err := f.Digest(i)
	return &spectrum.Spectrum{ObjectID: f.words[i], SourceFile: f.path, SourceRow: i, RA: 10, Dec: 20, Layout: f.words[i], InputDigest: digest}, err
}

// wordScience is a Processor whose answer is a hash of the word, and which
// panics on "panic", breaks the rules of the catalog on "infinite", and notices
// when a worker goes on after it panicked.
type wordScience struct{ digest string }

func (w wordScience) NewWorker() Worker { return &wordWorker{} }

func (w wordScience) Digests() map[string]string { return map[string]string{"line_list": w.digest} }

type wordWorker struct{ dirty bool }

func (w *wordWorker) Process(s *spectrum.Spectrum) Outcome {
	if w.dirty {
		panic("the scratch of a worker that panicked was used again")
	}
	out := Outcome{Object: blankObject()}
	o := &out.Object
	o.RA, o.Dec = s.RA, s.Dec
	switch word := s.Layout; word {
	case "panic":
		w.dirty = true
		var none []int
		_ = none[len(word)]
	case "infinite":
		o.Redshift = math.Inf(1)
	case "nowhere":
		o.RA, o.Dec = -999, -999
	default:
		sum := sha256.Sum256([]byte(word))
		o.Redshift = float64(binary.LittleEndian.Uint16(sum[:])) / 1e4
		o.Class, o.Verdict, o.Confidence = catalog.Galaxy, catalog.Secure, 0.99
		for i := range int(sum[2]) % 4 {
			out.Lines = append(out.Lines, catalog.Line{Line: fmt.Sprintf("L%d", i), RestWave: 5000 + float64(i), Kind: "emission", EWRest: -o.Redshift})
		}
	}
	return out
}

// writeNight writes files of words: "name: word word ..." a line.
func writeNight(t testing.TB, folder, text string) {
	t.Helper()
	for line := range strings.Lines(text) {
		name, words, ok := strings.Cut(strings.TrimSpace(line), ":")
		if !ok {
			continue
		}
		path := filepath.Join(folder, name)
		if err := os.MkdirAll(filepath.Dir(path), 0o777); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(strings.TrimSpace(words)), 0o666); err != nil {
			t.Fatal(err)
		}
	}
}

// smallNight has 26 objects in 9 files, two of which have trouble at the door.
const smallNight = `
	night/a.fits: a1
	night/b.fits: b1 b2 b3 b4 b5 b6 b7 b8 b9
	night/c.fits: broken
	night/d.fits: closed
	night/e/e1.fit: e1 e2 panic e3 a1
	night/e/e2.FTS: a1 infinite
	night/f.fits.gz: trap
	night/g.fits: g1 nowhere g3 g4 g5
	night/h.fits: trapdoor
	night/readme.txt: not a spectrum
`

const smallNightObjects = 26

// smallJob is a job on smallNight in a new folder, in blocks of 5.
func smallJob(t testing.TB) Job {
	t.Helper()
	base := t.TempDir()
	writeNight(t, base, smallNight)
	set := DefaultSettings()
	set.Run.BlockSize, set.Run.Workers = 5, 2
	return Job{Out: "RUN", Base: base, Paths: []string{"night"}, Settings: set, Program: "test",
		Processor: wordScience{"0123"}, Open: openWords}
}

// finish takes a job to its end.
func finish(t testing.TB, job Job) *Summary {
	t.Helper()
	s, err := tryFinish(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func tryFinish(ctx context.Context, job Job) (*Summary, error) {
	r, err := Prepare(ctx, job)
	if err != nil {
		return nil, err
	}
	if err := r.Work(ctx); err != nil {
		return nil, err
	}
	return r.Gather(ctx)
}

// snapshot returns the bytes of all files below the run folder, and fails if
// anything unfinished is there.
func snapshot(t testing.TB, job Job) map[string]string {
	t.Helper()
	files := map[string]string{}
	root := filepath.Join(job.Base, job.Out)
	err := filepath.WalkDir(root, func(path string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if strings.HasPrefix(d.Name(), ".") {
			t.Errorf("%s was left behind", path)
		}
		if d.IsDir() {
			return nil
		}
		text, err := os.ReadFile(path)
		rel, _ := filepath.Rel(root, path)
		files[rel] = string(text)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return files
}

func sameFiles(t testing.TB, got, want map[string]string, what string) {
	t.Helper()
	for name, text := range want {
		if got[name] != text {
			t.Errorf("%s: %s differs", what, name)
		}
	}
	for name := range got {
		if _, ok := want[name]; !ok {
			t.Errorf("%s: %s should not be there", what, name)
		}
	}
}

// readObjects returns the rows of catalog.csv.
func readObjects(t testing.TB, job Job) []catalog.Object {
	t.Helper()
	var rows []catalog.Object
	if err := readTable(filepath.Join(job.Base, job.Out, objectsName), func(o *catalog.Object) error {
		rows = append(rows, *o)
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	return rows
}

func mustRead(t testing.TB, word string) *spectrum.Spectrum {
	t.Helper()
	s, err := (&wordFile{words: []string{word}}).Read(0)
	if err != nil {
		t.Fatal(err)
	}
	return s
}
