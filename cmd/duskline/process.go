package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"time"

	"duskline/pipeline"
)

// session is one command at work on a run folder: where its words go.
type session struct {
	*app
	flags    logFlags
	file     *runLog
	log      *slog.Logger
	progress *progress
	began    time.Duration
}

// begin makes log and progress for a job and puts them into it.
func (a *app) begin(job *pipeline.Job, flags logFlags) *session {
	bar := isTerminal(a.stderr) && !flags.Quiet && flags.LogFormat == "text"
	s := &session{app: a, flags: flags, file: &runLog{}, began: a.clock.elapsed()}
	s.log = flags.newLogger(a.stderr, bar, s.file)
	s.progress = newProgress(a.stderr, bar, s.log, a.clock)
	job.Log, job.Progress = s.log, s.progress
	return s
}

// prepare plans the run or finds its plan, and begins to keep its log.
func (s *session) prepare(job pipeline.Job) (*pipeline.Run, error) {
	var err error
	if job.Processor, err = s.science(job.Settings, job.Recipes); err != nil {
		return nil, err
	}
	r, err := pipeline.Prepare(s.ctx, job)
	if err != nil {
		return nil, err
	}
	if err := s.record(r, job.Shard); err != nil {
		return nil, err
	}
	s.log.Info("run begins", "out", job.Out, "program", job.Program, "build", job.Build, "spectra", r.Objects(),
		"blocks", r.Blocks(), "shard", job.Shard.String())
	return r, nil
}

// record begins to keep the log and the metrics of a run.
func (s *session) record(r *pipeline.Run, shard pipeline.Shard) error {
	if err := s.file.open(r.LogFile()); err != nil {
		return err
	}
	s.log = s.log.With("run", r.ID())
	s.progress.log = s.log
	s.progress.startMetrics(r.LogFile(), r.ID(), shard.String())
	return nil
}

func (s *session) end() {
	s.progress.close()
	s.file.Close()
}

// failed notes an error in the log of the run on its way out. A person reads it
// once, as the last words of the command.
func (s *session) failed(err error) error {
	log := s.log
	if s.flags.LogFormat == "text" {
		log = s.flags.newLogger(io.Discard, false, s.file).With("run", s.progress.metrics.Run)
	}
	log.Error("run ends early", "error", err)
	state := "failed"
	if errors.Is(err, context.Canceled) {
		state = "interrupted"
	}
	s.progress.endMetrics(state, err)
	return err
}

// process does a job from plan to catalogs and says what came out. For a shard
// there are no catalogs and no summary.
func (a *app) process(job pipeline.Job, flags logFlags) (*pipeline.Summary, error) {
	s := a.begin(&job, flags)
	defer s.end()
	r, err := s.prepare(job)
	if err != nil {
		return nil, err
	}
	if err := r.Work(a.ctx); err != nil {
		return nil, s.failed(err)
	}
	if job.Like != "" {
		s.log.Info("taken over", "like", job.Like, "spectra", r.Taken(), "computed", s.progress.done-r.Taken())
		if !flags.Quiet {
			s.progress.close()
			fmt.Fprintf(a.stdout, "%d spectra were taken over from %s, %d computed.\n\n", r.Taken(), job.Like, s.progress.done-r.Taken())
		}
	}
	if !job.Shard.Whole() {
		s.progress.close()
		s.progress.endMetrics("done", nil)
		s.log.Info("shard ends", "shard", job.Shard.String(), "spectra", s.progress.done, "unreadable", s.progress.bad,
			"seconds", s.seconds())
		if !flags.Quiet {
			fmt.Fprintf(a.stdout, "Shard %s of %s is done. When all are: duskline gather %s\n", job.Shard, job.Out, job.Out)
		}
		return nil, nil
	}
	summary, err := r.Gather(a.ctx)
	if err != nil {
		return nil, s.failed(err)
	}
	s.report(job.Out, summary)
	return summary, nil
}

// planOnly leaves a plan for others to work on.
func (a *app) planOnly(job pipeline.Job, flags logFlags) error {
	s := a.begin(&job, flags)
	defer s.end()
	r, err := s.prepare(job)
	if err != nil {
		return err
	}
	if !flags.Quiet {
		fmt.Fprintf(a.stdout, "%s is planned: %d spectra in %d blocks.\n", job.Out, r.Objects(), r.Blocks())
		fmt.Fprintf(a.stdout, "Do all of it with duskline run --out %s, or parts of it with --shard I/N, N at most %d, and then duskline gather %s.\n",
			job.Out, r.Blocks(), job.Out)
	}
	return nil
}

// report says what a run came to, with the last word for those who read
// nothing else.
func (s *session) report(out string, summary *pipeline.Summary) {
	s.progress.close()
	s.progress.endMetrics("done", nil)
	s.log.Info("run ends", "complete", summary.Complete, "spectra", summary.Objects, "secure", summary.Verdicts["secure"],
		"uncertain", summary.Verdicts["uncertain"], "none", summary.Verdicts["none"], "unreadable", summary.Unreadable,
		"internal_errors", summary.InternalErrors, "seconds", s.seconds())
	if s.flags.Quiet {
		return
	}
	writeTally(s.stdout, summary)
	writeWhere(s.stdout, out, summary)
	writeLastWord(s.stdout, out, summary, s.clock.elapsed()-s.began)
}

func (s *session) seconds() float64 {
	return (s.clock.elapsed() - s.began).Round(time.Millisecond).Seconds()
}

// writeLastWord is the line to be read at breakfast.
func writeLastWord(w io.Writer, out string, s *pipeline.Summary, took time.Duration) {
	state := "is whole"
	if !s.Complete {
		state = fmt.Sprintf("LACKS %d of %d spectra", s.MissingObjects, s.Planned)
	}
	took = took.Round(time.Second)
	if took < time.Minute {
		took = max(took, time.Second)
	}
	fmt.Fprintf(w, "\n%s %s: %d spectra, %d secure, %d uncertain, %d without redshift, %d unreadable; this command took %s.\n", out, state,
		s.Objects, s.Verdicts["secure"], s.Verdicts["uncertain"], s.Verdicts["none"]-s.Unreadable, s.Unreadable, took)
}
