package main

import (
	"bufio"
	"flag"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"duskline/pipeline"
	"duskline/synth"
)

// The full sizes: go test ./cmd/duskline -run TestArchive -archive 1000000 -archive-files 1000000 -timeout 3h -v
var (
	archiveObjects = flag.Int("archive", 30_000, "objects of the archive of large files")
	archiveFiles   = flag.Int("archive-files", 6_000, "objects of the archive of one file each")
	archiveScience = flag.String("archive-science", "quick", "what measures the archive of large files: quick, or real, the program itself on spectra of 600 pixels")
	archiveFolder  = flag.String("archive-folder", "", "where the real archive and its run are kept; the same command goes on with them")
)

// memoryMost is what a command may take, whatever the size of the archive.
const memoryMost = 300 << 20

// archiveSite is a folder in which commands are timed and their memory is looked
// at.
type archiveSite struct {
	*testing.T
	folder, bin string
	env         []string
	program     string
}

func newArchiveSite(t *testing.T) *archiveSite {
	t.Helper()
	if testing.Short() {
		t.Skip("measures the memory of a program that the race detector does not watch")
	}
	return &archiveSite{t, t.TempDir(), commandFolder(t), os.Environ(), quickName}
}

func (s *archiveSite) step(what string, args ...string) (output string) {
	s.Helper()
	c := exec.Command(filepath.Join(s.bin, s.program), args...)
	peak := filepath.Join(s.bin, "peak")
	c.Dir, c.Env = s.folder, append(s.env, peakFile+"="+peak)
	began := time.Now()
	code, out := finished(s.T, c)
	if code != exitDone {
		s.Fatalf("%s: exit code %d: %s", what, code, out)
	}
	text, err := os.ReadFile(peak)
	if err != nil {
		s.Fatal(err)
	}
	memory, err := strconv.ParseInt(string(text), 10, 64)
	if err != nil || memory == 0 {
		s.Fatalf("the peak of memory is %q", text)
	}
	s.Logf("%-44s %8.2f s  %4d MB", what, time.Since(began).Seconds(), memory>>20)
	if memory > memoryMost {
		s.Errorf("%s took %d MB", what, memory>>20)
	}
	return out
}

// TestArchive takes an archive of short spectra, 10,000 a file, through plan,
// two shards, gathering, a resumption with nothing to do, repetitions and
// comparisons. What measures a spectrum is the quick double; reading, plan, blocks
// and catalogs are those of the program.
func TestArchive(t *testing.T) {
	s := newArchiveSite(t)
	if *archiveScience == "real" {
		s.real(*archiveObjects)
		return
	}
	const perFile = 10_000
	if err := writeShort(filepath.Join(s.folder, "archive"), *archiveObjects/perFile, perFile); err != nil {
		t.Fatal(err)
	}
	s.step("plan", "run", "--out", "RUN", "--plan-only", "-q", "archive")
	s.step("shard 0 of 2", "run", "--out", "RUN", "--shard", "0/2", "-q")
	s.step("shard 1 of 2", "run", "--out", "RUN", "--shard", "1/2", "-q")
	s.step("gather", "gather", "RUN", "-q")
	s.step("the same run again, nothing to do", "run", "--out", "RUN", "-q")
	s.step("the same with its inputs", "run", "--out", "RUN", "-q", "archive")
	s.step("repeated, all rows taken over", "run", "--like", "RUN", "--out", "AGAIN", "-q")
	s.step("compared", "compare", "RUN", "AGAIN", "--max-changed", "0", "-q")
	if n := lineCount(t, filepath.Join(s.folder, "RUN", "catalog.csv")); n != *archiveObjects+1 {
		t.Errorf("the catalog has %d lines for %d objects", n, *archiveObjects)
	}
}

// real takes spectra of 600 pixels, 2,000 a file, through the program itself, on
// the grid that they have. A command that was killed is gone on with.
func (s *archiveSite) real(objects int) {
	if *archiveFolder != "" {
		if err := os.MkdirAll(*archiveFolder, 0o777); err != nil {
			s.Fatal(err)
		}
		s.folder = *archiveFolder
	}
	s.program = "duskline"
	const perFile = 2000
	began := time.Now()
	if err := synth.ShortArchive(filepath.Join(s.folder, "archive"), objects/perFile, perFile, nil); err != nil {
		s.Fatal(err)
	}
	s.Logf("%d spectra are there after %.0f s", objects, time.Since(began).Seconds())
	s.step("plan", "run", "--out", "RUN", "--plan-only", "-q", "--set", fmt.Sprintf("grid.step=%g", synth.ShortStep), "archive")
	s.step("run and gather", "run", "--out", "RUN", "-q")
	s.step("the same run again, nothing to do", "run", "--out", "RUN", "-q")
	if n := lineCount(s.T, filepath.Join(s.folder, "RUN", "catalog.csv")); n != objects+1 {
		s.Errorf("the catalog has %d lines for %d objects", n, objects)
	}
	summary, err := pipeline.ReadSummary(filepath.Join(s.folder, "RUN", "summary.json"))
	if err != nil || !summary.Complete || summary.Unreadable > 0 || summary.InternalErrors > 0 {
		s.Errorf("%v, %+v", err, summary)
	}
	s.Logf("%v", summary.Classes)
}

// TestArchiveOfFiles does the same with a file for each object, half of them in
// one folder, named by folder and by a list in reverse order, which must come to
// the same rows. In the end every object has changed.
func TestArchiveOfFiles(t *testing.T) {
	s := newArchiveSite(t)
	n := *archiveFiles
	if err := writeSingles(filepath.Join(s.folder, "archive"), filepath.Join(s.folder, "reverse.txt"), n); err != nil {
		t.Fatal(err)
	}
	s.step("plan", "run", "--out", "RUN", "--plan-only", "-q", "archive")
	s.step("run", "run", "--out", "RUN", "-q")
	s.step("the same run again, nothing to do", "run", "--out", "RUN", "-q")
	s.step("the same with its inputs", "run", "--out", "RUN", "-q", "archive")
	s.step("planned from a pattern", "run", "--out", "PATTERN", "--plan-only", "-q", "archive/*/*.fits")
	out := s.step("repeated in reverse order, all taken over", "run", "--like", "RUN", "--out", "REVERSE", "@reverse.txt")
	if want := fmt.Sprintf("%d spectra were taken over from RUN, 0 computed.", n); !strings.Contains(out, want) {
		t.Errorf("want %q in %s", want, out)
	}
	s.step("compared with the reverse", "compare", "RUN", "REVERSE", "--max-changed", "0", "-q")
	s.env = append(s.env, "QUICK_LINES=x")
	s.step("repeated with another line list", "run", "--like", "RUN", "--out", "OTHER", "-q")
	out = s.step("compared, all with lines changed", "compare", "RUN", "OTHER", "--out", "CHANGES")
	if !strings.Contains(out, fmt.Sprintf("%d objects in both catalogs", n)) {
		t.Errorf("the comparison says %s", out)
	}
	for _, name := range []string{"RUN", "REVERSE"} {
		if got := lineCount(t, filepath.Join(s.folder, name, "catalog.csv")); got != n+1 {
			t.Errorf("the catalog of %s has %d lines for %d objects", name, got, n)
		}
	}
}

// writeSingles makes n files of one short spectrum in folder, half of them in one
// subfolder and half by thousands, and lists them in reverse order. The files are
// hard links to few: what a file system holds is not what is tried here.
func writeSingles(folder, list string, n int) error {
	const linksMost = 50_000 // of one file; ext4 takes 65,000
	wave := shortWave()
	originals := filepath.Join(filepath.Dir(folder), "originals")
	if err := os.MkdirAll(originals, 0o777); err != nil {
		return err
	}
	kinds := 16 + n/linksMost
	for k := range kinds {
		if err := writeShortFile(filepath.Join(originals, fmt.Sprint(k)), wave, k, 1, false); err != nil {
			return err
		}
	}
	var names []string
	for i := range n {
		sub := "one"
		if i%2 == 1 {
			sub = fmt.Sprintf("n%05d", i/2000)
		}
		name := filepath.Join(folder, sub, fmt.Sprintf("lr-20310314-%08d.fits", i))
		if i%2000 < 2 {
			if err := os.MkdirAll(filepath.Dir(name), 0o777); err != nil {
				return err
			}
		}
		if err := os.Link(filepath.Join(originals, fmt.Sprint(i%kinds)), name); err != nil {
			return err
		}
		rel, err := filepath.Rel(filepath.Dir(folder), name)
		if err != nil {
			return err
		}
		names = append(names, rel)
	}
	slices.Sort(names)
	f, err := os.Create(list)
	if err != nil {
		return err
	}
	defer f.Close()
	w := bufio.NewWriter(f)
	for _, name := range slices.Backward(names) {
		fmt.Fprintln(w, name)
	}
	return w.Flush()
}
