package pipeline

import (
	"math"
	"testing"

	"duskline/catalog"
	"duskline/redshift"
	"duskline/spectrum"
)

// A line beside a gap has a continuum as long as data hold it on both sides within two knots:
// the mask on a line that ends a wide gap makes it a guess, one that ends a narrow gap
// does not. At the ends of the data only the inner side is asked.
func TestContinuumNeedsDataOnBothSides(t *testing.T) {
	set := DefaultSettings()
	for _, c := range []struct {
		what     string
		from, to float64 // the gap, Angstrom
		line     float64
		want     bool
	}{
		{"no gap", 0, 0, 6000, true},
		{"a gap of half a knot", 5700, 5800, 5850, true},
		{"a gap of three knots, the line at its end", 5000, 5940, 6000, false},
		{"the same, on the other side", 6060, 7200, 6000, false},
		{"a gap of three knots, the line 300 Angstrom on", 4700, 5600, 6000, true},
		{"the end of the data just beyond the line", 6065, 9000, 6000, true},
		{"the end of the data within the line", 6040, 9000, 6000, false},
	} {
		g := fluxGrid(4000, 3010, 50, func(w float64) float64 { return 2 + 0.1*math.Sin(w/700) })
		for i := range g.Ivar {
			if w := math.Pow(10, g.LogWave(i)); w > c.from && w < c.to {
				g.Ivar[i] = 0
			}
		}
		x := make([]float64, g.Len())
		for i := range x {
			x[i] = g.LogWave(i)
		}
		res := redshift.Result{Class: catalog.Galaxy, Lines: []redshift.LineEvidence{{Name: "Hb", Wave: c.line, Breadth: 1200, Model: 5}}}
		var l level
		if !l.fit(g, x, &res, &set) {
			t.Fatalf("%s: no continuum", c.what)
		}
		if at := math.Log10(c.line); l.covers(at, g.Step) != c.want {
			t.Errorf("%s: held is %v", c.what, !c.want)
		} else if v := l.Value(at); c.want && math.Abs(v-2-0.1*math.Sin(c.line/700)) > 5*l.Sigma(at)+0.02 {
			t.Errorf("%s: continuum %.3f +- %.3f, want %.3f", c.what, v, l.Sigma(at), 2+0.1*math.Sin(c.line/700))
		}
	}
}

// A quasar's continuum passes below O I, C II and Si IV, whose masks join to a gap of two knots, with the
// forest, and what the masks leave of the wing of N V and Si II 1263, on its blue side. A free spline stood
// 22 % above it at 1304 Angstrom.
func TestContinuumBelowSiIV(t *testing.T) {
	set := DefaultSettings()
	const z = 2.2
	law := func(w float64) float64 { return math.Pow(w/4500, -1.4) }
	g := fluxGrid(3600, 4000, 20, func(w float64) float64 {
		f := law(w)
		for _, line := range []struct{ wave, ew float64 }{{1216, 60}, {1240, 25}, {1263, 12}, {1304, 2}, {1335, 1}, {1397, 8}, {1549, 30}} {
			sigma := line.wave * 2400 / spectrum.SpeedOfLight
			u := (w/(1+z) - line.wave) / sigma
			f += law(w) * line.ew / (math.Sqrt(2*math.Pi) * sigma) * math.Exp(-u*u/2)
		}
		if w < 1216*(1+z) {
			f *= 0.8
		}
		return f
	})
	x := make([]float64, g.Len())
	for i := range x {
		x[i] = g.LogWave(i)
	}
	res := redshift.Result{Class: catalog.Quasar, Redshift: z}
	for _, w := range []float64{1216, 1239, 1243, 1304, 1335, 1394, 1403, 1549} {
		res.Lines = append(res.Lines, redshift.LineEvidence{Name: "a line", Wave: w * (1 + z), Breadth: 2400, Model: 5})
	}
	var l level
	if !l.fit(g, x, &res, &set) {
		t.Fatal("no continuum")
	}
	// Wings in the windows lift it: Si II by 7 % at 1283 Angstrom, Si IV by 2 % at 1357.
	for _, rest := range []float64{1304, 1335, 1397, 1549} {
		w := rest * (1 + z)
		if r := l.Value(math.Log10(w)) / law(w); math.Abs(r-1) > 0.07 {
			t.Errorf("at %.0f Angstrom %.3f of the continuum", rest, r)
		}
	}
}
