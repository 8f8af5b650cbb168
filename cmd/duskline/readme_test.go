package main

import (
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// What README.md shows of the demo's night is what the program prints. Lines are compared
// word by word, in their order; "..." stands for what was left out.
func TestReadmeShowsTheDemo(t *testing.T) {
	if testing.Short() {
		t.Skip("processes the whole night of the demo")
	}
	page, err := os.ReadFile("../../README.md")
	if err != nil {
		t.Fatal(err)
	}
	base, bin := t.TempDir(), commandFolder(t)
	output := func(args ...string) string {
		c := exec.Command(filepath.Join(bin, "duskline"), args...)
		c.Dir = base
		code, out := finished(t, c)
		if code != exitDone {
			t.Fatalf("%v ends with %d: %s", args, code, out)
		}
		return out
	}
	for _, shown := range []struct {
		first, out string
		lines      int
	}{
		{"class secure uncertain none all", output("demo", "--out", "DEMO"), 9},
		{"layout named-columns: columns are named as wavelength and flux", output("peek", "DEMO/night/p01/lr-20310314-p01-132.fits"), 15},
	} {
		block := blockFrom(string(page), shown.first)
		if len(block) < shown.lines {
			t.Errorf("README.md shows %d lines from %q on, want %d: the test does not see the page", len(block), shown.first, shown.lines)
		}
		at, printed := 0, strings.Split(shown.out, "\n")
		for _, want := range block {
			want, cut := strings.CutSuffix(want, "...")
			want = strings.TrimSpace(want)
			i := at
			for i < len(printed) {
				got := strings.Join(strings.Fields(printed[i]), " ")
				if got == want || cut && strings.HasPrefix(got, want) {
					break
				}
				i++
			}
			if i == len(printed) {
				t.Errorf("README.md shows %q, which is not printed or not in that order; printed is\n%s", want, shown.out)
				break
			}
			at = i + 1
		}
	}
}

// blockFrom returns the lines of an indented block of a page from one of them on, their
// words separated by one space, without empty ones.
func blockFrom(page, first string) []string {
	var block []string
	for line := range strings.Lines(page) {
		words := strings.Join(strings.Fields(line), " ")
		switch {
		case words == first || len(block) > 0 && strings.HasPrefix(line, "    "):
			block = append(block, words)
		case len(block) > 0 && words != "":
			return block
		}
	}
	return block
}
