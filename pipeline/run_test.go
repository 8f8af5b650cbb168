package pipeline

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// TestForeignFolderIsLeftAlone: a folder that holds anything but a run is
// never written into.
func TestForeignFolderIsLeftAlone(t *testing.T) {
	job := smallJob(t)
	for name, text := range map[string]string{"thesis.tex": "years of work", planName: "not a plan\n"} {
		folder := filepath.Join(job.Base, "F"+name)
		if err := os.MkdirAll(folder, 0o777); err != nil {
			t.Fatal(err)
		}
		path := filepath.Join(folder, name)
		if err := os.WriteFile(path, []byte(text), 0o666); err != nil {
			t.Fatal(err)
		}
		job.Out = "F" + name
		if _, err := Prepare(context.Background(), job); err == nil {
			t.Errorf("a folder with %s was taken as run folder", name)
		}
		entries, err := os.ReadDir(folder)
		if got, _ := os.ReadFile(path); err != nil || len(entries) != 1 || string(got) != text {
			t.Errorf("the folder with %s was changed", name)
		}
	}
}

// TestPlanningThatWasKilled leaves a folder that the next command takes.
func TestPlanningThatWasKilled(t *testing.T) {
	job := smallJob(t)
	out := filepath.Join(job.Base, job.Out)
	if err := os.MkdirAll(out, 0o777); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(out, unfinished+"plan-X"), []byte(`{"format":"duskline pl`), 0o666); err != nil {
		t.Fatal(err)
	}
	finish(t, job)
	snapshot(t, job) // fails on anything left behind
}

func TestRunFolderThatCannotBeUsed(t *testing.T) {
	job := smallJob(t)
	if err := os.WriteFile(filepath.Join(job.Base, "file"), nil, 0o666); err != nil {
		t.Fatal(err)
	}
	for _, out := range []string{"file", "file/RUN"} {
		job.Out = out
		var input *InputError
		if _, err := Prepare(context.Background(), job); !errors.As(err, &input) {
			t.Errorf("--out %s: %v, want an InputError", out, err)
		}
	}
	if os.Geteuid() == 0 {
		return // root may write anywhere
	}
	locked := filepath.Join(job.Base, "locked")
	if err := os.Mkdir(locked, 0o555); err != nil {
		t.Fatal(err)
	}
	job.Out = "locked"
	var input *InputError
	if _, err := Prepare(context.Background(), job); !errors.As(err, &input) {
		t.Errorf("--out locked: %v, want an InputError", err)
	}
}

func TestNothingToDo(t *testing.T) {
	job := smallJob(t)
	if err := os.MkdirAll(filepath.Join(job.Base, "empty"), 0o777); err != nil {
		t.Fatal(err)
	}
	for _, paths := range [][]string{{"empty"}, nil, {"night/readme.txt/x"}} {
		job.Paths = paths
		var input *InputError
		if _, err := Prepare(context.Background(), job); !errors.As(err, &input) {
			t.Errorf("%q: %v, want an InputError", paths, err)
		}
		if _, err := os.Stat(filepath.Join(job.Base, job.Out)); err == nil {
			t.Errorf("%q: a run folder was left behind", paths)
		}
	}
	if _, err := Recall(job.Base, job.Out); err == nil {
		t.Error("a run was recalled that never was")
	}
}

// TestMismatch changes one thing at a time between a run and its resumption.
func TestMismatch(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	for name, c := range map[string]struct {
		change func(*Job)
		says   string
	}{
		"program":   {func(j *Job) { j.Program = "test2" }, "version test and this is test2"},
		"limit":     {func(j *Job) { j.Limit = 3 }, "--limit is none, not 3"},
		"setting":   {func(j *Job) { j.Settings.Run.BlockSize = 6 }, "run.block_size (5 and 6)"},
		"line list": {func(j *Job) { j.Processor = wordScience{"4567"} }, "line_list changed (digest 0123, now 4567)"},
		"layout":    {func(j *Job) { j.Layouts = []LayoutText{{"x", "y"}} }, "layouts changed (digest none"},
		"input gone": {func(j *Job) {
			j.Paths = []string{"night/a.fits", "night/b.fits"}
		}, "night/c.fits of its plan is gone"},
		"input new": {func(j *Job) {
			writeNight(t, j.Base, "late.fits: x")
			j.Paths = append(j.Paths, "late.fits")
		}, "late.fits is not in its plan of 9 inputs"},
		"input other": {func(j *Job) { j.Paths = []string{"night/b.fits"} }, "its plan has night/a.fits where now there is night/b.fits"},
	} {
		changed := job
		changed.Paths = append([]string(nil), job.Paths...)
		c.change(&changed)
		_, err := Prepare(context.Background(), changed)
		var mismatch *MismatchError
		if !errors.As(err, &mismatch) {
			t.Errorf("%s: %v, want a MismatchError", name, err)
		} else if !strings.Contains(err.Error(), c.says) || len(mismatch.Differences) != 1 {
			t.Errorf("%s: %q does not say %q alone", name, err, c.says)
		} else if advice := strings.Contains(err.Error(), "use the program that began it"); advice != (name == "program") {
			t.Errorf("%s: the advice is that for another program: %t", name, advice)
		}
	}
	writeNight(t, job.Base, "night/g.fits: g1\n")
	_, err := Prepare(context.Background(), job)
	var mismatch *MismatchError
	if !errors.As(err, &mismatch) || !strings.Contains(err.Error(), "night/g.fits has now 2 bytes and had") {
		t.Errorf("a changed input: %v", err)
	}
}

// TestWorkersMayDiffer: a key marked free is no mismatch.
func TestWorkersMayDiffer(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	job.Settings.Run.Workers = 7
	finish(t, job)
}

func TestRecall(t *testing.T) {
	job := smallJob(t)
	job.Layouts = []LayoutText{{"mine", "text"}}
	job.Limit = 9
	finish(t, job)
	got, err := Recall(job.Base, job.Out)
	if err != nil {
		t.Fatal(err)
	}
	if got.Limit != 9 || len(got.Layouts) != 1 || got.Layouts[0] != job.Layouts[0] || got.Settings.Run.BlockSize != 5 {
		t.Errorf("recalled %+v", got)
	}
	job.Settings, job.Layouts, job.Limit, job.Paths = got.Settings, got.Layouts, got.Limit, nil
	finish(t, job)
}

func TestDamagedPlan(t *testing.T) {
	job := smallJob(t)
	finish(t, job)
	path := filepath.Join(job.Base, job.Out, planName)
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	lines := strings.SplitAfter(string(text), "\n")
	for name, spoilt := range map[string]string{
		"cut":         string(text[:len(text)/2]),
		"without end": strings.Join(lines[:len(lines)-2], ""),
		"line lost":   lines[0] + strings.Join(lines[2:], ""),
		"empty":       "",
	} {
		if err := os.WriteFile(path, []byte(spoilt), 0o666); err != nil {
			t.Fatal(err)
		}
		if _, err := Prepare(context.Background(), job); !errors.Is(err, ErrDamaged) {
			t.Errorf("plan %s: %v, want ErrDamaged", name, err)
		}
	}
}

// TestLostRunFolder: the disk goes away under a run.
func TestLostRunFolder(t *testing.T) {
	job := smallJob(t)
	r, err := Prepare(context.Background(), job)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(r.Folder(), blocksName), nil, 0o666); err != nil {
		t.Fatal(err)
	}
	err = r.Work(context.Background())
	if err == nil || errors.Is(err, context.Canceled) {
		t.Errorf("work on a run folder that takes no block: %v", err)
	}
}
