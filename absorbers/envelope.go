package absorbers

import "math"

const (
	// envelopeHalf is the half width of the window in which the continuum of
	// the doublet search is a straight line, km/s: wider than any doublet
	// of an intervening system, narrower than emission lines of quasars.
	envelopeHalf = 2200.0
	// A pixel leaves the continuum when it lies below by clipLow or above by
	// clipHigh of its error; a few rounds settle it.
	clipLow, clipHigh = 2.0, 3.5
	clipRounds        = 8
	// Fewest pixels, and fewest of the window's, that hold a straight line.
	envelopeLeast = 8
	envelopeShare = 0.15
)

// envelope is a continuum above narrow absorption.
type envelope struct {
	level, err []float64 // NaN where there is none
	keep       []bool
	sum        [5][]float64 // running sums of w, wx, wxx, wy, wxy
}

// fit follows emission lines and runs over absorption lines: in a window around
// every pixel a weighted straight line, with pixels that lie low or high left
// out of all windows. err is the standard error of the line at the pixel.
func (e *envelope) fit(t *track) {
	n := len(t.x)
	e.level, e.err = resize(e.level, n), resize(e.err, n)
	if cap(e.keep) < n {
		e.keep = make([]bool, n+n/2)
	}
	e.keep = e.keep[:n]
	for i := range e.keep {
		e.keep[i] = t.weight[i] > 0
	}
	for k := range e.sum {
		e.sum[k] = resize(e.sum[k], n+1)
	}
	for round := range clipRounds {
		e.lines(t)
		if round == clipRounds-1 || !e.clip(t) {
			return
		}
	}
}

// lines fits all windows by running sums.
func (e *envelope) lines(t *track) {
	n := len(t.x)
	if n == 0 {
		return
	}
	x0 := t.x[0]
	s := &e.sum
	for i := range n {
		w := 0.0
		if e.keep[i] {
			w = t.weight[i]
		}
		x, y := (t.x[i]-x0)/envelopeHalf, t.flux[i]
		s[0][i+1] = s[0][i] + w
		s[1][i+1] = s[1][i] + w*x
		s[2][i+1] = s[2][i] + w*x*x
		s[3][i+1] = s[3][i] + w*y
		s[4][i+1] = s[4][i] + w*x*y
	}
	lo, hi := 0, 0
	kept := 0
	for i := range n {
		for hi < n && t.x[hi] <= t.x[i]+envelopeHalf {
			if e.keep[hi] {
				kept++
			}
			hi++
		}
		for t.x[lo] < t.x[i]-envelopeHalf {
			if e.keep[lo] {
				kept--
			}
			lo++
		}
		e.level[i], e.err[i] = math.NaN(), math.NaN()
		if kept < envelopeLeast || float64(kept) < envelopeShare*float64(hi-lo) {
			continue
		}
		x := (t.x[i] - x0) / envelopeHalf
		w, wx, wxx := s[0][hi]-s[0][lo], s[1][hi]-s[1][lo], s[2][hi]-s[2][lo]
		wy, wxy := s[3][hi]-s[3][lo], s[4][hi]-s[4][lo]
		mean := wx / w
		spread := wxx/w - mean*mean
		level, variance := wy/w, 1/w
		if d := x - mean; spread > 0.02 && math.Abs(d) < 1 {
			level += d * (wxy/w - mean*wy/w) / spread
			variance *= 1 + d*d/spread
		}
		e.level[i], e.err[i] = level, math.Sqrt(variance)
	}
}

// clip judges every pixel against the present continuum and reports whether
// any changed sides. Neighbors of a deep pixel go with it.
func (e *envelope) clip(t *track) bool {
	changed := false
	n := len(t.x)
	pull := func(i int) float64 { return (t.flux[i] - e.level[i]) * math.Sqrt(t.weight[i]) }
	for i := range n {
		if t.weight[i] == 0 || math.IsNaN(e.level[i]) {
			continue
		}
		p := pull(i)
		keep := p > -clipLow && p < clipHigh
		if keep && p < 0 {
			for _, j := range [2]int{i - 1, i + 1} {
				if j >= 0 && j < n && t.weight[j] > 0 && pull(j) < -2*clipLow {
					keep = false
				}
			}
		}
		if keep != e.keep[i] {
			e.keep[i], changed = keep, true
		}
	}
	return changed
}
