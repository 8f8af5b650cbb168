package lines

import (
	"math"
	"testing"

	"duskline/linelist"
)

// Two Gaussians of one line come out as one row of their total; rows of other
// lines stay.
func TestFold(t *testing.T) {
	nan := math.NaN()
	in := []Result{
		{Name: "Hb", Kind: Absorption, EWRest: 4, EWRestErr: 0.3, EWSum: 5, EWSumErr: 0.3, Flux: -40, FluxErr: 3, WidthKms: 300, UpperLimit: nan, Blend: "Hb"},
		{Name: "Hb_broad", Kind: Absorption, EWRest: 10, EWRestErr: 0.4, EWSum: 9.5, EWSumErr: 0.5, Flux: -100, FluxErr: 4, WidthKms: 1200, UpperLimit: nan},
		{Name: "OIII_5007", Kind: Limit, EWRest: 0.1, EWRestErr: 0.1},
		{Name: "Ha", Kind: Unmeasured, EWRest: nan, Reason: ReasonMasked},
	}
	out := Fold(in)
	if len(out) != 3 || out[1].Name != "OIII_5007" || out[2].Name != "Ha" || out[2].Reason != ReasonMasked {
		t.Fatalf("rows: %+v", out)
	}
	r := out[0]
	if r.Name != "Hb" || r.Kind != Absorption || r.EWRest != 14 || math.Abs(r.EWRestErr-0.5) > 1e-12 || r.Flux != -140 || r.FluxErr != 5 ||
		r.WidthKms != 1200 || r.EWSum != 13.5 || r.SNR != 28 || r.Blend != "Hb" {
		t.Errorf("the sum is %+v", r)
	}
}

// Emission that was taken back in one part does not come back with the sum, unless the
// other part shines.
func TestFoldKeepsDoubt(t *testing.T) {
	nan := math.NaN()
	part := func(name, kind, reason string) Result {
		return Result{Name: name, Kind: kind, Reason: reason, EWRest: -4, EWRestErr: 0.3, EWSum: -4, EWSumErr: 0.3, Flux: 40, FluxErr: 3, SNR: 13, WidthKms: 300, UpperLimit: nan}
	}
	for _, tc := range []struct{ first, kind, reason string }{{Limit, Limit, ReasonCrowded}, {Emission, Emission, ""}} {
		first := part("Hb", tc.first, tc.reason)
		got := Fold([]Result{first, part("Hb_broad", Limit, ReasonCrowded)})
		if len(got) != 1 || got[0].Kind != tc.kind || got[0].Reason != tc.reason || tc.kind == Limit && !(got[0].UpperLimit > 8) {
			t.Errorf("%s with a doubted part: %+v", tc.first, got)
		}
	}
}

// A line that is not expected takes nothing from its neighbor.
func TestExpect(t *testing.T) {
	list, err := linelist.Parse([]byte(twoLines))
	if err != nil {
		t.Fatal(err)
	}
	arm := Arm{}
	for i := range 400 {
		w := 5000 + float64(i)
		u := (w - 5200) / 12
		arm.Wave, arm.Flux = append(arm.Wave, w), append(arm.Flux, 1-0.5*math.Exp(-0.5*u*u))
		arm.Ivar, arm.Cont = append(arm.Ivar, 1e4), append(arm.Cont, 1)
	}
	only := func(l *linelist.Line) bool { return l.Name == "star" }
	got := NewMeter(list).Measure(nil, []Arm{arm}, Options{Expect: only}, nil)
	if len(got) != 2 || got[1].Name != "cloud" || got[1].Kind != Unmeasured || got[1].Reason != ReasonUnexpected {
		t.Fatalf("rows: %+v", got)
	}
	// W = sqrt(2 pi) sigma depth of a Gaussian; the straight continuum of the
	// window may take a hundredth.
	if want := math.Sqrt(2*math.Pi) * 12 * 0.5; math.Abs(got[0].EWRest/want-1) > 0.01 {
		t.Errorf("equivalent width %.3f, want %.3f", got[0].EWRest, want)
	}
	// Fitted together, the cloud can only be of the sign that clouds have.
	for _, r := range NewMeter(list).Measure(nil, []Arm{arm}, Options{}, nil) {
		if r.Name == "cloud" && r.Kind == Absorption {
			t.Errorf("a line that never absorbs: %+v", r)
		}
	}
}

const twoLines = `
[[line]]
name = "star"
ion = "Fe I"
wave = 5200.0
seen = "both"
source = "for the test"
[[line]]
name = "cloud"
ion = "[Fe II]"
wave = 5215.0
seen = "emission"
source = "for the test"
`
