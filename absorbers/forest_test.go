package absorbers

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// What is made up behind forests whose lines come singly, in groups of 2.5 on
// average, and of 4: many sub-damped systems where lines crowd, next to none damped.
// DUSKLINE_LONG=1 takes 500 quasars instead of 60, of S/N 2 to 20 a pixel.
func TestForestGroups(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	n := 60
	if os.Getenv("DUSKLINE_LONG") == "1" {
		n = 500
	}
	f := fullFinder(t)
	var sc Scratch
	for _, group := range []float64{1, forestGroup, 4} {
		r := rand.New(rand.NewPCG(63, uint64(10*group)))
		all, damped := 0, 0
		for range n {
			q := makeQuasarBehind(r, group, 2.4+1.2*r.Float64(), 2*math.Pow(10, r.Float64()))
			for _, s := range hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)) {
				if s.Flags&BreakOnly != 0 {
					continue
				}
				all++
				if s.LogN > 20.3 {
					damped++
				}
			}
		}
		t.Logf("groups of %.1f: %d made up in %d quasars, %d above log N = 20.3", group, all, n, damped)
		if damped > 1+n/100 {
			t.Errorf("groups of %.1f: %d damped systems made up in %d quasars", group, damped, n)
		}
	}
}
