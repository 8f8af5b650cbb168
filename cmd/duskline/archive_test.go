package main

import (
	"flag"
	"os/exec"
	"path/filepath"
	"testing"
	"time"
)

// The full size: go test ./cmd/duskline -run TestArchive -archive 1000000 -v
var archiveObjects = flag.Int("archive", 30_000, "objects of the archive")

// memoryMost is what a run may take, whatever its size.
const memoryMost = 300 << 20

// TestArchive takes an archive of short spectra, 10,000 a file, through plan,
// two shards, gathering and a resumption with nothing to do, and looks at the
// memory of each. What measures a spectrum is the quick double; reading, plan,
// blocks and catalogs are those of the program.
func TestArchive(t *testing.T) {
	if testing.Short() {
		t.Skip("measures the memory of a program that the race detector does not watch")
	}
	folder, bin := t.TempDir(), commandFolder(t)
	const perFile = 10_000
	if err := writeShort(filepath.Join(folder, "archive"), *archiveObjects/perFile, perFile); err != nil {
		t.Fatal(err)
	}
	step := func(what string, args ...string) {
		t.Helper()
		c := exec.Command(filepath.Join(bin, quickName), args...)
		c.Dir = folder
		began := time.Now()
		if code, out := finished(t, c); code != exitDone {
			t.Fatalf("%s: exit code %d: %s", what, code, out)
		}
		memory := peakMemory(c)
		t.Logf("%-34s %8.2f s  %4d MB", what, time.Since(began).Seconds(), memory>>20)
		if memory > memoryMost {
			t.Errorf("%s took %d MB", what, memory>>20)
		}
	}
	step("plan", "run", "--out", "RUN", "--plan-only", "-q", "archive")
	step("shard 0 of 2", "run", "--out", "RUN", "--shard", "0/2", "-q")
	step("shard 1 of 2", "run", "--out", "RUN", "--shard", "1/2", "-q")
	step("gather", "gather", "RUN", "-q")
	step("the same run again, nothing to do", "run", "--out", "RUN", "-q")
	step("the same with its inputs", "run", "--out", "RUN", "-q", "archive")
	step("repeated, all rows taken over", "run", "--like", "RUN", "--out", "AGAIN", "-q")
	step("compared", "compare", "RUN", "AGAIN", "--max-changed", "0", "-q")
	if n := lineCount(t, filepath.Join(folder, "RUN", "catalog.csv")); n != *archiveObjects+1 {
		t.Errorf("the catalog has %d lines for %d objects", n, *archiveObjects)
	}
}
