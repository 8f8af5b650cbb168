package shards

import (
	"slices"
	"testing"

	"pgregory.net/rapid"
)

func TestWith(t *testing.T) {
	if got := With([]int{0, 3, 8, 9, 17}, 8); !slices.Equal(got, []int{0, 1, 3}) {
		t.Errorf("shards %v", got)
	}
	// A shard is listed exactly if one of the blocks is its own.
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 40).Draw(t, "shards")
		blocks := rapid.SliceOf(rapid.IntRange(0, 1000)).Draw(t, "blocks")
		got := With(blocks, n)
		for i := range n {
			if want := slices.ContainsFunc(blocks, func(b int) bool { return Of(b, n) == i }); slices.Contains(got, i) != want {
				t.Fatalf("shard %d of %d: %v", i, n, got)
			}
		}
	})
}

// The form is that of job arrays (sbatch manual, --array).
func TestRanges(t *testing.T) {
	for _, k := range []struct {
		numbers []int
		between string
		want    string
	}{
		{[]int{7, 0, 1, 2}, ",", "0-2,7"},
		{[]int{1, 2, 3, 5, 7, 8}, ", ", "1-3, 5, 7-8"},
		{nil, ",", ""},
		{[]int{4}, ",", "4"},
	} {
		if got := Ranges(k.numbers, k.between); got != k.want {
			t.Errorf("%v gives %q, want %q", k.numbers, got, k.want)
		}
	}
}
