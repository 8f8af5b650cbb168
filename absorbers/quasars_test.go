package absorbers

import (
	"math"
	"math/rand/v2"

	"duskline/hydrogen"
	"duskline/spectrum"
)

const c = spectrum.SpeedOfLight

// A made-up quasar for tests: its forest is drawn line by line and knows nothing
// of the smooth level and Gaussian scatter that the search assumes.
type madeUp struct {
	z      float64
	clouds []cloudTruth
	arm    Arm
}

type cloudTruth struct{ z, logN, b float64 }

// Fine grid on which quasars are painted, km/s, and the survey's pixel and
// instrument.
const fineKms, pixelFine, surveyR = 11.5, 6, 2000.0

// makeQuasar paints a quasar with damped systems of the given columns at drawn
// redshifts and noise of sn a pixel near 1350 Angstrom.
func makeQuasar(r *rand.Rand, sn float64, columns ...float64) madeUp {
	return makeQuasarAt(r, 2.4+1.2*r.Float64(), sn, columns...)
}

func makeQuasarAt(r *rand.Rand, z, sn float64, columns ...float64) madeUp {
	return makeQuasarBehind(r, forestGroup, z, sn, columns...)
}

// makeQuasarBehind is makeQuasarAt behind a forest whose lines come in groups of
// so many on average, 1 for none.
func makeQuasarBehind(r *rand.Rand, group, z, sn float64, columns ...float64) madeUp {
	q := madeUp{z: z}
	start := math.Log(3600) * c
	end := math.Log(min(1420*(1+q.z), 9000)) * c
	n := int((end-start)/fineKms) / pixelFine * pixelFine
	wave, flux, tau := make([]float64, n), make([]float64, n), make([]float64, n)
	slope := -1.4 + 0.4*r.NormFloat64()
	// Rest wavelength, equivalent width, sigma in km/s; invented, of the usual
	// order.
	lines := [][3]float64{{1215.67, 60, 1800}, {1215.67, 40, 5000}, {1240.8, 15, 2500}, {1033, 9, 2500}, {1304, 3, 2000}, {1400, 8, 2500}, {1070, 3, 3000}, {1123, 2, 3000}}
	for k := range lines {
		lines[k][1] *= math.Exp(0.3 * r.NormFloat64())
		lines[k][2] *= math.Exp(0.2 * r.NormFloat64())
	}
	for i := range wave {
		wave[i] = math.Exp((start + float64(i)*fineKms) / c)
		rest := wave[i] / (1 + q.z)
		f := math.Pow(rest/1350, slope)
		for _, l := range lines {
			s := l[0] * l[2] / c
			f += l[1] / (math.Sqrt(2*math.Pi) * s) * math.Exp(-0.5*(rest-l[0])*(rest-l[0])/(s*s)) * math.Pow(l[0]/1350, slope)
		}
		flux[i] = f
	}
	if group > 0 {
		paintForest(r, wave, tau, start, q.z, group)
	}
	low := max(2.05, (1+q.z)*0.87-1)
	for _, logN := range columns {
		t := cloudTruth{low + (q.z-0.05-low)*r.Float64(), logN, 20 + 30*r.Float64()}
		q.clouds = append(q.clouds, t)
		addCloud(wave, tau, start, t)
	}
	for i := range flux {
		flux[i] *= math.Exp(-tau[i])
	}
	blur(flux, nil, c/surveyR/fwhmPerSigma/fineKms)
	m := n / pixelFine
	a := Arm{Wave: make([]float64, m), Flux: make([]float64, m), Ivar: make([]float64, m), Resolution: []float64{surveyR}}
	for k := range m {
		for i := k * pixelFine; i < (k+1)*pixelFine; i++ {
			a.Flux[k] += flux[i] / pixelFine
		}
		a.Wave[k] = math.Exp((start + (float64(k)+0.5)*fineKms*pixelFine - 0.5*fineKms) / c)
		// Sky and detector in equal parts with the light.
		sd := math.Sqrt((0.5 + 0.5*max(a.Flux[k], 0)) / (sn * sn))
		a.Flux[k] += sd * r.NormFloat64()
		a.Ivar[k] = 1 / (sd * sd)
	}
	q.arm = a
	return q
}

// Mean number of lines in a group and the spread of its redshifts, km/s; invented.
// The transmission of neighboring pixels of 69 km/s is then correlated by 0.84 and
// scatters by 0.3 of its mean at redshift 3; without groups by 0.78 and 0.25.
const forestGroup, groupKms = 2.5, 130.0

// paintForest draws lines of columns N^-1.6 from 10^12.7 to 10^17.2, as many at each
// redshift as make the mean transmission that of Becker et al. (2013), tau =
// 0.751 ((1+z)/4.5)^2.90 - 0.132 (from memory), as TestForestMean checks.
func paintForest(r *rand.Rand, wave, tau []float64, start, z, group float64) {
	low := max(wave[0]/1215.67-1.2, 0)
	count := func(z float64) float64 { return forestLines * math.Pow((1+z)/3.5, forestGrowth) * (1 + 0.05*(group-1)) }
	most := count(z) * (z - low) / group
	for range int(most) {
		at := low + (z-low)*r.Float64()
		if r.Float64()*count(z) > count(at) {
			continue
		}
		for first := true; first || r.Float64() < 1-1/group; first = false {
			logN := 12.7 - math.Log10(1-r.Float64())/0.6
			if v := groupKms * r.NormFloat64(); logN < 17.2 {
				addCloud(wave, tau, start, cloudTruth{at + (1+at)*v/c, logN, 15 + 25*r.Float64()})
			}
		}
	}
}

// Number of lines a unit of redshift at redshift 2.5, and how it grows with 1+z.
const forestLines, forestGrowth = 580.0, 3.1

var seriesForTests = func() (lines []hydrogen.AbsorptionLine) {
	for n := 2; n <= 8; n++ {
		t, err := hydrogen.NewTransition(1, n)
		if err != nil {
			panic(err)
		}
		lines = append(lines, t.Absorption())
	}
	return lines
}()

func addCloud(wave, tau []float64, start float64, t cloudTruth) {
	column := math.Pow(10, t.logN)
	for _, line := range seriesForTests {
		if line.TauZero(column, t.b) < 3e-3 {
			break // and so all that follow
		}
		center := (c*math.Log(line.Wave*(1+t.z)) - start) / fineKms
		half := max(6*t.b, t.b*math.Sqrt(line.Damping(t.b)*line.TauZero(column, t.b)/1e-3)) / fineKms
		lo, hi := max(0, int(center-half)), min(len(wave), int(center+half)+2)
		for i := lo; i < hi; i++ {
			tau[i] += line.OpticalDepth(column, t.b, wave[i]/(1+t.z))
		}
	}
}
