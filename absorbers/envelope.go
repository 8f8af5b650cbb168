package absorbers

import (
	"math"
	"slices"
)

const (
	// envelopeHalf is the half width of the window in which the continuum of
	// the doublet search is a parabola, km/s: wider than any doublet of an
	// intervening system, no wider than the emission lines of quasars.
	envelopeHalf = 2200.0
	// A pixel leaves the continuum when it lies below by clipLow or above by
	// clipHigh of its error; a few rounds settle it.
	clipLow, clipHigh = 2.0, 3.5
	clipRounds        = 8
	// What is kept of Gaussian noise between those limits has this mean, in its own
	// standard deviation: (phi(2) - phi(3.5)) / (Phi(3.5) - Phi(-2)) of the truncated normal
	// distribution (Johnson, Kotz & Balakrishnan 1994, section 10.1, from memory).
	clipBias = 0.0544
	// So does one whose neighborhood of clipKms on either side lies below as a
	// whole by clipBox of its error, contFloor included: shallow lines of many
	// pixels would otherwise bend the parabola into themselves.
	clipKms, clipBox = 150.0, 2.5
	// Fewest pixels, and fewest of the window's, that hold the continuum.
	envelopeLeast = 8
	envelopeShare = 0.15
	// The bend is used where the kept pixels hold it: they reach to both sides
	// of the pixel, and what the line leaves of the square of x has at least
	// this variance (0.09 for pixels spread evenly over the window).
	bendSpread = 0.02
	// Where the parabola does not follow the spectrum, on the flanks and peaks of narrow
	// emission lines, its window has narrowHalf: where all pixels over more than runKms
	// have left it, which is longer than a narrow absorption line, or where those within
	// clipKms of one lie above it by clipPeak of their error, as no absorption does.
	narrowHalf       = 0.5 * envelopeHalf
	runKms, clipPeak = 800.0, 4.0
	// envelopePiece is the length, in half windows, of the pieces in which
	// running sums begin anew, so that fourth powers keep their digits.
	envelopePiece = 16.0
)

// envelope is a continuum above narrow absorption.
type envelope struct {
	level, err []float64 // NaN where there is none
	keep       []bool
	root       []float64    // of the weights
	narrow     []bool       // where the window has narrowHalf
	sum        [9][]float64 // running sums of w, wx, wx^2, wx^3, wx^4, wy, wxy, wx^2y, sqrt(w)
}

// fit follows emission lines and runs over absorption lines: in a window around
// every pixel from start on a weighted parabola, with pixels that lie low or high
// left out of all windows. err is the standard error of the parabola at the
// pixel.
func (e *envelope) fit(t *track, start int) {
	n := len(t.x)
	e.level, e.err = resize(e.level, n), resize(e.err, n)
	if cap(e.keep) < n {
		e.keep = make([]bool, n+n/2)
	}
	e.keep = e.keep[:n]
	e.root = resize(e.root, n)
	for i := range e.keep {
		e.keep[i] = i >= start && t.weight[i] > 0
		e.level[i], e.err[i] = math.NaN(), math.NaN()
		e.root[i] = math.Sqrt(t.weight[i])
	}
	for k := range e.sum {
		e.sum[k] = resize(e.sum[k], n+1)
	}
	if cap(e.narrow) < n {
		e.narrow = make([]bool, n+n/2)
	}
	e.narrow = e.narrow[:n]
	clear(e.narrow)
	e.settle(t, start, false)
	if e.findPeaked(t, start) {
		e.settle(t, start, true)
	}
}

// settle fits and clips until no pixel changes sides, all pieces or those with peaks.
func (e *envelope) settle(t *track, start int, peaked bool) {
	n := len(t.x)
	for round := range clipRounds {
		for first := start; first < n; {
			end := index(t.x, t.x[first]+envelopePiece*envelopeHalf)
			if !peaked || slices.Contains(e.narrow[first:end], true) {
				e.piece(t, first, end)
			}
			first = end
		}
		if round == clipRounds-1 || !e.clip(t, start) {
			return
		}
	}
}

// findPeaked marks as narrow, and takes all pixels back in, where the parabola does not
// follow the spectrum, and reports whether that is anywhere.
func (e *envelope) findPeaked(t *track, start int) bool {
	n := len(t.x)
	found := false
	mark := func(low, high float64) {
		found = true
		for i := index(t.x, low-envelopeHalf); i < n && t.x[i] <= high+envelopeHalf; i++ {
			if i >= start {
				e.narrow[i] = true
			}
		}
	}
	ws, rs := e.residuals(t, start)
	run := start // first pixel after the last that was kept
	lo, hi := start, start
	for i := start; i < n; i++ {
		for hi < n && t.x[hi] <= t.x[i]+clipKms {
			hi++
		}
		for t.x[lo] < t.x[i]-clipKms {
			lo++
		}
		if e.keep[i] || t.weight[i] == 0 || i == n-1 {
			if i > run && t.x[i-1]-t.x[run] > runKms {
				mark(t.x[run], t.x[i-1])
			}
			run = i + 1
		}
		if w, floor := ws[hi]-ws[lo], contFloor*e.level[i]; w > 0 && (rs[hi]-rs[lo])/w > clipPeak*math.Sqrt(1/w+floor*floor) {
			mark(t.x[i], t.x[i])
		}
	}
	for i := start; i < n; i++ {
		if e.narrow[i] {
			e.keep[i] = t.weight[i] > 0
		}
	}
	return found
}

// residuals fills two running sums, of weight and of weighted residual from the
// present continuum, in room that the lines through the windows use.
func (e *envelope) residuals(t *track, start int) (ws, rs []float64) {
	ws, rs = e.sum[0], e.sum[1]
	ws[start], rs[start] = 0, 0
	for i := start; i < len(t.x); i++ {
		w, r := t.weight[i], t.flux[i]-e.level[i]
		if w == 0 || math.IsNaN(r) {
			w, r = 0, 0
		}
		ws[i+1], rs[i+1] = ws[i]+w, rs[i]+w*r
	}
	return ws, rs
}

// piece fits the windows of the pixels from first to end by running sums.
func (e *envelope) piece(t *track, first, end int) {
	s := &e.sum
	x0 := 0.5 * (t.x[first] + t.x[end-1])
	begin, stop := index(t.x, t.x[first]-envelopeHalf), index(t.x, t.x[end-1]+1.001*envelopeHalf)
	for k := range s {
		s[k][begin] = 0
	}
	for i := begin; i < stop; i++ {
		w, root := 0.0, 0.0
		if e.keep[i] {
			w, root = t.weight[i], e.root[i]
		}
		x, y := (t.x[i]-x0)/envelopeHalf, t.flux[i]
		wx := w * x
		wxx := wx * x
		s[0][i+1] = s[0][i] + w
		s[1][i+1] = s[1][i] + wx
		s[2][i+1] = s[2][i] + wxx
		s[3][i+1] = s[3][i] + wxx*x
		s[4][i+1] = s[4][i] + wxx*x*x
		s[5][i+1] = s[5][i] + w*y
		s[6][i+1] = s[6][i] + wx*y
		s[7][i+1] = s[7][i] + wxx*y
		s[8][i+1] = s[8][i] + root
	}
	lo, hi, kept := begin, begin, 0
	for i := first; i < end; i++ {
		half := envelopeHalf
		if e.narrow[i] {
			half = narrowHalf
		}
		for ; hi < stop && t.x[hi] <= t.x[i]+half; hi++ {
			kept += e.count(hi)
		}
		for ; t.x[hi-1] > t.x[i]+half; hi-- {
			kept -= e.count(hi - 1)
		}
		for ; t.x[lo] < t.x[i]-half; lo++ {
			kept -= e.count(lo)
		}
		for ; lo > begin && t.x[lo-1] >= t.x[i]-half; lo-- {
			kept += e.count(lo - 1)
		}
		e.level[i], e.err[i] = math.NaN(), math.NaN()
		if kept < envelopeLeast || float64(kept) < envelopeShare*float64(hi-lo) {
			continue
		}
		e.level[i], e.err[i] = e.at((t.x[i]-x0)/envelopeHalf, half/envelopeHalf, lo, hi)
	}
}

func (e *envelope) count(i int) int {
	if e.keep[i] {
		return 1
	}
	return 0
}

// at returns the value at x and its error of the parabola through the kept
// pixels from lo to hi, by polynomials that are orthogonal over them. Where they
// do not hold its bend it is a line, where not that, the mean.
func (e *envelope) at(x, half float64, lo, hi int) (level, err float64) {
	s := &e.sum
	w := s[0][hi] - s[0][lo]
	mean := (s[1][hi] - s[1][lo]) / w
	// Moments about the mean, by the binomial theorem.
	m2, m3, m4 := (s[2][hi]-s[2][lo])/w, (s[3][hi]-s[3][lo])/w, (s[4][hi]-s[4][lo])/w
	c2 := m2 - mean*mean
	c3 := m3 - 3*mean*m2 + 2*mean*mean*mean
	c4 := m4 - 4*mean*m3 + 6*mean*mean*m2 - 3*mean*mean*mean*mean
	y0, y1, y2 := (s[5][hi]-s[5][lo])/w, (s[6][hi]-s[6][lo])/w, (s[7][hi]-s[7][lo])/w
	level, variance := y0-clipBias*(s[8][hi]-s[8][lo])/w, 1.0
	d := x - mean
	if c2 <= 0.02*half*half || math.Abs(d) >= half {
		return level, math.Sqrt(variance / w)
	}
	slope := (y1 - mean*y0) / c2
	level += slope * d
	variance += d * d / c2
	// The bend: q = d^2 - (c3/c2) d - c2.
	norm := c4 - c3*c3/c2 - c2*c2
	if norm > bendSpread*half*half*half*half && math.Abs(d) < 0.5*half {
		q := d*d - c3/c2*d - c2
		square := y2 - 2*mean*y1 + mean*mean*y0 // mean of (x - mean)^2 y
		bend := (square - c3*slope - c2*y0) / norm
		level += bend * q
		variance += q * q / norm
	}
	return level, math.Sqrt(variance / w)
}

// clip judges every pixel against the present continuum and reports whether
// any changed sides. Neighbors of a deep pixel go with it.
func (e *envelope) clip(t *track, start int) bool {
	changed := false
	n := len(t.x)
	pull := func(i int) float64 { return (t.flux[i] - e.level[i]) * e.root[i] }
	ws, rs := e.residuals(t, start)
	lo, hi := start, start
	for i := start; i < n; i++ {
		for hi < n && t.x[hi] <= t.x[i]+clipKms {
			hi++
		}
		for t.x[lo] < t.x[i]-clipKms {
			lo++
		}
		if t.weight[i] == 0 || math.IsNaN(e.level[i]) {
			continue
		}
		p := pull(i)
		keep := p > -clipLow && p < clipHigh
		if keep {
			w, floor := ws[hi]-ws[lo], contFloor*e.level[i]
			keep = (rs[hi]-rs[lo])/w > -clipBox*math.Sqrt(1/w+floor*floor)
		}
		if keep && p < 0 {
			for _, j := range [2]int{i - 1, i + 1} {
				if j >= start && j < n && t.weight[j] > 0 && pull(j) < -2*clipLow {
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
