package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"math"
	"os"
	"os/signal"
	"path/filepath"
	"strconv"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"duskline/catalog"
	"duskline/internal/fitsout"
	"duskline/pipeline"
	"duskline/spectrum"

	"github.com/rogpeppe/go-internal/testscript"
)

// quickName is the command with a science that takes microseconds, for tests of
// everything around it: the same commands, files, plans, blocks and catalogs.
const quickName = "duskline-quick"

func quickStart() int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	context.AfterFunc(ctx, stop)
	a := &app{ctx: ctx, stdout: os.Stdout, stderr: os.Stderr, getenv: os.Getenv, clock: quickClock(),
		science: func(pipeline.Settings, []pipeline.RecipeText) (pipeline.Processor, error) {
			pause, err := time.ParseDuration(os.Getenv("QUICK_PAUSE"))
			if err != nil {
				pause = 0
			}
			return quick{pause, os.Getenv("QUICK_LINES")}, nil
		}}
	return runApp(a, os.Args[1:])
}

// quickClock is the system's, or with QUICK_CLOCK=jumps one that somebody sets
// half a century forth and back whenever it is looked at.
func quickClock() clock {
	c := systemClock()
	if os.Getenv("QUICK_CLOCK") == "jumps" {
		var looks atomic.Int64
		c.wall = func() time.Time { return time.Now().AddDate(int(50*(1-2*(looks.Add(1)%2))), 0, 0).Round(0) }
	}
	return c
}

// quick answers with a hash of the flux. QUICK_PAUSE makes it sleep as long for
// each spectrum; QUICK_LINES stands for another line list.
type quick struct {
	pause time.Duration
	lines string
}

func (q quick) NewWorker() pipeline.Worker { return q }

func (q quick) Digests() map[string]string {
	return map[string]string{"lines": "quick" + q.lines, "family quick": "1"}
}

func (q quick) Process(s *spectrum.Spectrum) pipeline.Outcome {
	time.Sleep(q.pause)
	h := fnv.New64a()
	sum := 0.0
	for _, seg := range s.Segments {
		for _, f := range seg.Flux {
			sum += f
			bits := math.Float64bits(f)
			h.Write([]byte{byte(bits >> 24), byte(bits >> 32), byte(bits >> 40), byte(bits >> 48)})
		}
	}
	key := h.Sum64()
	nan := math.NaN()
	o := catalog.Object{RA: s.RA, Dec: s.Dec, Class: catalog.Galaxy, Family: "quick", Verdict: catalog.Verdicts()[key%3],
		Redshift: float64(key%100_000) / 1e5, RedshiftErr: 1e-5, Confidence: float64(key%1000) / 1e3, RivalRedshift: nan, Gap: 1,
		RStat: nan, SNR: sum, WaveMin: nan, WaveMax: nan, Chi2Dof: 1, BaryVelocity: nan, VelocityFrame: s.Frame.String()}
	out := pipeline.Outcome{Object: o}
	for i := range int(key % 5) {
		ew := float64(key>>i%1000) / 100
		out.Lines = append(out.Lines, catalog.Line{Line: fmt.Sprintf("Q%d%s", i, q.lines), RestWave: 4000 + 100*float64(i), Kind: "absorption",
			EWRest: ew, EWRestErr: 0.1, EWSum: ew, EWSumErr: 0.1, Flux: nan, FluxErr: nan, OffsetKms: nan, OffsetErr: nan,
			WidthKms: nan, WidthErr: nan, SNR: 10 * ew, Continuum: nan, UpperLimit: nan, Pixels: 9})
	}
	if key%7 == 0 {
		out.Absorbers = append(out.Absorbers, catalog.Absorber{Kind: catalog.MgII, ZAbs: float64(key%1000) / 1e3, LinesUsed: "MgII_2796",
			ZAbsErr: 1e-4, LogNHI: nan, LogNHIErr: nan, BKms: nan, BErr: nan, EWRest: 1, EWRestErr: 0.1, EWSecond: 1, EWSecondErr: 0.1})
	}
	return out
}

// shortPixels is the length of the spectra of writeShort.
const shortPixels = 48

// writeShort writes files of n short spectra each, two images with a spectrum a
// line and a table of targets.
func writeShort(folder string, files, n int) error {
	if err := os.MkdirAll(folder, 0o777); err != nil {
		return err
	}
	wave := shortWave()
	for k := range files {
		if err := writeShortFile(filepath.Join(folder, fmt.Sprintf("lr-%04d.fits", k)), wave, k*n, n, true); err != nil {
			return err
		}
	}
	return nil
}

func shortWave() []float64 {
	wave := make([]float64, shortPixels)
	for i := range wave {
		wave[i] = 4000 * math.Pow(10, 1e-3*float64(i))
	}
	return wave
}

// writeShortFile writes n short spectra, with a table of targets or, if they are
// not named, without.
func writeShortFile(path string, wave []float64, first, n int, named bool) error {
	f, err := os.Create(path)
	if err != nil {
		return err
	}
	defer f.Close()
	w, err := fitsout.NewWriter(f)
	if err != nil {
		return err
	}
	h := &fitsout.Header{}
	h.Text("DATE-OBS", "2031-03-14", "")
	if err := w.Empty(h); err != nil {
		return err
	}
	unit := &fitsout.Header{}
	unit.Text("BUNIT", "Angstrom", "")
	unit.Text("VELFRAME", "barycentric", "")
	if err := fitsout.WriteImage(w, unit, "WAVELENGTH", []int{len(wave)}, wave); err != nil {
		return err
	}
	flux, ivar := make([]float32, n*len(wave)), make([]float32, n*len(wave))
	seed := uint64(first)*2654435761 + 12345
	for i := range flux {
		seed = seed*6364136223846793005 + 1442695040888963407
		flux[i], ivar[i] = 10+float32(seed>>40)/(1<<24), 100
	}
	unit = &fitsout.Header{}
	unit.Text("BUNIT", "10**-17 erg s-1 cm-2 Angstrom-1", "")
	if err := fitsout.WriteImage(w, unit, "FLUX", []int{len(wave), n}, flux); err != nil {
		return err
	}
	if err := fitsout.WriteImage(w, nil, "IVAR", []int{len(wave), n}, ivar); err != nil {
		return err
	}
	if !named {
		return w.Close()
	}
	t, err := w.Table(nil, "TARGETS", []fitsout.Column{
		{Name: "TARGET_ID", Kind: fitsout.Text, Repeat: 16, UCD: "meta.id;meta.main"},
		{Name: "RA", Kind: fitsout.Float64, Unit: "deg", UCD: "pos.eq.ra;meta.main"},
		{Name: "DEC", Kind: fitsout.Float64, Unit: "deg", UCD: "pos.eq.dec;meta.main"},
	})
	if err != nil {
		return err
	}
	for i := range n {
		t.Text(fmt.Sprintf("LR-%09d", first+i))
		t.Float(float64((first+i)%360_000) / 1000)
		t.Float(float64((first+i)%1000) / 100)
		if err := t.EndRow(); err != nil {
			return err
		}
	}
	if err := t.Close(); err != nil {
		return err
	}
	return w.Close()
}

func makeShort(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 3 {
		ts.Fatalf("usage: mkshort DIR FILES N")
	}
	files, err := strconv.Atoi(args[1])
	ts.Check(err)
	n, err := strconv.Atoi(args[2])
	ts.Check(err)
	ts.Check(writeShort(ts.MkAbs(args[0]), files, n))
}

// touchRow changes the flux of one pixel in one spectrum of a file of writeShort
// with up to 10,000 of them.
func touchRow(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 2 {
		ts.Fatalf("usage: touchrow FILE ROW")
	}
	path := ts.MkAbs(args[0])
	row, err := strconv.Atoi(args[1])
	ts.Check(err)
	data, err := os.ReadFile(path)
	ts.Check(err)
	at := bytes.Index(data, []byte("EXTNAME = 'FLUX"))
	if at < 0 {
		ts.Fatalf("%s is not of mkshort", args[0])
	}
	at = (at/2880+1)*2880 + row*shortPixels*4 // the header is one block
	binary.BigEndian.PutUint32(data[at:], math.Float32bits(99))
	ts.Check(os.WriteFile(path, data, 0o666))
}

// commandFolder returns a folder with the program and its quick double, for
// tests that are not scripts.
func commandFolder(t testing.TB) string {
	t.Helper()
	folder := t.TempDir()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"duskline", quickName} {
		if err := os.Symlink(self, filepath.Join(folder, name)); err != nil {
			t.Fatal(err)
		}
	}
	return folder
}

// peakFile names the environment variable with the path of a file for the peak of
// a program's memory.
const peakFile = "DUSKLINE_TEST_PEAK"

// tellingPeak makes a main function that leaves its largest resident memory in a
// file if it is asked to. What the system counts for a child also has what the
// test itself takes.
func tellingPeak(start func() int) func() {
	return func() {
		code := start()
		if path := os.Getenv(peakFile); path != "" {
			if err := os.WriteFile(path, []byte(strconv.FormatInt(residentMost(), 10)), 0o666); err != nil {
				panic(err)
			}
		}
		os.Exit(code)
	}
}

// lineCount counts the lines of a file.
func lineCount(t testing.TB, path string) int {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	n := 0
	for s := bufio.NewScanner(f); s.Scan(); {
		n++
	}
	return n
}
