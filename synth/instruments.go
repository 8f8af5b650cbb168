package synth

import (
	"math"

	"duskline/spectrum"
)

// logGrid returns n wavelengths from first in steps of dex.
func logGrid(first, dex float64, n int) []float64 {
	wave := make([]float64, n)
	for i := range wave {
		wave[i] = first * math.Pow(10, dex*float64(i))
	}
	return wave
}

// linearGrid returns wavelengths from first up to last in equal steps.
func linearGrid(first, last, step float64) []float64 {
	wave := make([]float64, int((last-first)/step)+1)
	for i := range wave {
		wave[i] = first + step*float64(i)
	}
	return wave
}

// logArm covers 3600 to 9800 Angstrom in steps of 1e-4 dex.
func logArm() []*arm {
	return []*arm{newArm("", logGrid(3600, 1e-4, 4350), spectrum.Vacuum, 3680, 9720, 45)}
}

// linearArm covers the same in steps of 1.2 Angstrom.
func linearArm() []*arm {
	return []*arm{newArm("", linearGrid(3610, 9790, 1.2), spectrum.Vacuum, 3680, 9720, 45)}
}

// twoArms overlap at a dichroic near 5900 Angstrom and are calibrated in air.
func twoArms() []*arm {
	return []*arm{
		newArm("BLUE", linearGrid(3600, 6060, 1.0), spectrum.Air, 3680, 5960, 35),
		newArm("RED", linearGrid(5740, 9800, 1.4), spectrum.Air, 5840, 9720, 35),
	}
}

// threeArms overlap twice.
func threeArms() []*arm {
	return []*arm{
		newArm("BLUE", linearGrid(3600, 5800, 0.9), spectrum.Vacuum, 3680, 5740, 20),
		newArm("MID", linearGrid(5660, 7680, 1.0), spectrum.Vacuum, 5700, 7620, 20),
		newArm("RED", linearGrid(7520, 9800, 1.1), spectrum.Vacuum, 7570, 9740, 20),
	}
}
