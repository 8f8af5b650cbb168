package synth

import (
	"encoding/json"
	"errors"
	"math"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/internal/outside"
)

// firstFiles writes a small night and returns its folder and the first truth
// row of every plate.
func firstFiles(t *testing.T) (dir string, first []Truth) {
	t.Helper()
	dir = t.TempDir()
	truth, err := Night(dir, Options{Seed: 3, Objects: 16})
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]bool{}
	for _, row := range truth {
		if row.Class != Broken && !seen[row.Layout] {
			seen[row.Layout] = true
			first = append(first, row)
		}
	}
	if len(first) != len(plates) {
		t.Fatalf("%d layouts, want %d", len(first), len(plates))
	}
	return dir, first
}

// Every layout opens in astropy with the wavelengths, fluxes and weights that
// were written.
func TestLayoutsInAstropy(t *testing.T) {
	python := outside.Python(t, "astropy")
	dir, first := firstFiles(t)
	args := []string{"60", python, filepath.Join("testdata", "readback.py")}
	for _, row := range first {
		args = append(args, row.Layout, filepath.Join(dir, row.File))
	}
	out, err := exec.Command("timeout", args...).Output()
	if err != nil {
		var exit *exec.ExitError
		if errors.As(err, &exit) {
			t.Fatalf("astropy: %v\n%s", err, exit.Stderr)
		}
		t.Fatal(err)
	}
	var files []struct {
		Velocity float64
		Arms     []struct{ Wave, Flux, Ivar []float64 }
	}
	if err := json.Unmarshal(out, &files); err != nil {
		t.Fatal(err)
	}
	for i := range plates {
		p := &plates[i]
		e, _ := p.fiber(p.arms(), 3, 0)
		if len(files[i].Arms) != len(e.arms) {
			t.Errorf("%s: %d arms, want %d", p.layout, len(files[i].Arms), len(e.arms))
			continue
		}
		// The velocity that the wavelengths contain is the one that the header asks
		// to take out; 0.5 m/s is the accuracy of spectrum.BarycentricVelocity. On this
		// night it is nowhere zero.
		if d := math.Abs(files[i].Velocity - e.velocity); d > 5e-4 || p.topocentric != (e.velocity != 0) {
			t.Errorf("%s: header asks for %.4f km/s, wavelengths contain %.4f", p.layout, files[i].Velocity, e.velocity)
		}
		for k, a := range e.arms {
			got := files[i].Arms[k]
			if len(got.Wave) != len(a.wave) || len(got.Flux) != len(a.wave) || len(got.Ivar) != len(a.wave) {
				t.Errorf("%s %s: %d, %d, %d pixels, want %d", p.layout, a.name, len(got.Wave), len(got.Flux), len(got.Ivar), len(a.wave))
				continue
			}
			var wave, flux, ivar float64
			for j := range a.wave {
				wave = math.Max(wave, math.Abs(got.Wave[j]/a.wave[j]-1))
				want := e.data[k].flux[j]
				if math.IsNaN(want) {
					want = -9e9
				}
				flux = math.Max(flux, math.Abs(got.Flux[j]-want)/(1+math.Abs(want)))
				ivar = math.Max(ivar, math.Abs(got.Ivar[j]-e.data[k].ivar[j])/(1e-6+e.data[k].ivar[j]))
			}
			// 1e-12: float64 through a logarithm or an axis of header cards. 2e-7: float32
			// for flux and weight, three roundings where the weight was a sigma.
			if wave > 1e-12 || flux > 2e-7 || ivar > 3e-7 {
				t.Errorf("%s %s: largest relative differences: wave %.1e, flux %.1e, weight %.1e", p.layout, a.name, wave, flux, ivar)
			}
		}
	}
}

// fitsverify finds no error and no warning in any layout.
func TestLayoutsVerify(t *testing.T) {
	program := outside.Program(t, "fitsverify")
	dir, first := firstFiles(t)
	for _, row := range first {
		path := filepath.Join(dir, row.File)
		if strings.HasSuffix(path, ".gz") {
			if out, err := exec.Command("gunzip", path).CombinedOutput(); err != nil {
				t.Fatalf("gunzip: %v\n%s", err, out)
			}
			path = strings.TrimSuffix(path, ".gz")
		}
		out, err := exec.Command("timeout", "60", program, "-l", path).CombinedOutput()
		if err != nil || !strings.Contains(string(out), "0 warning(s) and 0 error(s)") {
			t.Errorf("%s: %v\n%s", row.Layout, err, out)
		}
	}
}
