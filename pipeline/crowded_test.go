package pipeline_test

import (
	"path/filepath"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/internal/outside"
	"duskline/lines"
	"duskline/pipeline"
)

// Stars and old galaxies have next to no emission, and what stands between their
// absorption lines is none. Of open stars 5 rows in emission were looked at and
// are there (a flare star), 5 more are in the data if not of the star (Lyman-alpha of the
// sky above a satellite, a very red star between its bands); of old galaxies about all, of [O II], [N II] and [S II].
// Held against the noise alone 81 and 56 rows said emission. Allowed are the present numbers and
// twice their roots.
func TestStarsDoNotShine(t *testing.T) {
	if testing.Short() {
		t.Skip("many spectra")
	}
	dir := outside.Spectra(t)
	chain, err := pipeline.NewChain(pipeline.DefaultSettings())
	if err != nil {
		t.Fatal(err)
	}
	worker := chain.NewWorker()
	count, objects := map[string]int{}, map[string]int{}
	for _, p := range readPublished(t, dir) {
		if !strings.HasPrefix(p.class, "STAR") && p.class != "GALAXY" {
			continue
		}
		f, err := fitsread.Open(filepath.Join(dir, p.file), fitsread.Options{})
		if err != nil {
			t.Fatal(err)
		}
		s, err := f.Read(0)
		f.Close()
		if err != nil {
			continue
		}
		out := worker.Process(s)
		kind := out.Object.Class
		if kind == catalog.Galaxy {
			kind = out.Object.Family
		}
		objects[kind]++
		for _, l := range out.Lines {
			if l.Kind == lines.Emission {
				count[kind]++
				if kind == catalog.Star {
					t.Logf("%s: %s %.1f +- %.1f", p.file, l.Line, l.EWRest, l.EWRestErr)
				}
			}
		}
	}
	for kind, most := range map[string]int{catalog.Star: 17, "passive": 24} {
		t.Logf("%s: %d rows in emission of %d objects", kind, count[kind], objects[kind])
		if count[kind] > most || objects[kind] < 15 {
			t.Errorf("%s: %d rows in emission of %d objects, want %d at most", kind, count[kind], objects[kind], most)
		}
	}
}
