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

// ownWaves are the strong interstellar and stellar lines of galaxies blueward of
// Lyman alpha and just beyond, vacuum Angstrom (Morton 2003, from memory). Lyman
// beta to delta are among them.
var ownWaves = [...]float64{
	949.74, 972.54, 977.02, 989.80, 1020.70, 1025.72, 1031.93, 1037.0, 1083.99, 1122.52, 1144.94, 1175.71, 1190.42, 1193.29, 1200.0, 1206.50,
	1238.82, 1242.80, 1260.42,
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
