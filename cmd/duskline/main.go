// Command duskline measures redshifts and equivalent widths of a night's
// one-dimensional FITS spectra.
//
//	duskline run --out RUN night/      process a folder of spectra
//	duskline run --out RUN             go on with a run that was interrupted
//	duskline peek spectrum.fits        see how one file is read and what comes out
//	duskline demo                      try everything on a synthetic night
//
// Exit codes: 0 all objects processed (rows may be flagged); 3 finished, but
// some inputs were unreadable; 2 the command or its settings are wrong; 1 the
// run could not go on, or it finished and an internal error spoiled some rows;
// 4 compare found more changes than allowed; 130 interrupted, the same command goes on.
package main

import (
	"context"
	"os"
	"os/signal"
	"syscall"
)

func main() { os.Exit(start()) }

// start is the program with what is outside of it.
func start() int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	context.AfterFunc(ctx, stop) // a second signal ends the process at once
	return run(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr, os.Getenv)
}
