package main

import (
	"encoding/json"
	"os"
	"path/filepath"
	"strings"
	"time"
)

// metricsEvery is how often the file for monitoring is written anew.
const metricsEvery = 10 * time.Second

// metrics is what monitoring reads of a command at work: the file metrics.json
// in the run folder, metrics.IofN.json of a shard. It is replaced as a whole,
// and says when: one that is older than a few times metricsEvery is of a command
// that ended without a word.
type metrics struct {
	Format      string    `json:"format"`
	Version     int       `json:"format_version"`
	Run         string    `json:"run"`
	Shard       string    `json:"shard,omitempty"`
	State       string    `json:"state"` // measuring, gathering, done, interrupted or failed
	Error       string    `json:"error,omitempty"`
	Started     time.Time `json:"started"`
	Updated     time.Time `json:"updated"`
	Seconds     float64   `json:"seconds"`      // that the command has run, whatever the clock was set to
	Spectra     int64     `json:"spectra"`      // of the run or the shard
	Done        int64     `json:"done"`         // of them, by whomever
	DoneHere    int64     `json:"done_here"`    // by this command
	Secure      int64     `json:"secure"`       // of those
	Unreadable  int64     `json:"unreadable"`   // of those
	PerSecond   float64   `json:"per_second"`   // of this command
	SecondsLeft float64   `json:"seconds_left"` // at this rate; 0 when nothing is left
	MemoryMB    int64     `json:"memory_mb"`    // largest so far
	Process     int       `json:"process"`

	path string
	next time.Duration
}

// startMetrics begins to write beside the log of a run.
func (p *progress) startMetrics(logFile, run, shard string) {
	name := strings.Replace(filepath.Base(logFile), "run", "metrics", 1)
	name = strings.TrimSuffix(name, ".log") + ".json"
	p.metrics = &metrics{Format: "duskline metrics", Version: 1, Run: run, Shard: shard, State: "measuring", Started: p.clock.wall().UTC(),
		Process: os.Getpid(), path: filepath.Join(filepath.Dir(logFile), name)}
}

// tellMetrics writes the file when it is time, or now.
func (p *progress) tellMetrics(now bool) {
	m := p.metrics
	if m == nil || !now && p.clock.elapsed() < m.next {
		return
	}
	m.next = p.clock.elapsed() + metricsEvery
	m.Updated = p.clock.wall().UTC()
	m.Seconds = round1(p.clock.elapsed().Seconds())
	m.Spectra, m.Done, m.DoneHere, m.Secure, m.Unreadable = p.total, p.there+p.done, p.done, p.secure, p.bad
	m.PerSecond, m.SecondsLeft = 0, 0
	if p.done > 0 {
		m.PerSecond = round1(p.rate())
		m.SecondsLeft = round1(float64(m.Spectra-m.Done) / max(m.PerSecond, 0.1))
	}
	m.MemoryMB = residentMost() >> 20
	if err := m.write(); err != nil {
		p.log.Debug("the file for monitoring cannot be written", "error", err)
	}
}

// endMetrics says how the command ended.
func (p *progress) endMetrics(state string, err error) {
	if p.metrics == nil {
		return
	}
	p.metrics.State = state
	if err != nil {
		p.metrics.Error = err.Error()
	}
	p.tellMetrics(true)
}

func (m *metrics) write() error {
	text, err := json.MarshalIndent(m, "", "  ")
	if err != nil {
		return err
	}
	// Nothing is lost with this file: it need not be synced.
	tmp := m.path + ".tmp"
	if err := os.WriteFile(tmp, append(text, '\n'), 0o666); err != nil {
		return err
	}
	return os.Rename(tmp, m.path)
}

func round1(x float64) float64 { return float64(int64(x*10)) / 10 }
