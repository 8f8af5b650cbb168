package pipeline

import (
	"testing"

	"duskline/catalog"
	"duskline/redshift"
)

// What the model uses is masked; in quasars also emission that it could have used, but
// no trough that is not there.
func TestMaskerLines(t *testing.T) {
	for _, c := range []struct {
		name, class string
		e           redshift.LineEvidence
		want        bool
	}{
		{"emission that is there", catalog.Galaxy, redshift.LineEvidence{Name: "Ha", Model: 5}, true},
		{"emission that is not", catalog.Galaxy, redshift.LineEvidence{Name: "Ha"}, false},
		{"a quasar's that is not", catalog.Quasar, redshift.LineEvidence{Name: "Ha"}, true},
		{"a quasar's trough", catalog.Quasar, redshift.LineEvidence{Name: "CIV_1548", Model: 5, Absorption: true}, true},
		{"a quasar's trough that is not there", catalog.Quasar, redshift.LineEvidence{Name: "CIV_1548", Absorption: true}, false},
		{"a bump", catalog.Galaxy, redshift.LineEvidence{Model: 5}, false},
	} {
		g := fluxGrid(5000, 1000, 10, func(float64) float64 { return 1 })
		c.e.Wave, c.e.Breadth = 5500, 300
		m := masker{grid: g, ivar: append([]float64(nil), g.Ivar...), widths: 3}
		m.lines(&redshift.Result{Class: c.class, Lines: []redshift.LineEvidence{c.e}})
		hidden := 0
		for _, w := range m.ivar {
			if w == 0 {
				hidden++
			}
		}
		// Three sigma of 300 km/s to either side in pixels of 69 km/s: 26.
		if masked := hidden > 0; masked != c.want || masked && (hidden < 25 || hidden > 27) {
			t.Errorf("%s: %d pixels masked", c.name, hidden)
		}
	}
}
