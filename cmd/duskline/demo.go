package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"duskline/catalog"
	"duskline/pipeline"
	"duskline/synth"
)

type demoCmd struct {
	Out     string `placeholder:"DIR" help:"New or empty folder for the night and the run; by default a temporary one."`
	Objects int    `default:"320" placeholder:"N" help:"Spectra of the night, beside a few broken files."`
	Seed    uint64 `default:"1" placeholder:"S" help:"Another seed gives another night."`
	Recipes string `placeholder:"DIR" help:"Folder of template recipes over the built-in ones."`
	logFlags
}

// Help teaches by example.
func (demoCmd) Help() string {
	return `Writes one night of the invented Lantern Ridge survey in six file layouts, with faint objects, blank sky and broken files as in a real night, processes it with the defaults, and compares the catalog with the truth. The spectra are painted with models of their own, not with the templates that measure them, and their lines stand off the redshift by as much as those of real stars, galaxies and quasars.

Examples:
  duskline demo                  in a temporary folder
  duskline demo --out DEMO       keep everything in DEMO
  duskline peek DEMO/night/p01/lr-20310314-p01-101.fits   then look at single files`
}

func (c *demoCmd) run(a *app) (int, error) {
	if c.Objects < 1 {
		return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("--objects %d is not allowed; give at least 1", c.Objects)}}
	}
	recipes, err := readRecipes(a, c.Recipes)
	if err != nil {
		return 0, err
	}
	if _, err := pipeline.Templates(recipes); err != nil {
		return 0, err // before a night is written
	}
	out := c.Out
	if out == "" {
		var err error
		if out, err = os.MkdirTemp(a.getenv("TMPDIR"), "duskline-demo-"); err != nil {
			return 0, fmt.Errorf("no temporary folder can be made: %w; give one with --out", err)
		}
	}
	night := filepath.Join(out, "night")
	truth, err := synth.Night(a.locate(night), synth.Options{Seed: c.Seed, Objects: c.Objects})
	if errors.Is(err, synth.ErrNotEmpty) {
		return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("%s holds a night already; give a new folder as --out", out)}}
	}
	if err != nil {
		return 0, err
	}
	if !c.Quiet {
		fmt.Fprintf(a.stdout, "A synthetic night of %d spectra is in %s; its truth is in %s there.\n\n", len(truth), night, synth.TruthFile)
	}
	job := pipeline.Job{Out: filepath.Join(out, "run"), Base: a.folder, Paths: []string{night},
		Settings: pipeline.DefaultSettings(), Recipes: recipes, Program: version(), Build: build()}
	summary, err := a.process(job, c.logFlags)
	if err != nil {
		return 0, err
	}
	objects, err := readCatalog(a.locate(filepath.Join(job.Out, pipeline.CatalogCSV)))
	if err != nil {
		return 0, err
	}
	if !c.Quiet {
		writeScore(a.stdout, synth.Score(truth, objects))
	}
	if summary.InternalErrors > 0 {
		return exitFailed, nil
	}
	return exitDone, nil // the broken files are there on purpose
}

func readCatalog(path string) ([]catalog.Object, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	r, err := catalog.NewCSVReader[catalog.Object](f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	var rows []catalog.Object
	for {
		var o catalog.Object
		if err := r.Next(&o); errors.Is(err, io.EOF) {
			return rows, nil
		} else if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
		rows = append(rows, o)
	}
}

// writeScore prints the answers against the truth.
func writeScore(w io.Writer, res synth.Result) {
	fmt.Fprintf(w, "\nAgainst the truth:\n\n")
	fmt.Fprintf(w, "%-10s%11s%11s%11s%11s%11s%11s\n", "truth", "spectra", "right", "secure", "and right", "class", "pull")
	line := func(n synth.Tally) {
		fmt.Fprintf(w, "%-10s%11d%11d%11d%11d%11d%11s\n", n.Class, n.Objects, n.Right, n.Secure, n.SecureRight, n.ClassRight, number(n.Pull, 2))
	}
	for _, n := range res.Classes {
		line(n)
	}
	res.Total.Class = "all"
	line(res.Total)
	fmt.Fprintf(w, "\nright: redshift within 1,000 km/s of the truth, quasars 3,000; for sky and broken files: not secure\n"+
		"and right: of the secure ones; class: told right\n"+
		"pull: rms of (redshift - truth) / error of those secure and right; 1 where errors are what they say\n")
	for _, m := range res.Misses {
		fmt.Fprintf(w, "Secure and wrong: %s row %d, %s at %.4f, found %s at %.4f.\n", m.Truth.File, m.Truth.Row, m.Truth.Kind,
			m.Truth.Redshift, m.Object.Class, m.Object.Redshift)
	}
}
