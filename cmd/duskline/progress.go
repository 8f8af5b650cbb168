package main

import (
	"io"
	"log/slog"
	"os"
	"time"

	"duskline/catalog"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// How often a run says how far it is when nobody sees a bar: often soon, so
// that a wrong start shows, and rarely later, so that logs stay short.
const (
	firstReport = 10 * time.Second
	reportEvery = time.Minute
)

// progress shows how a run goes on: a bar on a terminal, lines in the log
// otherwise. It implements pipeline.Progress.
type progress struct {
	bar    *progressbar.ProgressBar // of the current phase, nil without a terminal
	term   io.Writer                // nil without a terminal
	log    *slog.Logger
	clock  clock
	next   time.Duration // of the next log line
	start  time.Duration // of work
	total  int64
	there  int64 // finished before work began, or elsewhere
	done   int64 // in this process
	secure int64
	bad    int64 // unreadable

	metrics *metrics // nil before the run folder is known
}

func newProgress(w io.Writer, showBar bool, log *slog.Logger, clock clock) *progress {
	p := &progress{log: log, clock: clock, next: clock.elapsed() + firstReport}
	if showBar {
		p.term = w
	}
	return p
}

// isTerminal reports whether a person may be looking at w.
func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

func (p *progress) newBar(total int64, what string) {
	p.close()
	if p.term == nil {
		return
	}
	p.bar = progressbar.NewOptions64(total, progressbar.OptionSetWriter(p.term), progressbar.OptionSetDescription(what),
		progressbar.OptionShowCount(), progressbar.OptionShowIts(), progressbar.OptionSetItsString("spectra"),
		progressbar.OptionThrottle(100*time.Millisecond), progressbar.OptionSetWidth(30), progressbar.OptionClearOnFinish(),
		progressbar.OptionSetSpinnerChangeInterval(0)) // else a goroutine goes on drawing
}

// close takes the bar off the screen.
func (p *progress) close() {
	if p.bar != nil {
		p.bar.Clear()
		p.bar.Exit()
		p.bar = nil
	}
}

// due reports whether it is time for a line in the log.
func (p *progress) due() bool {
	now := p.clock.elapsed()
	if now < p.next {
		return false
	}
	p.next = now + reportEvery
	return true
}

func (p *progress) Planning(inputs, spectra int64) {
	if p.term != nil {
		if p.bar == nil {
			p.newBar(-1, "counting spectra")
		}
		p.bar.Set64(spectra)
	}
	if p.due() {
		p.log.Info("counting spectra", "files", inputs, "spectra", spectra)
	}
}

func (p *progress) Working(total, there int64) {
	p.total, p.there, p.start = total, there, p.clock.elapsed()
	p.log.Info("working", "spectra", total, "already_done", there)
	p.tellMetrics(true)
	if total > there {
		p.newBar(total-there, "measuring")
	}
}

func (p *progress) Object(o *catalog.Object) {
	p.done++
	if o.Verdict == catalog.Secure {
		p.secure++
	}
	if o.Flags.Has(catalog.Unreadable) {
		p.bad++
	}
	if p.bar != nil {
		p.bar.Add(1)
	}
	p.tellMetrics(false)
	if p.due() {
		rate := p.rate()
		left := time.Duration(float64(p.total-p.there-p.done) / rate * float64(time.Second))
		p.log.Info("measuring", "done", p.there+p.done, "of", p.total, "per_second", float64(int(rate*10))/10,
			"left", left.Round(time.Second).String(), "secure", p.secure, "unreadable", p.bad)
	}
}

// rate returns how many spectra were done a second.
func (p *progress) rate() float64 {
	return float64(p.done) / max(p.clock.elapsed()-p.start, time.Millisecond).Seconds()
}

func (p *progress) Elsewhere(n int64) {
	p.there += n
	if p.bar != nil {
		p.bar.ChangeMax64(p.total - p.there)
	}
}

func (p *progress) Gathering() {
	p.close()
	p.log.Info("writing the catalogs")
	p.endMetrics("gathering", nil)
}
