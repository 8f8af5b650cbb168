package fitsread

import (
	"errors"
	"slices"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestReadTable(t *testing.T) {
	data := join(empty(), table("NIGHT", 2, []tcol{
		{name: "file", form: "12A", text: []string{"a.fits", "b c.fits"}},
		{name: "row", form: "J", data: []float64{3, -1}, more: []stem{{"TNULL", -1}}},
		{name: "ra", form: "D", data: []float64{10.125, 350}},
		{name: "redshift_min", form: "E", data: []float64{0.1, 0}},
		{name: "exclude", form: "L", data: []float64{0, 1}},
		{name: "spectrum", form: "3E", data: make([]float64, 6)},
		{name: "count", form: "I", data: []float64{-32768, 5}, more: []stem{{"TZERO", 32768}}},
	}))
	var names []string
	var rows [][]string
	if err := ReadTable(save(t, data), func(c []string) { names = slices.Clone(c) }, func(c []string) { rows = append(rows, slices.Clone(c)) }); err != nil {
		t.Fatal(err)
	}
	ignore := func([]string) {}
	if diff := cmp.Diff([]string{"file", "row", "ra", "redshift_min", "exclude", "count"}, names); diff != "" {
		t.Error(diff)
	}
	want := [][]string{{"a.fits", "3", "10.125", "0.1", "F", "0"}, {"b c.fits", "", "350", "0", "T", "32773"}}
	if diff := cmp.Diff(want, rows); diff != "" {
		t.Error(diff)
	}
	if err := ReadTable(save(t, empty()), ignore, ignore); !errors.Is(err, ErrNoSpectrum) {
		t.Errorf("no table: %v", err)
	}
	if err := ReadTable(save(t, data[:len(data)-blockLen]), ignore, ignore); !errors.Is(err, ErrTruncated) {
		t.Errorf("cut: %v", err)
	}
}

// What is known from elsewhere goes before the file, in the correction as well.
func TestReadAs(t *testing.T) {
	n := 64
	cards := append([]string{kv("SPECSYS", "LSRK"), kv("RA", 83.6), kv("DEC", 22.0), kv("OBJECTID", "LR 7")}, logAxis...)
	f := open(t, image(true, -32, []int{n}, noisy(n, 1), cards...), Options{})
	if who, err := f.Identity(0); err != nil || who != (Identity{"LR 7", 83.6, 22}) {
		t.Errorf("%+v", who)
	}
	s, err := f.ReadAs(0, Identity{"Mine", 200, -35})
	if err != nil {
		t.Fatal(err)
	}
	// astropy 5.2.1, LSRK: 1.1081 km/s there, see package spectrum.
	if s.ObjectID != "Mine" || s.RA != 200 || s.Dec != -35 || s.BaryVelocity < 1.1 || s.BaryVelocity > 1.115 {
		t.Errorf("%s at %g %g, %g km/s", s.ObjectID, s.RA, s.Dec, s.BaryVelocity)
	}
	if s, _ = f.ReadAs(0, Nobody()); s.ObjectID != "LR 7" || s.RA != 83.6 {
		t.Errorf("%s at %g", s.ObjectID, s.RA)
	}
}
