package main

import (
	"bytes"
	"fmt"
	"io"
	"log/slog"
	"os"
)

// logFlags are the flags of commands that work for long.
type logFlags struct {
	Quiet     bool   `short:"q" help:"Say nothing but warnings and errors."`
	LogFormat string `enum:"text,json" default:"text" help:"Form of the lines on standard error: text or json."`
}

// runLog is a log in the run folder. What is written before the folder is
// known to be ours is kept until then.
type runLog struct {
	early bytes.Buffer
	file  *os.File
}

func (l *runLog) Write(b []byte) (int, error) {
	if l.file == nil {
		return l.early.Write(b)
	}
	return l.file.Write(b)
}

// open begins to append to the file.
func (l *runLog) open(path string) error {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_APPEND, 0o666)
	if err != nil {
		return fmt.Errorf("the log of the run cannot be written: %w", err)
	}
	l.file = f
	_, err = f.Write(l.early.Bytes())
	return err
}

func (l *runLog) Close() error {
	if l.file == nil {
		return nil
	}
	return l.file.Close()
}

// newLogger logs everything, also every block, to the run's log and, by the flags, to the screen.
// Under a bar only warnings reach the screen, each on a line of its own.
func (f logFlags) newLogger(screen io.Writer, bar bool, file io.Writer) *slog.Logger {
	opts := &slog.HandlerOptions{Level: slog.LevelInfo}
	if f.Quiet || bar {
		opts.Level = slog.LevelWarn
	}
	if bar {
		screen = lineClearer{screen}
	}
	var onScreen slog.Handler = slog.NewTextHandler(screen, opts)
	if f.LogFormat == "json" {
		onScreen = slog.NewJSONHandler(screen, opts)
	}
	return slog.New(slog.NewMultiHandler(onScreen, slog.NewJSONHandler(file, &slog.HandlerOptions{Level: slog.LevelDebug})))
}

// lineClearer wipes a bar off the line before it writes.
type lineClearer struct{ w io.Writer }

func (c lineClearer) Write(b []byte) (int, error) {
	if _, err := io.WriteString(c.w, "\r\x1b[K"); err != nil {
		return 0, err
	}
	return c.w.Write(b)
}
