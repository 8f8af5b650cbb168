package pipeline_test

import (
	"path/filepath"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/pipeline"
	"duskline/spectrum"
	"duskline/synth"
)

// BenchmarkChain takes synthetic spectra of about 4,600 pixels through the
// whole chain, one worker, reading left out.
func BenchmarkChain(b *testing.B) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		b.Fatal(err)
	}
	worker := chain.NewWorker()
	spectra, _ := synth.Spectra(1, 64)
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		s := cloned(spectra[i%len(spectra)])
		worker.Process(s)
	}
}

// shortChain is the chain for spectra of synth.ShortArchive, on their own grid.
func shortChain(t testing.TB) *pipeline.Chain {
	t.Helper()
	set := pipeline.DefaultSettings()
	set.Grid.Step = synth.ShortStep
	chain, err := pipeline.NewChain(set)
	if err != nil {
		t.Fatal(err)
	}
	return chain
}

func shortFile(t testing.TB, n int) (*fitsread.File, []synth.Truth) {
	t.Helper()
	dir := t.TempDir()
	var truth []synth.Truth
	err := synth.ShortArchive(dir, 1, n, func(t synth.Truth) { truth = append(truth, t) })
	if err != nil {
		t.Fatal(err)
	}
	f, err := fitsread.Open(filepath.Join(dir, truth[0].File), fitsread.Options{})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { f.Close() })
	return f, truth
}

// BenchmarkShortChain reads spectra of 600 pixels and takes them through the
// whole chain, one worker.
func BenchmarkShortChain(b *testing.B) {
	f, _ := shortFile(b, 512)
	worker := shortChain(b).NewWorker()
	b.ReportAllocs()
	for i := 0; b.Loop(); i++ {
		s, err := f.Read(i % 512)
		if err != nil {
			b.Fatal(err)
		}
		worker.Process(s)
	}
}

// assumptions are the flags that speak of the input, not of the answer.
const assumptions = catalog.FrameAssumed | catalog.NoiseEstimated | catalog.WeightsSuspect

// Short spectra of low resolution: what is called secure is right.
func TestShortSpectra(t *testing.T) {
	if testing.Short() {
		t.Skip("statistics: long, and nothing runs at the same time")
	}
	f, truth := shortFile(t, 512)
	worker := shortChain(t).NewWorker()
	secure, right, wrong := 0, 0, 0
	for i, want := range truth {
		s, err := f.Read(i)
		if err != nil {
			t.Fatal(err)
		}
		o := worker.Process(s).Object
		if o.Verdict != catalog.Secure && (o.Flags&^assumptions == 0 || o.Reason == "") {
			t.Errorf("%s is %s with flags %v and reason %q: nothing says why", want.ObjectID, o.Verdict, o.Flags.Names(), o.Reason)
		}
		ok := synth.IsRight(want, o)
		if ok {
			right++
		}
		if o.Verdict != catalog.Secure {
			continue
		}
		if secure++; !ok {
			wrong++
			t.Logf("%s, %s, z = %.4f, S/N %.1f: secure %s (%s) at %.4f", want.ObjectID, want.Kind, want.Redshift, want.SNR, o.Class, o.Family, o.Redshift)
		}
	}
	t.Logf("%d spectra, %d right, %d secure, %d of these wrong", len(truth), right, secure, wrong)
	// The default secure_confidence of 0.995 allows for one wrong answer in 200; more
	// than three of about 200 come by chance once in fifty such tests.
	if wrong > 3 || secure < len(truth)/4 || right < secure {
		t.Errorf("%d of %d secure ones are wrong", wrong, secure)
	}
}

func cloned(s *spectrum.Spectrum) *spectrum.Spectrum {
	c := *s
	c.Segments = append([]spectrum.Segment(nil), s.Segments...)
	return &c
}
