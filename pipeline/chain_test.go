package pipeline_test

import (
	"testing"

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

func cloned(s *spectrum.Spectrum) *spectrum.Spectrum {
	c := *s
	c.Segments = append([]spectrum.Segment(nil), s.Segments...)
	return &c
}
