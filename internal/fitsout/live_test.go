package fitsout

import (
	"encoding/json"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"duskline/internal/outside"
)

// verifyFITS runs fitsverify, which must find no error and no warning.
func verifyFITS(t *testing.T, path string) {
	t.Helper()
	program := outside.Program(t, "fitsverify")
	// It can hang on some files.
	out, err := exec.Command("timeout", "60", program, "-l", path).CombinedOutput()
	if err != nil || !strings.Contains(string(out), "0 warning(s) and 0 error(s)") {
		t.Errorf("fitsverify: %v\n%s", err, out)
	}
}

type readback struct {
	HDUs []struct {
		Name, Kind        string
		Cards             map[string]any
		Comments          map[string]string
		Comment           []string
		Checksum, Datasum int
		Rows              [][]any
		Shape             []int
		Dtype             string
		Pixels            []any
	}
	Warnings []string
}

// readAstropy returns what astropy finds in the file.
func readAstropy(t *testing.T, path string) readback {
	t.Helper()
	python := outside.Python(t, "astropy")
	out, err := exec.Command("timeout", "60", python, filepath.Join("testdata", "readback.py"), path).Output()
	if err != nil {
		if exit, ok := err.(*exec.ExitError); ok {
			t.Fatalf("astropy: %v\n%s", err, exit.Stderr)
		}
		t.Fatal(err)
	}
	var r readback
	if err := json.Unmarshal(out, &r); err != nil {
		t.Fatal(err)
	}
	if len(r.Warnings) > 0 {
		t.Errorf("astropy warns: %q", r.Warnings)
	}
	for i, h := range r.HDUs {
		if h.Checksum != 1 || h.Datasum != 1 {
			t.Errorf("HDU %d %q: astropy finds checksum state %d, datasum state %d, want 1 and 1", i, h.Name, h.Checksum, h.Datasum)
		}
	}
	return r
}
