package main

import "duskline/pipeline"

type gatherCmd struct {
	AcceptMissing bool   `help:"Write catalogs without the blocks that are missing; they and the summary say so."`
	Out           string `arg:"" name:"run" help:"Folder of the run."`
	logFlags
}

// Help teaches by example.
func (gatherCmd) Help() string {
	return `Joins the blocks that shards have finished into the catalogs. It computes nothing: a block that is missing or damaged is named, and the exit code is 1.

Examples:
  duskline gather RUN                     join, once all shards are done
  duskline gather --accept-missing RUN    look at what is there already`
}

func (c *gatherCmd) run(a *app) (int, error) {
	job := pipeline.Job{Out: c.Out, Base: a.folder, Program: version(), Build: build()}
	s := a.begin(&job, c.logFlags)
	defer s.end()
	r, err := pipeline.Recorded(job)
	if err != nil {
		return 0, err
	}
	if err := s.record(r, pipeline.Shard{}); err != nil {
		return 0, err
	}
	s.progress.total = r.Objects()
	join := r.Gather
	if c.AcceptMissing {
		join = r.GatherPresent
	}
	summary, err := join(a.ctx)
	if err != nil {
		return 0, s.failed(err)
	}
	s.progress.there = summary.Objects
	s.report(c.Out, summary)
	return outcomeCode(summary), nil
}
