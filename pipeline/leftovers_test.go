package pipeline_test

import (
	"math"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/spectrum"
	"duskline/synth"
)

// The lines of a second galaxy, laid over a synthetic one, give its row the flag and a
// reason with their wavelengths; the redshift stays the first's.
func TestSecondGalaxyIsFlagged(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	spectra, truth := synth.Spectra(1, 32)
	tried := 0
	for i, s := range spectra {
		alone := worker.Process(cloned(s)).Object
		if truth[i].Class != catalog.Galaxy || alone.Verdict != catalog.Secure || alone.Redshift < 0.05 || alone.Redshift > 0.25 || alone.Flags.Has(catalog.Unexplained) {
			continue
		}
		const second = 0.3302 // [O III] 4959, 5007 at 6598 and 6662 Angstrom, free of lines of the sky
		c := cloned(s)
		seg := &c.Segments[0]
		for k, w := range seg.Wave {
			for _, l := range []struct{ rest, height float64 }{{4960.3, 12}, {5008.24, 36}} { // vacuum, from memory; in sigmas of the noise
				if seg.Ivar[k] > 0 {
					u := (w/(l.rest*(1+second)) - 1) * spectrum.SpeedOfLight / 130
					seg.Flux[k] += l.height / math.Sqrt(seg.Ivar[k]) * math.Exp(-0.5*u*u)
				}
			}
		}
		o := worker.Process(c).Object
		if !o.Flags.Has(catalog.Unexplained) || !strings.Contains(o.Reason, "6662, 6598 Angstrom") || math.Abs(o.Redshift-alone.Redshift) > 0.001 {
			t.Errorf("%s at %.4f and one at %.4f: %.4f, flags %s, %s", s.ObjectID, alone.Redshift, second, o.Redshift, o.Flags, o.Reason)
		}
		if tried++; tried == 2 {
			break
		}
	}
	if tried == 0 {
		t.Error("no galaxy to try")
	}
}
