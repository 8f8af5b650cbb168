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

// Limits that hold the answer change nothing of it; limits that do not hold it are
// kept to, and the row says what lies outside.
func TestLimits(t *testing.T) {
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	spectra, truth := synth.Spectra(1, 32)
	tried := 0
	for i, s := range spectra {
		free := worker.Process(cloned(s)).Object
		if truth[i].Class != catalog.Galaxy || free.Verdict != catalog.Secure || free.Redshift < 0.05 || free.Redshift > 0.6 {
			continue
		}
		within := func(lim spectrum.Limits) catalog.Object {
			c := cloned(s)
			c.Limits = &lim
			return worker.Process(c).Object
		}
		o := within(spectrum.Limits{Class: catalog.Galaxy, ZMin: free.Redshift - 0.05, ZMax: free.Redshift + 0.05})
		// A thousandth of the error: the fit is the same, its start may differ.
		if math.Abs(o.Redshift-free.Redshift) > 1e-3*free.RedshiftErr+1e-9 || o.Class != catalog.Galaxy || strings.Contains(o.Reason, "manifest") || o.Flags != free.Flags || o.Verdict != free.Verdict {
			t.Errorf("%s: z = %.6f, %s within limits that hold %.6f: %s", s.ObjectID, o.Redshift, o.Class, free.Redshift, o.Reason)
		}
		o = within(spectrum.Limits{ZMin: free.Redshift + 0.2, ZMax: math.NaN()})
		if o.Redshift < free.Redshift+0.19 || !strings.Contains(o.Reason, "manifest's limits (redshift from") || !strings.Contains(o.Reason, "outside them galaxy at z = ") {
			t.Errorf("%s: z = %.6f, not above %.2f: %s", s.ObjectID, o.Redshift, free.Redshift+0.2, o.Reason)
		}
		if o = within(spectrum.Limits{Class: catalog.Star, ZMin: math.NaN(), ZMax: math.NaN()}); o.Class == catalog.Galaxy || !strings.Contains(o.Reason, "(star, any redshift)") {
			t.Errorf("%s: %s at %.5f, a star was asked for: %s", s.ObjectID, o.Class, o.Redshift, o.Reason)
		}
		if o.Verdict == catalog.Secure || !o.Flags.Has(catalog.OutsideLimits) {
			t.Errorf("%s: a star was asked for: %s, flags %s", s.ObjectID, o.Verdict, o.Flags)
		}
		// A quasar at the redshift of the galaxy: the class is wrong, the redshift is not.
		o = within(spectrum.Limits{Class: catalog.Quasar, ZMin: math.NaN(), ZMax: math.NaN()})
		same := math.Abs(o.Redshift-free.Redshift) < 0.01*(1+free.Redshift)
		if !o.Flags.Has(catalog.OutsideLimits) || !same && o.Verdict == catalog.Secure {
			t.Errorf("%s: a quasar was asked for: %s at %.5f, of %.5f, flags %s", s.ObjectID, o.Verdict, o.Redshift, free.Redshift, o.Flags)
		}
		if o = within(spectrum.Limits{ZMin: 19, ZMax: 20}); o.Verdict != catalog.None || !strings.Contains(o.Reason, "nothing was found within the manifest's limits") {
			t.Errorf("%s: %s at %.5f where no family goes: %s", s.ObjectID, o.Verdict, o.Redshift, o.Reason)
		}
		if tried++; tried == 2 {
			break
		}
	}
	if tried == 0 {
		t.Error("no galaxy to try")
	}
}
