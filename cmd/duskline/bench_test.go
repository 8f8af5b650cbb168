package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"testing"

	"duskline/synth"
)

// BenchmarkWorkers processes 500 files with the whole command, by one worker and
// by two: the ratio of the rates is what a second core gives.
func BenchmarkWorkers(b *testing.B) {
	const files = 500
	folder := b.TempDir()
	night := filepath.Join(folder, "night")
	if err := synth.BenchmarkNight(night, files); err != nil {
		b.Fatal(err)
	}
	runs := 0
	for _, workers := range []string{"1", "2"} {
		b.Run(workers, func(b *testing.B) {
			for b.Loop() {
				runs++
				out := filepath.Join(folder, fmt.Sprintf("RUN%d", runs))
				if code := run(context.Background(), []string{"run", "--quiet", "--workers", workers, "--out", out, night}, nil, io.Discard, os.Stderr, os.Getenv); code != exitDone {
					b.Fatalf("exit code %d", code)
				}
			}
			b.ReportMetric(float64(files)*float64(b.N)/b.Elapsed().Seconds(), "spectra/s")
		})
	}
}

// BenchmarkNight processes 2,000 files of 4,600 pixels with the whole command:
// plan, reading, redshifts, lines, blocks, catalogs.
func BenchmarkNight(b *testing.B) {
	const files = 2000
	folder := b.TempDir()
	night := filepath.Join(folder, "night")
	if err := synth.BenchmarkNight(night, files); err != nil {
		b.Fatal(err)
	}
	run0 := 0
	for b.Loop() {
		out := filepath.Join(folder, fmt.Sprintf("RUN%d", run0))
		run0++
		if code := run(context.Background(), []string{"run", "--quiet", "--out", out, night}, nil, io.Discard, os.Stderr, os.Getenv); code != exitDone {
			b.Fatalf("exit code %d", code)
		}
	}
	b.ReportMetric(float64(files)*float64(b.N)/b.Elapsed().Seconds(), "spectra/s")
	b.ReportMetric(b.Elapsed().Seconds()*1e3/float64(files)/float64(b.N), "ms/spectrum")
}
