package absorbers

import (
	"math"
	"slices"

	"duskline/linelist"
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

// ownLines names the lines of galaxies that are strong or crowd. Single fainter ones, such as
// N II 1084, Fe III 1122, Fe II 1145 and C III 1176, are much narrower than a line of ownLogN.
var ownLines = [...]string{
	"Lyd", "Lyg", "CIII_977", "NIII_989", "Lyb", "OVI_1031", "CII_1036", "OVI_1037", "SiII_1190", "SiII_1193", "NI_1200", "SiIII_1206",
	"NV_1238", "NV_1242", "SiII_1260",
}

// ownWaves returns the wavelengths of those that are in the list.
func ownWaves(list *linelist.List) []float64 {
	var waves []float64
	for _, l := range slices.Concat(list.Lines(), list.Rare()) {
		if slices.Contains(ownLines[:], l.Name) {
			waves = append(waves, l.Wave)
		}
	}
	return waves
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
	for _, w := range f.own {
		hide(w, ownHalfKms+2*f.sres, ownHalfKms+2*f.sres)
	}
	hide(f.alpha, ownHydrogenKms, ownHydrogenKms)
}
