package pipeline

import (
	"math"

	"duskline/lines"
	"duskline/spectrum"
)

// clearWindows are rest wavelengths, vacuum Angstrom, where quasars show little but
// their continuum (Vanden Berk et al. 2001, AJ 122, 549, section 3, and Shen et al.
// 2011, ApJS 194, 45, section 3, from memory).
var clearWindows = [][2]float64{{1275, 1290}, {1350, 1360}, {1445, 1465}, {1690, 1710}, {1975, 2050}, {2150, 2200}, {2640, 2675},
	{3010, 3050}, {3650, 3710}, {4190, 4230}, {5080, 5120}, {5600, 5650}}

// powerLaw is level (x/at)^slope, from windows up to the wavelength reddest.
type powerLaw struct{ at, level, slope, reddest float64 }

func (p powerLaw) value(wave float64) float64 { return p.level * math.Pow(wave/p.at, p.slope) }

const (
	// usualSlope is that of the mean quasar from Lyman alpha to H-beta (Vanden Berk et
	// al. 2001); it holds where one window is all there is, or windows too close
	// to tell. Others lie within leastSlope and mostSlope: dust reddens, and nothing
	// is bluer than the Rayleigh-Jeans side of a disk by much (common practice,
	// no source).
	usualSlope            = -1.56
	leastSlope, mostSlope = -3.0, 1.5
	slopeSpan             = 0.08 // of the natural logarithm of wavelength, for a slope
	// lowWindow is how far, relatively, a window may lie below the law through the
	// others: more, and absorption is in it.
	lowWindow = 0.1
)

// through returns the power law through the medians of the clear windows within
// [from, to], rest Angstrom, outside the troughs that are known; drop leaves out those
// that lie below the others.
func (l *level) through(g *spectrum.Grid, m *masker, z1, from, to float64, drop bool) (p powerLaw, ok bool) {
	var x, y []float64
	for _, c := range clearWindows {
		if c[0] < from || c[1] > to || l.inTrough(m.pixels(c[0]*z1, c[1]*z1)) != nil {
			continue
		}
		if f, _ := l.seen(g, m, c[0]*z1, c[1]*z1); f > 0 {
			x, y = append(x, math.Log(0.5*(c[0]+c[1])*z1)), append(y, math.Log(f))
		}
	}
	for drop && len(x) > 2 {
		worst, low := -1, math.Log1p(-lowWindow)
		for i := range x {
			if r := y[i] - lineThrough(x, y, i, x[i]); r < low {
				worst, low = i, r
			}
		}
		if worst < 0 {
			break
		}
		x, y = append(x[:worst], x[worst+1:]...), append(y[:worst], y[worst+1:]...)
	}
	if len(x) == 0 {
		return p, false
	}
	mean := 0.0
	for i := range x {
		mean += x[i] / float64(len(x))
	}
	p = powerLaw{at: math.Exp(mean), slope: usualSlope, reddest: math.Exp(x[len(x)-1])}
	if x[len(x)-1]-x[0] >= slopeSpan {
		p.slope = min(max(lineThrough(x, y, -1, mean+1)-lineThrough(x, y, -1, mean), leastSlope), mostSlope)
	}
	for i := range x {
		p.level += (y[i] - p.slope*(x[i]-mean)) / float64(len(x))
	}
	p.level = math.Exp(p.level)
	return p, true
}

// seen returns the median flux of the good pixels between two observed wavelengths,
// and their weight together; 0 where they are fewer than sideLeast.
func (l *level) seen(g *spectrum.Grid, m *masker, from, to float64) (f, weight float64) {
	l.window = l.window[:0]
	lo, hi := m.pixels(from, to)
	for i := lo; i < hi; i++ {
		if g.Ivar[i] > 0 {
			l.window = append(l.window, g.Flux[i])
			weight += g.Ivar[i]
		}
	}
	if len(l.window) < sideLeast {
		return 0, 0
	}
	return spectrum.Median(l.window), weight
}

// lineThrough returns the value at x of the line of least squares through the points,
// or of their mean where they have no span, without the one of index skip.
func lineThrough(xs, ys []float64, skip int, x float64) float64 {
	var n, sx, sy, sxx, sxy float64
	for i := range xs {
		if i != skip {
			dx := xs[i] - x
			n, sx, sy, sxx, sxy = n+1, sx+dx, sy+ys[i], sxx+dx*dx, sxy+dx*ys[i]
		}
	}
	if det := n*sxx - sx*sx; det > n*n*1e-4 {
		return (sxx*sy - sx*sxy) / det
	}
	return sy / n
}

// outflows are the lines, rest Angstrom, in whose blue wide troughs of outflows stand:
// Si IV, C IV, Al III and Mg II (Weymann et al. 1991, ApJ 373, 23). That of N V lies
// on Lyman alpha and its forest, where no continuum is seen in any case.
var outflows = []float64{1396.8, 1549.1, 1857.0, 2798.8}

const (
	// The velocities at which troughs count, their least width, all km/s, and the
	// level below which they do: Weymann et al. 1991.
	outflowFrom, outflowTo, outflowWidth = 3000.0, 25000.0, 2000.0
	outflowBelow                         = 0.9
	// A trough is outflowDepth deep in the mean, so that what a power law does
	// not describe is none, and that by outflowSigmas of the noise; it is looked for with
	// a mean of outflowSmooth km/s and masked with outflowMargin km/s on either side.
	// Common practice, no source.
	outflowDepth, outflowSigmas  = 0.2, 10.0
	outflowSmooth, outflowMargin = 700.0, 500.0
	// The windows that the power law is taken through, relative to the line.
	outflowBlue, outflowRed = 0.8, 1.75
	// troughDoubt is the relative standard error of the power law across a trough.
	troughDoubt = 0.05
)

// crossTroughs writes the power law through clear windows over the troughs of outflows.
// Otherwise the spline, which has few pixels between troughs and masked lines, dives into them.
func (l *level) crossTroughs(g *spectrum.Grid, m *masker, z1 float64) {
	l.troughs = l.troughs[:0]
	pixelKms := g.Step * math.Ln10 * spectrum.SpeedOfLight
	half, least, margin := int(outflowSmooth/2/pixelKms), int(outflowWidth/pixelKms), int(outflowMargin/pixelKms)
	_, edge := m.pixels(1, lyaEdge*z1)
	for _, line := range outflows {
		p, ok := l.through(g, m, z1, outflowBlue*line, outflowRed*line, true)
		if !ok || p.reddest < line*z1 {
			continue // what lies beyond all windows may be the law's fault
		}
		lo, hi := m.pixels(line*z1*(1-outflowTo/spectrum.SpeedOfLight), line*z1*(1-outflowFrom/spectrum.SpeedOfLight))
		lo = max(lo, edge)
		for i := lo; i < hi; {
			n := 0
			for i+n < hi && lowAround(g, p, i+n, half) {
				n++
			}
			if n >= least && deep(g, p, i, i+n) {
				l.troughs = append(l.troughs, trough{from: max(lo, i-margin), to: min(g.Len(), i+n+margin), line: line, law: p})
			}
			i += n + 1
		}
	}
	// Windows that dust or iron had made look low count where they proved free.
	for k := range l.troughs {
		t := &l.troughs[k]
		if p, ok := l.through(g, m, z1, outflowBlue*t.line, outflowRed*t.line, false); ok {
			t.law = p
		}
		for i := t.from; i < t.to; i++ {
			l.pretend(g, t.law, i, troughDoubt)
		}
	}
}

// trough is a range of pixels, and the continuum that the quasar has without it.
type trough struct {
	from, to int
	line     float64 // whose it is, rest Angstrom
	law      powerLaw
}

// inTrough returns the law of a trough in which pixels of a range lie; nil where none do.
func (l *level) inTrough(lo, hi int) *powerLaw {
	for i := range l.troughs {
		if t := &l.troughs[i]; lo < t.to && hi > t.from {
			return &t.law
		}
	}
	return nil
}

// absorbed reports whether a log10 wavelength lies in a trough: its light tells nothing
// of lines, nor of the continuum beside them.
func (l *level) absorbed(g *spectrum.Grid, x float64) bool {
	i := int(math.Round((x - g.Start) / g.Step))
	return l.inTrough(i, i+1) != nil
}

// pretend sets a pixel of the fit to the value of a power law with a relative error.
func (l *level) pretend(g *spectrum.Grid, p powerLaw, i int, doubt float64) {
	f := p.value(math.Pow(10, g.LogWave(i)))
	l.flux[i], l.ivar[i] = f, 1/(doubt*doubt*f*f)
}

// lowAround reports whether the mean around a pixel is below the power law by what counts in a trough.
func lowAround(g *spectrum.Grid, p powerLaw, i, half int) bool {
	n, sum := 0.0, 0.0
	for j := max(0, i-half); j < min(g.Len(), i+half+1); j++ {
		if g.Ivar[j] > 0 {
			n++
			sum += g.Flux[j]
		}
	}
	return n > 0 && sum < n*outflowBelow*p.value(math.Pow(10, g.LogWave(i)))
}

// deep reports whether a range of pixels is a trough by its depth and significance.
func deep(g *spectrum.Grid, p powerLaw, lo, hi int) bool {
	n, deficit, variance := 0.0, 0.0, 0.0
	for i := lo; i < hi; i++ {
		if g.Ivar[i] > 0 {
			f := p.value(math.Pow(10, g.LogWave(i)))
			n++
			deficit += 1 - g.Flux[i]/f
			variance += 1 / (g.Ivar[i] * f * f)
		}
	}
	return deficit > outflowDepth*n && deficit > outflowSigmas*math.Sqrt(variance)
}

// withPartners makes the lines of a doublet unmeasured together where a trough hides
// one: what is left of the other would be a number of neither.
func (l *level) withPartners(results []lines.Result) {
	for _, t := range l.troughs {
		var hidden *lines.Result
		for i := range results {
			if r := &results[i]; math.Abs(r.RestWave-t.line) < partnerWithin && r.Reason == lines.ReasonMasked {
				hidden = r
			}
		}
		for i := range results {
			if r := &results[i]; hidden != nil && math.Abs(r.RestWave-t.line) < partnerWithin {
				name, wave := r.Name, r.RestWave
				*r = *hidden
				r.Name, r.RestWave = name, wave
			}
		}
	}
}

// partnerWithin is how far, rest Angstrom, the lines of the doublets lie from their middle in outflows at most.
const partnerWithin = 8.0

const (
	// saturated is the mean transmission of the Lyman alpha forest below which no
	// continuum can be seen through it: reached at z = 4.7 (Becker et al. 2013, MNRAS 430,
	// 2067, from memory).
	saturated = 0.3
	// The forest that tells, rest Angstrom: free of the lines of O VI and of the
	// quasar's own surroundings.
	forestFrom, forestTo = 1050.0, 1170.0
	// The windows that the continuum at the edge is taken from, where it ends in the
	// blue of Lyman alpha, and where the blend of that with N V ends, rest Angstrom.
	edgeBlue, edgeRed, edgeEnd, edgeHeld = 1270.0, 1760.0, 1195.0, 1270.0
)

// anchor lets the continuum of a quasar whose forest is saturated end at Lyman alpha:
// what is left of the light beyond is not the continuum. Under the line itself it is the
// power law through the clear windows redward. Of the blend of Lyman alpha and N V the blue half is
// gone, and no profile fits the rest: nothing is measured there, nor in the forest.
func (l *level) anchor(g *spectrum.Grid, m *masker, z1 float64) {
	p, ok := l.through(g, m, z1, edgeBlue, edgeRed, true)
	lo, hi := m.pixels(forestFrom*z1, forestTo*z1)
	if !ok || hi-lo < sideLeast {
		return
	}
	n, sum := 0, 0.0
	for i := lo; i < hi; i++ {
		if g.Ivar[i] > 0 {
			n++
			sum += g.Flux[i] / p.value(math.Pow(10, g.LogWave(i)))
		}
	}
	if 2*n < hi-lo || sum > saturated*float64(n) {
		return
	}
	lo, hi = m.pixels(edgeEnd*z1, edgeHeld*z1)
	clear(l.ivar[:lo])
	l.edge = math.Log10(edgeHeld * z1)
	for i := lo; i < hi; i++ {
		l.pretend(g, p, i, troughDoubt)
	}
}

// lyaEdge is the rest wavelength of Lyman alpha, vacuum Angstrom (Morton 2003, ApJS 149, 205).
const lyaEdge = 1215.67
