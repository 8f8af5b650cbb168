package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/synth"
)

// TestRunningPage runs the commands of docs/running.md as they stand there.
func TestRunningPage(t *testing.T) {
	if testing.Short() {
		t.Skip("the scripts run the same commands")
	}
	text, err := os.ReadFile("../../docs/running.md")
	if err != nil {
		t.Fatal(err)
	}
	base, bin := t.TempDir(), commandFolder(t)
	if err := synth.BenchmarkNight(filepath.Join(base, "night"), 16); err != nil {
		t.Fatal(err)
	}
	for name, text := range map[string]string{"mine.toml": "[lines]\nwindow_kms = 1400\n", "tonight.txt": "night/lr-000003.fits\n"} {
		if err := os.WriteFile(filepath.Join(base, name), []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	ran, inside := 0, false
	for line := range strings.Lines(string(text)) {
		line = strings.TrimSpace(line)
		switch {
		case line == "```sh":
			inside = true
			continue
		case strings.HasPrefix(line, "```"):
			inside = false
		}
		if !inside {
			continue
		}
		c := exec.Command("/bin/sh", "-c", line)
		c.Dir = base
		c.Env = append(os.Environ(), "PATH="+bin+":"+os.Getenv("PATH"))
		if code, out := finished(t, c); code != exitDone {
			t.Errorf("%s\nends with %d: %s", line, code, out)
		}
		ran++
	}
	if ran < 13 {
		t.Errorf("%d commands were run: the test does not see the page", ran)
	}
	for _, path := range []string{"RUN/catalog.fits", "SHARED/catalog.fits", "WIDER/lines.parquet", "CHANGES/changes.csv", "CHANGES/lines.png", "NIGHT/slurm/array.sh"} {
		if _, err := os.Stat(filepath.Join(base, path)); err != nil {
			t.Errorf("the commands of the page leave no %s", path)
		}
	}
}
