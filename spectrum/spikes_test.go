package spectrum

import (
	"math"
	"testing"

	"pgregory.net/rapid"
)

// spiked returns a segment of n pixels of a level, a slope and a weight.
func spiked(n int, level, slope, ivar float64) Segment {
	seg := Segment{Wave: logWaves(3.7, testStep, counting(n)), Flux: make([]float64, n), Ivar: filled(n, ivar)}
	for i := range seg.Flux {
		seg.Flux[i] = level + slope*float64(i)
	}
	return seg
}

// A single pixel that stands out by more than the limit goes, and nothing
// else; the slices of the caller stay.
func TestMaskSpikesTakesOnePixel(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const n = 40
		ivar := rapid.Float64Range(1e-3, 1e3).Draw(t, "ivar")
		sigma := 1 / math.Sqrt(ivar)
		seg := spiked(n, rapid.Float64Range(-10, 10).Draw(t, "level")*sigma, rapid.Float64Range(-1, 1).Draw(t, "slope")*sigma, ivar)
		at := rapid.IntRange(2, n-3).Draw(t, "at")
		seg.Flux[at] += rapid.Float64Range(9.1, 1e6).Draw(t, "height") * sigma
		weights := seg.Ivar
		s := &Spectrum{Segments: []Segment{seg}}
		if taken := s.MaskSpikes(8); taken != 1 {
			t.Fatalf("%d pixels taken, want 1", taken)
		}
		for i, w := range s.Segments[0].Ivar {
			if (w == 0) != (i == at) {
				t.Fatalf("pixel %d weighs %g with the spike at %d", i, w, at)
			}
			if weights[i] != ivar {
				t.Fatalf("the weights of the caller were changed at %d", i)
			}
		}
		if s.MaskSpikes(8) != 0 {
			t.Fatal("a second call took more")
		}
	})
}

// A line of FWHM two pixels or more stays at any height and phase, in emission
// and in absorption, whether pixels sample the profile or average over it.
func TestMaskSpikesKeepsLines(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		const n = 61
		seg := spiked(n, 5, rapid.Float64Range(-0.1, 0.1).Draw(t, "slope"), 1)
		sigma := rapid.Float64Range(2, 12).Draw(t, "fwhm") / (2 * math.Sqrt(2*math.Ln2))
		center := rapid.Float64Range(25, 35).Draw(t, "center")
		height := math.Pow(10, rapid.Float64Range(0, 8).Draw(t, "log height"))
		if rapid.Bool().Draw(t, "absorption") {
			height = -height
		}
		average := rapid.Bool().Draw(t, "average")
		for i := range seg.Flux {
			u := (float64(i) - center) / sigma
			v := math.Exp(-0.5 * u * u)
			if average {
				h := 0.5 / sigma
				v = sigma * math.Sqrt(math.Pi/2) * (math.Erf((u+h)/math.Sqrt2) - math.Erf((u-h)/math.Sqrt2))
			}
			seg.Flux[i] += height * v
		}
		s := &Spectrum{Segments: []Segment{seg}}
		if taken := s.MaskSpikes(8); taken != 0 {
			t.Fatalf("%d pixels of a line of FWHM %.2f were taken", taken, sigma*2*math.Sqrt(2*math.Ln2))
		}
	})
}

func TestMaskSpikesLeavesAlone(t *testing.T) {
	for _, c := range []struct {
		name   string
		change func(seg *Segment)
	}{
		{"a negative spike", func(seg *Segment) { seg.Flux[10] -= 1000 }},
		{"a spike below the limit", func(seg *Segment) { seg.Flux[10] += 7.9 }},
		{"three pixels", func(seg *Segment) { seg.Flux[9] += 900; seg.Flux[10] += 1000; seg.Flux[11] += 900 }},
		{"a rise of both neighbors by more than a quarter", func(seg *Segment) { seg.Flux[10] += 100; seg.Flux[9] += 30; seg.Flux[11] += 30 }},
		{"two pixels whose neighbor rises", func(seg *Segment) { seg.Flux[10] += 100; seg.Flux[11] += 90; seg.Flux[12] += 20 }},
		{"a step", func(seg *Segment) {
			for i := 10; i < len(seg.Flux); i++ {
				seg.Flux[i] += 1000
			}
		}},
		{"a spike beside a pixel without weight", func(seg *Segment) { seg.Flux[10] += 1000; seg.Ivar[9] = 0 }},
		{"a spike two from a pixel without weight", func(seg *Segment) { seg.Flux[10] += 1000; seg.Ivar[12] = 0 }},
		{"a spike without weight", func(seg *Segment) { seg.Flux[10] = math.NaN(); seg.Ivar[10] = 0 }},
		{"a spike at the end", func(seg *Segment) { seg.Flux[1] += 1000; seg.Flux[len(seg.Flux)-1] += 1000 }},
	} {
		seg := spiked(30, 1, 0, 1)
		c.change(&seg)
		before := append([]float64(nil), seg.Ivar...)
		s := &Spectrum{Segments: []Segment{seg, {}, spiked(4, 1, 0, 1)}}
		if taken := s.MaskSpikes(8); taken != 0 {
			t.Errorf("%s: %d pixels taken", c.name, taken)
		}
		for i, w := range s.Segments[0].Ivar {
			if w != before[i] {
				t.Errorf("%s: weight of pixel %d changed", c.name, i)
			}
		}
	}
}

func TestMaskSpikesTakesTwoPixels(t *testing.T) {
	for _, second := range []float64{1000, 900, 200, 21} {
		seg := spiked(30, 1, 0, 1)
		seg.Flux[10] += 1000
		seg.Flux[11] += second
		s := &Spectrum{Segments: []Segment{seg}}
		if taken := s.MaskSpikes(8); taken == 0 || s.Segments[0].Ivar[10] != 0 {
			t.Errorf("a hit of 1000 and %g: %d pixels taken", second, taken)
		}
		for i, w := range s.Segments[0].Ivar {
			if i != 10 && i != 11 && w == 0 {
				t.Errorf("a hit of 1000 and %g: pixel %d was taken", second, i)
			}
		}
	}
}

// Every arm is judged by its own errors.
func TestMaskSpikesOnSeveralArms(t *testing.T) {
	a, b := spiked(30, 1, 0, 1), spiked(30, 1, 0, 4)
	a.Flux[10] += 100
	a.Flux[11] += 19  // less than a quarter of 81
	b.Flux[12] += 4.5 // nine of its sigmas
	b.Flux[20] += 20
	s := &Spectrum{Segments: []Segment{a, b}}
	if taken := s.MaskSpikes(8); taken != 3 {
		t.Errorf("%d pixels taken, want 3", taken)
	}
}
