package spectrum

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// Arms that overlap are joined by their inverse variances.
func TestGridJoinsArms(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		// On one grid, offset by whole pixels, so that rebinning is the identity.
		start := rapid.Float64Range(3.4, 3.8).Draw(t, "start")
		off := rapid.IntRange(1, 99).Draw(t, "offset")
		const n = 100
		var segs [2]Segment
		for k := range segs {
			at := counting(n)
			for i := range at {
				at[i] += float64(k * off)
			}
			segs[k] = Segment{Wave: logWaves(start, testStep, at), Flux: make([]float64, n), Ivar: make([]float64, n)}
			for i := range n {
				segs[k].Flux[i] = rapid.Float64Range(-5, 5).Draw(t, "flux")
				segs[k].Ivar[i] = rapid.Float64Range(0.1, 5).Draw(t, "ivar")
			}
		}
		g := gridOf(newGridder(), segs[0], segs[1])
		if g.Len() != n+off {
			t.Fatalf("%d pixels, want %d", g.Len(), n+off)
		}
		for q := range g.Flux {
			var w, wf float64
			for k := range segs {
				if i := q - k*off; i >= 0 && i < n {
					w += segs[k].Ivar[i]
					wf += segs[k].Ivar[i] * segs[k].Flux[i]
				}
			}
			// Edges half-way in wavelength are 3e-5 of a pixel off the middle
			// in log wavelength, which mixes in that much of each neighbor:
			// with variances up to 50 times larger, 3e-3 of the variance, and
			// that of fluxes up to 10 apart.
			if math.Abs(g.Ivar[q]/w-1) > 5e-3 || math.Abs(g.Flux[q]-wf/w) > 0.02 {
				t.Fatalf("pixel %d: %g weighing %g, want %g weighing %g", q, g.Flux[q], g.Ivar[q], wf/w, w)
			}
		}
	})
}

// arms returns two arms of a flat spectrum that share the given number of
// pixels, the second ratio times too bright.
func arms(shared int, ratio, noise float64) *Spectrum {
	const n = 200
	s := &Spectrum{}
	for k := range 2 {
		at := counting(n)
		for i := range at {
			at[i] += float64(k * (n - shared))
		}
		level := 10.0
		if k == 1 {
			level *= ratio
		}
		s.Segments = append(s.Segments, Segment{Wave: logWaves(3.7, testStep, at), Flux: filled(n, level), Ivar: filled(n, 1/(noise*noise))})
	}
	return s
}

func TestRescaleArms(t *testing.T) {
	s := arms(50, 1.3, 1)
	flux, ivar := s.Segments[1].Flux, s.Segments[1].Ivar
	s.RescaleArms(10)
	b := &s.Segments[1]
	for i := range b.Flux {
		if math.Abs(b.Flux[i]-10) > 1e-9 || math.Abs(b.Ivar[i]-1.69) > 1e-9 {
			t.Fatalf("pixel %d: flux %g, weight %g, want 10 and 1.69", i, b.Flux[i], b.Ivar[i])
		}
	}
	if flux[0] != 13 || ivar[0] != 1 {
		t.Error("the slices of the caller were changed")
	}
	if !s.Has(ArmsRescaled) {
		t.Error("no warning")
	}
	s.RescaleArms(10)
	if s.Segments[1].Flux[0] != b.Flux[0] {
		t.Error("a second call changed the fluxes again")
	}
}

func TestRescaleArmsLeavesAlone(t *testing.T) {
	negative := arms(50, 1.3, 1)
	negative.Segments[0].Flux = filled(200, -10)
	masked := arms(50, 1.3, 1)
	clear(masked.Segments[1].Ivar)
	empty := arms(50, 1.3, 1)
	empty.Segments[0] = Segment{}
	for name, s := range map[string]*Spectrum{
		"within two percent": arms(50, 1.019, 0.01), "within three sigma": arms(50, 1.03, 1.0), "too few shared pixels": arms(9, 1.3, 1),
		"no overlap": arms(0, 1.3, 1), "too faint to tell": arms(50, 1.3, 20), "beyond a factor of five": arms(50, 5.5, 1),
		"negative": negative, "no weight": masked, "empty arm": empty,
	} {
		before := append([]float64(nil), s.Segments[1].Flux...)
		s.RescaleArms(10)
		if s.Has(ArmsRescaled) {
			t.Errorf("%s: rescaled", name)
		}
		for i, f := range s.Segments[1].Flux {
			if f != before[i] {
				t.Errorf("%s: pixel %d changed from %g to %g", name, i, before[i], f)
				break
			}
		}
	}
}
