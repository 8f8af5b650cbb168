package main

import (
	"image/png"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"duskline/pipeline"
)

// Every built-in family can be drawn: each component comes to the height of the
// example, its lines are named where they are, and the ink is on the paper.
func TestSheets(t *testing.T) {
	all, err := pipeline.Templates(nil)
	if err != nil {
		t.Fatal(err)
	}
	for i := range all {
		f := &all[i]
		z := middle(f.ZMin, f.ZMax)
		s := newSheet(f, z)
		if len(s.rows) != len(f.View(f.Widths[0])) {
			t.Errorf("%s: %d rows", f.Name, len(s.rows))
		}
		for _, r := range s.rows {
			low, high := slices.Min(r.values), slices.Max(r.values)
			want := exampleEmits
			if r.absorption {
				want = exampleDepth
			}
			if r.title == "forest, absorption" {
				if low > -0.01 || low < -1 {
					t.Errorf("%s: the forest at z = %g is %.3f deep", f.Name, z, low)
				}
				continue
			}
			if got := math.Max(high, -low); math.Abs(got-want) > 1e-9 {
				t.Errorf("%s, %s: %.3f at its strongest, want %.3f", f.Name, r.title, got, want)
			}
			for _, m := range r.names {
				if m.wave < s.wave[0] || m.wave > s.wave[len(s.wave)-1] {
					t.Errorf("%s, %s: %s at %.0f is off the sheet", f.Name, r.title, m.text, m.wave)
				}
			}
		}
	}
	path := filepath.Join(t.TempDir(), "cool.png")
	k := slices.IndexFunc(all, func(f pipeline.Template) bool { return f.Name == "quasar" })
	if err := saveTemplate(path, &all[k], 3); err != nil {
		t.Fatal(err)
	}
	file, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	img, err := png.Decode(file)
	if err != nil {
		t.Fatal(err)
	}
	inks := inksOf(img)
	// The sum, emission and absorption; slopes and ends of a curve are of lighter
	// ink, so that a tenth of the width is asked for.
	for _, ink := range [][3]uint32{{25, 25, 25}, {16, 92, 166}, {120, 40, 120}} {
		if inks[ink] < img.Bounds().Dx()/10 {
			t.Errorf("%d pixels of color %v", inks[ink], ink)
		}
	}
}

func TestMiddle(t *testing.T) {
	for _, c := range []struct{ first, last, want float64 }{
		{-0.005, 0.005, 0}, {0.05, 7, 3.5}, {2.1, 6.6, 4.3}, {0.0008, 1.75, 0.8}, {0.31, 0.33, 0.32},
	} {
		if got := middle(c.first, c.last); math.Abs(got-c.want) > 1e-9 {
			t.Errorf("the middle of %g to %g is %g, want %g", c.first, c.last, got, c.want)
		}
	}
}
