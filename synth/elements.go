package synth

import (
	"duskline/hydrogen"
	"duskline/spectrum"
)

// feature is a line of a model atmosphere of our own: wavelength in air as the
// textbooks print it, and its equivalent width in Angstrom in a star like the
// Sun.
type feature struct{ airWave, ew float64 }

// ironLines are strong lines of iron-peak and other metals in cool stars,
// wavelengths from memory, strengths by eye.
var ironLines = []feature{
	{3581.2, 2.2}, {3618.8, 1.4}, {3647.8, 1.2}, {3719.9, 1.7}, {3734.9, 2.2}, {3749.5, 1.8}, {3758.2, 1.5},
	{3815.8, 1.3}, {3820.4, 1.8}, {3838.3, 1.9}, {3859.9, 1.6}, {3878.6, 1.1}, {3886.3, 0.9}, {3905.5, 0.8},
	{4005.2, 0.45}, {4030.8, 0.6}, {4045.8, 1.2}, {4063.6, 0.8}, {4071.7, 0.75}, {4077.7, 0.45}, {4101.0, 0.2},
	{4132.1, 0.4}, {4143.9, 0.5}, {4171.0, 0.25}, {4187.0, 0.3}, {4202.0, 0.35}, {4226.7, 1.5}, {4250.5, 0.4},
	{4260.5, 0.6}, {4271.6, 0.7}, {4290.0, 0.4}, {4315.0, 0.4}, {4325.8, 0.8}, {4352.7, 0.3}, {4383.5, 1.0},
	{4404.8, 0.8}, {4415.1, 0.45}, {4435.7, 0.3}, {4454.8, 0.4}, {4482.2, 0.3}, {4501.0, 0.25}, {4528.6, 0.35},
	{4549.5, 0.35}, {4571.1, 0.2}, {4668.1, 0.25}, {4703.0, 0.3}, {4737.0, 0.2}, {4920.5, 0.45}, {4957.5, 0.55},
	{5012.1, 0.2}, {5041.4, 0.3}, {5079.7, 0.2}, {5110.4, 0.25}, {5133.7, 0.15}, {5206.0, 0.5}, {5227.2, 0.5},
	{5269.5, 0.8}, {5328.0, 0.7}, {5371.5, 0.4}, {5397.1, 0.35}, {5405.8, 0.4}, {5429.7, 0.4}, {5446.9, 0.4},
	{5455.6, 0.3}, {5528.4, 0.3}, {5572.8, 0.2}, {5586.8, 0.2}, {5615.6, 0.25}, {5711.1, 0.15}, {5782.1, 0.1},
	{5857.5, 0.15}, {6102.7, 0.15}, {6122.2, 0.22}, {6137.3, 0.2}, {6162.2, 0.25}, {6191.6, 0.15}, {6230.7, 0.15},
	{6252.6, 0.13}, {6393.6, 0.13}, {6400.0, 0.13}, {6439.1, 0.16}, {6495.0, 0.3}, {6678.0, 0.12}, {7445.8, 0.12},
	{7511.0, 0.12}, {8183.3, 0.25}, {8194.8, 0.3}, {8468.4, 0.15}, {8688.6, 0.25}, {8806.8, 0.45},
}

// strongLines are the features that carry the look of a cool star.
var (
	calciumHK      = []feature{{3933.66, 9.5}, {3968.47, 7.5}}
	calciumTriplet = []feature{{8498.02, 1.4}, {8542.09, 3.4}, {8662.14, 2.7}}
	magnesiumB     = []feature{{5167.32, 0.9}, {5172.68, 1.3}, {5183.60, 1.6}}
	sodiumD        = []feature{{5889.95, 0.8}, {5895.92, 0.6}}
)

// draw multiplies lines in, each with the stated strength times a factor.
func (c *canvas) draw(lines []feature, factor, velocity, sigma float64) {
	for _, l := range lines {
		c.absorb(spectrum.AirToVacuum(l.airWave), velocity, sigma, l.ew*factor)
	}
}

// molecule is a band of an M star: head in air, relative depth, length of the
// tail in Angstrom.
type molecule struct{ airHead, depth, tail float64 }

// coolBands are the bands of TiO, with CaH and VO, heads from memory, depths by
// eye.
var coolBands = []molecule{
	{4584, 0.20, 60}, {4761, 0.40, 90}, {4954, 0.45, 110}, {5167, 0.50, 120}, {5448, 0.45, 110}, {5759, 0.30, 70},
	{5847, 0.40, 140}, {6158, 0.50, 150}, {6385, 0.25, 60}, {6651, 0.45, 110}, {6780, 0.35, 110}, {7054, 0.60, 200},
	{7589, 0.50, 130}, {7851, 0.25, 120}, {8206, 0.25, 130}, {8432, 0.45, 140}, {8859, 0.45, 150}, {9209, 0.30, 130},
}

// series returns vacuum wavelengths of the hydrogen lines from lower to first,
// first+1, ..., last.
func series(lower, first, last int) []float64 {
	var waves []float64
	for n := first; n <= last; n++ {
		t, err := hydrogen.NewTransition(lower, n)
		if err != nil {
			panic(err) // quantum numbers are constants of this package
		}
		waves = append(waves, t.Wave)
	}
	return waves
}
