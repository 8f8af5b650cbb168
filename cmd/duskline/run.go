package main

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"duskline/pipeline"
)

type runCmd struct {
	jobFlags
	PlanOnly bool   `help:"Plan the run and do nothing else."`
	Shard    string `placeholder:"I/N" env:"DUSKLINE_SHARD" help:"Do part I of N, I from 0 to N-1, and write no catalogs; array takes I and N from the environment of a job array."`
	logFlags
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
  duskline run --like RUN --out NEW --recipes my/  the same inputs and settings with other templates
  duskline run --like RUN --out NEW --set lines.window_kms=1500

The run folder then holds catalog.fits, catalog.csv, objects.parquet, lines.parquet and summary.json. Blocks of spectra that are finished are kept whatever happens: the same command goes on from there, and comes to the same bytes as if nothing had happened. An input that cannot be read becomes a row that says why.`
}

func (c *runCmd) run(a *app) (int, error) {
	job, err := c.job(a)
	if err != nil {
		return 0, err
	}
	if job.Shard, err = shardOf(c.Shard, a.getenv); err != nil {
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

func (a *app) locate(path string) string {
	return absolute(a.folder, path)
}

// readSettings reads a settings file over base; without a name it returns base.
func readSettings(a *app, name string, base pipeline.Settings) (pipeline.Settings, error) {
	if name == "" {
		return base, nil
	}
	text, err := readText(a, name, "settings")
	if err != nil {
		return base, err
	}
	set, err := base.Over(text)
	if err != nil {
		return set, fmt.Errorf("%s is not used, it has these problems:\n%w", name, err)
	}
	return set, nil
}

func readLayouts(a *app, names []string) ([]pipeline.LayoutText, error) {
	var out []pipeline.LayoutText
	for _, name := range names {
		if text, ok := builtInLayout(name); ok {
			out = append(out, pipeline.LayoutText{Name: name, Text: string(text)})
			continue
		}
		text, err := readText(a, name, "layout")
		if err != nil && !strings.ContainsAny(name, "./\\") {
			return nil, &pipeline.InputError{Problems: []string{fmt.Sprintf("there is no layout %s: neither a file of this name, nor one of those that come with the program, which are %s",
				name, strings.Join(builtInLayouts(), ", "))}}
		}
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
