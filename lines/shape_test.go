package lines

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/hydrogen"
)

// Derivatives against central differences, relative error below 1e-5 of the
// largest: those of the pixel-averaged Gaussian are checked elsewhere.
func TestShapeDerivatives(t *testing.T) {
	for _, profile := range []Profile{Gaussian, Hermite, Voigt, stark} {
		form := func(mu, sigma, a, b float64) shape {
			return shape{gauss: newGauss(mu, sigma, 0.3), profile: profile, a: a, b: b}
		}
		const h = 1e-5
		for x := -6.0; x <= 6; x += 0.37 {
			g := form(0.1, 1.2, 0.12, -0.08)
			_, dmu, ds, da, db := g.full(x)
			diff := func(up, down shape) float64 {
				a, _, _, _, _ := up.full(x)
				b, _, _, _, _ := down.full(x)
				return (a - b) / (2 * h)
			}
			near(t, "dmu", dmu, diff(form(0.1+h, 1.2, 0.12, -0.08), form(0.1-h, 1.2, 0.12, -0.08)), 1e-5)
			near(t, "dsigma", ds, diff(form(0.1, 1.2+h, 0.12, -0.08), form(0.1, 1.2-h, 0.12, -0.08)), 1e-5)
			near(t, "da", da, diff(form(0.1, 1.2, 0.12+h, -0.08), form(0.1, 1.2, 0.12-h, -0.08)), 1e-5)
			near(t, "db", db, diff(form(0.1, 1.2, 0.12, -0.08+h), form(0.1, 1.2, 0.12, -0.08-h)), 1e-5)
		}
	}
}

// Profiles have unit area: by the midpoint rule, which for the Voigt profile
// leaves out the tails beyond 400, 2 gamma/(pi 400), and for wings of the power
// -5/2 twice 2/3 s^(3/2) 400^(-3/2) over the area in units of s.
func TestShapeArea(t *testing.T) {
	for _, g := range []shape{{gauss: newGauss(0, 1, 0.02), profile: Hermite, a: 0.1, b: 0.15}, {gauss: newGauss(0, 1, 0.02), profile: Voigt, a: 0.5},
		{gauss: newGauss(0, 1, 0.02), profile: stark}} {
		sum := 0.0
		for x := -400.0; x < 400; x += 0.02 {
			v, _, _, _, _ := g.full(x + 0.01)
			sum += 0.02 * v
		}
		near(t, "area", sum, 1, 1e-6+map[Profile]float64{Voigt: 2 * 0.5 / (math.Pi * 400) * 1.01,
			stark: 4. / 3 * math.Pow(starkCore, 1.5) * math.Pow(400, -1.5) / starkArea}[g.profile])
	}
	// sigma stands for the full width at half maximum.
	g := shape{gauss: newGauss(0, 1, 1e-6), profile: stark}
	top, _, _, _, _ := g.full(0)
	half, _, _, _, _ := g.full(0.5 * fwhmPerSigma)
	near(t, "half maximum", half/top, 0.5, 1e-6)
}

// A line of hydrogen with the wings of Stark broadening: 300 spectra, standard
// error of the mean 0.06 of the error from noise.
func TestStarkRecovered(t *testing.T) {
	m := parse(t, hBeta)
	wave := m.lines[0].Wave
	clean := newArm(grid(wave, 69, 501), 1, 0.02)
	const sigma, flux = 11.0, -18.0
	for i, w := range clean.Wave {
		u := (w - wave) / (1.3677 * sigma)
		clean.Flux[i] += flux / (1.3677 * sigma * 2.3963) * math.Pow(1+u*u, -1.25)
	}
	rng := rand.New(rand.NewPCG(19, 1))
	var a Arm
	var sc Scratch
	var ew, sum, width, stated moments
	for range 300 {
		noisy(&a, clean, rng)
		r := m.Measure(nil, []Arm{a}, Options{Stark: true, ContinuumSlack: 0.01}, &sc)[0]
		ew.add(r.EWRest)
		sum.add(r.EWSum)
		width.add((r.WidthKms - sigma/wave*c) / r.WidthErr)
		stated.add(math.Sqrt(r.EWRestErr*r.EWRestErr - math.Pow(starkDoubt*r.EWRest, 2)))
	}
	t.Logf("W %.3f +- %.3f, stated %.3f; sum %.3f +- %.3f; width %.2f +- %.2f", ew.mean(), ew.sd(), stated.mean(), sum.mean(), sum.sd(), width.mean(), width.sd())
	near(t, "equivalent width", ew.mean(), -flux, 0.25*stated.mean())
	near(t, "sum", sum.mean(), -flux, 0.25*stated.mean())
	// A standard deviation of 300 has a standard error of 4 %.
	if r := ew.sd() / stated.mean(); r > 1.12 || r < 0.88 {
		t.Errorf("scatter %.3f, stated without the doubt of the form %.3f", ew.sd(), stated.mean())
	}
	checkPull(t, "width", &width, around(0.87, 1.13, 0.25, 0.1))
}

// What is put in comes out, with errors that hold: 500 spectra each, standard
// error of a deviation 3.2 %, of a mean 4.5 %.
func TestShapesRecovered(t *testing.T) {
	m := parse(t, oneLine)
	wave := grid(5000, 25, 601)
	const sigma, flux = 3.0, 40.0
	for _, tc := range []struct {
		profile Profile
		a, b    float64
	}{{Hermite, 0.1, 0.08}, {Hermite, -0.12, 0}, {Voigt, 80, 0}} {
		clean := newArm(wave, 1, 0.05)
		for i, w := range wave {
			u := (w - 5000) / sigma
			switch tc.profile {
			case Hermite:
				g := math.Exp(-0.5*u*u) / (math.Sqrt(2*math.Pi) * sigma)
				h3 := (2*math.Sqrt2*u*u*u - 3*math.Sqrt2*u) / math.Sqrt(6)
				h4 := (4*u*u*u*u - 12*u*u + 3) / math.Sqrt(24)
				clean.Flux[i] += flux * g * (1 + tc.a*h3 + tc.b*h4) / (1 + math.Sqrt(6)/4*tc.b)
			case Voigt:
				k := 1 / (math.Sqrt2 * sigma)
				clean.Flux[i] += flux * hydrogen.VoigtReference(tc.a*5000/c*k, math.Abs(w-5000)*k) / (math.Sqrt(2*math.Pi) * sigma)
			}
		}
		rng := rand.New(rand.NewPCG(17, 1))
		var a Arm
		var sc Scratch
		var ew, first, second moments
		for range 500 {
			noisy(&a, clean, rng)
			r := m.Measure(nil, []Arm{a}, Options{Profile: tc.profile}, &sc)[0]
			ew.add((r.EWRest + flux) / r.EWRestErr)
			first.add((r.Shape[0] - tc.a) / r.ShapeErr[0])
			second.add((r.Shape[1] - tc.b) / r.ShapeErr[1])
		}
		t.Logf("%v: W %.2f +- %.2f, shape %.2f +- %.2f, %.2f +- %.2f", tc, ew.mean(), ew.sd(), first.mean(), first.sd(), second.mean(), second.sd())
		b := around(0.87, 1.13, 0.3, 0.08)
		checkPull(t, "equivalent width", &ew, b)
		checkPull(t, "first shape", &first, b)
		if tc.profile == Hermite {
			checkPull(t, "second shape", &second, b)
		}
	}
}
