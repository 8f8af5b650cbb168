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
	// The forest: column densities N^-1.6 from 12.7 to 17.2, number (1+z)^2.5,
	// about 400 a unit of redshift at 2.5.
	zLow := 3600/1215.67 - 1
	count := func(z float64) float64 { return 400 * math.Pow((1+z)/3.5, 2.5) }
	most := count(q.z) * (q.z - zLow + 0.2)
	for range int(most) {
		z := zLow - 0.2 + (q.z-zLow+0.2)*r.Float64()
		if r.Float64()*count(q.z) > count(z) {
			continue
		}
		logN := 12.7 - math.Log10(1-r.Float64())/0.6
		if logN < 17.2 {
			addCloud(wave, tau, start, cloudTruth{z, logN, 15 + 25*r.Float64()})
		}
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
