package main

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"os"
	"strings"

	"duskline/pipeline"
)

type templatesStackCmd struct {
	Out         string  `required:"" placeholder:"FILE.fits" help:"FITS file to write."`
	Family      string  `placeholder:"NAME" help:"Stack the objects of this template family."`
	Class       string  `placeholder:"CLASS" help:"Stack the objects of this class: galaxy, quasar, star or nebula."`
	ExcludeList string  `placeholder:"FILE" help:"Text file of objects to leave out, an object_id or a source_file of the catalog a line."`
	MinSNR      float64 `name:"min-snr" default:"3" placeholder:"S" help:"Least signal-to-noise a pixel of the objects."`
	MinObjects  int     `default:"3" placeholder:"N" help:"Objects that a pixel of the composite needs."`
	MaxError    float64 `default:"0.1" placeholder:"E" help:"Error from the noise that a pixel of the composite may have, a fraction of the continuum: noise must not become a feature."`
	Clip        float64 `default:"4" placeholder:"K" help:"Leave out pixels more than K sigma from the mean; 0 for none."`
	Workers     int     `placeholder:"N" help:"Spectra worked on at the same time; by default one a processor. Changes no result."`
	Run         string  `arg:"" help:"Folder of a finished run; its input files must still be in place."`
}

// Help teaches by example.
func (templatesStackCmd) Help() string {
	return `Examples:
  duskline templates stack RUN --family passive --out passive.fits
  duskline templates stack RUN --class quasar --min-snr 5 --out quasar.fits
  duskline templates stack RUN --family passive --exclude-list judged.txt --out half.fits

The secure objects are read again, divided by their continua, shifted to rest and averaged with inverse variances, without outliers. The file holds the composite with error, scatter and number of objects at each wavelength, what it was made of, and a table of the objects. A recipe uses it with stack = "passive.fits"; see docs/templates.md. To judge by it, leave the objects to be judged out with --exclude-list.`
}

func (c *templatesStackCmd) run(a *app) (int, error) {
	var problems []string
	bad := func(format string, args ...any) { problems = append(problems, fmt.Sprintf(format, args...)) }
	if c.Family == "" && c.Class == "" {
		bad("give --family or --class: what is to be stacked")
	}
	if c.MinObjects < 1 {
		bad("--min-objects %d is not allowed; give at least 1", c.MinObjects)
	}
	if !(c.Clip >= 0) || c.Clip > 0 && c.Clip < 2 {
		bad("--clip %g is not allowed; give 0 or at least 2", c.Clip)
	}
	if !(c.MaxError > 0) {
		bad("--max-error %g is not allowed; give a number above 0", c.MaxError)
	}
	if !(c.MinSNR >= 0) {
		bad("--min-snr %g is not allowed; give 0 or more", c.MinSNR)
	}
	if c.Workers < 0 || c.Workers > 1024 {
		bad("--workers %d is not allowed; give 0 to 1024", c.Workers)
	}
	if len(problems) > 0 {
		return 0, &pipeline.InputError{Problems: problems}
	}
	job := pipeline.StackJob{Run: c.Run, Base: a.folder, Out: c.Out, Family: c.Family, Class: c.Class, MinSNR: c.MinSNR,
		Clip: c.Clip, MinObjects: c.MinObjects, MaxError: c.MaxError, Workers: c.Workers, Program: version()}
	var err error
	if job.Exclude, job.ExcludeDigest, err = readExcluded(a, c.ExcludeList); err != nil {
		return 0, err
	}
	rep, err := pipeline.Stack(a.ctx, job)
	if err != nil {
		return 0, err
	}
	fmt.Fprintf(a.stdout, "%s: composite of %s, %d pixels from %.1f to %.1f Angstrom at rest, %.2f %% of their pixels clipped\n", c.Out,
		count(int64(rep.Objects), "object", "objects"), rep.Pixels, rep.First, rep.Last, 100*rep.Clipped)
	if len(job.Exclude) > 0 {
		fmt.Fprintf(a.stdout, "%s left out by name", count(int64(rep.Excluded), "object", "objects"))
		if rep.Missed > 0 {
			fmt.Fprintf(a.stdout, "; %d of %d names fit no object of the run", rep.Missed, len(job.Exclude))
		}
		fmt.Fprintln(a.stdout)
	}
	if rep.Unfit > 0 {
		fmt.Fprintf(a.stdout, "%s without a continuum to divide by\n", count(int64(rep.Unfit), "object", "objects"))
	}
	if rep.Unreadable > 0 {
		fmt.Fprintf(a.stdout, "%s could not be read again:\n", count(int64(rep.Unreadable), "object", "objects"))
		for _, why := range rep.Why {
			fmt.Fprintf(a.stdout, "  %s\n", why)
		}
		return exitUnreadable, nil
	}
	return exitDone, nil
}

// readExcluded reads a list of names, one a line; empty lines and lines that
// begin with # are passed over.
func readExcluded(a *app, name string) (map[string]bool, string, error) {
	if name == "" {
		return nil, "", nil
	}
	text, err := os.ReadFile(a.locate(name))
	if err != nil {
		return nil, "", &pipeline.InputError{Problems: []string{fmt.Sprintf("the list %s cannot be read: %v", name, err)}}
	}
	names := map[string]bool{}
	lines := bufio.NewScanner(bytes.NewReader(text))
	for lines.Scan() {
		if line := strings.TrimSpace(lines.Text()); line != "" && !strings.HasPrefix(line, "#") {
			names[line] = true
		}
	}
	if err := lines.Err(); err != nil {
		return nil, "", &pipeline.InputError{Problems: []string{fmt.Sprintf("the list %s cannot be read: %v", name, err)}}
	}
	if len(names) == 0 {
		return nil, "", &pipeline.InputError{Problems: []string{name + " names nothing to leave out"}}
	}
	sum := sha256.Sum256(text)
	return names, hex.EncodeToString(sum[:8]), nil
}
