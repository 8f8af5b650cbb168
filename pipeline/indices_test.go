package pipeline

import (
	"context"
	"maps"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/spectrum"
)

// indexScience is wordScience with an index a line.
type indexScience struct {
	wordScience
	file string // digest of the file of indices
}

func (s indexScience) Digests() map[string]string {
	return map[string]string{"line_list": s.digest, IndicesDigest: s.file}
}

func (s indexScience) NewWorker() Worker { return indexWorker{&wordWorker{}} }

type indexWorker struct{ Worker }

func (w indexWorker) Process(s *spectrum.Spectrum) Outcome {
	out := w.Worker.Process(s)
	for _, l := range out.Lines {
		out.Indices = append(out.Indices, catalog.Index{Index: "I" + l.Line, Unit: "mag", Value: l.EWRest, ValueErr: 0.1})
	}
	return out
}

// A run with indices has their table in every block and in the catalog, the same
// bytes for any number of workers and taken over from an earlier run; one
// without has none.
func TestIndicesTable(t *testing.T) {
	job := smallJob(t)
	job.Processor = indexScience{wordScience{"0123"}, "4567"}
	summary := finish(t, job)
	want := snapshot(t, job)
	owners := map[string]int{}
	if err := readTable(filepath.Join(job.Base, job.Out, indicesName), func(i *catalog.Index) error {
		owners[i.ObjectID]++
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	lines := map[string]int{}
	if err := readTable(filepath.Join(job.Base, job.Out, linesName), func(l *catalog.Line) error {
		lines[l.ObjectID]++
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	if !maps.Equal(owners, lines) || owners["a1#2"] != owners["a1"] || summary.Indices != summary.Lines || summary.Indices == 0 {
		t.Errorf("indices of %v, want of %v; %d in the summary", owners, lines, summary.Indices)
	}
	if text := want["catalog.fits"]; !strings.Contains(text, "'INDICES '") {
		t.Error("catalog.fits has no table INDICES")
	}
	if _, ok := want[filepath.Join(blocksName, "000001", indicesName)]; !ok {
		t.Error("block 1 has no table of indices")
	}
	again := job
	again.Out, again.Settings.Run.Workers = "AGAIN", 1
	finish(t, again)
	sameFiles(t, snapshot(t, again), want, "one worker")
	like := job
	like.Out, like.Like = "LIKE", job.Out
	finish(t, like)
	for _, name := range []string{indicesName, "catalog.fits"} {
		if snapshot(t, like)[name] != want[name] {
			t.Errorf("%s differs when rows are taken over", name)
		}
	}
	// A damaged table of indices is a damaged block.
	path := filepath.Join(job.Base, job.Out, blocksName, "000002", indicesName)
	if err := os.WriteFile(path, []byte("no table"), 0o666); err != nil {
		t.Fatal(err)
	}
	finish(t, job)
	sameFiles(t, snapshot(t, job), want, "a mended block")
	plain := smallJob(t)
	finish(t, plain)
	if names := slices.Collect(maps.Keys(snapshot(t, plain))); slices.Contains(names, indicesName) {
		t.Error("a run without indices has a table of them")
	}
	other := job
	other.Processor = indexScience{wordScience{"0123"}, "89ab"}
	if _, err := tryFinish(context.Background(), other); err == nil || !strings.Contains(err.Error(), "indices changed") {
		t.Errorf("another file of indices in the same run: %v", err)
	}
}

// The real chain: the file is read, measured, and its faults told.
func TestIndicesSetting(t *testing.T) {
	set := DefaultSettings()
	set.Lines.Indices = "built-in"
	chain, err := NewChain(set)
	if err != nil {
		t.Fatal(err)
	}
	if chain.Digests()[IndicesDigest] == "" {
		t.Error("the file of indices has no digest")
	}
	// A continuum of 10 with an H-alpha line to find and an absorption of 2 Angstrom, rest
	// frame, at 5268: Fe5270 is that, a ratio of flat bands is 1.
	var seg spectrum.Segment
	const z = 0.1
	for x := math.Log10(3800); x < math.Log10(9000); x += 1e-4 {
		w := math.Pow(10, x)
		f := 10.0
		for _, l := range []struct{ wave, flux, sigma float64 }{
			{3728.5, 100, 120}, {4862.69, 100, 120}, {4960.295, 100, 120}, {5008.24, 298, 120}, {6564.61, 290, 120}, {6585.27, 100, 120}, {5268, -20 * (1 + z), 200},
		} {
			s := l.wave * (1 + z) * l.sigma / spectrum.SpeedOfLight
			u := (w - l.wave*(1+z)) / s
			f += l.flux / (math.Sqrt(2*math.Pi) * s) * math.Exp(-u*u/2)
		}
		seg.Wave, seg.Flux, seg.Ivar = append(seg.Wave, w), append(seg.Flux, f), append(seg.Ivar, 100)
	}
	out := chain.NewWorker().Process(&spectrum.Spectrum{RA: math.NaN(), Dec: math.NaN(), BaryVelocity: math.NaN(), Segments: []spectrum.Segment{seg}})
	if math.Abs(out.Object.Redshift-z) > 1e-3 {
		t.Fatalf("redshift %.4f", out.Object.Redshift)
	}
	found := map[string]catalog.Index{}
	for _, i := range out.Indices {
		found[i.Index] = i
	}
	for name, want := range map[string]struct {
		unit  string
		value float64
	}{"Fe5270": {"Angstrom", 2}, "Break4000": {"ratio", 1}} {
		// The band ends 2 and 3 sigma from the line: a percent is outside.
		if i := found[name]; i.Unit != want.unit || math.Abs(i.Value-want.value) > 0.02*want.value || !(i.ValueErr > 0) {
			t.Errorf("%s: %+v, want %g %s", name, i, want.value, want.unit)
		}
	}
	bad := filepath.Join(t.TempDir(), "indices.toml")
	if err := os.WriteFile(bad, []byte("[[index]]\nname = \"X\"\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	for file, want := range map[string]string{bad: `index "X"`, bad + ".not": "no such file"} {
		set.Lines.Indices = file
		if _, err := NewChain(set); err == nil || !strings.Contains(err.Error(), want) || !strings.Contains(err.Error(), "lines.indices") {
			t.Errorf("%s: %v, want %q", file, err, want)
		}
	}
}
