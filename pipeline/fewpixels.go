package pipeline

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"

	"duskline/spectrum"
)

// mostLosses is how many causes the reason of a row names.
const mostLosses = 4

// fewPixels says, for a spectrum of too few usable pixels, how many there are, how many
// are needed, and what took the others: the most first.
func (b *Bench) fewPixels(s *spectrum.Spectrum, why string) string {
	set := &b.chain.set
	good, lo, hi := 0, math.Inf(1), 0.0
	outside := 0
	for k := range s.Segments {
		seg := &s.Segments[k]
		if n := seg.Len(); n > 0 {
			lo, hi = math.Min(lo, seg.Wave[0]), math.Max(hi, seg.Wave[n-1])
		}
		for i, w := range seg.Ivar {
			switch {
			case !(w > 0):
			case seg.Wave[i] < set.Grid.MinWave || seg.Wave[i] > set.Grid.MaxWave:
				outside++
			default:
				good++
			}
		}
	}
	if s.Pixels == 0 { // not out of a file
		return why
	}
	gridded, _, _ := b.grid.Good()
	file := ""
	if s.SourceFile != "" {
		file = s.SourceFile + ": "
	}
	text := fmt.Sprintf("%s%s: %d of %d", file, why, good, s.Pixels)
	if gridded != good {
		text += fmt.Sprintf(", which are %d on the grid of %g dex", gridded, b.grid.Step)
	}
	text += fmt.Sprintf(", where %d are needed", set.Redshift.MinPixels)
	losses := append(slices.Clone(s.Losses), spectrum.Loss{Cause: "narrower than any line", Pixels: b.spikes},
		spectrum.Loss{Cause: fmt.Sprintf("outside %g to %g Angstrom", set.Grid.MinWave, set.Grid.MaxWave), Pixels: outside})
	losses = slices.DeleteFunc(losses, func(l spectrum.Loss) bool { return l.Pixels == 0 })
	slices.SortStableFunc(losses, func(a, b spectrum.Loss) int { return cmp.Compare(b.Pixels, a.Pixels) })
	if len(losses) == 0 {
		return text + fmt.Sprintf("; the file covers %s to %s Angstrom", plainNumber(lo), plainNumber(hi))
	}
	var parts []string
	for _, l := range losses[:min(mostLosses, len(losses))] {
		parts = append(parts, l.String())
	}
	if more := len(losses) - mostLosses; more > 0 {
		parts = append(parts, fmt.Sprintf("%d more causes", more))
	}
	text += "; not used: " + strings.Join(parts, ", ")
	if outside > 0 {
		text += fmt.Sprintf("; the file covers %s to %s Angstrom", plainNumber(lo), plainNumber(hi))
	}
	return text
}

func plainNumber(v float64) string {
	if v >= 0.1 && v < 1e6 {
		return fmt.Sprintf("%.1f", v)
	}
	return fmt.Sprintf("%.3g", v)
}
