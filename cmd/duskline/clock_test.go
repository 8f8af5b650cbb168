package main

import (
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"duskline/catalog"
)

func readMetrics(t *testing.T, path string) (m metrics) {
	t.Helper()
	text, err := os.ReadFile(path)
	if err == nil {
		err = json.Unmarshal(text, &m)
	}
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// setClock is a clock that runs steadily while its hands are set.
type setClock struct {
	ran   time.Duration
	hands time.Time
}

func (c *setClock) clock() clock {
	return clock{wall: func() time.Time { return c.hands }, elapsed: func() time.Duration { return c.ran }}
}

// watched runs 3,000 objects, 20 a second, with hands that are set before each, and returns
// what was logged and how the metrics stood in the middle and at the end.
func watched(t *testing.T, set func(i int, now time.Time) time.Time) (lines string, half, end metrics) {
	t.Helper()
	c := &setClock{hands: time.Date(2031, 3, 14, 20, 0, 0, 0, time.UTC)}
	var log strings.Builder
	p := newProgress(io.Discard, false, slog.New(slog.NewTextHandler(&log, &slog.HandlerOptions{
		ReplaceAttr: func(_ []string, a slog.Attr) slog.Attr {
			if a.Key == slog.TimeKey {
				return slog.Attr{}
			}
			return a
		}})), c.clock())
	path := filepath.Join(t.TempDir(), "metrics.json")
	p.startMetrics(filepath.Join(filepath.Dir(path), "run.log"), "r", "")
	const objects = 3000
	p.Working(objects+500, 500)
	for i := range objects {
		c.ran += 50 * time.Millisecond
		c.hands = set(i, c.hands.Add(50*time.Millisecond))
		p.Object(&catalog.Object{Verdict: catalog.Secure})
		if i == objects/2 {
			half = readMetrics(t, path)
		}
	}
	p.endMetrics("done", nil)
	return log.String(), half, readMetrics(t, path)
}

// Hands that are set change neither rates nor what is due when, only the times
// that are written down.
func TestProgressWithClockThatIsSet(t *testing.T) {
	steady := func(_ int, now time.Time) time.Time { return now }
	want, half, end := watched(t, steady)
	// 150 s: one line after 10 s, then one a minute; the metrics every 10 s, so that
	// those seen at 75 s are of 70 s and 1,400 objects, with 1,600 to go.
	if n := strings.Count(want, "msg=measuring"); n != 3 {
		t.Errorf("%d lines in\n%s", n, want)
	}
	if half.PerSecond != 20 || half.SecondsLeft != 80 || half.Seconds != 70 || half.DoneHere != 1400 || end.PerSecond != 20 || end.SecondsLeft != 0 || end.Done != 3500 {
		t.Errorf("half-way %+v, at the end %+v", half, end)
	}
	for name, set := range map[string]func(int, time.Time) time.Time{
		"back a year at once": func(i int, now time.Time) time.Time {
			if i == 700 {
				return now.AddDate(-1, 0, 0)
			}
			return now
		},
		"forth a year at once": func(i int, now time.Time) time.Time {
			if i == 700 {
				return now.AddDate(1, 0, 0)
			}
			return now
		},
		"stopped": func(_ int, now time.Time) time.Time { return now.Add(-50 * time.Millisecond) },
		"wild":    func(i int, now time.Time) time.Time { return now.Add(time.Duration(i%7-3) * 10000 * time.Hour) },
	} {
		lines, h, e := watched(t, set)
		if lines != want {
			t.Errorf("%s: the log says\n%swant\n%s", name, lines, want)
		}
		for _, m := range []*metrics{&h, &e} {
			m.Started, m.Updated = time.Time{}, time.Time{}
			m.MemoryMB = 0
		}
		half.Started, half.Updated, half.MemoryMB = time.Time{}, time.Time{}, 0
		end.Started, end.Updated, end.MemoryMB = time.Time{}, time.Time{}, 0
		if fmt.Sprint(h) != fmt.Sprint(half) || fmt.Sprint(e) != fmt.Sprint(end) {
			t.Errorf("%s: metrics %+v and %+v, want %+v and %+v", name, h, e, half, end)
		}
	}
}
