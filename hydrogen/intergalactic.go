package hydrogen

import "math"

// inoueLimit is the wavelength of the Lyman limit in Inoue et al. (2014).
const inoueLimit = 911.8

// Transmission returns the mean fraction of the light of a source at redshift
// zSource that reaches us at the observed wavelength waveObs (vacuum Angstrom)
// through the intergalactic medium: Lyman-series and Lyman-continuum absorption
// by the forest, Lyman-limit and damped systems (Inoue, Shimizu, Iwata & Tanaka
// 2014, section 4 and Table 2).
//
// It is one redward of Lyman alpha of the source and for zSource <= 0. Observed
// wavelengths below 911.8 Angstrom, where nothing is seen from Earth, get the
// value of 911.8. NaN if an argument is NaN or waveObs is not positive. A single
// line of sight scatters widely about the mean.
func Transmission(zSource, waveObs float64) float64 {
	if math.IsNaN(zSource) || !(waveObs > 0) {
		return math.NaN()
	}
	if zSource <= 0 {
		return 1
	}
	onePlusZ := 1 + zSource
	tau := 0.0
	if waveObs < forestLines[0].wave*onePlusZ {
		tau = seriesDepth(onePlusZ, waveObs)
	}
	if r := math.Max(waveObs/inoueLimit, 1); r < onePlusZ {
		// The fits with their rounded coefficients dip below zero by 1e-5 at r = 1 + z.
		tau += math.Max(forestContinuum(onePlusZ, r)+dampedContinuum(onePlusZ, r), 0)
	}
	return math.Exp(-tau)
}

// scaledForest is forestLines with the wavelengths taken into the coefficients,
// so that one power of the observed wavelength serves all lines.
var scaledForest = func() [len(forestLines)]forestLine {
	scaled := forestLines
	for i := range scaled {
		l := &scaled[i]
		l.laf1 /= math.Pow(l.wave, 1.2)
		l.laf2 /= math.Pow(l.wave, 3.7)
		l.laf3 /= math.Pow(l.wave, 5.5)
		l.dla1 /= math.Pow(l.wave, 2)
		l.dla2 /= math.Pow(l.wave, 3)
	}
	return scaled
}()

// seriesDepth is the optical depth in the Lyman lines. With r = waveObs/lambda_j
// = 1 + z of the absorber, 1 < r < onePlusZ, line j adds A1 r^1.2, A2 r^3.7 or
// A3 r^5.5 (r < 2.2, < 5.7 or more) for the forest and A1 r^2 or A2 r^3 (r < 3 or
// more) for the damped systems.
func seriesDepth(onePlusZ, waveObs float64) float64 {
	w2 := waveObs * waveObs
	w3 := w2 * waveObs
	w12, w37, w55 := math.Pow(waveObs, 1.2), math.Pow(waveObs, 3.7), w2*w3*math.Sqrt(waveObs)
	tau := 0.0
	for i := range scaledForest {
		l := &scaledForest[i]
		if waveObs >= l.wave*onePlusZ {
			break // so it does for all that follow, which are bluer
		}
		if waveObs <= l.wave {
			continue
		}
		switch {
		case waveObs < 2.2*l.wave:
			tau += l.laf1 * w12
		case waveObs < 5.7*l.wave:
			tau += l.laf2 * w37
		default:
			tau += l.laf3 * w55
		}
		if waveObs < 3*l.wave {
			tau += l.dla1 * w2
		} else {
			tau += l.dla2 * w3
		}
	}
	return tau
}

// forestContinuum is the forest's part of the optical depth in the Lyman
// continuum; zs = 1 + z of the source, r = waveObs/inoueLimit, 1 <= r < zs.
func forestContinuum(zs, r float64) float64 {
	r21 := math.Pow(r, 2.1)
	switch {
	case zs < 2.2:
		return 0.325 * (math.Pow(r, 1.2) - math.Pow(zs, -0.9)*r21)
	case zs < 5.7:
		far := 2.55e-2 * math.Pow(zs, 1.6) * r21
		if r < 2.2 {
			return far + 0.325*math.Pow(r, 1.2) - 0.250*r21
		}
		return far - 2.55e-2*math.Pow(r, 3.7)
	}
	far := 5.22e-4 * math.Pow(zs, 3.4) * r21
	switch {
	case r < 2.2:
		return far + 0.325*math.Pow(r, 1.2) - 3.14e-2*r21
	case r < 5.7:
		return far + 0.218*r21 - 2.55e-2*math.Pow(r, 3.7)
	}
	return far - 5.22e-4*math.Pow(r, 5.5)
}

// dampedContinuum is the damped systems' part of it.
func dampedContinuum(zs, r float64) float64 {
	r03 := math.Pow(r, -0.3)
	if zs < 3 {
		return 0.211*zs*zs - 0.0766*math.Pow(zs, 2.3)*r03 - 0.135*r*r
	}
	far := 4.70e-2*zs*zs*zs - 1.78e-2*math.Pow(zs, 3.3)*r03
	if r < 3 {
		return 0.634 + far - 0.135*r*r - 0.291*r03
	}
	return far - 2.92e-2*r*r*r
}

// madauLines holds the four lines of Madau (1995) and their coefficients; the
// wavelengths are printed there to the Angstrom.
var madauLines = [4]struct{ wave, a float64 }{
	{1215.67, 0.0036}, {1025.72, 0.0017}, {972.537, 0.0012}, {949.743, 0.00093},
}

// MadauTransmission is the older mean transmission of Madau (1995): four Lyman
// lines and the approximate continuum (its footnote 3). Arguments, limits and
// NaN as in Transmission, the limit being at 912 Angstrom. It is kept for
// comparison with published work.
func MadauTransmission(zSource, waveObs float64) float64 {
	if math.IsNaN(zSource) || !(waveObs > 0) {
		return math.NaN()
	}
	if zSource <= 0 {
		return 1
	}
	xe := 1 + zSource
	tau := 0.0
	for _, l := range madauLines {
		if r := waveObs / l.wave; r > 1 && r < xe {
			tau += l.a * math.Pow(r, 3.46)
		}
	}
	if xc := math.Max(waveObs/912, 1); xc < xe {
		x3 := xc * xc * xc
		continuum := 0.25*x3*(math.Pow(xe, 0.46)-math.Pow(xc, 0.46)) +
			9.4*xc*math.Sqrt(xc)*(math.Pow(xe, 0.18)-math.Pow(xc, 0.18)) -
			0.7*x3*(math.Pow(xc, -1.32)-math.Pow(xe, -1.32)) -
			0.023*(math.Pow(xe, 1.68)-math.Pow(xc, 1.68))
		tau += math.Max(continuum, 0)
	}
	return math.Exp(-tau)
}
