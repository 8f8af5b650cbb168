package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"strings"
	"time"

	"duskline/pipeline"

	"github.com/alecthomas/kong"
)

// The exit codes, a promise to scripts.
const (
	exitDone        = 0   // all objects processed; rows may be flagged
	exitFailed      = 1   // could not go on, or internal errors spoiled rows
	exitUsage       = 2   // command or settings wrong
	exitUnreadable  = 3   // finished, some inputs were unreadable
	exitChanged     = 4   // compare: more changed than allowed
	exitInterrupted = 130 // can be resumed
)

// app is the outside world of one command.
type app struct {
	ctx            context.Context
	stdout, stderr io.Writer
	getenv         func(string) string
	folder         string // working folder
	program        string // path of the program itself
	clock          clock
	// science makes what measures one spectrum.
	science func(pipeline.Settings, []pipeline.RecipeText) (pipeline.Processor, error)
}

// theChain is the science of the program; tests of the engine have one that is
// fast.
func theChain(set pipeline.Settings, recipes []pipeline.RecipeText) (pipeline.Processor, error) {
	return pipeline.NewChain(set, recipes...)
}

// grammar is the command line.
type grammar struct {
	Run       runCmd       `cmd:"" help:"Process spectra into a catalog; the same command goes on after an interruption."`
	Gather    gatherCmd    `cmd:"" help:"Join the blocks of a run that was shared among machines into its catalogs."`
	Compare   compareCmd   `cmd:"" help:"Say what changed between the catalogs of two runs, and why."`
	Cluster   clusterCmd   `cmd:"" help:"Share a run among the nodes of a cluster."`
	Demo      demoCmd      `cmd:"" help:"Make a synthetic night of known truth, process it and count what came out right."`
	Peek      peekCmd      `cmd:"" help:"Show how one file is read, what was assumed, and the answer."`
	Templates templatesCmd `cmd:"" help:"List, show, check and stack the template families that redshifts are found with."`
	Version   versionCmd   `cmd:"" help:"Print version and digests of what is built in."`
}

const description = `Redshifts and equivalent widths of a night's one-dimensional FITS spectra.

Examples:
  duskline demo                          see it work on a synthetic night
  duskline peek spec-0042.fits           check how your files are read, first
  duskline run --out RUN night/          process a folder
  duskline run --out RUN                 go on after an interruption

Exit codes: 0 all objects processed, 3 finished but some inputs were unreadable, 2 the command or its settings are wrong, 1 the run could not go on or internal errors spoiled some rows, 4 compare found more changes than allowed, 130 interrupted (the same command goes on).`

// command is what each subcommand does; the code is the exit code where there
// is no error.
type command interface {
	run(a *app) (code int, err error)
}

// early carries the exit code of --help out of the parser.
type early int

// run is the whole program: it takes everything from outside as arguments and
// returns the exit code.
func run(ctx context.Context, args []string, _ io.Reader, stdout, stderr io.Writer, getenv func(string) string) int {
	return runApp(&app{ctx: ctx, stdout: stdout, stderr: stderr, getenv: getenv, clock: systemClock(), science: theChain}, args)
}

// runApp is run with a science to choose.
func runApp(a *app, args []string) (code int) {
	stdout, stderr := a.stdout, a.stderr
	defer func() {
		if p := recover(); p != nil {
			e, ok := p.(early)
			if !ok {
				panic(p)
			}
			code = int(e)
		}
	}()
	var g grammar
	parser := kong.Must(&g, kong.Name("duskline"), kong.Description(description), kong.Writers(stdout, stderr),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true, WrapUpperBound: 100}),
		kong.Exit(func(code int) { panic(early(code)) }))
	if len(args) == 0 {
		args = []string{"--help"}
	}
	parsed, err := parser.Parse(args)
	if err != nil {
		complain(stderr, parseProblem(err, parser))
		return exitUsage
	}
	folder, err := os.Getwd()
	if err != nil {
		complain(stderr, fmt.Errorf("the working folder cannot be found: %w", err))
		return exitFailed
	}
	a.folder = folder
	if a.program, err = exec.LookPath(os.Args[0]); err == nil {
		a.program = absolute(folder, a.program)
	}
	cmd, ok := parsed.Selected().Target.Addr().Interface().(command)
	if !ok {
		panic("command without run: " + parsed.Command())
	}
	code, err = a.patiently(cmd)
	if err != nil {
		code = exitCode(err)
		if code == exitInterrupted {
			err = errors.New("interrupted; finished blocks are kept, the same command goes on from there")
		}
		complain(stderr, err)
	}
	return code
}

// patiently runs a command, but does not wait for it longer than a second
// after an interruption: a file system may be stuck under a read. What is
// finished is safe on disk; what is not is dropped.
func (a *app) patiently(cmd command) (int, error) {
	type ending struct {
		code int
		err  error
	}
	done := make(chan ending, 1)
	go func() {
		code, err := cmd.run(a)
		done <- ending{code, err}
	}()
	select {
	case e := <-done:
		return e.code, e.err
	case <-a.ctx.Done():
	}
	select {
	case e := <-done:
		return e.code, e.err
	case <-time.After(900 * time.Millisecond):
		return exitInterrupted, a.ctx.Err()
	}
}

func exitCode(err error) int {
	var input *pipeline.InputError
	var settings *pipeline.SettingsError
	var mismatch *pipeline.MismatchError
	var unreadable *unreadableError
	switch {
	case errors.Is(err, context.Canceled):
		return exitInterrupted
	case errors.As(err, &input), errors.As(err, &settings), errors.As(err, &mismatch):
		return exitUsage
	case errors.As(err, &unreadable):
		return exitUnreadable
	}
	return exitFailed
}

// unreadableError is an input of peek that cannot be read.
type unreadableError struct{ err error }

func (e *unreadableError) Error() string { return e.err.Error() }
func (e *unreadableError) Unwrap() error { return e.err }

// complain prints an error, one line a problem.
func complain(w io.Writer, err error) {
	for line := range strings.Lines(err.Error()) {
		fmt.Fprintf(w, "duskline: %s\n", strings.TrimSuffix(line, "\n"))
	}
}
