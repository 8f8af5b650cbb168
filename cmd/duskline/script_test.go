package main

import (
	"bytes"
	"errors"
	"image"
	"image/png"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"testing"
	"time"

	"duskline/synth"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"duskline": tellingPeak(start), quickName: tellingPeak(quickStart)})
}

// TestScripts runs the commands as people do. Beside the usual words a script
// knows:
//
//	exits CODE COMMAND...   run and want that exit code
//	mknight DIR N           write N synthetic spectra, one a file
//	await PATTERN           wait until a file is there
//	isplot FILE             want a PNG that is more than an empty frame
//	spoil FILE              cut a file in half
//	mkshort DIR FILES N     write FILES files of N short spectra each
//	mkheader FILE N CARD... write an HDU of these cards and N bytes
//	mkspectrum FILE [CARD]  write a spectrum with such cards as SPECSYS=TOPOCENT
func TestScripts(t *testing.T) {
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata",
		RequireExplicitExec: true,
		Cmds: map[string]func(ts *testscript.TestScript, neg bool, args []string){
			"exits": exits, "mknight": makeNight, "await": await, "isplot": isPlot, "spoil": spoil,
			"mkshort": makeShort, "touchrow": touchRow, "mkspectrum": makeSpectrum, "mkheader": makeHeader,
		},
	})
}

func exits(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exits CODE COMMAND...")
	}
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	got := 0
	if err := ts.Exec(args[1], args[2:]...); err != nil {
		var exit *exec.ExitError
		if !errors.As(err, &exit) {
			ts.Fatalf("%v", err)
		}
		got = exit.ExitCode()
	}
	if got != want {
		ts.Fatalf("exit code %d, want %d", got, want)
	}
}

func makeNight(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 2 {
		ts.Fatalf("usage: mknight DIR N")
	}
	n, err := strconv.Atoi(args[1])
	ts.Check(err)
	ts.Check(synth.BenchmarkNight(ts.MkAbs(args[0]), n))
}

// await gives up after a time that only a hanging program needs.
func await(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 1 {
		ts.Fatalf("usage: await PATTERN")
	}
	for range 6000 {
		found, err := filepath.Glob(ts.MkAbs(args[0]))
		ts.Check(err)
		if len(found) > 0 {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	ts.Fatalf("%s did not appear", args[0])
}

// inksOf counts the pixels of every color.
func inksOf(img image.Image) map[[3]uint32]int {
	inks := map[[3]uint32]int{}
	b := img.Bounds()
	for y := b.Min.Y; y < b.Max.Y; y++ {
		for x := b.Min.X; x < b.Max.X; x++ {
			r, g, blue, _ := img.At(x, y).RGBA()
			inks[[3]uint32{r >> 8, g >> 8, blue >> 8}]++
		}
	}
	return inks
}

func isPlot(ts *testscript.TestScript, neg bool, args []string) {
	img, err := png.Decode(bytes.NewReader([]byte(ts.ReadFile(args[0]))))
	ts.Check(err)
	inks := inksOf(img)
	// Black of the smoothed spectrum and red of the continuum over most of the
	// width of the plot.
	for _, ink := range [][3]uint32{{25, 25, 25}, {214, 69, 33}} {
		if inks[ink] < img.Bounds().Dx()/4 {
			ts.Fatalf("%s has %d pixels of color %v", args[0], inks[ink], ink)
		}
	}
}

func spoil(ts *testscript.TestScript, neg bool, args []string) {
	path := ts.MkAbs(args[0])
	info, err := os.Stat(path)
	ts.Check(err)
	ts.Check(os.Truncate(path, info.Size()/2))
}
