package pipeline

import (
	"math"
	"testing"

	"duskline/catalog"
)

// Lines are written as astronomers do, second components too.
func TestMarks(t *testing.T) {
	out := &Outcome{Object: catalog.Object{Redshift: 0.5}}
	want := map[string]string{"Ha": "Hα", "Ha_broad": "Hα broad", "OIII_5007": "[O III] 5007", "OIII_5007_broad": "[O III] 5007 broad",
		"CaII_K": "Ca II K", "Gband": "G band", "Lya": "Lyα", "H8": "H8", "Pab": "Paβ"}
	var names []string
	for name := range want {
		names = append(names, name)
		out.Lines = append(out.Lines, catalog.Line{Line: name, Kind: "emission", RestWave: 5000})
	}
	out.Lines = append(out.Lines, catalog.Line{Line: "Hb", Kind: "none", RestWave: 4862})
	marks := Marks(out)
	if len(marks) != len(want) {
		t.Fatalf("%d marks, want %d", len(marks), len(want))
	}
	for i, m := range marks {
		if m.Label != want[names[i]] || m.Wave != 7500 || !m.Emission {
			t.Errorf("%s: %+v, want it called %q", names[i], m, want[names[i]])
		}
	}
	out.Object.Redshift = math.NaN()
	if marks := Marks(out); marks != nil {
		t.Errorf("%d marks without a redshift", len(marks))
	}
}
