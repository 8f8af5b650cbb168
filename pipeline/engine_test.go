package pipeline

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"

	"duskline/catalog"
	"duskline/spectrum"
)

func TestEveryObjectMakesARow(t *testing.T) {
	job := smallJob(t)
	summary := finish(t, job)
	rows := readObjects(t, job)
	var got []string
	for _, o := range rows {
		got = append(got, fmt.Sprintf("%s %d %s", o.SourceFile, o.SourceRow, o.ObjectID))
	}
	want := `night/a.fits 0 a1
night/b.fits 0 b1
night/b.fits 1 b2
night/b.fits 2 b3
night/b.fits 3 b4
night/b.fits 4 b5
night/b.fits 5 b6
night/b.fits 6 b7
night/b.fits 7 b8
night/b.fits 8 b9
night/c.fits 0 c
night/d.fits 0 d
night/e/e1.fit 0 e1
night/e/e1.fit 1 e2
night/e/e1.fit 2 panic
night/e/e1.fit 3 e3
night/e/e1.fit 4 a1#2
night/e/e2.FTS 0 a1#3
night/e/e2.FTS 1 infinite
night/f.fits.gz 0 f
night/g.fits 0 g1
night/g.fits 1 nowhere
night/g.fits 2 g3
night/g.fits 3 g4
night/g.fits 4 g5
night/h.fits 0 h`
	if text := strings.Join(got, "\n"); text != want {
		t.Errorf("rows are\n%s\nwant\n%s", text, want)
	}
	reasons := map[string]string{
		"c":        "night/c.fits: this spectrum is broken",
		"d":        "night/d.fits: this file opens for nobody",
		"f":        "internal error: reading fell into a trap (fake_test.go:",
		"h":        "internal error: the door is a trap (fake_test.go:",
		"panic":    "internal error: runtime error: index out of range [5] with length 0 (fake_test.go:",
		"infinite": "internal error: catalog row",
	}
	for _, o := range rows {
		if want, ok := reasons[o.ObjectID]; ok {
			if !strings.HasPrefix(o.Reason, want) {
				t.Errorf("%s: reason %q, want %q", o.ObjectID, o.Reason, want)
			}
			if o.Verdict != catalog.None {
				t.Errorf("%s: verdict %s, want none", o.ObjectID, o.Verdict)
			}
		} else if o.ObjectID != "nowhere" && o.Verdict != catalog.Secure {
			t.Errorf("%s: verdict %s (%s), want secure", o.ObjectID, o.Verdict, o.Reason)
		}
		if o.ObjectID == "g1" && o.InputDigest == "" {
			t.Error("g1 has no input digest")
		}
	}
	if summary.Objects != smallNightObjects || summary.Inputs != 9 || summary.Unreadable != 4 ||
		summary.InternalErrors != 4 || summary.RepeatedIDs != 2 || summary.Flags["unreadable"] != 4 ||
		summary.Classes[catalog.Galaxy][catalog.Secure] != 19 || summary.Verdicts[catalog.None] != 7 {
		t.Errorf("summary is %+v", summary)
	}
	read, err := ReadSummary(filepath.Join(job.Base, job.Out, summaryName))
	if err != nil || read.Objects != summary.Objects || read.Digests["line_list"] != "0123" {
		t.Errorf("summary.json reads as %+v, %v", read, err)
	}
}

// TestLinesFollowTheirObject guards the renaming of repeated IDs: the three
// objects a1 have the same lines.
func TestLinesFollowTheirObject(t *testing.T) {
	job := smallJob(t)
	writeNight(t, job.Base, "night/a.fits: e2\n night/e/e2.FTS: e2 e2 b1 e2\n") // e2 and its repetitions, also next to one another
	finish(t, job)
	lines := map[string]int{}
	if err := readTable(filepath.Join(job.Base, job.Out, linesName), func(l *catalog.Line) error {
		lines[l.ObjectID]++
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	probe := (&wordWorker{}).Process(mustRead(t, "e2"))
	if len(probe.Lines) == 0 {
		t.Fatal("the word e2 has no lines: the test is blind")
	}
	for _, id := range []string{"e2", "e2#2", "e2#3", "e2#4", "e2#5"} {
		if lines[id] != len(probe.Lines) {
			t.Errorf("%s has %d lines, want %d", id, lines[id], len(probe.Lines))
		}
	}
}

func TestSameBytesForAnyWorkers(t *testing.T) {
	job := smallJob(t)
	job.Settings.Run.Workers = 1
	finish(t, job)
	want := snapshot(t, job)
	for _, n := range []int{2, 8} {
		job.Out = fmt.Sprintf("RUN%d", n)
		job.Settings.Run.Workers = n
		finish(t, job)
		sameFiles(t, snapshot(t, job), want, fmt.Sprintf("%d workers", n))
	}
}

// interrupter cancels a run after a number of objects.
type interrupter struct {
	silent
	after  int
	cancel context.CancelFunc
}

func (p *interrupter) Object(*catalog.Object) {
	if p.after--; p.after == 0 {
		p.cancel()
	}
}

func TestInterruptedRunComesToTheSameBytes(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	want := snapshot(t, job)
	for after := 1; after <= smallNightObjects; after++ {
		if err := os.RemoveAll(filepath.Join(job.Base, job.Out)); err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithCancel(context.Background())
		stopped := job
		stopped.Progress = &interrupter{after: after, cancel: cancel}
		_, err := tryFinish(ctx, stopped)
		cancel()
		if err != nil && !errors.Is(err, context.Canceled) {
			t.Fatalf("interrupted after %d objects: %v", after, err)
		}
		if err == nil && after < smallNightObjects-5 {
			t.Errorf("interruption after %d objects went unnoticed", after)
		}
		finish(t, job)
		sameFiles(t, snapshot(t, job), want, fmt.Sprintf("interrupted after %d objects", after))
	}
}

func TestResumeDoesOnlyWhatIsMissing(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	want := snapshot(t, job)
	if err := os.RemoveAll(filepath.Join(job.Base, job.Out, blocksName, "000002")); err != nil {
		t.Fatal(err)
	}
	counter := &counting{}
	job.Progress = counter
	job.Paths = nil // goes on with the plan
	finish(t, job)
	if counter.objects != 5 || counter.there != smallNightObjects-5 {
		t.Errorf("%d objects were done again and %d found, want 5 and %d", counter.objects, counter.there, smallNightObjects-5)
	}
	sameFiles(t, snapshot(t, job), want, "resumed")
}

type counting struct {
	silent
	objects, there int
}

func (c *counting) Object(*catalog.Object)         { c.objects++ }
func (c *counting) Working(total, there int64)     { c.there = int(there) }
func (c *counting) Planning(inputs, spectra int64) {}

// TestDamagedBlockIsDoneAgain spoils every file of a block in the ways that a
// full or failing disk does.
func TestDamagedBlockIsDoneAgain(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	want := snapshot(t, job)
	block := filepath.Join(job.Base, job.Out, blocksName, "000001")
	spoil := map[string]func(text []byte) []byte{
		"cut":    func(text []byte) []byte { return text[:len(text)/2] },
		"empty":  func([]byte) []byte { return nil },
		"flip":   func(text []byte) []byte { text[len(text)/3] ^= 0x10; return text },
		"longer": func(text []byte) []byte { return append(text, 0) },
	}
	for _, name := range append(tableNames[:], noteName) {
		for how, change := range spoil {
			path := filepath.Join(block, name)
			text, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if err := os.WriteFile(path, change(text), 0o666); err != nil {
				t.Fatal(err)
			}
			counter := &counting{}
			job.Progress = counter
			finish(t, job)
			if counter.objects != 5 {
				t.Errorf("%s %s: %d objects were done again, want 5", name, how, counter.objects)
			}
			sameFiles(t, snapshot(t, job), want, name+" "+how)
		}
	}
	if err := os.Remove(filepath.Join(block, linesName)); err != nil {
		t.Fatal(err)
	}
	finish(t, job)
	sameFiles(t, snapshot(t, job), want, "file of a block removed")
}

func TestGatherRefusesMissingBlock(t *testing.T) {
	job := smallJob(t)
	r, err := Prepare(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Work(context.Background()); err != nil {
		t.Fatal(err)
	}
	if err := os.RemoveAll(r.blockFolder(3)); err != nil {
		t.Fatal(err)
	}
	if _, err := r.Gather(context.Background()); err == nil {
		t.Error("a catalog was written without one of its blocks")
	}
	if _, err := os.Stat(filepath.Join(r.Folder(), CatalogFITS)); err == nil {
		t.Error("catalog.fits is there without one of its blocks")
	}
}

// TestManyRunsOnOneFolder lets commands race for the plan, the blocks and the
// catalogs.
func TestManyRunsOnOneFolder(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	want := snapshot(t, job)
	for round := range 10 {
		if err := os.RemoveAll(filepath.Join(job.Base, job.Out)); err != nil {
			t.Fatal(err)
		}
		var all sync.WaitGroup
		for range 3 {
			all.Go(func() {
				if _, err := tryFinish(context.Background(), job); err != nil {
					t.Errorf("round %d: %v", round, err)
				}
			})
		}
		all.Wait()
		sameFiles(t, snapshot(t, job), want, "three at once")
	}
}

func TestPlanBoundsTheWork(t *testing.T) {
	job := smallJob(t)
	job.Limit = 7 // in the middle of b.fits
	summary := finish(t, job)
	rows := readObjects(t, job)
	if summary.Objects != 7 || len(rows) != 7 || rows[6].ObjectID != "b6" {
		t.Errorf("%d objects, the last is %s", len(rows), rows[len(rows)-1].ObjectID)
	}
	finish(t, job) // the same command again
}

// TestInputChangedAfterPlanning: rows of the old and the new file must never
// stand in one catalog unsaid.
func TestInputChangedAfterPlanning(t *testing.T) {
	job := smallJob(t)
	r, err := Prepare(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	writeNight(t, job.Base, "night/a.fits: another1 another2\n")
	if err := os.Remove(filepath.Join(job.Base, "night/c.fits")); err != nil {
		t.Fatal(err)
	}
	if err := r.Work(context.Background()); err != nil {
		t.Fatal(err)
	}
	if _, err := r.Gather(context.Background()); err != nil {
		t.Fatal(err)
	}
	for _, o := range readObjects(t, job) {
		switch o.SourceFile {
		case "night/a.fits":
			if o.Flags != catalog.Unreadable || !strings.Contains(o.Reason, "written to after the run was planned") {
				t.Errorf("a changed file came out as %+v", o)
			}
		case "night/c.fits":
			if o.Flags != catalog.Unreadable || !strings.Contains(o.Reason, "is not now") {
				t.Errorf("a removed file came out as %+v", o)
			}
		}
	}
}

// endlessFile has as many spectra as it says, made when they are read.
type endlessFile int

func (f endlessFile) Count() int                   { return int(f) }
func (f endlessFile) Close() error                 { return nil }
func (f endlessFile) Digest(i int) (string, error) { return fmt.Sprint(i), nil }
func (f endlessFile) Read(i int) (*spectrum.Spectrum, error) {
	return &spectrum.Spectrum{Layout: fmt.Sprint(i), ObjectID: fmt.Sprint(i), InputDigest: fmt.Sprint(i)}, nil
}

// heapWatch measures the heap in use after some and after many objects.
type heapWatch struct {
	silent
	at   map[int]bool
	done int
	heap []uint64
}

func (w *heapWatch) Object(*catalog.Object) {
	if w.done++; w.at[w.done] {
		runtime.GC()
		var m runtime.MemStats
		runtime.ReadMemStats(&m)
		w.heap = append(w.heap, m.HeapAlloc)
	}
}

// TestMemoryDoesNotGrow: what is finished is on disk and nowhere else.
func TestMemoryDoesNotGrow(t *testing.T) {
	job := smallJob(t)
	writeNight(t, job.Base, "many.fits: x\n")
	job.Paths = []string{"many.fits"}
	job.Settings.Run.BlockSize = 500
	job.Open = func(string) (SpectrumFile, error) { return endlessFile(65000), nil }
	// The least of five looks each: what is in flight comes and goes.
	watch := &heapWatch{at: map[int]bool{}}
	for k := range 5 {
		watch.at[3600+100*k], watch.at[63600+100*k] = true, true
	}
	job.Progress = watch
	r, err := Prepare(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	if err := r.Work(context.Background()); err != nil {
		t.Fatal(err)
	}
	// An Outcome without lines is about 400 bytes: 60,000 of them, if they were
	// kept, would be 24 MB. Blocks in flight and what other tests of the package leave to
	// be collected come and go by some 2 MB.
	if grown := int64(slices.Min(watch.heap[5:])) - int64(slices.Min(watch.heap[:5])); grown > 8<<20 {
		t.Errorf("60,000 objects made the heap grow by %d bytes", grown)
	}
}

// countedFile says when it is closed.
type countedFile struct {
	endlessFile
	open *atomic.Int32
}

func (f countedFile) Close() error { f.open.Add(-1); return nil }

// TestFileOfManyObjectsIsOpenedOnce for all workers, and closed again.
func TestFileOfManyObjectsIsOpenedOnce(t *testing.T) {
	job := smallJob(t)
	writeNight(t, job.Base, "many/1.fits: x\nmany/2.fits: x\nmany/3.fits: x\n")
	job.Paths = []string{"many"}
	job.Settings.Run.BlockSize, job.Settings.Run.Workers = 100, 4
	var opened, open atomic.Int32
	job.Open = func(string) (SpectrumFile, error) {
		opened.Add(1)
		open.Add(1)
		return countedFile{300, &open}, nil
	}
	r, err := Prepare(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	opened.Store(0)
	if err := r.Work(context.Background()); err != nil {
		t.Fatal(err)
	}
	// A file may be closed when all workers happen to be past it but for one
	// that has still to begin on it; four workers keep that rare.
	if n := opened.Load(); n < 3 || n > 12 {
		t.Errorf("3 files were opened %d times for 900 objects", n)
	}
	if n := open.Load(); n != 0 {
		t.Errorf("%d files were left open", n)
	}
}
