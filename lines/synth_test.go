package lines

import (
	"math"
	"math/rand/v2"
	"testing"

	"duskline/linelist"
	"duskline/spectrum"
)

const c = spectrum.SpeedOfLight

// parse returns a meter of a list in TOML.
func parse(t testing.TB, text string) *Meter {
	t.Helper()
	l, err := linelist.Parse([]byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return NewMeter(l)
}

const oneLine = `
[[line]]
name = "A"
ion = "X I"
wave = 5000.0
seen = "both"
source = "invented"
`

// profileTruth is a Gaussian of observed center and sigma in Angstrom.
type profileTruth struct{ mu, sigma, flux float64 }

// grid returns n wavelengths uniform in log wavelength, step in km/s, pixel
// n/2 at center.
func grid(center, step float64, n int) []float64 {
	w := make([]float64, n)
	for i := range w {
		w[i] = center * math.Exp(float64(i-n/2)*step/c)
	}
	return w
}

// newArm returns a noiseless arm of continuum cont with lines integrated over
// the pixels by the error function.
func newArm(wave []float64, cont, sigma float64, lines ...profileTruth) Arm {
	n := len(wave)
	a := Arm{Wave: wave, Flux: make([]float64, n), Ivar: make([]float64, n), Cont: make([]float64, n)}
	for i := range wave {
		lo, hi := pixelEdges(wave, i)
		f := cont
		for _, l := range lines {
			f += l.flux * (math.Erf((hi-l.mu)/l.sigma/math.Sqrt2) - math.Erf((lo-l.mu)/l.sigma/math.Sqrt2)) / 2 / (hi - lo)
		}
		a.Flux[i], a.Cont[i], a.Ivar[i] = f, cont, 1/(sigma*sigma)
	}
	return a
}

// noisy copies clean into dst with Gaussian noise of its own weights.
func noisy(dst *Arm, clean Arm, rng *rand.Rand) {
	flux := dst.Flux
	*dst = clean
	if len(flux) != len(clean.Flux) {
		flux = make([]float64, len(clean.Flux))
	}
	dst.Flux = flux
	for i := range flux {
		flux[i] = clean.Flux[i] + rng.NormFloat64()/math.Sqrt(clean.Ivar[i])
	}
}

// moments gathers mean and standard deviation.
type moments struct{ n, sum, sq, inside float64 }

func (m *moments) add(x float64) {
	if math.IsNaN(x) {
		return // not measured
	}
	m.n++
	m.sum += x
	m.sq += x * x
	if math.Abs(x) < 1 {
		m.inside++
	}
}
func (m *moments) mean() float64 { return m.sum / m.n }
func (m *moments) sd() float64   { return math.Sqrt(m.sq/m.n - m.mean()*m.mean()) }
