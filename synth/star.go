package synth

import (
	"math"
	"math/rand/v2"
)

// star paints a star of the given effective temperature: a blackbody with the
// Balmer jump of hot stars, the line blanketing and bands of cool ones.
func star(r *rand.Rand, kelvin float64) func(c *canvas) {
	metals := math.Exp(r.NormFloat64() * 0.25)
	tilt := r.NormFloat64() * 0.25 // reddening and flux calibration
	rotation := 10 + 60*r.Float64()
	active := kelvin < 3600 && r.Float64() < 0.4
	return func(c *canvas) {
		cool := step((5400 - kelvin) / 500) // 0 for F and hotter, 1 for late K
		hot := step((kelvin - 7400) / 350)
		c.fill(func(w float64) float64 {
			f := planck(w, kelvin) * math.Pow(w/5500, tilt)
			f *= 1 - (0.18+0.30*cool)*(1-hot)*math.Min(metals, 1.5)*step((4000-w)/60)
			f *= 1 - 0.55*hot*step((3690-w)/12) // Balmer jump
			f *= 1 - 0.18*hot*step((8310-w)/25)*step((w-7600)/400)
			return f
		})
		hydrogenLines(c, kelvin, hot)
		if kelvin < 9200 {
			calcium := math.Pow(math.Min(5800/kelvin, 1.25), 5)
			c.draw(calciumHK, calcium, 0, 420)
			c.draw(calciumTriplet, math.Min(calcium, 1.3), 0, 90)
			strength := metals * math.Pow(math.Min(5800/kelvin, 1.45), 4)
			c.draw(ironLines, strength, 0, rotation)
			c.draw(magnesiumB, strength, 0, 80)
			c.draw(sodiumD, strength*strength, 0, 80)
			g := math.Max(0, 1-math.Abs(kelvin-5200)/1700)
			c.absorb(4305.6, 0, 700, 6.5*g*metals)
			c.absorb(3875, 0, 900, 6*g*cool*metals)
			c.absorb(5130, 0, 2600, 9*cool)
		}
		if kelvin < 4100 {
			deep := math.Min((4100-kelvin)/700, 1.25)
			for _, b := range coolBands {
				c.band(b.airHead+1.5, math.Min(b.depth*deep, 0.85), b.tail)
			}
			c.draw([]feature{{4226.7, 3}, {5889.95, 2.5}, {5895.92, 2.5}, {8183.3, 0.8}, {8194.8, 1.0}}, deep, 0, 110)
		}
		if active {
			for i, w := range series(2, 3, 6) {
				c.emit(w, 0, 40, c.at(w)*4/float64(1+i))
			}
		}
	}
}

// hydrogenLines draws the Balmer and Paschen series, strongest near 9000 K.
func hydrogenLines(c *canvas, kelvin, hot float64) {
	peak := math.Exp(-math.Pow(math.Log(kelvin/9000)/0.30, 2))
	for i, w := range series(2, 3, 18) {
		if hot > 0.05 {
			c.wings(w, 0, 1.5*peak*math.Pow(0.95, float64(i)), 10*math.Pow(0.86, float64(i)))
		} else {
			c.absorb(w, 0, 110, (6.5*peak+0.8*math.Max(0, 1-math.Abs(kelvin-5200)/1500))*math.Pow(0.9, float64(i)))
		}
	}
	for i, w := range series(3, 9, 18) {
		c.absorb(w, 0, 220, 4.5*peak*hot*math.Pow(0.9, float64(i)))
	}
}
