package pipeline

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"duskline/internal/outside"
)

// found returns what findInputs yields, a line a candidate.
func found(base, out string, paths ...string) (string, error) {
	var lines []string
	err := findInputs(context.Background(), base, out, paths, func(c candidate) error {
		line := c.path
		if c.trouble != "" {
			line += " (" + c.trouble + ")"
		}
		lines = append(lines, line)
		return nil
	})
	return strings.Join(lines, "\n"), err
}

func inputNight(t *testing.T) string {
	t.Helper()
	base := t.TempDir()
	writeNight(t, base, `
		n/b.fits: x
		n/a.FITS.GZ: x
		n/c.dat: x
		n/.hidden.fits: x
		n/d/z.fit: x
		n/d/y.fts: x
		n/RUN/`+planName+`: {"format":"`+planFormat+`","format_version":1}
		n/RUN/catalog.fits: x
		alone.spectrum: x
		odd[1].fits: x
	`)
	for link, target := range map[string]string{
		"n/loop": "..", "n/d/up": "../../n", "n/twin.fits": "b.fits", "n/gone.fits": "nothing", "n/note.txt": "c.dat",
	} {
		if err := os.Symlink(target, filepath.Join(base, link)); err != nil {
			t.Fatal(err)
		}
	}
	if err := syscall.Mkfifo(filepath.Join(base, "n/pipe.fits"), 0o666); err != nil {
		t.Fatal(err)
	}
	// The plan that makes RUN a run ends its first line.
	plan := filepath.Join(base, "n/RUN", planName)
	text, err := os.ReadFile(plan)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(plan, append(text, '\n'), 0o666); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(base, "list.txt"), []byte("# tonight\n\nn/b.fits\n lost.fits \nn/d\nn/d/y.fts\n"), 0o666); err != nil {
		t.Fatal(err)
	}
	return base
}

func TestFindInputs(t *testing.T) {
	base := inputNight(t)
	// n/loop leads back to base, so that base is walked from there; n and all
	// in it are not walked again.
	folder := `n/a.FITS.GZ
n/b.fits
n/d/y.fts
n/d/z.fit
n/gone.fits (cannot be found: no such file or directory)
n/loop/odd[1].fits
n/pipe.fits`
	for _, c := range []struct {
		paths []string
		want  string
	}{
		{[]string{"n"}, folder},
		{[]string{"n", "n/", "n/d", "n/b.fits"}, folder},
		{[]string{"n/d", "n/b.fits"}, "n/d/up/a.FITS.GZ\nn/d/up/b.fits\nn/d/up/gone.fits (cannot be found: no such file or directory)\nn/d/up/loop/odd[1].fits\nn/d/up/pipe.fits\nn/d/y.fts\nn/d/z.fit"},
		{[]string{"alone.spectrum", filepath.Join(base, "alone.spectrum")}, "alone.spectrum"},
		{[]string{"odd[1].fits"}, "odd[1].fits"},
		{[]string{"n/[ab].*", "n/twin.fits"}, "n/a.FITS.GZ\nn/b.fits"},
		{[]string{"n/twin.fits", "n/b.fits"}, "n/twin.fits"},
		{[]string{"n/*/z.fit", "*/b.fits", "./n/d/[xyz].f*"}, "n/d/z.fit\nn/b.fits\nn/d/y.fts"},
		{[]string{filepath.Join(base, "?", "b.fit*")}, filepath.Join(base, "n", "b.fits")},
	} {
		got, err := found(base, filepath.Join(base, "OUT"), c.paths...)
		if err != nil || got != c.want {
			t.Errorf("%q gives\n%s\n%v\nwant\n%s", c.paths, got, err, c.want)
		}
	}
}

func TestFindInputsOfAList(t *testing.T) {
	base := inputNight(t)
	got, err := found(base, filepath.Join(base, "OUT"), "@list.txt")
	if err != nil {
		t.Fatal(err)
	}
	want := "n/b.fits\nlost.fits (cannot be found: no such file or directory)\nn/d/up/"
	if !strings.HasPrefix(got, want) || !strings.HasSuffix(got, "\nn/d/y.fts\nn/d/z.fit") {
		t.Errorf("the list gives\n%s", got)
	}
}

func TestFindInputsReportsAllProblems(t *testing.T) {
	base := inputNight(t)
	_, err := found(base, filepath.Join(base, "OUT"), "n/b.fits", "nix.fits", "n/*.nix", "@nolist", "n/RUN", "n/[")
	var input *InputError
	if !errors.As(err, &input) || len(input.Problems) != 5 {
		t.Fatalf("got %v, want an InputError of five problems", err)
	}
	for i, part := range []string{"nix.fits", "n/*.nix", "nolist", "n/RUN is a run", "n/["} {
		if !strings.Contains(input.Problems[i], part) {
			t.Errorf("problem %d is %q, want it to name %s", i, input.Problems[i], part)
		}
	}
}

func TestFindInputsOutsideTheRunFolder(t *testing.T) {
	base := inputNight(t)
	got, err := found(base, filepath.Join(base, "n/d"), "n")
	if err != nil || strings.Contains(got, "n/d/z.fit") {
		t.Errorf("the run folder itself was searched:\n%s\n%v", got, err)
	}
}

// A name that is not UTF-8 survives the plan.
func TestOddNames(t *testing.T) {
	base := t.TempDir()
	name := "odd\xff\n.fits"
	if err := os.WriteFile(filepath.Join(base, name), []byte("w"), 0o666); err != nil {
		outside.Missing(t, "this file system takes no such name: %v", err)
	}
	set := DefaultSettings()
	job := Job{Out: "RUN", Base: base, Paths: []string{name}, Settings: set, Program: "test", Processor: wordScience{}, Open: openWords}
	finish(t, job)
	rows := readObjects(t, job)
	if len(rows) != 1 || rows[0].SourceFile != `odd\xff\n.fits` || rows[0].ObjectID != "w" {
		t.Errorf("rows are %+v", rows)
	}
}
