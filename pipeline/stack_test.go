package pipeline

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/internal/fitsout"
	"duskline/internal/outside"
	"duskline/spectrum"
)

// ridges are the invented features of the objects that are stacked: rest
// wavelength, height over the continuum, sigma in km/s.
var ridges = [][3]float64{{4000, -0.4, 300}, {4250, 0.5, 350}, {4600, -0.3, 300}, {4950, 0.3, 300}, {5200, -0.3, 300}}

func ridge(wave float64) float64 {
	v := 1.0
	for _, f := range ridges {
		u := math.Log(wave/f[0]) * spectrum.SpeedOfLight / f[2]
		v += f[1] * math.Exp(-0.5*u*u)
	}
	return v
}

// labelScience takes the answer from the name of an object, "z0.1234" or, for
// one of another family, "odd0.1234"; any other is uncertain.
type labelScience struct{}

func (labelScience) NewWorker() Worker { return labelScience{} }
func (labelScience) Digests() map[string]string {
	return map[string]string{"lines": "0123456789abcdef"}
}

func (labelScience) Process(s *spectrum.Spectrum) Outcome {
	out := Outcome{Object: blankObject()}
	o := &out.Object
	o.Verdict, o.Class, o.Family, o.SNR = catalog.Uncertain, catalog.Galaxy, "passive", 20
	name := s.ObjectID
	if rest, ok := strings.CutPrefix(name, "odd"); ok {
		name, o.Family = "z"+rest, "emission"
	}
	if z, err := strconv.ParseFloat(strings.TrimPrefix(name, "z"), 64); err == nil {
		o.Redshift, o.Verdict, o.Confidence = z, catalog.Secure, 1
	}
	return out
}

// writeSpectrumFile writes a spectrum of 3,400 pixels of 1e-4 dex.
func writeSpectrumFile(t testing.TB, path string, flux func(wave float64) float64, sigma float64, seed uint64) {
	t.Helper()
	var m fitsout.Memory
	w, err := fitsout.NewWriter(&m)
	if err != nil {
		t.Fatal(err)
	}
	if err := w.Empty(nil); err != nil {
		t.Fatal(err)
	}
	tab, err := w.Table(nil, "SPECTRUM", []fitsout.Column{{Name: "loglam", Kind: fitsout.Float64}, {Name: "flux", Kind: fitsout.Float64}, {Name: "ivar", Kind: fitsout.Float64}})
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(11, seed))
	for i := range 3400 {
		x := 3.58 + 1e-4*float64(i)
		tab.Float(x)
		tab.Float(flux(math.Pow(10, x)) + sigma*r.NormFloat64())
		tab.Float(1 / (sigma * sigma))
		if err := tab.EndRow(); err != nil {
			t.Fatal(err)
		}
	}
	if err := errors.Join(tab.Close(), w.Close(), os.MkdirAll(filepath.Dir(path), 0o777), os.WriteFile(path, m.Bytes(), 0o666)); err != nil {
		t.Fatal(err)
	}
}

// stackNight is a finished run of twelve objects with the ridges at redshifts
// of their own, and four that must not be in the composite.
func stackNight(t *testing.T) StackJob {
	t.Helper()
	base := t.TempDir()
	for i := range 12 {
		z := 0.02 + 0.0123*float64(i)
		writeSpectrumFile(t, filepath.Join(base, "night", fmt.Sprintf("z%.4f.fits", z)), func(w float64) float64 {
			return float64(1+i) * (w / 6000) * ridge(w/(1+z))
		}, 0.1*float64(1+i)*math.Sqrt(float64(1+i%3)), uint64(i))
	}
	flat := func(w float64) float64 { return 5 }
	writeSpectrumFile(t, filepath.Join(base, "night", "odd0.1.fits"), flat, 0.1, 100)
	writeSpectrumFile(t, filepath.Join(base, "night", "uncertain.fits"), flat, 0.1, 101)
	writeSpectrumFile(t, filepath.Join(base, "night", "z0.3000.fits"), flat, 0.1, 102)
	writeSpectrumFile(t, filepath.Join(base, "night", "z0.3001.fits"), flat, 0.1, 103)
	finish(t, Job{Out: "RUN", Base: base, Paths: []string{"night"}, Settings: DefaultSettings(), Program: "test", Processor: labelScience{}})
	return StackJob{Run: "RUN", Base: base, Out: "out.fits", Family: "passive", Clip: 4, MinObjects: 3, MaxError: 0.1, Program: "test",
		Exclude: map[string]bool{"z0.3000": true, "night/z0.3001.fits": true, "nobody": true}, ExcludeDigest: "00"}
}

func readStackFile(t *testing.T, path string) (wave, flux, sigma []float64) {
	t.Helper()
	f, err := fitsread.Open(path, fitsread.Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	s, err := f.Read(0)
	if err != nil {
		t.Fatal(err)
	}
	if s.Medium != spectrum.Vacuum || s.Frame != spectrum.RestFrame {
		t.Errorf("the composite is read as %v in frame %v", s.Medium, s.Frame)
	}
	seg := &s.Segments[0]
	for i, w := range seg.Ivar {
		if w > 0 {
			wave, flux, sigma = append(wave, seg.Wave[i]), append(flux, seg.Flux[i]), append(sigma, 1/math.Sqrt(w))
		}
	}
	return wave, flux, sigma
}

// The composite is what all objects share, with errors that cover it, and says
// what is in it; the same bytes for any number of workers.
func TestStack(t *testing.T) {
	job := stackNight(t)
	rep, err := Stack(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	if rep.Objects != 12 || rep.Excluded != 2 || rep.Missed != 1 || rep.Unreadable != 0 || rep.Unfit != 0 {
		t.Errorf("the report says %+v", rep)
	}
	path := filepath.Join(job.Base, job.Out)
	wave, flux, sigma := readStackFile(t, path)
	// The continuum that spectra are divided by takes up what is wider than a
	// few knots: here a fault of percents around features. So the height of each
	// feature over its surroundings is compared, to 0.06.
	at := func(w float64) float64 {
		for i := range wave {
			if wave[i] >= w {
				return (flux[i-1] + flux[i] + flux[i+1]) / 3
			}
		}
		t.Fatalf("no pixel at %g Angstrom", w)
		return 0
	}
	for _, f := range ridges {
		side := 5 * f[2] / spectrum.SpeedOfLight
		got := at(f[0]) - 0.5*(at(f[0]*(1-side))+at(f[0]*(1+side)))
		if math.Abs(got-f[1]) > 0.06 {
			t.Errorf("the feature at %g is %.3f high, want %.3f", f[0], got, f[1])
		}
	}
	// Errors: noise of 0.1 to 0.17 of the continuum in twelve objects.
	var chi2, n float64
	for i := 2; i < len(wave)-2; i++ {
		if wave[i] > 4300 && wave[i] < 4540 { // clear of features
			d := flux[i] - 0.5*(flux[i-2]+flux[i+2])
			chi2 += d * d / (1.5 * sigma[i] * sigma[i])
			n++
		}
	}
	// Sharing between neighbors takes a third of the noise of a pixel at random
	// phases, which the errors do not count.
	if q := chi2 / n; q < 0.4 || q > 1.4 {
		t.Errorf("the scatter of pixels is %.2f times what their errors say, squared", q)
	}
	first, _ := os.ReadFile(path)
	job.Workers = 5
	if _, err := Stack(context.Background(), job); err != nil {
		t.Fatal(err)
	}
	if again, _ := os.ReadFile(path); !bytes.Equal(first, again) || len(first) == 0 {
		t.Error("five workers make another file")
	}
	// Left in, the flat ones dilute the features.
	job.Exclude, job.Clip = nil, 0
	if rep, err = Stack(context.Background(), job); err != nil || rep.Objects != 14 {
		t.Errorf("without a list: %+v, %v", rep, err)
	}
}

// What a manifest said in the run holds when its spectra are read again.
func TestStackWithManifest(t *testing.T) {
	job := stackNight(t)
	path := filepath.Join(job.Base, "known.csv")
	if err := os.WriteFile(path, []byte("file,ra,dec\nz0.0200.fits,150.5,2.5\nz0.0323.fits,150.6,2.5\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	m, err := ReadManifest(path, "known.csv")
	if err != nil {
		t.Fatal(err)
	}
	finish(t, Job{Out: "KNOWN", Base: job.Base, Paths: []string{"night"}, Settings: DefaultSettings(), Program: "test", Processor: labelScience{}, Manifest: m})
	job.Run = "KNOWN"
	rep, err := Stack(context.Background(), job)
	if err != nil || rep.Objects != 12 || rep.Unreadable != 0 {
		t.Errorf("%+v, %v", rep, err)
	}
}

// One object that is nothing like the others is clipped, not averaged in.
func TestStackClips(t *testing.T) {
	grid := func(v float64) *restSpectrum {
		r := &restSpectrum{lo: 0, hi: 1, flux: []float64{v}, weight: []float64{100}}
		return r
	}
	values := []float64{1.0, 1.1, 0.9, 1.05, 0.95, 1.02, 0.98, 1.0, 1.03, 0.97, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 1.0, 9.0}
	first := newStackSums()
	for _, v := range values {
		first.add(grid(v))
	}
	if m, s := first.at(0); math.Abs(m-1.4) > 1e-12 || math.Abs(s-1.7442) > 0.001 { // by hand
		t.Errorf("mean %.4f, scatter %.4f", m, s)
	}
	second := newStackSums()
	second.reference(first, 4)
	for _, v := range values {
		second.add(grid(v))
	}
	if m, _ := second.at(0); math.Abs(m-1) > 1e-12 || second.clipped != 1 || second.n[0] != 19 {
		t.Errorf("mean %.4f of %d objects, %d clipped", m, second.n[0], second.clipped)
	}
	// 19 of weight 100 and a scatter below that: 1/sqrt(1900).
	if e := second.errorOf(0); math.Abs(e-0.022942) > 1e-6 {
		t.Errorf("error %.6f", e)
	}
	// Where objects differ more than their noise, the scatter is the error:
	// sqrt(2 x 0.5^2) / 2 for two of equal weight.
	far := newStackSums()
	far.add(grid(0.5))
	far.add(grid(1.5))
	if e := far.errorOf(0); math.Abs(e-math.Sqrt(0.5)/2) > 1e-12 {
		t.Errorf("error %.6f of two that differ", e)
	}
}

// Shifting shares a pixel between two and keeps the flux of a flat spectrum.
func TestShiftToRest(t *testing.T) {
	r := &restSpectrum{grid: spectrum.Grid{Start: 3.6, Step: 1e-4}}
	for range 500 {
		r.grid.Flux, r.grid.Ivar = append(r.grid.Flux, 1.25), append(r.grid.Ivar, 400)
	}
	r.grid.Ivar[250] = 0
	r.shift(0.1 + 0.3e-4)
	full := 0
	for j := r.lo; j < r.hi; j++ {
		if r.weight[j] == 0 {
			continue
		}
		full++
		if math.Abs(r.flux[j]-1.25) > 1e-12 {
			t.Fatalf("pixel %d has %.6f", j, r.flux[j])
		}
	}
	// Weight: 1/400 and equalError^2 in quadrature, both pixels together whole.
	want := 1 / (1.0/400 + equalError*equalError)
	if mid := r.weight[(r.lo+r.hi)/2-100]; math.Abs(mid/want-1) > 1e-9 {
		t.Errorf("weight %.3f, want %.3f", mid, want)
	}
	// 500 pixels with one dead: its share of 0.7 goes, so does the first or
	// last pixel of less than half.
	if full < 498 || full > 500 {
		t.Errorf("%d pixels are covered", full)
	}
	if first := stackFirst + float64(r.lo)*1e-4; math.Abs(first-(3.5-0.3e-4)) > 1e-4 {
		t.Errorf("it begins at %.5f", first)
	}
}

// What cannot be used is left out and told; what cannot be done is said.
func TestStackComplains(t *testing.T) {
	job := stackNight(t)
	ctx := context.Background()
	var input *InputError
	for _, c := range []struct {
		name, want string
		change     func(j *StackJob)
	}{
		{"no run", "night holds no run", func(j *StackJob) { j.Run = "night" }},
		{"family", `RUN knows no family "pasive"; its families are active`, func(j *StackJob) { j.Family = "pasive" }},
		{"nothing asked", "give --family or --class", func(j *StackJob) { j.Family = "" }},
		{"no members", "0 secure objects of family carbon", func(j *StackJob) { j.Family = "carbon" }},
		{"too good", "the error of 1e-06 that --max-error asks for", func(j *StackJob) { j.MaxError = 1e-6 }},
		{"too bright", "no rest wavelength has the 3 objects", func(j *StackJob) { j.MinSNR = 1e9 }},
	} {
		j := job
		c.change(&j)
		if _, err := Stack(ctx, j); !errors.As(err, &input) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want one that says %q", c.name, err, c.want)
		}
	}
	// An input that was written to since, and one that is gone.
	writeSpectrumFile(t, filepath.Join(job.Base, "night", "z0.0200.fits"), ridge, 0.1, 999)
	if err := os.Remove(filepath.Join(job.Base, "night", "z0.0323.fits")); err != nil {
		t.Fatal(err)
	}
	rep, err := Stack(ctx, job)
	if err != nil {
		t.Fatal(err)
	}
	if rep.Objects != 10 || rep.Unreadable != 2 || len(rep.Why) != 2 || !strings.Contains(rep.Why[0], "z0.0200.fits: was written to since the run") {
		t.Errorf("the report says %+v", rep)
	}
	stopped, cancel := context.WithCancel(ctx)
	cancel()
	if _, err := Stack(stopped, job); !errors.Is(err, context.Canceled) {
		t.Errorf("after an interruption: %v", err)
	}
	if err := os.Remove(filepath.Join(job.Base, "RUN", objectsName)); err != nil {
		t.Fatal(err)
	}
	if _, err := Stack(ctx, job); !errors.As(err, &input) || !strings.Contains(err.Error(), "the run is not finished") {
		t.Errorf("an unfinished run: %v", err)
	}
}

// TestStackFileElsewhere: other programs find the file in order and read the
// same numbers.
func TestStackFileElsewhere(t *testing.T) {
	job := stackNight(t)
	if _, err := Stack(context.Background(), job); err != nil {
		t.Fatal(err)
	}
	path := filepath.Join(job.Base, job.Out)
	out, err := exec.Command("timeout", "60", outside.Program(t, "fitsverify"), "-l", path).CombinedOutput()
	if err != nil || !strings.Contains(string(out), "0 warning(s) and 0 error(s)") {
		t.Errorf("fitsverify: %v\n%s", err, out)
	}
	python := outside.Python(t, "astropy")
	out, err = exec.Command("timeout", "60", python, "-W", "error", "-c", `
import sys
import numpy as np
from astropy.io import fits
with fits.open(sys.argv[1], checksum=True) as h:
    c = h["COMPOSITE"].data
    good = np.isfinite(c["flux"])
    print(h[0].header["NOBJECTS"], len(h["OBJECTS"].data), good.sum(), "%.6f" % c["flux"][good].sum(dtype=float),
          "%.3f" % c["wavelength_rest"][good][0], h["COMPOSITE"].columns["wavelength_rest"].unit, c["objects"].max(), h[0].header["PLAN"])
`, path).CombinedOutput()
	if err != nil {
		t.Fatalf("astropy: %v\n%s", err, out)
	}
	wave, flux, _ := readStackFile(t, path)
	sum := 0.0
	for _, f := range flux {
		sum += f
	}
	_, _, plan, err := readTotals(filepath.Join(job.Base, "RUN", planName))
	if err != nil {
		t.Fatal(err)
	}
	want := fmt.Sprintf("12 12 %d %.6f %.3f Angstrom 12 %s", len(flux), sum, wave[0], plan)
	if got := strings.TrimSpace(string(out)); got != want {
		t.Errorf("astropy reads %q, want %q", got, want)
	}
}
