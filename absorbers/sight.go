package absorbers

import (
	"math"
	"sort"

	"duskline/spectrum"
)

// Arm is one piece of a spectrum, as in package lines. All slices but Resolution
// have the length of Wave; Cont and ContErr are not read.
type Arm struct {
	Wave []float64 // vacuum, barycentric, Angstrom, strictly increasing
	Flux []float64 // any unit; not read where Ivar is 0
	Ivar []float64 // inverse variance of Flux, 0 where a pixel must not be used
	Cont []float64
	// ContErr is there so that the arms of package lines convert.
	ContErr []float64
	// Resolution is wavelength / FWHM: empty, one value, or one per pixel.
	Resolution []float64
}

func (a *Arm) check() {
	n := len(a.Wave)
	if len(a.Flux) != n || len(a.Ivar) != n {
		panic("absorbers: slices of an arm differ in length")
	}
	if k := len(a.Resolution); k > 1 && k != n {
		panic("absorbers: resolution must be empty, one value, or one per pixel")
	}
}

// sigmaKms returns the instrument's Gaussian sigma at a pixel, 0 when unknown.
func (a *Arm) sigmaKms(i int) float64 {
	r := 0.0
	switch len(a.Resolution) {
	case 0:
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

// track is a spectrum laid end to end. x is c ln(wave), so that differences are
// velocities; a pixel that cannot be used has weight 0.
type track struct {
	wave, x, dx, flux, weight, sres []float64
}

func (t *track) reset() {
	for _, v := range []*[]float64{&t.wave, &t.x, &t.dx, &t.flux, &t.weight, &t.sres} {
		*v = (*v)[:0]
	}
}

// lay joins the arms from blue to red. Where two overlap they are cut in the
// middle of the overlap; an arm inside another is left out.
func (s *Scratch) lay(arms []Arm) {
	t := &s.track
	t.reset()
	s.order = s.order[:0]
	for k := range arms {
		arms[k].check()
		if len(arms[k].Wave) >= 2 {
			s.order = append(s.order, k)
		}
	}
	sort.SliceStable(s.order, func(i, j int) bool { return arms[s.order[i]].Wave[0] < arms[s.order[j]].Wave[0] })
	last := math.Inf(-1) // end of what was laid
	for _, k := range s.order {
		a := &arms[k]
		n := len(a.Wave)
		if a.Wave[n-1] <= last {
			continue
		}
		lo := math.Inf(-1)
		if a.Wave[0] < last {
			lo = 0.5 * (a.Wave[0] + last)
			cut := len(t.wave)
			for cut > 0 && t.wave[cut-1] >= lo {
				cut--
			}
			t.truncate(cut)
		}
		for p := range a.Wave {
			if a.Wave[p] >= lo {
				t.add(a, p)
			}
		}
		last = a.Wave[n-1]
	}
	for i := range t.x {
		t.dx = append(t.dx, 0)
		switch {
		case len(t.x) == 1:
		case i == 0:
			t.dx[i] = t.x[1] - t.x[0]
		case i == len(t.x)-1:
			t.dx[i] = t.x[i] - t.x[i-1]
		default:
			// Beside a gap a pixel is as wide as on its other side.
			l, r := t.x[i]-t.x[i-1], t.x[i+1]-t.x[i]
			t.dx[i] = 0.5 * (min(l, 1.5*r) + min(r, 1.5*l))
		}
	}
}

func (t *track) truncate(n int) {
	t.wave, t.x, t.flux, t.weight, t.sres = t.wave[:n], t.x[:n], t.flux[:n], t.weight[:n], t.sres[:n]
	t.dx = t.dx[:min(n, len(t.dx))] // laid last
}

func (t *track) add(a *Arm, p int) {
	w, f := a.Ivar[p], a.Flux[p]
	if !(w > 0) || math.IsInf(w, 0) || math.IsNaN(f) || math.IsInf(f, 0) {
		w, f = 0, 0
	}
	t.wave = append(t.wave, a.Wave[p])
	t.x = append(t.x, spectrum.SpeedOfLight*math.Log(a.Wave[p]))
	t.flux = append(t.flux, f)
	t.weight = append(t.weight, w)
	t.sres = append(t.sres, a.sigmaKms(p))
}

// index returns the first element of an increasing slice that is at least v.
func index(x []float64, v float64) int {
	lo, hi := 0, len(x)
	for lo < hi {
		mid := (lo + hi) / 2
		if x[mid] < v {
			lo = mid + 1
		} else {
			hi = mid
		}
	}
	return lo
}

// resize returns a zeroed slice of length n, reusing v when it is large enough.
func resize(v []float64, n int) []float64 {
	if cap(v) < n {
		v = make([]float64, n, n+n/2)
	}
	v = v[:n]
	clear(v)
	return v
}
