package lines

import (
	"math"

	"duskline/spectrum"
)

// Scratch holds the buffers of Measure. The zero value is ready for use.
type Scratch struct {
	meter *Meter
	arms  []Arm
	opt   Options

	first  []int     // offset of each arm in the slices below
	weight []float64 // of every pixel, 0 when it cannot be used
	resid  []float64 // flux - continuum
	sumW   []float64 // running sum of weight, one longer than the arm
	sumWR  []float64 // running sum of weight times (flux - continuum)
	sumN   []float64 // running number of good pixels
	claims []Band    // around strong lines, in order of wavelength
	tracks []track
	parent []int // union-find over tracks
	blends []blend
	order  []int // blends, strongest first
	member []int // track indices of all blends, one after the other
	lent         // by the blends measured so far

	done      []done // blends of the first round
	wasMember []int
	borrowed  lent // what faint blends of the first round could borrow
	was       []was

	bins      []int // pixels a bin may have, along a window
	prob      problem
	lm        marquardt
	avg       average
	left      []float64 // residuals of a blend
	copy      []float64 // profiles of a second component
	jac       []float64 // Jacobian of all windows
	jacAt     []int
	grad      []float64
	cross     []float64
	bumps     []bump
	sums      []int // first components of broad lots
	moved     []int
	free      snapshot // a blend before its lines are joined to lots
	tilted    [tiltNodes]tiltNode
	tiltBest  float64 // see tiltRange
	tiltErr   float64
	cramped   bool        // the last tilt may be far from the fit
	even      snapshot    // with equal amplitudes in the lots
	sides     [2]snapshot // see refit
	guesses   [len(stellarSigma)]stellarGuess
	placed    []placement
	placedArm int // the arm of placed
	heights   []height
	means     []float64
	bar       []byte // of every line of the list, for a second round: inList and others
	labels    map[labelKey]string
	labeled   *Meter // whose names the labels are
}

// track is a line inside the coverage.
type track struct {
	line    *line
	index   int     // of the line in the list
	center  int     // pixel of the arm nearest to lam0
	next    float64 // distance of the nearest line of the group, km/s
	carrier int     // index of the line that carries this one's flux, -1 for none
	lam0    float64 // observed wavelength at zero offset
	arm     int     // the arm that sees it best
	pix     float64 // width of a pixel there, km/s
	sres    float64 // Gaussian sigma of the instrument there, km/s; 0 unknown
	broad   bool    // allowed broad widths and offsets
	usable  bool    // takes part in a fit
	strong  bool    // claims the pixels around it
	stands  bool    // has its results from the first round, judged there
	snr     float64 // of the best box, signed: negative in absorption
	first   float64 // snr before stronger lines claimed their pixels
	v, s    float64 // offset and total sigma of the best box, or the guess
	result  Result
	second  Result     // of the broader component, Name empty where there is none
	doubt   [2]string  // why the emission of either is none
	high    [2]float64 // how high its emission stands, in units of the dips around
}

// kinematics is an offset with the width of the source.
type kinematics struct {
	snr, v, source float64
}

const (
	freeFrom   = 4.0  // box S/N from which a line may find its own offset and width
	ownFrom    = 12.0 // amplitude S/N from which an ion in a blend leaves the main ion's offset and width
	seenFrom   = 3.0  // profile S/N from which a line counts as seen
	anchorFrom = 5.0  // profile S/N from which a line may lend its offset and width
)

func sign(x float64) int {
	if x < 0 {
		return 1
	}
	return 0
}

// good returns the weight of a pixel, 0 when it cannot be used.
func (a *Arm) good(i int) float64 {
	w := a.Ivar[i]
	if !(w > 0) || math.IsInf(w, 0) {
		return 0
	}
	r := a.Flux[i] - a.Cont[i]
	if math.IsNaN(r) || math.IsInf(r, 0) {
		return 0
	}
	return w
}

// sigmaKms returns the instrument's Gaussian sigma at pixel i in km/s, 0 when
// it is not known.
func (a *Arm) sigmaKms(i int) float64 {
	var r float64
	switch len(a.Resolution) {
	case 0:
		return 0
	case 1:
		r = a.Resolution[0]
	default:
		r = a.Resolution[i]
	}
	if !(r > 0) || math.IsInf(r, 0) {
		return 0
	}
	return spectrum.SpeedOfLight / r / fwhmPerSigma
}

// fwhmPerSigma is 2 sqrt(2 ln 2).
const fwhmPerSigma = 2.3548200450309493

// pixelKms returns the width of pixel i in km/s, the smaller of both sides.
func (a *Arm) pixelKms(i int) float64 {
	d := math.Inf(1)
	if i > 0 {
		d = a.Wave[i] - a.Wave[i-1]
	}
	if i+1 < len(a.Wave) {
		d = min(d, a.Wave[i+1]-a.Wave[i])
	}
	return spectrum.SpeedOfLight * d / a.Wave[i]
}

// index returns the first pixel at or above a wavelength.
func (a *Arm) index(wave float64) int { return lowerBound(a.Wave, wave) }

// nearest returns the pixel nearest to a wavelength.
func (a *Arm) nearest(wave float64) int {
	i := a.index(wave)
	if i == len(a.Wave) || (i > 0 && wave-a.Wave[i-1] < a.Wave[i]-wave) {
		i--
	}
	return i
}

// load checks every pixel once: weight and residual of those that can be used.
func (s *Scratch) load() {
	total := 0
	s.first = s.first[:0]
	for k := range s.arms {
		s.first = append(s.first, total)
		total += len(s.arms[k].Wave) + 1
	}
	s.weight, s.resid = resize(s.weight, total), resize(s.resid, total)
	s.sumW, s.sumWR, s.sumN = resize(s.sumW, total), resize(s.sumWR, total), resize(s.sumN, total)
	for k := range s.arms {
		a, o := &s.arms[k], s.first[k]
		for i := range a.Wave {
			if g := a.good(i); g > 0 {
				s.weight[o+i], s.resid[o+i] = g, a.Flux[i]-a.Cont[i]
			}
		}
	}
}

// good returns the weight of pixel i of arm k, 0 when it cannot be used.
func (s *Scratch) good(k, i int) float64 { return s.weight[s.first[k]+i] }

// survey fills the running sums, without the pixels that claims cover.
func (s *Scratch) survey() {
	for k := range s.arms {
		a, o := &s.arms[k], s.first[k]
		var w, wr, n float64
		i := 0
		for claim := 0; i < len(a.Wave); claim++ {
			to, next := len(a.Wave), len(a.Wave)
			if claim < len(s.claims) {
				b := s.claims[claim]
				to = max(i, a.index(b.Lo))
				next = max(to, a.index(math.Nextafter(b.Hi, math.Inf(1))))
			}
			weight, resid := s.weight[o+i:o+to], s.resid[o+i:o+to]
			resid = resid[:len(weight)]
			sumW, sumWR, sumN := s.sumW[o+i+1:][:len(weight)], s.sumWR[o+i+1:][:len(weight)], s.sumN[o+i+1:][:len(weight)]
			for k, g := range weight {
				if g > 0 {
					w += g
					wr += g * resid[k]
					n++
				}
				sumW[k], sumWR[k], sumN[k] = w, wr, n
			}
			for k := to; k < next; k++ {
				s.sumW[o+k+1], s.sumWR[o+k+1], s.sumN[o+k+1] = w, wr, n
			}
			i = next
		}
	}
}

// box returns weight, weighted residual and number of good pixels of [lo, hi)
// on arm k, cut to the arm.
func (s *Scratch) box(k, lo, hi int) (w, wr, n float64) {
	lo, hi = max(lo, 0), min(hi, len(s.arms[k].Wave))
	if lo >= hi {
		return 0, 0, 0
	}
	o := s.first[k]
	return s.sumW[o+hi] - s.sumW[o+lo], s.sumWR[o+hi] - s.sumWR[o+lo], s.sumN[o+hi] - s.sumN[o+lo]
}
