package spectrum

import "math"

// Median returns the upper median of v, the element of rank len(v)/2, and
// leaves v in another order. An empty v gives NaN; v must hold no NaN. It
// selects (Hoare 1961) with the median of three as pivot: linear time where
// sorting is not.
func Median(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	k, lo, hi := len(v)/2, 0, len(v)-1
	for lo < hi {
		mid := lo + (hi-lo)/2
		if v[mid] < v[lo] {
			v[mid], v[lo] = v[lo], v[mid]
		}
		if v[hi] < v[lo] {
			v[hi], v[lo] = v[lo], v[hi]
		}
		if v[hi] < v[mid] {
			v[hi], v[mid] = v[mid], v[hi]
		}
		p := v[mid]
		i, j := lo, hi
		for i <= j {
			for v[i] < p {
				i++
			}
			for p < v[j] {
				j--
			}
			if i <= j {
				v[i], v[j] = v[j], v[i]
				i++
				j--
			}
		}
		switch {
		case k <= j:
			hi = j
		case k >= i:
			lo = i
		default:
			return v[k]
		}
	}
	return v[k]
}
