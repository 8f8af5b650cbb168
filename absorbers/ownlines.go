package absorbers

import (
	"math"

	"duskline/spectrum"
)

const (
	// ownHydrogenKms is how far in front of a galaxy hydrogen lies at least: its
	// own Lyman alpha is damped and dark over thousands of km/s.
	ownHydrogenKms = 6000.0
	// ownLogN is the least column in front of a galaxy: fainter systems are as
	// wide as blends of its own lines.
	ownLogN = 20.3
	// ownHalfKms is how much of the light around a line of the galaxy is left out,
	// each way, beside that of the instrument: winds of a few hundred km/s.
	ownHalfKms = 800.0
)

// ownWaves are the lines of galaxies that are strong or crowd, vacuum Angstrom (Morton
// 2003, from memory): higher Lyman lines, C III 977, N III 990, O VI, C II 1037, Si II
// 1190 and 1193, N I 1200, Si III 1206, and beyond Lyman alpha N V and Si II 1260. Single
// fainter ones, such as N II 1084, Fe III 1122, Fe II 1145 and C III 1176, are much
// narrower than a line of ownLogN.
var ownWaves = [...]float64{
	949.74, 972.54, 977.02, 989.80, 1025.72, 1031.93, 1037.0, 1190.42, 1193.29, 1200.0, 1206.50, 1238.82, 1242.80, 1260.42,
}

// hideOwn takes the bins out that a galaxy's own lines dim.
func (f *forest) hideOwn(z float64) {
	hide := func(wave, blue, red float64) {
		x := spectrum.SpeedOfLight*math.Log(wave*(1+z)) - f.x0
		lo, hi := int(math.Ceil((x-blue)/f.step)), int(math.Floor((x+red)/f.step))
		for i := max(0, lo); i <= min(len(f.noise)-1, hi); i++ {
			f.noise[i] = 0
		}
	}
	for _, w := range ownWaves {
		hide(w, ownHalfKms+2*f.sres, ownHalfKms+2*f.sres)
	}
	hide(1215.67, ownHydrogenKms, ownHydrogenKms)
}
