// Package linelist holds the one list of spectral lines that templates and
// measurements share: the hydrogen series, computed, and companion lines of
// other elements, read from a TOML file with the source of every number.
package linelist

import (
	"bytes"
	"cmp"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"math"
	"slices"

	"duskline/hydrogen"

	"github.com/pelletier/go-toml/v2"
)

// Line is one spectral line.
type Line struct {
	Name string  // unique key, such as "Ha" or "OIII_5007"
	Ion  string  // such as "H I" or "[O III]"
	Wave float64 // rest wavelength in vacuum, Angstrom
	F    float64 // absorption oscillator strength, 0 where unknown or forbidden
	// Gamma is the damping constant (total decay rate of the levels), s^-1, 0
	// where unknown.
	Gamma float64
	// Group names lines that are fitted together: they overlap at the
	// resolution of a survey or are tied by physics. Empty for a line alone.
	Group string
	// Seen says how the line usually appears: "emission", "absorption" or
	// "both".
	Seen string
	// Feature is true for a blend of many lines measured as one, such as the
	// G band; its profile fit is an approximation.
	Feature bool
	Source  string // where the numbers come from
	// Galactic is true for lines that gas of our own Galaxy absorbs, strong
	// enough for a survey, in front of whatever is behind it.
	Galactic bool
}

// List is an immutable set of lines in order of rest wavelength.
type List struct {
	lines  []Line
	rare   []Line
	night  []float64
	byName map[string]int
	digest string
}

type lineRow struct {
	Name     string  `toml:"name"`
	Ion      string  `toml:"ion"`
	Wave     float64 `toml:"wave"`
	F        float64 `toml:"f"`
	Gamma    float64 `toml:"gamma"`
	Group    string  `toml:"group"`
	Seen     string  `toml:"seen"`
	Feature  bool    `toml:"feature"`
	Source   string  `toml:"source"`
	Galactic bool    `toml:"galactic"`
}

type hydrogenRow struct {
	Name  string `toml:"name"`
	Lower int    `toml:"lower"`
	Upper int    `toml:"upper"`
	Group string `toml:"group"`
	Seen  string `toml:"seen"`
}

type document struct {
	Hydrogen []hydrogenRow `toml:"hydrogen"`
	Line     []lineRow     `toml:"line"`
	Rare     []lineRow     `toml:"rare"`
	Night    struct {
		Source string    `toml:"source"`
		Lines  []float64 `toml:"lines"`
	} `toml:"night"`
}

// Parse reads a line list. Hydrogen rows give quantum numbers only: their
// wavelengths and strengths are computed by package hydrogen. Every problem
// found is reported, joined into one error that names the line.
func Parse(text []byte) (*List, error) {
	var doc document
	dec := toml.NewDecoder(bytes.NewReader(text)).DisallowUnknownFields()
	if err := dec.Decode(&doc); err != nil {
		var strict *toml.StrictMissingError
		if errors.As(err, &strict) {
			return nil, fmt.Errorf("line list: unknown keys:\n%s", strict.String())
		}
		return nil, fmt.Errorf("line list: %w", err)
	}
	var lines []Line
	var errs []error
	for _, h := range doc.Hydrogen {
		t, err := hydrogen.NewTransition(h.Lower, h.Upper)
		if err != nil {
			errs = append(errs, fmt.Errorf("line list: hydrogen line %q: %w", h.Name, err))
			continue
		}
		lines = append(lines, Line{Name: h.Name, Ion: "H I", Wave: t.Wave, F: t.F, Gamma: t.Gamma,
			Group: h.Group, Seen: h.Seen, Source: "computed, package hydrogen"})
	}
	for _, r := range doc.Line {
		lines = append(lines, Line(r))
	}
	var rare []Line
	for _, r := range doc.Rare {
		rare = append(rare, Line(r))
	}
	seen := map[string]bool{}
	for _, l := range slices.Concat(lines, rare) {
		errs = append(errs, l.problems()...)
		if l.Name != "" && seen[l.Name] {
			errs = append(errs, fmt.Errorf("line list: line %q is listed twice", l.Name))
		}
		seen[l.Name] = true
	}
	if len(doc.Night.Lines) > 0 && doc.Night.Source == "" {
		errs = append(errs, errors.New("line list: night: source is missing: say where the numbers come from"))
	}
	for i, w := range doc.Night.Lines {
		if !(w > 100 && w < 1e6) || i > 0 && !(w > doc.Night.Lines[i-1]) {
			errs = append(errs, fmt.Errorf("line list: night: line %d at %g, want vacuum Angstrom between 100 and 1e6, each above the one before", i+1, w))
		}
	}
	if len(errs) > 0 {
		return nil, errors.Join(errs...)
	}
	if len(lines) == 0 {
		return nil, errors.New("line list: no lines")
	}
	byWave := func(a, b Line) int { return cmp.Compare(a.Wave, b.Wave) }
	slices.SortStableFunc(lines, byWave)
	slices.SortStableFunc(rare, byWave)
	list := &List{lines: lines, rare: rare, night: doc.Night.Lines, byName: make(map[string]int, len(lines))}
	for i, l := range lines {
		list.byName[l.Name] = i
	}
	sum := sha256.Sum256(text)
	list.digest = hex.EncodeToString(sum[:8])
	return list, nil
}

// problems returns everything that is wrong with a line by itself.
func (l *Line) problems() []error {
	var errs []error
	bad := func(format string, args ...any) {
		errs = append(errs, fmt.Errorf("line list: line %q: %s", l.Name, fmt.Sprintf(format, args...)))
	}
	if l.Name == "" {
		errs = append(errs, fmt.Errorf("line list: a line of %q at %g has no name", l.Ion, l.Wave))
	}
	if !(l.Wave > 100 && l.Wave < 1e6) {
		bad("wave = %g, want vacuum Angstrom between 100 and 1e6", l.Wave)
	}
	if !(l.F >= 0 && l.Gamma >= 0) || math.IsInf(l.F, 0) || math.IsInf(l.Gamma, 0) {
		bad("f = %g, gamma = %g, want finite numbers, not negative", l.F, l.Gamma)
	}
	if l.Seen != "emission" && l.Seen != "absorption" && l.Seen != "both" {
		bad("seen = %q, want emission, absorption or both", l.Seen)
	}
	if l.Source == "" {
		bad("source is missing: say where the numbers come from")
	}
	return errs
}

// Lines returns all lines in order of rest wavelength. The caller must not
// change the slice.
func (l *List) Lines() []Line { return l.lines }

// Rare returns, in order of rest wavelength, the lines that explain what a spectrum
// shows but are not measured and stand in no template. The caller must not change the slice.
func (l *List) Rare() []Line { return l.rare }

// Night returns the observed wavelengths of the lines of the night sky, vacuum Angstrom, in
// order. The caller must not change the slice.
func (l *List) Night() []float64 { return l.night }

// Find returns the line of that name, none of the rare ones.
func (l *List) Find(name string) (Line, bool) {
	i, ok := l.byName[name]
	if !ok {
		return Line{}, false
	}
	return l.lines[i], true
}

// Digest identifies the text that the list was parsed from: the first 16
// hexadecimal digits of its SHA-256.
func (l *List) Digest() string { return l.digest }
