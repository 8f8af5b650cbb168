package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"duskline/pipeline"
)

type runCmd struct {
	Out      string   `required:"" placeholder:"RUN" help:"Folder for the run: new, empty, or that of a run to go on with."`
	Settings string   `placeholder:"FILE" help:"Settings in TOML over the built-in ones."`
	Layout   []string `placeholder:"FILE" sep:"none" help:"Layout in TOML: how to read files that do not speak for themselves; may be repeated."`
	Recipes  string   `placeholder:"DIR" help:"Folder of template recipes (*.toml) that add to the built-in families or replace them."`
	Manifest string   `placeholder:"FILE" help:"Table, CSV or FITS, of what is known about the objects: names, positions, limits, what to leave out."`
	Workers  int      `placeholder:"N" help:"Spectra worked on at the same time; by default one a processor. Changes no result."`
	Limit    int64    `placeholder:"N" help:"Process the first N spectra only."`
	PlanOnly bool     `help:"Plan the run and do nothing else."`
	Shard    string   `placeholder:"I/N" env:"DUSKLINE_SHARD" help:"Do part I of N, I from 0 to N-1, and write no catalogs; array takes I and N from the environment of a job array."`
	logFlags
	Path []string `arg:"" optional:"" help:"FITS files, folders (searched through), quoted patterns, or @list.txt with a path a line."`
}

// Help teaches by example.
func (runCmd) Help() string {
	return `Examples:
  duskline run --out RUN night/                    all FITS files below a folder
  duskline run --out RUN 'night/*/spec-*.fits.gz'  a pattern
  duskline run --out RUN @tonight.txt              a list, one path a line
  duskline run --out TRY --limit 100 night/        the first hundred, as a trial
  duskline run --out RUN                           go on after an interruption
  duskline run --out RUN --plan-only night/        plan, then share the work:
  duskline run --out RUN --shard 3/8               part 3 of 0 to 7, on any machine that sees RUN
  duskline gather RUN                              join what the shards did

The run folder then holds catalog.fits, catalog.csv, objects.parquet, lines.parquet and summary.json. Blocks of spectra that are finished are kept whatever happens: the same command goes on from there, and comes to the same bytes as if nothing had happened. An input that cannot be read becomes a row that says why.`
}

func (c *runCmd) run(a *app) (int, error) {
	job, err := c.job(a)
	if err != nil {
		return 0, err
	}
	if c.PlanOnly {
		return exitDone, a.planOnly(job, c.logFlags)
	}
	summary, err := a.process(job, c.logFlags)
	if err != nil {
		return 0, err
	}
	return outcomeCode(summary), nil
}

// outcomeCode is the exit code of a run that came to its end, or of a shard
// that has no summary.
func outcomeCode(s *pipeline.Summary) int {
	switch {
	case s == nil: // a shard: what came out is the matter of gather
		return exitDone
	case s.InternalErrors > 0:
		return exitFailed
	case s.Unreadable > 0:
		return exitUnreadable
	}
	return exitDone
}

// job turns the flags into a job. Without any PATH, what is not given is taken
// from the run that is to go on.
func (c *runCmd) job(a *app) (pipeline.Job, error) {
	job := pipeline.Job{Out: c.Out, Base: a.folder, Paths: c.Path, Limit: c.Limit, Program: version(), Build: build()}
	if c.Limit < 0 {
		return job, &pipeline.InputError{Problems: []string{fmt.Sprintf("--limit %d is not allowed; give the number of spectra to process, at least 1", c.Limit)}}
	}
	var err error
	if job.Shard, err = shardOf(c.Shard, a.getenv); err != nil {
		return job, err
	}
	if job.Settings, err = readSettings(a, c.Settings); err != nil {
		return job, err
	}
	if job.Layouts, err = readLayouts(a, c.Layout); err != nil {
		return job, err
	}
	if job.Recipes, err = readRecipes(a, c.Recipes); err != nil {
		return job, err
	}
	if c.Manifest != "" {
		if job.Manifest, err = pipeline.ReadManifest(a.locate(c.Manifest), c.Manifest); err != nil {
			return job, err
		}
	}
	if len(c.Path) == 0 {
		planned, err := pipeline.Recall(a.folder, c.Out)
		if err != nil {
			return job, err
		}
		if c.Settings == "" {
			job.Settings = planned.Settings
		}
		if len(c.Layout) == 0 {
			job.Layouts = planned.Layouts
		}
		if c.Recipes == "" {
			job.Recipes = planned.Recipes
		}
		if c.Manifest == "" && planned.Manifest != "" {
			if job.Manifest, err = pipeline.ReadManifest(planned.Manifest, planned.Manifest); err != nil {
				return job, err
			}
		}
		if c.Limit == 0 {
			job.Limit = planned.Limit
		}
	}
	if c.Workers != 0 {
		job.Settings.Run.Workers = c.Workers
	}
	return job, nil
}

func (a *app) locate(path string) string {
	if filepath.IsAbs(path) {
		return path
	}
	return filepath.Join(a.folder, path)
}

// readSettings reads a settings file over the defaults; without a name it
// returns the defaults.
func readSettings(a *app, name string) (pipeline.Settings, error) {
	if name == "" {
		return pipeline.DefaultSettings(), nil
	}
	text, err := readText(a, name, "settings")
	if err != nil {
		return pipeline.Settings{}, err
	}
	set, err := pipeline.ParseSettings(text)
	if err != nil {
		return set, fmt.Errorf("%s is not used, it has these problems:\n%w", name, err)
	}
	return set, nil
}

func readLayouts(a *app, names []string) ([]pipeline.LayoutText, error) {
	var out []pipeline.LayoutText
	for _, name := range names {
		text, err := readText(a, name, "layout")
		if err != nil {
			return nil, err
		}
		base := filepath.Base(name)
		out = append(out, pipeline.LayoutText{Name: strings.TrimSuffix(base, filepath.Ext(base)), Text: string(text)})
	}
	return out, nil
}

// readRecipes reads a folder of recipes; without a name there are none.
func readRecipes(a *app, name string) ([]pipeline.RecipeText, error) {
	if name == "" {
		return nil, nil
	}
	return pipeline.ReadRecipes(a.locate(name), name)
}

func readText(a *app, name, what string) ([]byte, error) {
	text, err := os.ReadFile(a.locate(name))
	if err != nil {
		return nil, &pipeline.InputError{Problems: []string{fmt.Sprintf("the %s file cannot be read: %s", what, err)}}
	}
	return text, nil
}
