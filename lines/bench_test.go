package lines

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"duskline/linelist"
)

// fullMeter returns the meter of the list that the program ships.
func fullMeter(t testing.TB) *Meter {
	t.Helper()
	text, err := os.ReadFile("../configs/lines.toml")
	if err != nil {
		t.Fatal(err)
	}
	l, err := linelist.Parse(text)
	if err != nil {
		t.Fatal(err)
	}
	return NewMeter(l)
}

// survey makes a spectrum of 4,600 pixels of 69 km/s from 3600 Angstrom with
// every line of the list as a Gaussian of the width and peak that shape gives.
func surveySpectrum(m *Meter, z, noise float64, shape func(l *line) (sigmaKms, peak float64)) Arm {
	const n = 4600
	wave := make([]float64, n)
	for i := range wave {
		wave[i] = math.Pow(10, math.Log10(3600)+1e-4*float64(i))
	}
	var truth []profileTruth
	for i := range m.lines {
		l := &m.lines[i]
		s, p := shape(l)
		if p != 0 {
			mu := l.Wave * (1 + z)
			sg := mu * s / c
			truth = append(truth, profileTruth{mu, sg, p * math.Sqrt(2*math.Pi) * sg})
		}
	}
	a := newArm(wave, 1, noise, truth...)
	rng := rand.New(rand.NewPCG(7, 7))
	clean := a
	clean.Flux = append([]float64(nil), a.Flux...)
	noisy(&a, clean, rng)
	return a
}

// galaxyShape and quasarShape are invented strengths of about the right order.
func galaxyShape(l *line) (sigma, peak float64) {
	switch {
	case l.Name == "OIII_5007":
		return 120, 2.98
	case l.Name == "NII_6583":
		return 120, 0.61
	case l.Name == "NII_6548":
		return 120, 0.2
	case l.Name == "OI_6364":
		return 120, 0.33
	case l.Seen == Absorption:
		return 200, -0.3
	case l.Seen == Emission:
		return 120, 1
	case l.ion == "H I":
		return 120, 2 * l.F / 0.2
	}
	return 120, 0.2
}

func quasarShape(l *line) (sigma, peak float64) {
	switch l.Name {
	case "Lya":
		return 2500, 3
	case "CIV_1548", "CIV_1550", "CIII_1908", "MgII_2796", "MgII_2803":
		return 2500, 1
	case "NV_1238", "NV_1242", "SiIV_1393", "SiIV_1402", "SiIII_1892", "Hb", "Hg", "HeI_5876":
		return 2500, 0.3
	case "Ha":
		return 2500, 2
	case "OIII_5007":
		return 250, 0.298
	case "OIII_4959", "OII_3726", "OII_3729", "NeIII_3869":
		return 250, 0.1
	}
	return 0, 0
}

func benchmark(b *testing.B, z float64, broad bool, noise float64, shape func(*line) (float64, float64)) {
	m := fullMeter(b)
	arms := []Arm{surveySpectrum(m, z, noise, shape)}
	var sc Scratch
	opt := Options{Z: z, Broad: broad}
	res := m.Measure(nil, arms, opt, &sc)
	seen := 0
	for _, r := range res {
		if r.Kind == Emission || r.Kind == Absorption {
			seen++
		}
	}
	b.ReportAllocs()
	for b.Loop() {
		res = m.Measure(res[:0], arms, opt, &sc)
	}
	b.ReportMetric(float64(len(res)), "lines")
	b.ReportMetric(float64(seen), "seen")
}

// BenchmarkMeasure runs all lines of the shipped list over one spectrum of
// 4,600 pixels.
func BenchmarkMeasure(b *testing.B) {
	none := func(*line) (float64, float64) { return 0, 0 }
	b.Run("galaxy", func(b *testing.B) { benchmark(b, 0.1, false, 0.05, galaxyShape) })
	b.Run("nothing", func(b *testing.B) { benchmark(b, 0.1, false, 0.05, none) })
	b.Run("quasar", func(b *testing.B) { benchmark(b, 2.2, true, 0.05, quasarShape) })
	b.Run("quasar_low", func(b *testing.B) { benchmark(b, 0.3, true, 0.05, quasarShape) })
}
