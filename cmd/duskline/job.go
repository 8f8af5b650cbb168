package main

import (
	"fmt"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"duskline/pipeline"
)

// jobFlags say what a run is of.
type jobFlags struct {
	Out      string   `required:"" placeholder:"RUN" help:"Folder for the run: new, empty, or that of a run to go on with."`
	Settings string   `placeholder:"FILE" help:"Settings in TOML over the built-in ones."`
	Set      []string `placeholder:"KEY=VALUE" sep:"none" help:"One setting, such as redshift.stiffness=0.05, over the others; may be repeated."`
	Layout   []string `placeholder:"FILE" sep:"none" help:"Layout in TOML, or the name of one that comes with the program: how to read files that do not speak for themselves; may be repeated."`
	Recipes  string   `placeholder:"DIR" help:"Folder of template recipes (*.toml) that add to the built-in families or replace them."`
	Manifest string   `placeholder:"FILE" help:"Table, CSV or FITS, of what is known about the objects: names, positions, limits, what to leave out."`
	Workers  int      `placeholder:"N" help:"Spectra worked on at the same time; by default one a processor. Changes no result."`
	Limit    int64    `placeholder:"N" help:"Process the first N spectra only."`
	Like     string   `placeholder:"OLDRUN" help:"Repeat an earlier run, with the changes that other flags name; rows that nothing changed for are taken over."`
	Path     []string `arg:"" optional:"" help:"FITS files, folders (searched through), quoted patterns, or @list.txt with a path a line."`
}

// job turns the flags into a job. What is not given is taken from the run that
// is to be repeated or, without any PATH, from the one that is to go on.
func (c *jobFlags) job(a *app) (pipeline.Job, error) {
	job := pipeline.Job{Out: c.Out, Base: a.folder, Paths: c.Path, Limit: c.Limit, Like: c.Like, Program: version(), Build: build(),
		Settings: pipeline.DefaultSettings()}
	if c.Limit < 0 {
		return job, &pipeline.InputError{Problems: []string{fmt.Sprintf("--limit %d is not allowed; give the number of spectra to process, at least 1", c.Limit)}}
	}
	var err error
	if err := c.recall(a, &job); err != nil {
		return job, err
	}
	base := job.Settings
	if c.Like == "" {
		base = pipeline.DefaultSettings()
	}
	if c.Settings != "" {
		if job.Settings, err = readSettings(a, c.Settings, base); err != nil {
			return job, err
		}
	}
	if len(c.Set) > 0 {
		if job.Settings, err = job.Settings.Over([]byte(settingLines(c.Set))); err != nil {
			return job, fmt.Errorf("--set %s is not used:\n%w", strings.Join(c.Set, " --set "), err)
		}
	}
	if len(c.Layout) > 0 {
		if job.Layouts, err = readLayouts(a, c.Layout); err != nil {
			return job, err
		}
	}
	if c.Recipes != "" {
		if job.Recipes, err = readRecipes(a, c.Recipes); err != nil {
			return job, err
		}
	}
	if c.Manifest != "" {
		if job.Manifest, err = pipeline.ReadManifest(a.locate(c.Manifest), c.Manifest); err != nil {
			return job, err
		}
	}
	if c.Workers != 0 {
		job.Settings.Run.Workers = c.Workers
	}
	return job, nil
}

// bareWord is KEY=word where the word has no quotes.
var bareWord = regexp.MustCompile(`^(\s*[\w.]+\s*=\s*)([A-Za-z][A-Za-z_-]*)\s*$`)

// settingLines makes TOML of the values of --set. A shell takes away the quotes that
// TOML wants around a text, so a bare word gets them back.
func settingLines(set []string) string {
	lines := make([]string, len(set))
	for i, s := range set {
		lines[i] = s
		if m := bareWord.FindStringSubmatch(s); m != nil && !slices.Contains([]string{"true", "false", "inf", "nan"}, m[2]) {
			lines[i] = m[1] + strconv.Quote(m[2])
		}
	}
	return strings.Join(lines, "\n")
}

// recall fills a job from a run that was planned before, if the flags refer to
// one.
func (c *jobFlags) recall(a *app, job *pipeline.Job) error {
	from := c.Out
	switch {
	case c.Like == "" && len(c.Path) > 0:
		return nil
	case c.Like != "" && !pipeline.IsRun(a.locate(c.Out)):
		from = c.Like
	}
	if from != c.Out && !pipeline.IsRun(a.locate(from)) {
		return &pipeline.InputError{Problems: []string{fmt.Sprintf("%s holds no run; --like wants the folder of an earlier one", from)}}
	}
	planned, err := pipeline.Recall(a.folder, from)
	if err != nil {
		return err
	}
	job.Settings, job.Layouts, job.Recipes = planned.Settings, planned.Layouts, planned.Recipes
	if c.Limit == 0 {
		job.Limit = planned.Limit
	}
	if c.Manifest == "" && planned.Manifest != "" {
		if job.Manifest, err = pipeline.ReadManifest(planned.Manifest, planned.Manifest); err != nil {
			return err
		}
	}
	if c.Like != "" && len(c.Path) == 0 && planned.Folder != a.folder {
		// Relative inputs start where they did.
		job.Out, job.Like, job.Base = absolute(a.folder, c.Out), absolute(a.folder, c.Like), planned.Folder
	}
	return nil
}

func absolute(folder, path string) string {
	if filepath.IsAbs(path) {
		return path
	}
	return filepath.Join(folder, path)
}
