package pipeline

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"log/slog"
	"maps"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"duskline/fitsread"
	"duskline/spectrum"
)

// Job is what one command asks for.
type Job struct {
	Out   string   // run folder, made if it is not there
	Base  string   // absolute folder that relative paths start from
	Paths []string // files, folders, patterns, @lists; none to go on with the plan of Out

	Settings Settings
	Layouts  []LayoutText // tried before the built-in rules for reading
	Recipes  []RecipeText // of which Processor was made, kept in the plan
	Manifest *Manifest    // what is known about the objects, may be nil
	Limit    int64        // largest number of spectra, 0 for all
	Program  string       // version of the program, part of the plan
	Build    string       // which binary of that version, part of the plan
	// Like is the folder of an earlier run: its inputs are taken where Paths has
	// none, and its rows where nothing that they depend on has changed. It
	// changes no byte of what comes out.
	Like      string
	Shard     Shard // the part that Work does; the zero value is all
	Processor Processor

	Progress Progress     // may be nil
	Log      *slog.Logger // may be nil

	// Open opens an input file. Nil takes fitsread.Open with Layouts.
	Open func(path string) (SpectrumFile, error)
}

// LayoutText is a layout file: how to read inputs that do not speak for
// themselves. See fitsread.ParseLayout.
type LayoutText struct {
	Name string `json:"name"`
	Text string `json:"text"`
}

// SpectrumFile is an open input; *fitsread.File is one. Several goroutines may
// call its methods, except Close, at the same time.
type SpectrumFile interface {
	Count() int
	// Read returns spectrum i with its InputDigest.
	Read(i int) (*spectrum.Spectrum, error)
	// Digest is of spectrum i, also where it cannot be read.
	Digest(i int) (string, error)
	Close() error
}

// Run is a run folder with its plan, ready for work.
type Run struct {
	job    Job
	out    string
	plan   string // path
	head   planHead
	totals planEnd
	id     string // digest of the plan

	allWhole bool     // every block was seen whole by Work
	earlier  *earlier // nil without Job.Like
	taken    int64    // objects taken over from it
}

// The names in the digests of a plan that are not the processor's.
const (
	settingsDigest = "settings"
	// calibrationDigest is of what turns a gap between scores into a confidence
	// and a verdict. It is a part of the settings.
	calibrationDigest = "calibration"
	layoutsDigest     = "layouts"
)

// Recalled is what an earlier command planned in a run folder.
type Recalled struct {
	Settings Settings
	Layouts  []LayoutText
	Recipes  []RecipeText
	Manifest string // path of the copy in the run folder, empty for none
	Limit    int64
	Folder   string // that relative inputs start from
}

// Recall reads back the plan of the run folder out below base, so that a command without any
// PATH can go on with it. The error is an *InputError when there is none.
func Recall(base, out string) (Recalled, error) {
	r, err := openPlan(filepath.Join(locate(base, out), planName))
	if errors.Is(err, fs.ErrNotExist) {
		return Recalled{}, noRun(out)
	}
	if err != nil {
		return Recalled{}, err
	}
	defer r.Close()
	set, err := ParseSettings([]byte(r.head.Settings))
	if err != nil {
		return Recalled{}, fmt.Errorf("%s was begun with settings of another version: %w", out, err)
	}
	recalled := Recalled{Settings: set, Layouts: r.head.Layouts, Recipes: r.head.Recipes, Limit: r.head.Limit,
		Folder: r.head.Folder}
	if r.head.Manifest != "" {
		recalled.Manifest = filepath.Join(locate(base, out), r.head.Manifest)
	}
	return recalled, nil
}

func noRun(out string) error {
	return inputError("%s holds no run to go on with; give at least one PATH to begin one", out)
}

// Prepare plans a run, or finds the plan of one that was begun and makes sure
// that it is the same run. A folder that holds anything else is never written
// into. The error is an *InputError, a *SettingsError or a *MismatchError when
// the command has to be changed.
func Prepare(ctx context.Context, job Job) (*Run, error) {
	if err := job.Settings.Check(); err != nil {
		return nil, err
	}
	if job.Progress == nil {
		job.Progress = silent{}
	}
	if job.Log == nil {
		job.Log = slog.New(slog.DiscardHandler)
	}
	if job.Open == nil {
		open, err := openWith(job.Layouts)
		if err != nil {
			return nil, err
		}
		job.Open = open
	}
	out := locate(job.Base, job.Out)
	run := &Run{job: job, out: out, plan: filepath.Join(out, planName)}
	want, err := job.head()
	if err != nil {
		return nil, err
	}
	want.Build = job.Build
	there, err := checkFolder(out, job.Out)
	if err != nil {
		return nil, err
	}
	if !there {
		if err := run.makePlan(ctx, want); err != nil {
			return nil, err
		}
	}
	if run.head, run.totals, run.id, err = readTotals(run.plan); err != nil {
		return nil, err
	}
	run.job.Log = job.Log.With("run", run.id)
	if there {
		if err := run.agree(ctx, want); err != nil {
			return nil, err
		}
	}
	if job.Manifest != nil {
		if err := job.Manifest.keep(out); err != nil {
			return nil, fmt.Errorf("the manifest cannot be copied into %s: %w", job.Out, err)
		}
	}
	if job.Like != "" {
		if run.earlier, err = openEarlier(&run.job, &run.head); err != nil {
			return nil, err
		}
	}
	return run, run.showSettings()
}

// showSettings writes the settings of the plan where people find them.
func (r *Run) showSettings() error {
	path := filepath.Join(r.out, settingsName)
	if _, err := os.Stat(path); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return writeAtomic(path, func(w io.Writer) error {
		_, err := io.WriteString(w, r.head.Settings)
		return err
	})
}

// Recorded opens a run folder for Gather alone: the program must be the one
// that began the run. The error is an *InputError or a *MismatchError when the
// command has to be changed.
func Recorded(job Job) (*Run, error) {
	if job.Progress == nil {
		job.Progress = silent{}
	}
	if job.Log == nil {
		job.Log = slog.New(slog.DiscardHandler)
	}
	run := &Run{job: job, out: locate(job.Base, job.Out)}
	run.plan = filepath.Join(run.out, planName)
	var err error
	run.head, run.totals, run.id, err = readTotals(run.plan)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, inputError("%s holds no run; give the folder of one", job.Out)
	}
	if err != nil {
		return nil, err
	}
	run.job.Log = job.Log.With("run", run.id)
	asNow := run.head
	asNow.Program, asNow.Build = job.Program, job.Build
	if diffs := run.head.differences(&asNow); len(diffs) > 0 {
		return nil, &MismatchError{job.Out, diffs, run.head.otherProgram(&asNow)}
	}
	return run, nil
}

// Taken returns how many objects Work took over from the earlier run.
func (r *Run) Taken() int64 { return r.taken }

// ID returns the digest of the plan, which names the run.
func (r *Run) ID() string { return r.id }

// Blocks returns how many blocks the run has.
func (r *Run) Blocks() int { return r.blocks() }

// Objects returns the number of spectra in the plan.
func (r *Run) Objects() int64 { return r.totals.Objects }

// Folder returns the path of the run folder.
func (r *Run) Folder() string { return r.out }

// head builds the head of a plan for the job.
func (j *Job) head() (planHead, error) {
	digests := map[string]string{settingsDigest: j.Settings.Digest(), calibrationDigest: Settings{Verdict: j.Settings.Verdict}.Digest()}
	maps.Copy(digests, j.Processor.Digests())
	if len(j.Layouts) > 0 {
		sum := sha256.New()
		for _, l := range j.Layouts {
			fmt.Fprintf(sum, "%d %s %d %s\n", len(l.Name), l.Name, len(l.Text), l.Text)
		}
		digests[layoutsDigest] = hex.EncodeToString(sum.Sum(nil)[:8])
	}
	kept := ""
	if j.Manifest != nil {
		digests[manifestDigest], kept = j.Manifest.digest(), j.Manifest.copy
	}
	return planHead{Format: planFormat, Version: planVersion, Program: j.Program, Folder: j.Base,
		BlockSize: j.Settings.Run.BlockSize, Limit: j.Limit, Digests: digests, Manifest: kept,
		Layouts: j.Layouts, Recipes: j.Recipes, Settings: string(j.Settings.Essential().TOML())}, nil
}

// workers returns how many objects are worked on at the same time.
func (j *Job) workers() int {
	if n := j.Settings.Run.Workers; n > 0 {
		return n
	}
	return runtime.GOMAXPROCS(0)
}

// openWith returns the opener of real files.
func openWith(texts []LayoutText) (func(string) (SpectrumFile, error), error) {
	var opts fitsread.Options
	var problems []string
	for _, l := range texts {
		layout, err := fitsread.ParseLayout(l.Name, []byte(l.Text))
		if err != nil {
			problems = append(problems, err.Error())
		}
		opts.Layouts = append(opts.Layouts, layout)
	}
	if len(problems) > 0 {
		return nil, &InputError{problems}
	}
	return func(path string) (SpectrumFile, error) {
		f, err := fitsread.Open(path, opts)
		if err != nil {
			return nil, err // not a nil *File in a non-nil interface
		}
		return f, nil
	}, nil
}

// checkFolder reports whether a run was begun in the folder. The error says
// why the folder cannot be used.
func checkFolder(out, name string) (bool, error) {
	entries, err := os.ReadDir(out)
	if errors.Is(err, fs.ErrNotExist) {
		return false, nil
	}
	if err != nil {
		return false, inputError("%s cannot be used as run folder: %s; give another --out", name, plain(err))
	}
	for _, e := range entries {
		if e.Name() == planName {
			r, err := openPlan(filepath.Join(out, planName))
			if err != nil {
				return false, err
			}
			return true, r.Close()
		}
	}
	for _, e := range entries {
		// A command that was killed while it planned leaves no more than this.
		if n := e.Name(); !strings.HasPrefix(n, unfinished) {
			return false, inputError("%s holds %s and no run of duskline; give a new or an empty folder as --out", name, n)
		}
	}
	return false, nil
}

// agree makes sure that the plan that is there is the one asked for.
func (r *Run) agree(ctx context.Context, want planHead) error {
	diffs := r.head.differences(&want)
	if len(r.job.Paths) > 0 {
		more, err := checkInputs(ctx, r.plan, r.job.Base, func(take func(planInput) (bool, error)) error {
			return r.job.listInputs(ctx, (*Job).examineStat, take)
		})
		if err != nil {
			return err
		}
		diffs = append(diffs, more...)
	}
	if len(diffs) > 0 {
		return &MismatchError{r.job.Out, diffs, r.head.otherProgram(&want)}
	}
	return nil
}

// makePlan lists the inputs and puts the plan into place.
func (r *Run) makePlan(ctx context.Context, head planHead) error {
	if len(r.job.Paths) == 0 && r.job.Like == "" {
		return noRun(r.job.Out)
	}
	_, statErr := os.Stat(r.out)
	if err := os.MkdirAll(r.out, 0o777); err != nil {
		return inputError("the run folder %s cannot be made: %s; give another --out", r.job.Out, plain(err))
	}
	if statErr != nil {
		// Best effort: a folder may be entered and not read.
		if err := syncFolder(filepath.Dir(r.out)); err != nil {
			r.job.Log.Debug("the folder around the run folder cannot be synced", "reason", err)
		}
	}
	tmp, err := createUnfinished(r.out, "plan")
	if err != nil {
		return inputError("the run folder %s cannot be written to: %s; give another --out", r.job.Out, plain(err))
	}
	defer func() {
		tmp.Close()
		os.Remove(tmp.Name())
		if statErr != nil {
			os.Remove(r.out) // succeeds only if nothing came of it
		}
	}()
	used := r.job.Manifest.unusedYet()
	totals, err := writePlan(tmp, head, func(take func(planInput) (bool, error)) error {
		var seen planEnd
		return r.job.listInputs(ctx, (*Job).examineOpen, func(in planInput) (bool, error) {
			seen.Inputs++
			seen.Objects += in.Rows
			for _, i := range in.entries {
				used[i] = true
			}
			r.job.Progress.Planning(seen.Inputs, seen.Objects)
			return take(in)
		})
	})
	var full *fs.PathError
	if errors.As(err, &full) && full.Path == tmp.Name() {
		return fmt.Errorf("the plan in %s cannot be written: %w; make room, then repeat the command", r.job.Out, full.Err)
	}
	if err != nil {
		return err
	}
	if totals.Objects == 0 {
		return inputError("no FITS file (*.fits, *.fit, *.fts, also with .gz or .fz) in %s; give another PATH", strings.Join(r.job.Paths, ", "))
	}
	r.warnManifest(used)
	return r.linkPlan(ctx, tmp, head)
}

// linkPlan gives the plan its name unless another command was faster; then the
// two must agree.
func (r *Run) linkPlan(ctx context.Context, tmp *os.File, head planHead) error {
	if err := tmp.Sync(); err != nil {
		return fmt.Errorf("the plan in %s cannot be written: %w", r.job.Out, err)
	}
	err := os.Link(tmp.Name(), r.plan)
	if _, statErr := os.Stat(r.plan); err != nil && statErr == nil {
		if r.head, _, _, err = readTotals(r.plan); err != nil {
			return err
		}
		return r.agree(ctx, head)
	}
	if err != nil { // a file system without links
		err = os.Rename(tmp.Name(), r.plan)
	}
	if err != nil {
		return fmt.Errorf("the plan in %s cannot be put into place: %w", r.job.Out, err)
	}
	return syncFolder(r.out)
}
