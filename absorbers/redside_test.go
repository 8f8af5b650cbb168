package absorbers

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// Broad emission lines of the made-up quasars redward of Lyman alpha: rest
// wavelength, equivalent width in Angstrom, share of a narrow core; invented, of
// the usual order.
var redLines = [][3]float64{
	{1215.67, 70, 0.2}, {1240.8, 15, 0}, {1263, 3, 0}, {1304, 3, 0.2}, {1335, 1, 0}, {1398, 8, 0}, {1549.5, 30, 0.3}, {1640, 6, 0.1}, {1663, 3, 0.1},
	{1858, 3, 0}, {1892, 4, 0}, {1908.7, 18, 0.2}, {2326, 2, 0}, {2799.1, 32, 0.3},
}

// redSide paints a quasar at z from its Lyman alpha to 9800 Angstrom in survey
// pixels, with lines of narrow cores, wide wings and skew, without absorption, and
// noise of sn a pixel at rest 1350 Angstrom.
func redSide(r *rand.Rand, z, sn float64) (a Arm) {
	slope := -1.4 + 0.4*r.NormFloat64()
	type part struct{ wave, peak, sigma, skew float64 }
	var parts []part
	width := 2000 * math.Exp(0.3*r.NormFloat64()) // sigma, km/s
	for _, l := range redLines {
		ew, shift := l[1]*math.Exp(0.4*r.NormFloat64()), 400*r.NormFloat64()
		for _, p := range [][2]float64{{l[2], 0.3}, {0.6 * (1 - l[2]), 1}, {0.4 * (1 - l[2]), 2.2}} {
			s := l[0] * width * p[1] / c
			parts = append(parts, part{l[0] * (1 + shift/c), p[0] * ew / (math.Sqrt(2*math.Pi) * s) * math.Pow(l[0]/1350, slope), s, 1 + 0.25*r.NormFloat64()})
		}
	}
	for w := max(3650, 1200*(1+z)); w < 9800; w *= 1 + 69.0/c {
		rest := w / (1 + z)
		f := math.Pow(rest/1350, slope)
		for _, p := range parts {
			d := (rest - p.wave) / p.sigma
			if d > 0 {
				d /= min(max(p.skew, 0.6), 1.6)
			}
			if math.Abs(d) < 6 {
				f += p.peak * math.Exp(-0.5*d*d)
			}
		}
		sky := 1 + 3*math.Exp(-math.Pow(math.Mod(w, 173)/4, 2)) // a sky line now and then
		sd := math.Sqrt((0.5*sky + 0.5*f) / (sn * sn))
		a.Wave, a.Flux, a.Ivar = append(a.Wave, w), append(a.Flux, f+sd*r.NormFloat64()), append(a.Ivar, 1/(sd*sd))
	}
	a.Resolution = []float64{2000}
	return a
}

// TestDoubletsBeforeQuasars measures what is made up on emission lines of quasars
// without absorbers, and what is found of one Mg II or C IV doublet in front of them,
// by rest equivalent width. DUSKLINE_LONG=1 takes 1,000 quasars a step of S/N (a pixel
// at rest 1350 Angstrom) instead of 100.
func TestDoubletsBeforeQuasars(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	n := 100
	if os.Getenv("DUSKLINE_LONG") == "1" {
		n = 1000
	}
	f := fullFinder(t)
	var sc Scratch
	t.Log("S/N | made up a quasar | found of W 0-0.3 | 0.3-0.6 | 0.6-0.9 | above | W - true and pulls for W > 0.3")
	for _, sn := range []float64{3, 6, 12, 25, 50, 100} {
		r := rand.New(rand.NewPCG(77, uint64(sn)))
		made := 0.0
		var found, all [4]float64
		var widths tally
		for range n {
			z := 0.6 + 2.6*r.Float64()
			a := redSide(r, z, sn)
			made += float64(len(f.Find(nil, []Arm{a}, Options{Z: z}, &sc)))
			d := f.doublets[r.IntN(2)]
			zMin := max(a.Wave[0]*1.03, 1240*(1+z))/d.strong.Wave - 1
			zMax := min(a.Wave[len(a.Wave)-1]*0.97/d.strong.Wave-1, z)
			if zMax < zMin {
				continue
			}
			zAbs := zMin + (zMax-zMin)*r.Float64()
			logN, b := 12.9+1.6*r.Float64(), 15+60*r.Float64()
			if d.kind == CIV {
				logN += 0.5
			}
			w := paintDoublet(&a, d, zAbs, logN, b)
			bin := min(int(w/0.3), 3)
			all[bin]++
			for _, s := range f.Find(nil, []Arm{a}, Options{Z: z}, &sc) {
				if s.Kind == d.kind && math.Abs(s.Z-zAbs)*c/(1+zAbs) < 150 {
					found[bin]++
					if w > 0.3 {
						widths.add(s.EW-w, s.EWErr)
					}
					break
				}
			}
		}
		t.Logf("%3.0f | %.3f | %.0f of %.0f | %.0f of %.0f | %.0f of %.0f | %.0f of %.0f | %.3f, %.2f +- %.2f", sn, made/float64(n), found[0], all[0], found[1], all[1],
			found[2], all[2], found[3], all[3], widths.sum/widths.found, widths.pull/widths.found, widths.pullSD())
		// What is reached, with three standard errors of 100 quasars of room.
		if made > 0.10*float64(n) {
			t.Errorf("S/N %g: %.0f doublets made up in %d quasars", sn, made, n)
		}
		if strong := found[3] / all[3]; sn >= 25 && strong < 0.9 || sn == 12 && strong < 0.6 {
			t.Errorf("S/N %g: %.0f of %.0f doublets of W > 0.9 found", sn, found[3], all[3])
		}
		if sn >= 25 && math.Abs(widths.sum/widths.found) > 0.08 {
			t.Errorf("S/N %g: W off by %.3f", sn, widths.sum/widths.found)
		}
	}
}

// paintDoublet multiplies a doublet of column 10^logN and Doppler parameter b into
// the flux, noise dimmed not at all, and returns the rest equivalent width of
// the stronger line.
func paintDoublet(a *Arm, d doublet, z, logN, b float64) float64 {
	ew := 0.0
	sigma := c / 2000 / fwhmPerSigma
	const fine = 5.0
	for k, line := range []struct{ wave, f float64 }{{d.strong.Wave, d.strong.F}, {d.weak.Wave, d.weak.F}} {
		tau0 := 1.497e-15 * math.Pow(10, logN) * line.f * line.wave / b // tau = 1.497e-15 N f lambda[A] / b[km/s]
		var depth []float64
		const half = 160
		for i := -half; i <= half; i++ {
			v := float64(i) * fine
			depth = append(depth, -math.Expm1(-tau0*math.Exp(-v*v/(b*b))))
			if k == 0 {
				ew += depth[len(depth)-1] * fine * line.wave / c
			}
		}
		blur(depth, nil, sigma/fine)
		for i, w := range a.Wave {
			v := c * math.Log(w/line.wave/(1+z))
			if math.Abs(v) > half*fine-40 {
				continue
			}
			// Mean over the pixel.
			sum, m := 0.0, 0.0
			for j := int(math.Ceil((v-34.5)/fine)) + half; j <= int(math.Floor((v+34.5)/fine))+half; j++ {
				if j >= 0 && j < len(depth) {
					sum += depth[j]
					m++
				}
			}
			a.Flux[i] *= 1 - sum/m
		}
	}
	return ew
}
