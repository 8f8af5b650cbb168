package fitsread

import (
	"fmt"
	"math"
	"strings"

	"duskline/spectrum"
)

// losses follows how many good pixels of a segment are left, step by step.
type losses struct {
	s    *spectrum.Spectrum
	good int
}

// since notes the pixels that lost their weight since the last call.
func (l *losses) since(seg *spectrum.Segment, cause, where string) {
	good := seg.Good()
	l.s.Lose(cause, where, l.good-good)
	l.good = good
}

// loseErrors notes the pixels whose flux is a number and whose error, or weight, is none.
func loseErrors(s *spectrum.Spectrum, a *arm, r role, flux, weight []float64) {
	var unknown, negative, zero int
	for i, w := range weight {
		switch {
		case flux[i]-flux[i] != 0:
		case w-w != 0:
			unknown++
		case w < 0:
			negative++
		case w == 0:
			zero++
		}
	}
	name, where := weightName(r), a.weight.String()
	s.Lose(name+" NaN or infinite", where, unknown)
	s.Lose(name+" negative", where, negative)
	s.Lose(name+" zero", where, zero)
}

// sameFlux returns the flux of a segment whose pixels with weight all have the same;
// false where they differ or are too few to tell.
func sameFlux(seg *spectrum.Segment) (v float64, ok bool) {
	n := 0
	for i, f := range seg.Flux {
		switch {
		case !(seg.Ivar[i] > 0):
			continue
		case n > 0 && f != v:
			return 0, false
		}
		v = f
		n++
	}
	return v, n >= flatRun
}

// noWavelengths says what is wrong with wavelengths of which fewer than two can be used.
func noWavelengths(a *arm, wave []float64, row int64) *ReadError {
	var unknown, negative, rest int
	for _, w := range wave {
		switch {
		case w-w != 0:
			unknown++
		case w <= 0:
			negative++
		default:
			rest++
		}
	}
	var why []string
	for _, c := range []struct {
		n    int
		says string
	}{{unknown, "NaN or infinite"}, {negative, "zero or negative"}, {rest, "the same or out of order"}} {
		if c.n > 0 {
			why = append(why, fmt.Sprintf("%d %s", c.n, c.says))
		}
	}
	h, column := a.flux.hdu, ""
	switch w := &a.wave; {
	case w.values.isSet():
		h = w.values.hdu
		if w.values.col != nil {
			column = w.values.col.name
		}
	case w.axisHDU != nil:
		h = w.axisHDU
	case w.start.isSet():
		h = w.start.hdu
	}
	return fault(ErrBadData, h.index, "check the file, or write a layout for it", "no wavelengths that can be used: of %d, %s",
		len(wave), strings.Join(why, ", ")).at(column, int(row))
}

// farOff is how many times the median absolute flux a pixel may have. A well of a
// detector holds some 1e5 electrons and is read with a noise of some electrons
// (common practice, no source); lines of nebulae, and the ends of spectra from the
// far ultraviolet on, stay within 1e6 of the middle. Values beyond are no light,
// and their squares leave nothing of what is summed with them.
const farOff = 1e8

// dropFarOff takes the weight from pixels whose flux is impossibly far from the
// others, and returns their number and the largest.
func dropFarOff(seg *spectrum.Segment) (n int, largest float64) {
	level := make([]float64, 0, len(seg.Flux))
	for i, f := range seg.Flux {
		if seg.Ivar[i] > 0 {
			level = append(level, math.Abs(f))
		}
	}
	limit := farOff * medianOf(level)
	if limit == 0 {
		return 0, 0
	}
	for i, f := range seg.Flux {
		if seg.Ivar[i] > 0 && math.Abs(f) > limit {
			seg.Ivar[i] = 0
			if n++; math.Abs(f) > math.Abs(largest) {
				largest = f
			}
		}
	}
	return n, largest
}
