package main

import (
	"fmt"
	"path/filepath"
	"strings"

	"duskline/pipeline"
)

// job turns the flags into a job. What is not given is taken from the run that
// is to be repeated or, without any PATH, from the one that is to go on.
func (c *runCmd) job(a *app) (pipeline.Job, error) {
	job := pipeline.Job{Out: c.Out, Base: a.folder, Paths: c.Path, Limit: c.Limit, Like: c.Like, Program: version(), Build: build(),
		Settings: pipeline.DefaultSettings()}
	if c.Limit < 0 {
		return job, &pipeline.InputError{Problems: []string{fmt.Sprintf("--limit %d is not allowed; give the number of spectra to process, at least 1", c.Limit)}}
	}
	var err error
	if job.Shard, err = shardOf(c.Shard, a.getenv); err != nil {
		return job, err
	}
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
		if job.Settings, err = job.Settings.Over([]byte(strings.Join(c.Set, "\n"))); err != nil {
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

// recall fills a job from a run that was planned before, if the flags refer to
// one.
func (c *runCmd) recall(a *app, job *pipeline.Job) error {
	from := c.Like
	if from == "" {
		if len(c.Path) > 0 {
			return nil
		}
		from = c.Out
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
