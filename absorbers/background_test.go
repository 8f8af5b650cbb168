package absorbers

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// Lines of made-up galaxies: rest wavelength and equivalent width, Angstrom, of the
// usual order for strong ones; invented.
var galaxyLines = [][2]float64{
	{977.02, 2}, {989.8, 1.5}, {1031.93, 1.5}, {1037, 2}, {1083.99, 1.5}, {1122.52, 1}, {1175.71, 1.2}, {1190.42, 1.5}, {1193.29, 1.5}, {1200, 1.5},
	{1206.5, 2}, {1239, 1.5}, {1260.42, 2}, {1302.2, 2.3}, {1334.53, 2},
}

// makeGalaxy paints a galaxy at z behind a forest, with interstellar lines, damped
// Lyman alpha of its own, and damped systems in front.
func makeGalaxy(r *rand.Rand, z, sn float64, front ...cloudTruth) Arm {
	start := math.Log(3600) * c
	n := int((math.Log(1420*(1+z))*c-start)/fineKms) / pixelFine * pixelFine
	wave, flux, tau := make([]float64, n), make([]float64, n), make([]float64, n)
	slope := -1.5 + 0.5*r.NormFloat64()
	for i := range wave {
		wave[i] = math.Exp((start + float64(i)*fineKms) / c)
		flux[i] = math.Pow(wave[i]/(1+z)/1350, slope)
	}
	paintForest(r, wave, tau, start, z, forestGroup)
	addCloud(wave, tau, start, cloudTruth{z, 20.3 + 1.2*r.Float64(), 60})
	for _, t := range front {
		addCloud(wave, tau, start, t)
	}
	for _, l := range galaxyLines {
		sigma, shift := 150+100*r.Float64(), -150+100*r.NormFloat64()
		depth := l[1] * math.Exp(0.3*r.NormFloat64()) * c / l[0] / (math.Sqrt(2*math.Pi) * sigma)
		for i := range wave {
			v := c*math.Log(wave[i]/l[0]/(1+z)) - shift
			if math.Abs(v) < 5*sigma {
				tau[i] += depth * math.Exp(-0.5*v*v/(sigma*sigma))
			}
		}
	}
	for i := range flux {
		flux[i] *= math.Exp(-tau[i])
	}
	const resolution = 1000.0
	blur(flux, nil, c/resolution/fwhmPerSigma/fineKms)
	a := Arm{Resolution: []float64{resolution}}
	for k := 0; k+pixelFine <= n; k += pixelFine {
		sum := 0.0
		for _, v := range flux[k : k+pixelFine] {
			sum += v / pixelFine
		}
		// Sky and detector.
		a.Wave = append(a.Wave, math.Exp((start+(float64(k)+0.5*pixelFine-0.5)*fineKms)/c))
		a.Flux = append(a.Flux, sum+r.NormFloat64()/sn)
		a.Ivar = append(a.Ivar, sn*sn)
	}
	return a
}

// TestHydrogenBeforeGalaxies counts damped systems in front of made-up galaxies at
// redshifts 2.6 to 3.6: found with their columns, and made up of the galaxies' own
// lines, which the same search in front of quasars takes for systems.
// DUSKLINE_LONG=1 takes 400 instead of 60 a step of S/N (of a pixel at rest 1350).
func TestHydrogenBeforeGalaxies(t *testing.T) {
	if testing.Short() {
		t.Skip("takes statistics that the race detector is not for")
	}
	n := 60
	if os.Getenv("DUSKLINE_LONG") == "1" {
		n = 400
	}
	f := fullFinder(t)
	var sc Scratch
	for _, sn := range []float64{2.0, 4, 8} {
		r := rand.New(rand.NewPCG(51, uint64(sn)))
		var found, all, made, asQuasar int
		var columns tally
		for k := range n {
			z := 2.6 + r.Float64()
			var front []cloudTruth
			if k%2 == 0 {
				low := max(2.05, (1+z)*0.9-1)
				front = append(front, cloudTruth{low + ((1+z)*0.965-1-low)*r.Float64(), 20.5 + 0.9*r.Float64(), 30})
				all++
			}
			a := makeGalaxy(r, z, sn, front...)
			for _, s := range hydrogenOnly(f.Find(nil, []Arm{a}, Options{Z: z, Before: BeforeGalaxy}, &sc)) {
				if len(front) > 0 && math.Abs(s.Z-front[0].z)*c/(1+s.Z) < 800 {
					found++
					columns.add(s.LogN-front[0].logN, s.LogErr)
				} else {
					made++
				}
			}
			if len(front) == 0 {
				asQuasar += len(hydrogenOnly(f.Find(nil, []Arm{a}, Options{Z: z}, &sc)))
			}
		}
		t.Logf("S/N %g: %d of %d found, %d made up in front of %d galaxies; of half of them %d as in front of quasars; log N - true %.3f, pulls %.2f +- %.2f",
			sn, found, all, made, n, asQuasar, columns.sum/columns.found, columns.pull/columns.found, columns.pullSD())
		if sn >= 4 && float64(found) < 0.9*float64(all) {
			t.Errorf("S/N %g: %d of %d found", sn, found, all)
		}
		// 17 in 1,200 with DUSKLINE_LONG=1; three standard errors of room.
		if usual := 0.025 * float64(n); float64(made) > usual+3*math.Sqrt(usual) {
			t.Errorf("S/N %g: %d made up in front of %d galaxies", sn, made, n)
		}
		if asQuasar < 3*made {
			t.Errorf("S/N %g: the galaxies' lines do not matter here", sn)
		}
		// Of 24 systems at least, errors 0.1: standard error of the mean 0.02.
		if sn >= 4 && math.Abs(columns.sum/columns.found) > 0.1 {
			t.Errorf("S/N %g: log N off by %.3f", sn, columns.sum/columns.found)
		}
	}
}

// Interstellar hydrogen in front of a hot star comes out with its column, neither
// with doublets nor with a Lyman limit.
func TestHydrogenBeforeStars(t *testing.T) {
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(52, 7))
	var sc Scratch
	for _, logN := range []float64{20.2, 20.7, 21.2} {
		var columns tally
		const n = 40
		for range n {
			a := Arm{Resolution: []float64{1000}}
			tau := f.series[0]
			fine, sigma := 0.05, 1215.67/1000/fwhmPerSigma
			var flux []float64
			for w := 1140.0; w < 1700; w += fine {
				v := math.Pow(w/1300, -2.2)
				for _, l := range [][3]float64{{1175.7, 1.5, 0.8}, {1206.5, 1.0, 0.5}, {1260.4, 0.5, 0.3}, {1240, 1.2, 1.0}, {1302, 1, 0.7}, {1550, 1.5, 1.5}} {
					v *= 1 - l[1]/(math.Sqrt(2*math.Pi)*l[2])*math.Exp(-0.5*(w-l[0])*(w-l[0])/(l[2]*l[2]))
				}
				flux = append(flux, v*math.Exp(-tau.OpticalDepth(math.Pow(10, logN), 12, w*(1-20/c))))
			}
			blur(flux, nil, sigma/fine)
			for i := 0; i+12 <= len(flux); i += 12 {
				sum := 0.0
				for _, v := range flux[i : i+12] {
					sum += v / 12
				}
				a.Wave = append(a.Wave, 1140+(float64(i)+5.5)*fine)
				a.Flux = append(a.Flux, sum+0.05*r.NormFloat64())
				a.Ivar = append(a.Ivar, 400)
			}
			got := f.Find(nil, []Arm{a}, Options{Z: 0, Before: BeforeStar}, &sc)
			if len(got) != 1 || got[0].Kind != Hydrogen {
				t.Errorf("log N = %g: %+v", logN, got)
				continue
			}
			columns.add(got[0].LogN-logN, got[0].LogErr)
			// Lines of the star in the wings pull the broadest by some 100 km/s.
			if v := c * got[0].Z; math.Abs(v-20) > 200 {
				t.Errorf("log N = %g: at %.0f km/s, painted at 20", logN, v)
			}
		}
		t.Logf("log N %.1f: off by %.3f, pulls %.2f +- %.2f", logN, columns.sum/columns.found, columns.pull/columns.found, columns.pullSD())
		if math.Abs(columns.sum/columns.found) > 0.08 {
			t.Errorf("log N = %g: off by %.3f", logN, columns.sum/columns.found)
		}
	}
}
