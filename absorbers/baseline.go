package absorbers

import (
	"math"
	"sort"

	"duskline/hydrogen"
	"duskline/spectrum"
)

// binKms is the width of the pixels on which hydrogen is looked for: those of
// most surveys. Damped lines are much wider.
const binKms = 70.0

// forest is the part of a spectrum in which Lyman lines of absorbers can lie, on
// bins uniform in log wavelength.
type forest struct {
	x0, step float64   // c ln wave of the center of bin 0; km/s
	first    int       // first bin redward of the Lyman limit of the background
	flux     []float64 // mean over the bin
	waves    []float64 // wavelengths of the centers
	noise    []float64 // variance of that mean, 0 where there is no data
	level    []float64 // mean level that thin absorption leaves
	mean     []float64 // mean transmission of the intergalactic medium
	begin    []float64 // -2 ln of the chance that a run of dark bins begins
	scatter  float64   // standard deviation of the thin absorption over level, of a bin
	scale    float64   // typical flux
	memory   float64   // by how much correlation of neighboring bins raises that of wide means
	sres     float64   // instrument's sigma, km/s
	lines    bool      // the background has broad emission lines
	own      []float64 // wavelengths of a galaxy's own lines
	alpha    float64   // of Lyman alpha
	basis    [][]float64
	keep     []bool
	shade    []float64 // transmission of the systems found, 1 at first
	sorted   []float64
}

// fill bins the track from below the redshifted Lyman limit, or where it begins, to
// redBound in the frame of the background. It reports whether there is enough.
func (f *forest) fill(t *track, z float64) bool {
	f.step = binKms
	first := index(t.wave, blueBound*(1+z))
	last := index(t.wave, redBound*(1+z))
	for first < last && t.weight[first] == 0 {
		first++
	}
	for first < last && t.weight[last-1] == 0 {
		last--
	}
	f.flux, f.noise = f.flux[:0], f.noise[:0]
	if last-first < 50 || t.wave[first] > 1200*(1+z) {
		return false
	}
	f.x0 = t.x[first]
	n := int((t.x[last-1]-f.x0)/f.step) + 1
	f.flux, f.noise = resize(f.flux, n), resize(f.noise, n)
	f.waves = f.waves[:0]
	for i := range n {
		f.waves = append(f.waves, math.Exp((f.x0+float64(i)*f.step)/spectrum.SpeedOfLight))
	}
	f.keep = f.keep[:0]
	counts := resize(f.sorted, n) // borrowed
	var sres, cover float64
	for i := first; i < last; i++ {
		if t.weight[i] == 0 {
			continue
		}
		// A pixel wider than a bin fills all that it covers.
		lo := int(math.Floor((t.x[i]-0.5*t.dx[i]-f.x0)/f.step + 0.5))
		hi := int(math.Floor((t.x[i]+0.5*t.dx[i]-f.x0)/f.step + 0.5))
		for k := max(lo, 0); k <= min(hi, n-1); k++ {
			center := f.x0 + float64(k)*f.step
			d := min(t.x[i]+0.5*t.dx[i], center+0.5*f.step) - max(t.x[i]-0.5*t.dx[i], center-0.5*f.step)
			if d <= 0 {
				continue
			}
			counts[k] += d
			f.flux[k] += d * t.flux[i]
			f.noise[k] += d * t.dx[i] / t.weight[i] // exact for whole pixels, conserves weight for parts
		}
		sres += t.sres[i]
		cover++
	}
	good := 0
	for k := range n {
		if counts[k] < 0.5*f.step {
			f.flux[k], f.noise[k] = 0, 0
			continue
		}
		f.flux[k] /= counts[k]
		f.noise[k] /= counts[k] * counts[k]
		good++
	}
	f.sorted = counts[:0]
	f.first = 0
	for f.first < n && f.waves[f.first] < 915*(1+z) {
		f.first++
	}
	f.sres = sres / max(cover, 1)
	return good > 40
}

// Range of the bins, rest Angstrom: from where breaks at the Lyman limit are
// looked for to beyond N V.
const blueBound, redBound = 780.0, 1290.0

// bumps are the emission lines that stand on the level: rest wavelength and
// sigma in Angstrom.
var bumps = [...]struct{ wave, sigma float64 }{
	{1215.67, 5}, {1215.67, 16}, {1240.8, 9}, {1263, 8}, {1034, 10}, {1070, 12}, {1123, 14}, {976, 10},
}

// levelSize is the number of functions that make the level.
const levelSize = 3 + len(bumps)

const (
	levelRounds = 5
	// A bin leaves the level where it lies below this part of it and below
	// three of its errors, scatter included: it belongs to a damped line.
	deepPart = 0.55
)

// follow fits the level: the mean transmission times a parabola and bumps where
// the background has emission lines, by least squares, without the bins of
// damped lines. It reports whether the fit stands.
func (f *forest) follow(opt Options) bool {
	n := len(f.flux)
	f.lines = opt.Before == BeforeQuasar
	if opt.Before == BeforeGalaxy {
		f.hideOwn(opt.Z)
	}
	f.shade = resize(f.shade, n)
	for i := range f.shade {
		f.shade[i] = 1
	}
	f.prepare(opt.Z)
	f.scatter, f.scale = 0.2, f.typical()
	for round := range levelRounds {
		if !f.refit() {
			return false
		}
		if round < levelRounds-1 {
			f.measureScatter()
			f.dropDeep()
		}
	}
	f.measureMemory()
	for i := range n {
		if f.noise[i] > 0 && !(f.level[i] > 0) {
			f.noise[i] = 0 // no background to absorb
		}
	}
	return true
}

// followShaded fits the level again where the systems found dim it by shade.
func (f *forest) followShaded() bool {
	for range 2 {
		for i := range f.keep {
			f.keep[i] = i >= f.first && f.noise[i] > 0 && f.shade[i] > 0.3
		}
		if !f.refit() {
			return false
		}
		f.measureScatter()
	}
	f.measureMemory()
	return true
}

// prepare lays out the functions of the level.
func (f *forest) prepare(z float64) {
	n := len(f.flux)
	f.mean, f.level, f.begin = resize(f.mean, n), resize(f.level, n), resize(f.begin, n)
	if cap(f.keep) < n {
		f.keep = make([]bool, n+n/2)
	}
	f.keep = f.keep[:n]
	const nb = levelSize
	for len(f.basis) < nb {
		f.basis = append(f.basis, nil)
	}
	for b := range f.basis {
		f.basis[b] = resize(f.basis[b], n)
	}
	// The transmission is smooth but for its steps at the Lyman lines.
	for i := range n {
		// Below the limit of the background the level is that of light which
		// no Lyman-limit system has dimmed: they are looked for.
		w := f.waves[max(i, min(f.first, n-1))]
		if i%4 == 0 || w/(1+z) > 1200 || i == n-1 {
			f.mean[i] = hydrogen.Transmission(z, w)
			f.begin[i] = runBegin(f.mean[i])
		} else {
			f.mean[i], f.begin[i] = f.mean[i-1], f.begin[i-1]
		}
		rest := f.waves[i] / (1 + z)
		u := (rest - 1100) / 150
		f.basis[0][i], f.basis[1][i], f.basis[2][i] = f.mean[i], f.mean[i]*u, f.mean[i]*u*u
		for b, k := range bumps {
			if !f.lines {
				break
			}
			d := (rest - k.wave) / k.sigma
			f.basis[3+b][i] = f.mean[i] * math.Exp(-0.5*d*d)
		}
		f.keep[i] = i >= f.first && f.noise[i] > 0
	}
}

// refit solves for the level on the bins that are kept.
func (f *forest) refit() bool {
	const nb = levelSize
	n := len(f.flux)
	var a [nb][nb + 1]float64
	scale := f.scale
	for r := range a {
		// Bumps are small unless the data say else.
		prior := 1e-4
		if r >= 3 {
			prior = 1
		}
		a[r][r] = prior / (scale * scale)
	}
	used := 0
	var row [nb]int
	var value [nb]float64
	for i := range n {
		if !f.keep[i] {
			continue
		}
		used++
		s := f.scatter * scale * f.shade[i]
		w := f.shade[i] / (f.noise[i] + s*s)
		// Most bumps are far from most bins.
		near := 0
		for r := range nb {
			if v := f.basis[r][i]; v > 1e-6 || r < 3 {
				row[near], value[near] = r, v
				near++
			}
		}
		for k := range near {
			wr := w * value[k]
			for l := k; l < near; l++ {
				a[row[k]][row[l]] += wr * value[l] * f.shade[i]
			}
			a[row[k]][nb] += wr * f.flux[i]
		}
	}
	var p [nb]float64
	if used < 30 || !solveNormal(&a, &p) {
		return false
	}
	for i := range n {
		v := 0.0
		for r := range nb {
			v += p[r] * f.basis[r][i]
		}
		f.level[i] = v
	}
	return true
}

// solveNormal solves the symmetric system in the upper triangle of a, with the
// right side in the last column, by Gaussian elimination.
func solveNormal(a *[levelSize][levelSize + 1]float64, p *[levelSize]float64) bool {
	const n = levelSize
	for r := range n {
		for c := range r {
			a[r][c] = a[c][r]
		}
	}
	for r := range n {
		if !(a[r][r] > 0) {
			return false
		}
		for k := r + 1; k < n; k++ {
			g := a[k][r] / a[r][r]
			for c := r; c <= n; c++ {
				a[k][c] -= g * a[r][c]
			}
		}
	}
	for r := n - 1; r >= 0; r-- {
		v := a[r][n]
		for c := r + 1; c < n; c++ {
			v -= a[r][c] * p[c]
		}
		p[r] = v / a[r][r]
	}
	return true
}

// typical is the median flux of the bins that are kept.
func (f *forest) typical() float64 {
	f.sorted = f.sorted[:0]
	for i, k := range f.keep {
		if k {
			f.sorted = append(f.sorted, f.flux[i])
		}
	}
	if len(f.sorted) == 0 {
		return 1
	}
	sort.Float64s(f.sorted)
	return max(f.sorted[len(f.sorted)/2], 1e-6*math.Abs(f.sorted[len(f.sorted)-1]), 1e-300)
}

// measureScatter takes the scatter of the thin absorption blueward of Lyman
// alpha from what the noise leaves of the residuals' mean square.
func (f *forest) measureScatter() {
	var sum, n float64
	for i, k := range f.keep {
		if !k || f.mean[i] > 0.999 || !(f.level[i] > 0) {
			continue
		}
		level := f.level[i] * f.shade[i]
		r := f.flux[i]/level - 1
		sum += r*r - f.noise[i]/(level*level)
		n++
	}
	if n > 20 {
		f.scatter = min(max(math.Sqrt(max(0, sum/n)), 0.05), 0.6)
	}
}

// measureMemory sets memory to 1 + 2 (rho_1 + ... + rho_6), the factor by which
// the variance of the mean of many bins exceeds that of independent ones, from
// the correlations rho of the residuals at one to six bins.
func (f *forest) measureMemory() {
	var lag [7]float64
	for i := range f.flux {
		if i < len(lag) || f.mean[i] > 0.999 {
			continue
		}
		for k := range lag {
			if f.keep[i] && f.keep[i-k] && f.level[i] > 0 && f.level[i-k] > 0 {
				lag[k] += (f.flux[i]/(f.level[i]*f.shade[i]) - 1) * (f.flux[i-k]/(f.level[i-k]*f.shade[i-k]) - 1)
				if k == 0 {
					lag[0] -= f.noise[i] / (f.level[i] * f.level[i] * f.shade[i] * f.shade[i])
				}
			}
		}
	}
	f.memory = 1
	if lag[0] > 0 {
		sum := 0.0
		for _, v := range lag[1:] {
			sum += v
		}
		f.memory = min(max(1+2*sum/lag[0], 1), 10)
	}
}

// dropDeep takes runs of bins that lie deep below the level from the fit.
func (f *forest) dropDeep() {
	n := len(f.flux)
	for i := range n {
		f.keep[i] = i >= f.first && f.noise[i] > 0
	}
	// The mean of half a dozen bins, so that single thin lines stay.
	const reach = 4
	for i := range n {
		var sum, level, variance float64
		for k := max(0, i-reach); k <= min(n-1, i+reach); k++ {
			if f.noise[k] > 0 {
				sum += f.flux[k]
				level += f.level[k]
				variance += f.noise[k]
			}
		}
		if sum < deepPart*level && level-sum > 3*math.Sqrt(variance) {
			f.keep[i] = false
		}
	}
}
