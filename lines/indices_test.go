package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"duskline/configs"
	"duskline/internal/checkvalues"
)

// Vega between the bands of testdata/vega_ew.csv; 0.5 % covers how pixels at the
// ends are counted.
func TestIndexVega(t *testing.T) {
	var a Arm
	for _, row := range checkvalues.Rows(t, "testdata/vega_calspec_excerpt.csv") {
		a.Wave = append(a.Wave, checkvalues.Number(t, row[0]))
		a.Flux = append(a.Flux, checkvalues.Number(t, row[1]))
		a.Ivar = append(a.Ivar, 1e24)
	}
	a.Cont = make([]float64, len(a.Wave))
	for _, row := range checkvalues.Rows(t, "testdata/vega_ew.csv")[1:] {
		mid, half, want := checkvalues.Number(t, row[1]), checkvalues.Number(t, row[2]), checkvalues.Number(t, row[6])
		b1, b2, _ := strings.Cut(row[3], "-")
		r1, r2, _ := strings.Cut(row[4], "-")
		list, err := ParseIndices([]byte(fmt.Sprintf("[[index]]\nname = %q\nmedium = \"vacuum\"\nunit = \"angstrom\"\nband = [%g, %g]\nblue = [%s, %s]\nred = [%s, %s]\nsource = \"test\"\n",
			row[0], mid-half, mid+half, b1+".0", b2+".0", r1+".0", r2+".0")))
		if err != nil {
			t.Fatal(err)
		}
		got, _ := list[0].Measure([]Arm{a}, 0)
		near(t, row[0]+" +-"+row[2], got, want, 0.005*want)
	}
}

// Errors are as large as the scatter. 4,000 spectra: the standard error of the
// deviation is 1.1 %; at S/N 10 the second order adds about 1 %.
func TestIndexErrors(t *testing.T) {
	list, err := ParseIndices(configs.Indices())
	if err != nil {
		t.Fatal(err)
	}
	list = append(list, Index{Name: "mag", Band: list[1].Band, Blue: list[1].Blue, Red: list[1].Red, Magnitude: true})
	const z = 0.1
	for _, ix := range list {
		mid := 0.5 * (ix.Blue[0] + ix.Red[1]) * (1 + z)
		wave := grid(mid, 69, 400)
		clean := newArm(wave, 1, 0.05, profileTruth{mid, 8, -4})
		for i := range clean.Flux {
			clean.Flux[i] *= 1 + 0.3*(wave[i]/mid-1)
			clean.Ivar[i] *= 1 + 2*(wave[i]/mid-1)
		}
		truth, _ := ix.Measure([]Arm{clean}, z)
		rng := rand.New(rand.NewPCG(3, 4))
		var a Arm
		var pull moments
		for range 4000 {
			noisy(&a, clean, rng)
			v, e := ix.Measure([]Arm{a}, z)
			pull.add((v - truth) / e)
		}
		if sd := pull.sd(); math.Abs(sd-1) > 0.05 || math.Abs(pull.mean()) > 0.08 {
			t.Errorf("%s: pulls %.3f +- %.3f", ix.Name, pull.mean(), sd)
		}
	}
}

// A flat spectrum has no feature; a box of depth 0.5 over the whole band has half
// its width; masked pixels do not count; too many of them are not measured.
func TestIndexClosed(t *testing.T) {
	ix := Index{Name: "x", Band: [2]float64{4990, 5010}, Blue: [2]float64{4950, 4970}, Red: [2]float64{5030, 5050}}
	a := newArm(grid(5000, 20, 800), 2, 0.01)
	v, e := ix.Measure([]Arm{a}, 0)
	near(t, "flat", v, 0, 1e-12)
	if !(e > 0) {
		t.Errorf("error %v", e)
	}
	for i, w := range a.Wave {
		lo, hi := pixelEdges(a.Wave, i)
		if hi > 4990 && lo < 5010 {
			a.Flux[i] = 1
		}
		if w > 4999 && w < 5001 {
			a.Ivar[i] = 0
		}
	}
	v, _ = ix.Measure([]Arm{a}, 0)
	near(t, "box", v, 10, 1e-9)
	for i := range a.Ivar {
		if a.Wave[i] > 5000 {
			a.Ivar[i] = 0
		}
	}
	if v, _ := ix.Measure([]Arm{a}, 0); !math.IsNaN(v) {
		t.Errorf("half a band measured: %v", v)
	}
	if v, _ := ix.Measure(nil, 0); !math.IsNaN(v) {
		t.Errorf("nothing measured: %v", v)
	}
}

// Every problem of a file is told at once.
func TestParseIndices(t *testing.T) {
	_, err := ParseIndices([]byte("[[index]]\nname = \"a\"\nmedium = \"water\"\nunit = \"ratio\"\nband = [1.0, 2.0]\nblue = [4000.0, 3900.0]\nred = [3000.0, 3100.0]\n"))
	for _, want := range []string{"medium", "source", "band", "blue = "} {
		if err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%q is missing in: %v", want, err)
		}
	}
	if _, err := ParseIndices([]byte("[[index]]\nnames = 1\n")); err == nil || !strings.Contains(err.Error(), "unknown keys") {
		t.Errorf("unknown key: %v", err)
	}
}
