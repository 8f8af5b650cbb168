// Package checkvalues reads the tables of published check values that tests hold the code
// to: CSV (RFC 4180) in which lines that begin with # are comments and name the source.
// Only test files import it.
package checkvalues

import (
	"encoding/csv"
	"os"
	"strconv"
	"testing"
)

// Rows returns all rows of a file, one that names the columns included; the test fails
// where there is none, or rows differ in length.
func Rows(t testing.TB, path string) [][]string {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatalf("%s: %v", path, err)
	}
	if len(rows) == 0 {
		t.Fatalf("%s has no rows", path)
	}
	return rows
}

// Number reads a number; the test fails where it is none.
func Number(t testing.TB, text string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(text, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// Table is a file whose first row names the columns.
type Table struct {
	t      testing.TB
	path   string
	column map[string]int
	rows   [][]string
}

// Read fails the test unless the file has at least atLeast rows below the names of its
// columns, so that a test over its rows cannot pass by seeing none.
func Read(t testing.TB, path string, atLeast int) *Table {
	t.Helper()
	rows := Rows(t, path)
	if len(rows)-1 < atLeast {
		t.Fatalf("%s: %d rows, want at least %d", path, len(rows)-1, atLeast)
	}
	c := &Table{t: t, path: path, column: map[string]int{}, rows: rows[1:]}
	for i, name := range rows[0] {
		c.column[name] = i
	}
	return c
}

// Len returns the number of rows.
func (c *Table) Len() int { return len(c.rows) }

// Text returns a cell; the test fails where there is no such column.
func (c *Table) Text(row int, column string) string {
	c.t.Helper()
	i, ok := c.column[column]
	if !ok {
		c.t.Fatalf("%s: no column %q", c.path, column)
	}
	return c.rows[row][i]
}

// Number returns a cell as a number; the test fails where it is none.
func (c *Table) Number(row int, column string) float64 {
	c.t.Helper()
	x, err := strconv.ParseFloat(c.Text(row, column), 64)
	if err != nil {
		c.t.Fatalf("%s: row %d, column %s: %v", c.path, row+1, column, err)
	}
	return x
}
