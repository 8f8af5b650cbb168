package synth

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"duskline/hydrogen"
	"duskline/spectrum"
)

func flatCanvas(z float64) *canvas {
	c := &canvas{wave: linearGrid(3500, 10000, 0.1), z: z, blur: instrumentBlur}
	c.flux = make([]float64, len(c.wave))
	c.fill(func(float64) float64 { return 1 })
	return c
}

// integral of f over the canvas by the trapezoid rule.
func (c *canvas) integral(f func(flux float64) float64) float64 {
	sum := 0.0
	for i := 1; i < len(c.wave); i++ {
		sum += (f(c.flux[i]) + f(c.flux[i-1])) / 2 * (c.wave[i] - c.wave[i-1])
	}
	return sum
}

// Lines have the flux and the equivalent width that they were asked for: the
// definitions, with 1e-5 left for the cut at five sigma (6e-7) and the sum.
func TestLineStrengths(t *testing.T) {
	const z = 0.3
	c := flatCanvas(z)
	c.emit(5008.24, 0, 60, 40)
	if got := c.integral(func(f float64) float64 { return f - 1 }); math.Abs(got/40-1) > 1e-5 {
		t.Errorf("emitted flux %.6f, want 40", got)
	}
	c = flatCanvas(z)
	c.absorb(5185.05, 0, 150, 1.3)
	if got := c.integral(func(f float64) float64 { return 1 - f }) / (1 + z); math.Abs(got/1.3-1) > 1e-5 {
		t.Errorf("equivalent width %.6f, want 1.3", got)
	}
	c.absorb(5185.05, 0, 10, 1000)
	if low := slices.Min(c.flux); low < 0 {
		t.Errorf("an absorption line goes down to %g", low)
	}
}

// peak returns the wavelength of the brightest pixel between lo and hi, refined
// by a parabola through its neighbors.
func peak(wave, flux []float64, lo, hi float64) float64 {
	best := -1
	for i := 1; i+1 < len(wave); i++ {
		if wave[i] > lo && wave[i] < hi && (best < 0 || flux[i] > flux[best]) {
			best = i
		}
	}
	a, b, c := flux[best-1], flux[best], flux[best+1]
	return wave[best] + (wave[best+1]-wave[best])*0.5*(a-c)/(a-2*b+c)
}

// The lines of an emission-line galaxy stand where its truth says: wavelengths
// from NIST, from memory, and of package hydrogen. 35 km/s is a quarter of a
// pixel at S/N 30 and the pull of [N II] on H alpha.
func TestLinesAtRedshift(t *testing.T) {
	const z = 0.12
	r := rand.New(rand.NewPCG(2, 2))
	s := paintScene(z, func(c *canvas) {
		c.fill(func(w float64) float64 { return 1 })
		nebula{hBeta: 60, oiii: 2, oii: 3, nii: 0.2, sii: 0.3, sigma: 70}.paint(c)
	})
	arms := logArm()
	data, _ := observe(r, arms, s, 0, 30)
	alpha, err := hydrogen.NewTransition(2, 3)
	if err != nil {
		t.Fatal(err)
	}
	for _, rest := range []float64{alpha.Wave, 5008.24} {
		want := rest * (1 + z)
		got := peak(arms[0].detector, data[0].flux, want-15, want+15)
		if dv := spectrum.SpeedOfLight * (got/want - 1); math.Abs(dv) > 35 {
			t.Errorf("line at %.2f is %.1f km/s off", rest, dv)
		}
	}
}

// A topocentric arm sees a line of known barycentric wavelength moved by the
// velocity of the observer: 1+z_bary = (1+z_obs)(1+v/c). Source without noise to
// speak of; 2 km/s is what the parabola through 1.2 Angstrom pixels leaves.
func TestTopocentricShift(t *testing.T) {
	for _, v := range []float64{-29, 0, 29} {
		s := paintScene(0, func(c *canvas) {
			c.fill(func(float64) float64 { return 0.01 })
			c.emit(5000, 0, 120, 100)
		})
		arms := linearArm()
		signal := make([]float64, len(arms[0].wave))
		for i, w := range arms[0].detector {
			signal[i] = s.at(w * (1 + v/spectrum.SpeedOfLight))
		}
		got := peak(arms[0].wave, signal, 4990, 5010)
		if dv := spectrum.SpeedOfLight * (5000/got - 1); math.Abs(dv-v) > 2 {
			t.Errorf("observer at %g km/s: line moved by %.2f", v, dv)
		}
		data, _ := observe(rand.New(rand.NewPCG(1, 1)), arms, s, v, 500)
		got = peak(arms[0].wave, data[0].flux, 4995, 5005)
		if dv := spectrum.SpeedOfLight * (5000/got - 1); math.Abs(dv-v) > 6 {
			t.Errorf("observer at %g km/s: recorded line moved by %.2f", v, dv)
		}
	}
}

// Balmer ratios of the gas are Case B dimmed by dust; without dust they are Case
// B itself.
func TestNebulaRatios(t *testing.T) {
	flux := func(dust float64, wave float64) float64 {
		c := &canvas{wave: linearGrid(3600, 7000, 0.2), blur: instrumentBlur}
		c.flux = make([]float64, len(c.wave))
		nebula{hBeta: 1, dust: dust, sigma: 50}.paint(c)
		first, end := c.window(wave-8, wave+8)
		sum := 0.0
		for i := first; i < end; i++ {
			sum += c.flux[i] * 0.2
		}
		return sum
	}
	alpha, beta := series(2, 3, 3)[0], series(2, 4, 4)[0]
	// Osterbrock & Ferland 2006, table 4.4: 2.863; 1e-3 for the cut of the sum.
	if got := flux(0, alpha) / flux(0, beta); math.Abs(got-2.863) > 3e-3 {
		t.Errorf("H alpha / H beta without dust %.4f, want 2.863", got)
	}
	// A color excess of 0.3 reddens: Balmer decrements of dusty galaxies are 3.5 to 4.5
	// (common practice, no source).
	if got := flux(0.3, alpha) / flux(0.3, beta); got < 3.5 || got > 4.5 {
		t.Errorf("H alpha / H beta with dust %.4f", got)
	}
}

// The stated errors are those of the noise: of blank sky, three quarters of the
// good pixels lie within 1.1503 sigma (normal distribution). 0.08 allows for
// sky residuals and unflagged cosmic rays, which make it larger.
func TestErrorsAreHonest(t *testing.T) {
	arms := logArm()
	var ratios []float64
	for i := range 8 {
		data, _ := observe(rand.New(rand.NewPCG(9, uint64(i))), arms, nil, 0, 0)
		dead := 0
		for k, v := range data[0].ivar {
			if v > 0 {
				ratios = append(ratios, math.Abs(data[0].flux[k])*math.Sqrt(v))
			} else {
				dead++
			}
		}
		if dead == 0 || dead > len(arms[0].wave)/20 {
			t.Errorf("%d dead pixels of %d", dead, len(arms[0].wave))
		}
	}
	slices.Sort(ratios)
	if got := ratios[len(ratios)*3/4]; math.Abs(got-1.1503) > 0.08 {
		t.Errorf("three quarters of the pixels within %.3f sigma, want 1.1503", got)
	}
	if top := ratios[len(ratios)-1]; top < 10 {
		t.Errorf("no cosmic ray: largest pixel at %.1f sigma", top)
	}
}

// Every kind of object paints finite, mostly positive light over the range.
func TestKindsPaint(t *testing.T) {
	for _, k := range kinds {
		if k.draw == nil {
			continue
		}
		for i := range 6 {
			z, paint, dla := k.draw(rand.New(rand.NewPCG(11, uint64(i))))
			s := paintScene(z, paint)
			positive := 0
			for j, f := range s.flux {
				if math.IsNaN(f) || math.IsInf(f, 0) || f < 0 {
					t.Fatalf("%s: flux %g at pixel %d", k.name, f, j)
				}
				if f > 0 {
					positive++
				}
			}
			if positive < sceneLen/3 {
				t.Errorf("%s at z = %.2f: light in %d of %d pixels", k.name, z, positive, sceneLen)
			}
			if dla != nil && !(dla.z < z && dla.logNHI >= 20.3 && s.at(1215.67*(1+dla.z)) == 0) {
				t.Errorf("damped absorber at %.3f of a quasar at %.3f leaves %g at its center", dla.z, z, s.at(1215.67*(1+dla.z)))
			}
		}
	}
}

// On average the forest lets through about what package hydrogen says; the
// lognormal scatter lets through more (Jensen's inequality), by less than 0.1 here.
func TestForestMean(t *testing.T) {
	const z = 3.2
	var got, want float64
	n := 0
	for i := range 20 {
		f := newForest(rand.New(rand.NewPCG(5, uint64(i))))
		c := &canvas{wave: logGrid(1090*(1+z), 1e-4, 300), z: z}
		c.flux = make([]float64, len(c.wave))
		c.fill(func(float64) float64 { return 1 })
		f.dim(c)
		for k, w := range c.wave {
			got += c.flux[k]
			want += hydrogen.Transmission(z, w)
			n++
		}
	}
	if d := (got - want) / float64(n); d < 0 || d > 0.1 {
		t.Errorf("mean transmission %.3f, of package hydrogen %.3f", got/float64(n), want/float64(n))
	}
}
