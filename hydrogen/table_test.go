package hydrogen

import (
	"math"
	"path/filepath"
	"testing"

	"duskline/internal/checkvalues"
)

// readTable reads published values from testdata, at least so many rows.
func readTable(t *testing.T, name string, atLeast int) *checkvalues.Table {
	t.Helper()
	return checkvalues.Read(t, filepath.Join("testdata", name), atLeast)
}

// relative returns |got/want - 1|, or 0 where both are zero.
func relative(got, want float64) float64 {
	if got == want {
		return 0
	}
	return math.Abs(got-want) / math.Abs(want)
}

// within reports an error unless |got - want| <= tol; NaN fails.
func within(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s = %.12g, want %.12g +- %.2g", what, got, want, tol)
	}
}
