package pipeline_test

import (
	"math"
	"path/filepath"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/pipeline"
	"duskline/synth"
)

// In a night whose lines scatter as those of real objects do, redshifts differ from the truth
// by about their errors, kind by kind.
func TestPullsOfNight(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	dir := filepath.Join(t.TempDir(), "night")
	truth, err := synth.Night(dir, synth.Options{Seed: 1})
	if err != nil {
		t.Fatal(err)
	}
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	group := func(kind string) string {
		switch kind = strings.TrimPrefix(kind, "faint "); kind {
		case "A star", "F star":
			return "hot star"
		case "G star", "K star", "M star":
			return "cool star"
		}
		return kind
	}
	squares, count := map[string]float64{}, map[string]int{}
	for _, want := range truth {
		if want.Class == synth.Sky || want.Class == synth.Broken {
			continue
		}
		f, err := fitsread.Open(filepath.Join(dir, filepath.FromSlash(want.File)), fitsread.Options{})
		if err != nil {
			t.Fatal(err)
		}
		s, err := f.Read(want.Row)
		f.Close()
		if err != nil {
			t.Fatal(err)
		}
		if o := worker.Process(s).Object; o.Verdict == catalog.Secure && synth.IsRight(want, o) {
			pull := (o.Redshift - want.Redshift) / o.RedshiftErr
			squares[group(want.Kind)] += pull * pull
			count[group(want.Kind)]++
		}
	}
	if len(count) != 6 {
		t.Errorf("kinds %v, want six", count)
	}
	for kind, n := range count {
		rms := math.Sqrt(squares[kind] / float64(n))
		t.Logf("%-22s %3d secure, rms of (z - truth)/error %.2f", kind, n, rms)
		// 17 to 58 objects a kind give an rms to 0.1 to 0.2; the floors of families are rounded and
		// a quasar's error takes lines one by one: no more than half again too small or two thirds too large.
		if n < 10 || rms < 0.6 || rms > 1.5 {
			t.Errorf("%s: rms %.2f of %d, want 0.6 to 1.5", kind, rms, n)
		}
	}
}
