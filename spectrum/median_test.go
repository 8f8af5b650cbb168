package spectrum

import (
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestMedianAgainstSorting(t *testing.T) {
	if !math.IsNaN(Median(nil)) {
		t.Error("the median of nothing is not NaN")
	}
	rapid.Check(t, func(t *rapid.T) {
		// Few distinct values make ties, which selection must survive.
		v := rapid.SliceOfN(rapid.OneOf(rapid.Float64Range(-1e3, 1e3), rapid.Map(rapid.IntRange(0, 3), func(i int) float64 { return float64(i) })), 1, 200).Draw(t, "v")
		sorted := slices.Clone(v)
		slices.Sort(sorted)
		if got := Median(v); got != sorted[len(sorted)/2] {
			t.Fatalf("median %g, want %g", got, sorted[len(sorted)/2])
		}
		slices.Sort(v)
		if !slices.Equal(v, sorted) {
			t.Fatal("selection lost or changed elements")
		}
	})
}
