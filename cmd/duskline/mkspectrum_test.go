package main

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"duskline/internal/fitsout"

	"github.com/rogpeppe/go-internal/testscript"
)

// makeSpectrum writes an emission-line spectrum of redshift 0.12 in a table with a
// row a pixel, WAVE in vacuum, FLUX and ERR. Cards KEY=VALUE go into the table's
// header; a VALUE that is a number is one.
func makeSpectrum(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 1 {
		ts.Fatalf("usage: mkspectrum FILE [KEY=VALUE...]")
	}
	var h fitsout.Header
	for _, arg := range args[1:] {
		key, value, _ := strings.Cut(arg, "=")
		if v, err := strconv.ParseFloat(value, 64); err == nil {
			h.Float(key, v, "")
		} else {
			h.Text(key, value, "")
		}
	}
	var m fitsout.Memory
	w, err := fitsout.NewWriter(&m)
	ts.Check(err)
	ts.Check(w.Empty(nil))
	tab, err := w.Table(&h, "SPECTRUM", []fitsout.Column{{Name: "WAVE_VAC", Unit: "Angstrom", Kind: fitsout.Float64}, {Name: "FLUX", Kind: fitsout.Float64}, {Name: "ERR", Kind: fitsout.Float64}})
	ts.Check(err)
	r := rand.New(rand.NewPCG(20310314, 12))
	for i := range 4000 {
		wave := math.Pow(10, 3.58+1e-4*float64(i))
		flux := 10 + r.NormFloat64()
		for _, line := range [][2]float64{{3728.5, 20}, {4862.68, 10}, {4960.3, 10}, {5008.24, 30}, {6564.61, 30}, {6718.3, 6}, {6732.7, 5}} {
			u := (wave/(line[0]*1.12) - 1) * 299792.458 / 120
			flux += line[1] * math.Exp(-u*u/2)
		}
		tab.Float(wave)
		tab.Float(flux)
		tab.Float(1)
		ts.Check(tab.EndRow())
	}
	path := ts.MkAbs(args[0])
	ts.Check(errors.Join(tab.Close(), w.Close(), os.MkdirAll(filepath.Dir(path), 0o777), os.WriteFile(path, m.Bytes(), 0o666)))
}

// makeHeader writes an empty primary HDU and a second one of the given cards, each
// as it stands in a file, with so many bytes of zeros behind.
func makeHeader(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 3 {
		ts.Fatalf("usage: mkheader FILE BYTES CARD...")
	}
	size, err := strconv.Atoi(args[1])
	ts.Check(err)
	var b bytes.Buffer
	for _, cards := range [][]string{{"SIMPLE  =                    T", "BITPIX  =                    8", "NAXIS   =                    0"}, args[2:]} {
		for _, c := range append(cards, "END") {
			fmt.Fprintf(&b, "%-80s", c)
		}
		b.WriteString(strings.Repeat(" ", (2880-b.Len()%2880)%2880))
	}
	b.Write(make([]byte, (size+2879)/2880*2880))
	ts.Check(os.MkdirAll(filepath.Dir(ts.MkAbs(args[0])), 0o777))
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), b.Bytes(), 0o666))
}
