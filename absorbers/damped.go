package absorbers

import (
	"math"

	"duskline/spectrum"
)

const (
	// Columns of the search, log10 cm^-2, and the Doppler parameter there, to
	// which damped lines are blind.
	searchFirst, searchStep = 19.5, 0.3
	searchColumns           = 8
	dopplerGuess            = 30.0
	// A center is tried where the mean of the bins within coreKms is below
	// this part of the level, noise allowed for.
	corePart, coreKms = 0.3, 250.0
	// A system enters the joint fit where twice the logarithm of the likelihood
	// gains searchGain, and is kept where it gains keepGain.
	searchGain, keepGain = 12.0, 20.0
	// Most systems of a spectrum.
	mostSystems = 8
	// So often the level is fitted again with the systems found in it.
	levelTurns = 2
	// wingDepth is the depth at which the window of a line ends.
	wingDepth = 0.04
	// leastMean is the mean transmission below which nothing is looked for: from
	// redshift 4.9 on so little light comes through beside any system that
	// most of what is found is made up (TestOpaqueForest).
	leastMean = 0.25
	// aheadKms is how far redward of the object hydrogen may lie.
	aheadKms = 3000.0
)

// damped is the state of the search for damped lines.
type damped struct {
	reach   [searchColumns]int       // bins on either side
	shape   [searchColumns][]float64 // transmission at offsets -reach to reach
	shapeOf float64                  // instrument's sigma that shape is for; 0 none yet
	null    []float64                // running sum of -2 ln likelihood without a system
	level   []float64                // level with the systems found so far
	found   []cloud
	least   float64 // column from which systems are kept, log10
}

// cloud is one hydrogen system: parameters and their errors.
type cloud struct {
	x, logN, lnB       float64 // x = c ln(1+z), km/s
	xErr, nErr, bErr   float64
	gain               float64
	chi2, dof          float64
	lines              int  // of the series, in the fit
	bound, lap, hidden bool // at a bound, overlapping another, core not covered
}

// prepareShapes fills the shapes of Lyman alpha for the search.
func (s *Scratch) prepareShapes(f *Finder) {
	d, fo := &s.damp, &s.forest
	if d.shapeOf == fo.sres && d.shape[0] != nil {
		return
	}
	d.shapeOf = fo.sres
	line := f.series[0]
	for k := range searchColumns {
		column := math.Pow(10, searchFirst+searchStep*float64(k))
		tau := func(i int) float64 {
			return line.OpticalDepth(column, dopplerGuess, line.Wave*math.Exp(float64(i)*fo.step/spectrum.SpeedOfLight))
		}
		reach := 4
		for reach < 400 && tau(reach) > wingDepth {
			reach++
		}
		d.reach[k] = reach
		d.shape[k] = resize(d.shape[k], 2*reach+1)
		for i := range d.shape[k] {
			d.shape[k][i] = math.Exp(-tau(i - reach))
		}
		s.blur = blur(d.shape[k], s.blur, fo.sres/fo.step)
	}
}

// blur convolves v with a Gaussian of sigma in elements, ends held. It returns
// the buffer it was given, grown.
func blur(v, buffer []float64, sigma float64) []float64 {
	if !(sigma > 0.2) {
		return buffer
	}
	half := int(3*sigma) + 1
	buffer = append(buffer[:0], v...)
	n := len(v)
	var kernel [64]float64
	half = min(half, len(kernel)-1)
	total := 0.0
	for k := 0; k <= half; k++ {
		kernel[k] = math.Exp(-0.5 * float64(k*k) / (sigma * sigma))
		total += kernel[k]
		if k > 0 {
			total += kernel[k]
		}
	}
	for i := range v {
		sum := kernel[0] * buffer[i]
		for k := 1; k <= half; k++ {
			sum += kernel[k] * (buffer[max(i-k, 0)] + buffer[min(i+k, n-1)])
		}
		v[i] = sum / total
	}
	return buffer
}

// cost returns -2 ln likelihood of one bin whose level is damped by t. The
// scatter of the forest dims with the light.
func (s *Scratch) cost(i int, level, t float64) float64 {
	fo := &s.forest
	if fo.noise[i] == 0 {
		return 0
	}
	m := level * t
	sd := fo.scatter * m
	variance := fo.noise[i] + sd*sd*fo.memory
	r := fo.flux[i] - m
	return r*r/variance + math.Log(variance)
}

// findDamped looks for the system whose likelihood gains most, fits it together
// with those found before, and goes on until nothing is gained.
func (s *Scratch) findDamped(f *Finder, opt Options) {
	d, fo := &s.damp, &s.forest
	d.found = d.found[:0]
	d.least = keepLogN
	if opt.Before == BeforeGalaxy {
		d.least = ownLogN
	}
	s.prepareShapes(f)
	d.level = append(d.level[:0], fo.level...)
	if n := len(fo.flux); cap(s.refused) < n {
		s.refused = make([]bool, n+n/2)
	}
	s.refused = s.refused[:len(fo.flux)]
	clear(s.refused)
	for len(d.found) < mostSystems {
		c, ok := s.bestCenter(f, opt)
		if !ok {
			break
		}
		d.found = append(d.found, c)
		if !s.fitClouds(f, len(d.found)-1) {
			d.found = d.found[:len(d.found)-1]
			// Nothing else is looked for there.
			s.blank(f, c)
		}
		s.dimLevel(f)
	}
	for range levelTurns {
		if len(d.found) == 0 {
			return
		}
		for i, v := range fo.level {
			fo.shade[i] = 1
			if v > 0 {
				fo.shade[i] = d.level[i] / v
			}
		}
		if !fo.followShaded() {
			return
		}
		for k := 0; k < len(d.found); k++ {
			if !s.fitClouds(f, k) {
				d.found = append(d.found[:k], d.found[k+1:]...)
				k--
			}
		}
		s.dimLevel(f)
	}
}

// blank takes the core of a refused center out of the search.
func (s *Scratch) blank(f *Finder, c cloud) {
	fo := &s.forest
	i := s.bin(f, c.x)
	for k := max(0, i-4); k <= min(len(fo.flux)-1, i+4); k++ {
		s.refused[k] = true
	}
}

// bin returns the bin of Lyman alpha at x = c ln(1+z).
func (s *Scratch) bin(f *Finder, x float64) int {
	return int(math.Round((x + spectrum.SpeedOfLight*math.Log(f.series[0].Wave) - s.forest.x0) / s.forest.step))
}

// bestCenter returns the most likely place and column of one more system.
func (s *Scratch) bestCenter(f *Finder, opt Options) (best cloud, ok bool) {
	d, fo := &s.damp, &s.forest
	n := len(fo.flux)
	d.null = resize(d.null, n+1)
	s.emptyCosts(d.null, 0, n, func(i int) float64 { return d.level[i] })
	core := int(coreKms / fo.step)
	last := min(n-1, s.bin(f, opt.lastHydrogen()))
	best.gain = searchGain
	at, column := -1, 0
	for i := max(core, fo.first); i <= last; i++ {
		if s.refused[i] || fo.mean[i] < leastMean {
			continue
		}
		var sum, level, variance, bins float64
		for k := max(0, i-core); k <= min(n-1, i+core); k++ {
			if fo.noise[k] > 0 {
				sum += fo.flux[k]
				level += d.level[k]
				variance += fo.noise[k]
				bins++
			}
		}
		if bins < float64(core) || sum-2*math.Sqrt(variance) > corePart*level || level < 3*math.Sqrt(variance) {
			continue
		}
		for k := range searchColumns {
			lo, hi := max(0, i-d.reach[k]), min(n-1, i+d.reach[k])
			gain := d.null[hi+1] - d.null[lo]
			for b := lo; b <= hi; b++ {
				gain -= s.cost(b, d.level[b], d.shape[k][b-i+d.reach[k]])
			}
			if gain > best.gain {
				best.gain, at, column = gain, i, k
			}
		}
	}
	if at < 0 {
		return best, false
	}
	best.x = fo.x0 + float64(at)*fo.step - spectrum.SpeedOfLight*math.Log(f.series[0].Wave)
	best.logN, best.lnB = searchFirst+searchStep*float64(column), math.Log(dopplerGuess)
	return best, true
}

// dimLevel makes level what all systems found let through.
func (s *Scratch) dimLevel(f *Finder) {
	d, fo := &s.damp, &s.forest
	copy(d.level, fo.level)
	for _, c := range d.found {
		for l := range c.lines {
			lo, hi := s.lineWindow(f, c, l)
			if lo >= hi {
				continue
			}
			s.dim(f, c, l, lo, hi)
			for i := lo; i < hi; i++ {
				d.level[i] *= s.through[i-lo]
			}
		}
	}
}

// lineWindow returns the bins that line l of a system dims.
func (s *Scratch) lineWindow(f *Finder, c cloud, l int) (lo, hi int) {
	fo := &s.forest
	line := f.series[l]
	// Damping wing: tau = a tau_0 / (sqrt(pi) u^2), at least the core.
	b := math.Exp(c.lnB)
	wing := b * math.Sqrt(line.Damping(b)*line.TauZero(math.Pow(10, c.logN), b)/(math.Sqrt(math.Pi)*wingDepth))
	half := max(wing, 5*b) + 3*fo.sres
	center := (c.x + spectrum.SpeedOfLight*math.Log(line.Wave) - fo.x0) / fo.step
	lo = int(math.Ceil(center - half/fo.step))
	hi = int(math.Floor(center+half/fo.step)) + 1
	return max(lo, fo.first), min(hi, len(fo.flux))
}

// dim fills through with the transmission of line l of a system on the bins from
// lo to hi, convolved with the instrument.
func (s *Scratch) dim(f *Finder, c cloud, l, lo, hi int) {
	fo := &s.forest
	line := f.series[l]
	column, b := math.Pow(10, c.logN), math.Exp(c.lnB)
	center := line.Wave * math.Exp(c.x/spectrum.SpeedOfLight)
	s.through = resize(s.through, hi-lo)
	for i := lo; i < hi; i++ {
		s.through[i-lo] = math.Exp(-line.OpticalDepth(column, b, line.Wave*fo.waves[i]/center))
	}
	s.blur = blur(s.through, s.blur, fo.sres/fo.step)
}
