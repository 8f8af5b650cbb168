package hydrogen

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"testing"
)

// checkTable is a CSV file of check values; the comment on its first line names
// their source.
type checkTable struct {
	t      *testing.T
	name   string
	column map[string]int
	rows   [][]string
}

// readTable fails unless the file has at least atLeast rows, so that a test
// over its rows cannot pass by seeing none.
func readTable(t *testing.T, name string, atLeast int) *checkTable {
	t.Helper()
	f, err := os.Open(filepath.Join("testdata", name))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows)-1 < atLeast {
		t.Fatalf("%s: %d rows, want at least %d", name, len(rows)-1, atLeast)
	}
	c := &checkTable{t: t, name: name, column: map[string]int{}, rows: rows[1:]}
	for i, h := range rows[0] {
		c.column[h] = i
	}
	return c
}

func (c *checkTable) text(row int, column string) string {
	c.t.Helper()
	i, ok := c.column[column]
	if !ok {
		c.t.Fatalf("%s: no column %q", c.name, column)
	}
	return c.rows[row][i]
}

func (c *checkTable) number(row int, column string) float64 {
	c.t.Helper()
	x, err := strconv.ParseFloat(c.text(row, column), 64)
	if err != nil {
		c.t.Fatalf("%s: row %d: %v", c.name, row+1, err)
	}
	return x
}

func (c *checkTable) integer(row int, column string) int {
	c.t.Helper()
	return int(c.number(row, column))
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
