package main

import (
	"bufio"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"duskline/internal/outside"
)

// call is one system call that matters for what a loss of power leaves.
type call struct {
	name, from, to string // paths; fsync has only from
}

// TestPowerLoss watches the system calls of a run: before anything gets the name
// under which it counts, its content and its folder are on disk, and the name
// itself is before the run ends.
func TestPowerLoss(t *testing.T) {
	strace := outside.Program(t, "strace")
	s := newCrashSite(t, 300)
	trace := filepath.Join(s.base, "trace")
	c := s.command()
	c.Path = strace
	c.Args = append([]string{"strace", "-f", "-y", "-s", "4096", "-e", "trace=fsync,fdatasync,rename,renameat,renameat2,link,linkat",
		"-o", trace, filepath.Join(s.bin, quickName)}, s.runArgs("RUN")...)
	if code, out := finished(t, c); code != exitDone {
		outside.Missing(t, "strace does not work here: exit code %d: %s", code, out)
	}
	calls := readTrace(t, trace)
	synced := map[string]int{} // path to its last sync
	for i, c := range calls {
		if c.name == "fsync" {
			synced[c.from] = i
		}
	}
	before := func(path string, at int) bool {
		for i, c := range calls[:at] {
			if c.name == "fsync" && c.from == path && i < at {
				return true
			}
		}
		return false
	}
	run := filepath.Join(s.base, "RUN")
	named := map[string]bool{}
	for at, c := range calls {
		if c.name == "fsync" || !strings.HasPrefix(c.to, run) || strings.HasPrefix(filepath.Base(c.to), "metrics.") {
			continue // monitoring reads the metrics of now
		}
		if filepath.Base(c.to) == "metrics.json" {
			continue // what monitoring reads of a command at work; nothing depends on it
		}
		must := []string{c.from}
		if filepath.Dir(c.to) == filepath.Join(run, "blocks") {
			for _, name := range []string{"objects.parquet", "lines.parquet", "absorbers.parquet", "block.json"} {
				must = append(must, filepath.Join(c.from, name))
			}
		}
		for _, path := range must {
			if !before(path, at) {
				t.Errorf("%s got its name before %s was on disk", c.to, path)
			}
		}
		if last, ok := synced[filepath.Dir(c.to)]; !ok || last < at {
			t.Errorf("the name %s was not on disk at the end", c.to)
		}
		named[strings.TrimPrefix(c.to, run+"/")] = true
	}
	for _, name := range []string{"plan.jsonl", "blocks/000000", "blocks/000004", "catalog.fits", "catalog.csv", "objects.parquet",
		"lines.parquet", "absorbers.parquet", "summary.json"} {
		if !named[name] {
			t.Errorf("no call was seen that named %s: the test is blind", name)
		}
	}
	if last, ok := synced[s.base]; !ok || last > synced[filepath.Join(run, "blocks")] {
		t.Error("the run folder itself was not on disk before its blocks")
	}
}

var (
	syncCall = regexp.MustCompile(`^\d+ +f(?:data)?sync\(\d+<([^>]*)>`)
	nameCall = regexp.MustCompile(`^\d+ +(?:rename|link)(?:at|at2)?\(.*?"([^"]*)".*?"([^"]*)".*(= 0|unfinished \.\.\.>)$`)
)

// readTrace returns the calls in order of their beginning; a sync that is still
// going on when another call begins comes too early only by the time that its
// thread needs to go on, and the caller waits for it.
func readTrace(t *testing.T, path string) []call {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	var calls []call
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		if m := syncCall.FindStringSubmatch(lines.Text()); m != nil {
			calls = append(calls, call{name: "fsync", from: m[1]})
		} else if m := nameCall.FindStringSubmatch(lines.Text()); m != nil {
			calls = append(calls, call{name: "name", from: m[1], to: m[2]})
		}
	}
	if err := lines.Err(); err != nil {
		t.Fatal(err)
	}
	return calls
}
