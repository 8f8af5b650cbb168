package absorbers

import (
	"testing"

	"duskline/configs"
	"duskline/linelist"
)

// Every line that is named as a galaxy's own is in the built-in list, in order of wavelength, between the fifth Lyman line
// and the last of the blends beyond Lyman-alpha.
func TestOwnLinesAreKnown(t *testing.T) {
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		t.Fatal(err)
	}
	f := NewFinder(list)
	if len(f.own) != len(ownLines) {
		t.Errorf("%d of %d lines are in the list: %.1f", len(f.own), len(ownLines), f.own)
	}
	// Lyman-delta and Si II 1260 (Morton 2003, from memory).
	if n := len(f.own); n == 0 || f.own[0] < 949 || f.own[n-1] > 1261 {
		t.Errorf("own lines at %.1f", f.own)
	}
}
