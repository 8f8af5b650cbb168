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
	for i := range forestLines {
		l := &forestLines[i]
		r := waveObs / l.wave
		if r >= onePlusZ {
			break // so do all that follow, which are bluer
		}
		if r > 1 {
			tau += l.forest(r) + l.damped(r)
		}
	}
	if r := math.Max(waveObs/inoueLimit, 1); r < onePlusZ {
		// The fits with their rounded coefficients dip below zero by 1e-5 at r = 1 + z.
		tau += math.Max(forestContinuum(onePlusZ, r)+dampedContinuum(onePlusZ, r), 0)
	}
	return math.Exp(-tau)
}

// forest is the forest's part of the optical depth in one line; r = 1 + z of the
// absorber.
func (l *forestLine) forest(r float64) float64 {
	switch {
	case r < 2.2:
		return l.laf1 * math.Pow(r, 1.2)
	case r < 5.7:
		return l.laf2 * math.Pow(r, 3.7)
	}
	return l.laf3 * math.Pow(r, 5.5)
}

// damped is the damped systems' part.
func (l *forestLine) damped(r float64) float64 {
	if r < 3 {
		return l.dla1 * r * r
	}
	return l.dla2 * r * r * r
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

// dampedContinuum is the damped systems' part.
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
