package synth

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"

	"duskline/catalog"
)

// The classes that a truth has beside those of package catalog.
const (
	Sky    = "sky"    // a fiber on blank sky: there is no object
	Broken = "broken" // a file or spectrum that cannot be used
)

// TruthFile is the name of the truth table in the folder of a night.
const TruthFile = "truth.csv"

// Truth is what is known of one synthetic spectrum.
type Truth struct {
	File     string  // path below the folder of the night, with slashes
	Row      int     // index of the spectrum in its file, from 0
	ObjectID string  // as the file states it; empty in a file without one
	Class    string  // of package catalog, Sky or Broken
	Kind     string  // finer class, such as "passive galaxy", or what is broken
	Redshift float64 // barycentric; NaN for Sky and Broken
	SNR      float64 // median signal-to-noise ratio a pixel; NaN for Broken
	Layout   string  // how the file is laid out
	// AbsorberZ and LogNHI describe the damped Lyman-alpha absorber in front
	// of a quasar: redshift and log10 of the column density in cm^-2. NaN
	// where there is none.
	AbsorberZ, LogNHI float64
}

var truthColumns = []string{"file", "row", "object_id", "class", "kind", "redshift", "snr", "layout", "absorber_z", "absorber_log_nhi"}

// WriteTruth writes a truth table as CSV (RFC 4180): a header line, then a line
// a spectrum in the order given. NaN becomes an empty field.
func WriteTruth(w io.Writer, rows []Truth) error {
	c := csv.NewWriter(w)
	if err := c.Write(truthColumns); err != nil {
		return err
	}
	number := func(v float64, digits int) string {
		if math.IsNaN(v) {
			return ""
		}
		return strconv.FormatFloat(v, 'f', digits, 64)
	}
	for _, t := range rows {
		if err := c.Write([]string{t.File, strconv.Itoa(t.Row), t.ObjectID, t.Class, t.Kind, number(t.Redshift, 6),
			number(t.SNR, 2), t.Layout, number(t.AbsorberZ, 6), number(t.LogNHI, 2)}); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}

// ReadTruth reads what WriteTruth wrote. An error names the line and column.
func ReadTruth(r io.Reader) ([]Truth, error) {
	c := csv.NewReader(r)
	c.FieldsPerRecord = len(truthColumns)
	head, err := c.Read()
	if err != nil {
		return nil, fmt.Errorf("truth table: %w", err)
	}
	if !slices.Equal(head, truthColumns) {
		return nil, fmt.Errorf("truth table: line 1: columns are %v, want %v", head, truthColumns)
	}
	var rows []Truth
	for {
		rec, err := c.Read()
		if errors.Is(err, io.EOF) {
			return rows, nil
		}
		if err != nil {
			return nil, fmt.Errorf("truth table: %w", err)
		}
		line, _ := c.FieldPos(0)
		var bad error
		number := func(i int) float64 {
			if rec[i] == "" {
				return math.NaN()
			}
			v, err := strconv.ParseFloat(rec[i], 64)
			if err != nil && bad == nil {
				bad = fmt.Errorf("truth table: line %d, column %s: %q is not a number", line, truthColumns[i], rec[i])
			}
			return v
		}
		row, err := strconv.Atoi(rec[1])
		if err != nil || row < 0 {
			return nil, fmt.Errorf("truth table: line %d, column row: %q is not a row", line, rec[1])
		}
		rows = append(rows, Truth{File: rec[0], Row: row, ObjectID: rec[2], Class: rec[3], Kind: rec[4], Redshift: number(5),
			SNR: number(6), Layout: rec[7], AbsorberZ: number(8), LogNHI: number(9)})
		if bad != nil {
			return nil, bad
		}
	}
}

// LoadTruth reads the truth table of a night's folder.
func LoadTruth(dir string) ([]Truth, error) {
	f, err := os.Open(filepath.Join(dir, TruthFile))
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return ReadTruth(f)
}

// Tolerance returns the velocity difference in km/s within which a redshift
// counts as right: 3,000 for quasars, 1,000 for the rest. Common practice in
// redshift surveys.
func Tolerance(class string) float64 {
	if class == catalog.Quasar {
		return 3000
	}
	return 1000
}
