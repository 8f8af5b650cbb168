// Package shards says which shard does which block of a run, and writes lists of
// their numbers. It is arithmetic alone, for those who plan shards and those who do
// them.
package shards

import (
	"slices"
	"strconv"
	"strings"
)

// Of returns which of n shards, from 0, does a block: every n-th block is the same
// shard's.
func Of(block, n int) int { return block % n }

// With returns the shards, of n, that do any of the blocks, in order.
func With(blocks []int, n int) []int {
	has := make([]bool, n)
	for _, b := range blocks {
		has[Of(b, n)] = true
	}
	var out []int
	for i, yes := range has {
		if yes {
			out = append(out, i)
		}
	}
	return out
}

// Ranges writes numbers in order, runs of them by their ends, such as "0-3,7"
// with "," between.
func Ranges(numbers []int, between string) string {
	numbers = slices.Sorted(slices.Values(numbers))
	var b strings.Builder
	for i := 0; i < len(numbers); {
		k := i
		for k+1 < len(numbers) && numbers[k+1] == numbers[k]+1 {
			k++
		}
		if i > 0 {
			b.WriteString(between)
		}
		b.WriteString(strconv.Itoa(numbers[i]))
		if k > i {
			b.WriteString("-" + strconv.Itoa(numbers[k]))
		}
		i = k + 1
	}
	return b.String()
}
