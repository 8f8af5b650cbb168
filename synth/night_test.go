package synth

import (
	"bytes"
	"compress/gzip"
	"crypto/sha256"
	"errors"
	"io"
	"io/fs"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"duskline/catalog"
)

// digests returns the SHA-256 of every file below dir.
func digests(t *testing.T, dir string) map[string][32]byte {
	t.Helper()
	sums := map[string][32]byte{}
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		content, err := os.ReadFile(path)
		rel, _ := filepath.Rel(dir, path)
		sums[filepath.ToSlash(rel)] = sha256.Sum256(content)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	return sums
}

func TestNightRepeats(t *testing.T) {
	dirs := []string{t.TempDir(), t.TempDir(), t.TempDir()}
	var truths [3][]Truth
	for i, opts := range []Options{{Seed: 5, Objects: 20}, {Seed: 5, Objects: 20}, {Seed: 6, Objects: 20}} {
		var err error
		if truths[i], err = Night(dirs[i], opts); err != nil {
			t.Fatal(err)
		}
	}
	first, second, other := digests(t, dirs[0]), digests(t, dirs[1]), digests(t, dirs[2])
	if !reflect.DeepEqual(first, second) {
		t.Error("the same seed gave other bytes")
	}
	same := 0
	for name, sum := range first {
		if other[name] == sum {
			same++
		}
	}
	if same != 2 { // the empty file and the text file
		t.Errorf("another seed gave the same bytes in %d files, want 2", same)
	}
	// The truth table says what the files are.
	read, err := LoadTruth(dirs[0])
	if err != nil {
		t.Fatal(err)
	}
	if len(read) != len(truths[0]) {
		t.Fatalf("truth table has %d rows, want %d", len(read), len(truths[0]))
	}
	files := map[string]bool{}
	for _, row := range read {
		if _, ok := first[row.File]; !ok {
			t.Errorf("%s is in the truth and not on disk", row.File)
		}
		files[row.File] = true
	}
	if len(files) != len(first)-1 {
		t.Errorf("%d files in the truth, %d on disk beside it", len(files), len(first)-1)
	}
}

// A smaller night is a part of a larger one.
func TestNightGrows(t *testing.T) {
	small, large := t.TempDir(), t.TempDir()
	if _, err := Night(small, Options{Seed: 1, Objects: 8}); err != nil {
		t.Fatal(err)
	}
	if _, err := Night(large, Options{Seed: 1, Objects: 16}); err != nil {
		t.Fatal(err)
	}
	more := digests(t, large)
	for name, sum := range digests(t, small) {
		if name != TruthFile && !strings.HasSuffix(name, "p05.fits") && more[name] != sum {
			t.Errorf("%s differs", name)
		}
	}
}

func TestNightRefuses(t *testing.T) {
	dir := t.TempDir()
	if err := os.WriteFile(filepath.Join(dir, "mine.txt"), []byte("x"), 0o644); err != nil {
		t.Fatal(err)
	}
	if _, err := Night(dir, Options{}); !errors.Is(err, ErrNotEmpty) {
		t.Errorf("a folder with files: %v, want ErrNotEmpty", err)
	}
	if _, err := Night(filepath.Join(dir, "mine.txt"), Options{}); err == nil {
		t.Error("a file was taken for a folder")
	}
	if _, err := Night(t.TempDir(), Options{Objects: -1}); err == nil {
		t.Error("a negative number of objects was accepted")
	}
}

func TestBrokenFiles(t *testing.T) {
	dir := t.TempDir()
	rows, err := writeBroken(dir, 1)
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != len(brokenFiles) {
		t.Fatalf("%d broken files, want %d", len(rows), len(brokenFiles))
	}
	for _, row := range rows {
		content, err := os.ReadFile(filepath.Join(dir, row.File))
		if err != nil {
			t.Fatal(err)
		}
		ok := false
		switch row.Kind {
		case "empty file":
			ok = len(content) == 0
		case "text instead of FITS":
			ok = len(content) > 0 && !bytes.HasPrefix(content, []byte("SIMPLE"))
		case "cut short":
			ok = bytes.HasPrefix(content, []byte("SIMPLE")) && len(content)%2880 != 0
		case "compressed file cut short":
			z, err := gzip.NewReader(bytes.NewReader(content))
			if err == nil {
				_, err = io.Copy(io.Discard, z)
			}
			ok = errors.Is(err, io.ErrUnexpectedEOF)
		case "flux all NaN", "weights all zero":
			ok = bytes.HasPrefix(content, []byte("SIMPLE")) && len(content)%2880 == 0 && row.ObjectID != ""
		}
		if !ok || row.Class != Broken || !math.IsNaN(row.Redshift) {
			t.Errorf("%s is not what its truth says: %+v", row.File, row)
		}
	}
}

// The night looks like one: classes, signal-to-noise ratios and redshifts of the
// default night. The bounds are the brief of the population, with room for its
// scatter.
func TestPopulation(t *testing.T) {
	total := 0.0
	for _, k := range kinds {
		total += k.share
	}
	if math.Abs(total-1) > 1e-12 {
		t.Errorf("shares add up to %g", total)
	}
	_, truth := Spectra(4, benchmarkScenes)
	classes := map[string]int{}
	usual := 0
	for _, row := range truth {
		classes[row.Class]++
		switch {
		case row.Class == Sky:
			if !math.IsNaN(row.Redshift) || row.SNR != 0 {
				t.Errorf("blank sky has redshift %g and S/N %g", row.Redshift, row.SNR)
			}
		case row.Class == catalog.Star:
			if math.Abs(row.Redshift) > 0.002 {
				t.Errorf("%s has redshift %g", row.Kind, row.Redshift)
			}
		case !(row.Redshift > 0.02 && row.Redshift < 5):
			t.Errorf("%s has redshift %g", row.Kind, row.Redshift)
		}
		if row.SNR > 1 && row.SNR < 10 {
			usual++
		}
		if row.SNR > 35 {
			t.Errorf("%s has S/N %g", row.Kind, row.SNR)
		}
	}
	for _, class := range []string{catalog.Galaxy, catalog.Quasar, catalog.Star, Sky} {
		if classes[class] < 1 {
			t.Errorf("%d of class %s in %d", classes[class], class, len(truth))
		}
	}
	if usual < len(truth)/3 {
		t.Errorf("only %d of %d spectra have S/N between 1 and 10", usual, len(truth))
	}
}

func TestBenchmarkNight(t *testing.T) {
	dir := t.TempDir()
	if err := BenchmarkNight(dir, 3); err != nil {
		t.Fatal(err)
	}
	sums := digests(t, dir)
	if len(sums) != 3 {
		t.Errorf("%d files, want 3", len(sums))
	}
	// 18 bytes a pixel and two or three header blocks.
	info, err := os.Stat(filepath.Join(dir, "lr-000002.fits"))
	if err != nil {
		t.Fatal(err)
	}
	if min := int64(18 * benchmarkPixels); info.Size() < min || info.Size() > min+5*2880 {
		t.Errorf("%d bytes, want a little more than %d", info.Size(), min)
	}
}

func BenchmarkDrawAndPaint(b *testing.B) {
	for i := 0; b.Loop(); i++ {
		drawSource(rand.New(rand.NewPCG(1, uint64(i))))
	}
}

func BenchmarkExpose(b *testing.B) {
	g := newGallery(1, 8)
	for i := 0; b.Loop(); i++ {
		g.expose(1, i)
	}
}
