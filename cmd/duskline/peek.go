package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"path/filepath"
	"strings"
	"text/tabwriter"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/pipeline"
	"duskline/spectrum"
)

type peekCmd struct {
	Row      int      `default:"0" placeholder:"N" help:"Spectrum in the file, from 0."`
	Plot     string   `placeholder:"OUT.png" help:"Also draw the spectrum, its continuum and the lines that were found."`
	Settings string   `placeholder:"FILE" help:"Settings in TOML over the built-in ones."`
	Layout   []string `placeholder:"FILE" sep:"none" help:"Layout in TOML, or the name of one that comes with the program, tried before the built-in rules; may be repeated."`
	Write    string   `name:"write-layout" placeholder:"OUT.toml" help:"Write a layout for files like this one: a first draft to be edited where the file is not understood."`
	Recipes  string   `placeholder:"DIR" help:"Folder of template recipes over the built-in ones."`
	File     string   `arg:"" help:"FITS file, gzipped or not."`
}

// Help teaches by example.
func (peekCmd) Help() string {
	return `Examples:
  duskline peek spec-0042.fits                     how it is read, and the answer
  duskline peek --plot spec.png spec-0042.fits     with a picture
  duskline peek --row 17 plate.fits                one of many spectra in a file
  duskline peek --layout ours.toml spec-0042.fits  try a layout before a long run
  duskline peek --write-layout ours.toml odd.fits  draft a layout for such files

Worth doing once for every kind of file, before a run: what had to be assumed about wavelengths, errors and frame is said here.`
}

func (c *peekCmd) run(a *app) (int, error) {
	if c.Plot != "" && !strings.EqualFold(filepath.Ext(c.Plot), ".png") {
		return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("the picture %s would be no PNG by its name; give a name that ends in .png", c.Plot)}}
	}
	set, err := readSettings(a, c.Settings, pipeline.DefaultSettings())
	if err != nil {
		return 0, err
	}
	texts, err := readLayouts(a, c.Layout)
	if err != nil {
		return 0, err
	}
	var opts fitsread.Options
	for _, l := range texts {
		layout, err := fitsread.ParseLayout(l.Name, []byte(l.Text))
		if err != nil {
			return 0, &pipeline.InputError{Problems: []string{err.Error()}}
		}
		opts.Layouts = append(opts.Layouts, layout)
	}
	recipes, err := readRecipes(a, c.Recipes)
	if err != nil {
		return 0, err
	}
	chain, err := pipeline.NewChain(set, recipes...)
	if err != nil {
		return 0, err
	}
	if c.Write != "" {
		if understood, err := c.writeLayout(a, opts); err != nil || !understood {
			return exitUnreadable, err
		}
	}
	f, err := fitsread.Open(a.locate(c.File), opts)
	if err != nil {
		return 0, c.unreadable(err)
	}
	defer f.Close()
	writeDescription(a.stdout, c.File, f.Describe())
	if c.Row < 0 || c.Row >= f.Count() {
		return 0, &pipeline.InputError{Problems: []string{fmt.Sprintf("%s has %s; give --row from 0 to %d", c.File,
			count(int64(f.Count()), "spectrum", "spectra"), f.Count()-1)}}
	}
	s, err := f.Read(c.Row)
	if err != nil {
		return 0, c.unreadable(err)
	}
	s.SourceFile = c.File
	writeSpectrum(a.stdout, c.Row, s)
	bench := chain.NewBench()
	out := bench.Process(s)
	writeAnswer(a.stdout, &out)
	if c.Plot == "" {
		return exitDone, nil
	}
	if err := savePicture(a.locate(c.Plot), newPicture(s, &out, bench.View())); err != nil {
		return 0, err
	}
	fmt.Fprintf(a.stdout, "\nThe picture is in %s.\n", c.Plot)
	return exitDone, nil
}

// unreadable names the file as it was given. One that is not there,
// or no file, is a wrong command.
func (c *peekCmd) unreadable(err error) error {
	var re *fitsread.ReadError
	if errors.As(err, &re) {
		named := *re
		named.File = c.File
		err = &named
	}
	if errors.Is(err, fs.ErrNotExist) || errors.Is(err, fitsread.ErrNotRegular) {
		return &pipeline.InputError{Problems: []string{err.Error()}}
	}
	return &unreadableError{err}
}

// writeDescription prints what is in the file and how it is read.
func writeDescription(w io.Writer, name string, d fitsread.Description) {
	packed := ""
	if d.Gzipped {
		packed = ", gzipped"
	}
	fmt.Fprintf(w, "%s: %d bytes%s, %s\n\n", name, d.Bytes, packed, count(int64(d.Spectra), "spectrum", "spectra"))
	writeTable(w, func(t io.Writer) { writeHDUs(t, d.HDUs) })
	fmt.Fprintln(w)
	writeTable(w, func(t io.Writer) { writeLayout(t, d) })
}

func writeHDUs(t io.Writer, hdus []fitsread.HDUInfo) {
	for _, h := range hdus {
		note := ""
		switch {
		case h.Problem != "":
			note = "not usable: " + h.Problem
		case h.Used:
			note = "read"
		}
		fmt.Fprintf(t, "HDU %d\t%s\t%s\t%s\t%s\n", h.Index, h.Name, h.Kind, h.Shape, note)
		if !h.Used {
			continue
		}
		for _, c := range h.Columns {
			fmt.Fprintf(t, "\t  %s\t%s\t%s\t%s\n", c.Name, c.Format, strings.TrimSpace(c.Unit+"  "+c.UCD), c.Role)
		}
	}
}

func writeLayout(t io.Writer, d fitsread.Description) {
	fmt.Fprintf(t, "layout\t%s: %s\n", d.Layout, d.Why)
	for _, p := range d.Parts {
		arm := ""
		if p.Name != "" {
			arm = "arm " + p.Name + ": "
		}
		fmt.Fprintf(t, "wavelength\t%s%s, %s\n", arm, p.Wavelength, p.WaveUnit)
		fmt.Fprintf(t, "flux\t%s%s, %s\n", arm, p.Flux, orNot(p.FluxUnit, "unit not stated"))
		if p.WeightKind == "" {
			fmt.Fprintf(t, "weight\t%snone in the file\n", arm)
		} else {
			fmt.Fprintf(t, "weight\t%s%s, %s\n", arm, p.Weight, p.WeightKind)
		}
		for _, extra := range [][2]string{{"mask", p.Mask}, {"resolution", p.Resolution}} {
			if extra[1] != "" {
				fmt.Fprintf(t, "%s\t%s%s\n", extra[0], arm, extra[1])
			}
		}
	}
	fmt.Fprintf(t, "medium\t%s\n", d.Medium)
	fmt.Fprintf(t, "frame\t%s\n", d.Frame)
	for _, s := range d.Skipped {
		fmt.Fprintf(t, "not read\t%s\n", s)
	}
}

// writeTable prints a table without the blanks that pad its last column.
func writeTable(w io.Writer, fill func(t io.Writer)) {
	var text bytes.Buffer
	t := tabwriter.NewWriter(&text, 0, 0, 2, ' ', 0)
	fill(t)
	t.Flush()
	for line := range strings.Lines(text.String()) {
		fmt.Fprintln(w, strings.TrimRight(line, " \n"))
	}
}

func orNot(s, otherwise string) string {
	if s == "" {
		return otherwise
	}
	return s
}

// writeSpectrum prints what was read of one spectrum.
func writeSpectrum(w io.Writer, row int, s *spectrum.Spectrum) {
	fmt.Fprintf(w, "\nspectrum %d: %s", row, s.ObjectID)
	if !math.IsNaN(s.RA) {
		fmt.Fprintf(w, ", RA %.5f Dec %+.5f", s.RA, s.Dec)
	}
	fmt.Fprintln(w)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for i := range s.Segments {
		seg := &s.Segments[i]
		if seg.Len() == 0 {
			continue
		}
		fmt.Fprintf(t, "pixels\t%d from %.1f to %.1f Angstrom (%s), %d of them good\n", seg.Len(), seg.Wave[0], seg.Wave[seg.Len()-1],
			strings.TrimSpace(s.Medium.String()+" "+seg.Name), seg.Good())
	}
	for _, l := range s.Losses {
		fmt.Fprintf(t, "not used\t%s\n", l)
	}
	switch {
	case s.Frame == spectrum.Topocentric || s.Frame == spectrum.Geocentric:
		if math.IsNaN(s.BaryVelocity) {
			fmt.Fprintf(t, "correction\tnone: the header lacks time, place or direction\n")
		} else {
			fmt.Fprintf(t, "correction\t%+.3f km/s to the barycenter\n", s.BaryVelocity)
		}
	case !math.IsNaN(s.BaryVelocity) && s.BaryVelocity != 0:
		fmt.Fprintf(t, "correction\tnone: %+.3f km/s are in the wavelengths already\n", s.BaryVelocity)
	}
	for _, warning := range s.Warnings {
		fmt.Fprintf(t, "assumed\t%s\n", warning.Text)
	}
	t.Flush()
}

// writeAnswer prints the row that the spectrum makes and its lines.
func writeAnswer(w io.Writer, out *pipeline.Outcome) {
	o := &out.Object
	fmt.Fprintf(w, "\nanswer\n")
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintf(t, "verdict\t%s, confidence %s\n", o.Verdict, number(o.Confidence, 3))
	fmt.Fprintf(t, "class\t%s\n", withFamily(o.Class, o.Family))
	fmt.Fprintf(t, "redshift\t%s +- %s\n", number(o.Redshift, 6), number(o.RedshiftErr, 6))
	if !math.IsNaN(o.RivalRedshift) {
		fmt.Fprintf(t, "rival\t%s, worse by %s\n", withFamily(number(o.RivalRedshift, 6), o.RivalFamily), number(o.Gap, 1))
	}
	fmt.Fprintf(t, "quality\tS/N %s a pixel, %d pixels, chi2/dof %s, r %s, %s\n", number(o.SNR, 1), o.PixelsUsed,
		number(o.Chi2Dof, 2), number(o.RStat, 1), count(int64(o.LinesSeen), "line seen", "lines seen"))
	if o.Flags != 0 {
		fmt.Fprintf(t, "flags\t%s\n", strings.Join(o.Flags.Names(), ", "))
	}
	if o.Reason != "" {
		fmt.Fprintf(t, "reason\t%s\n", strings.ReplaceAll(o.Reason, "; ", ";\n\t"))
	}
	t.Flush()
	writeLines(w, out)
}

// writeLines prints the lines that were seen.
func writeLines(w io.Writer, out *pipeline.Outcome) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	seen, limits := 0, 0
	for i := range out.Lines {
		l := &out.Lines[i]
		if l.Kind == "limit" {
			limits++
		}
		if l.Kind != "emission" && l.Kind != "absorption" {
			continue
		}
		if seen++; seen == 1 {
			fmt.Fprintf(t, "line\trest A\tobserved A\tkind\tEW rest A\t+-\tS/N\t\n")
		}
		fmt.Fprintf(t, "%s\t%.2f\t%.2f\t%s\t%s\t%s\t%s\t\n", l.Line, l.RestWave, l.RestWave*(1+out.Object.Redshift), l.Kind,
			number(l.EWRest, 2), number(l.EWRestErr, 2), number(l.SNR, 1))
	}
	if seen > 0 {
		fmt.Fprintln(w)
	}
	t.Flush()
	if limits > 0 {
		fmt.Fprintf(w, "%s only a limit.\n", count(int64(limits), "more line has", "more lines have"))
	}
}

func withFamily(s, family string) string {
	if family == "" {
		return s
	}
	return s + " (" + family + ")"
}

// number prints a number or, if it is not known, a dash.
func number(x float64, decimals int) string {
	if math.IsNaN(x) {
		return "-"
	}
	text := fmt.Sprintf("%.*f", decimals, x)
	if strings.Trim(text, "-0.") == "" {
		text = strings.TrimPrefix(text, "-") // no minus before a zero
	}
	return text
}

// title says in one line what a picture shows.
func title(o *catalog.Object) string {
	parts := []string{o.ObjectID}
	if math.IsNaN(o.Redshift) || o.Verdict == catalog.None {
		parts = append(parts, "no redshift")
	} else {
		parts = append(parts, fmt.Sprintf("%s   z = %.5f ± %.5f (%s)", o.Class, o.Redshift, o.RedshiftErr, o.Verdict))
	}
	if !math.IsNaN(o.SNR) {
		parts = append(parts, fmt.Sprintf("S/N %s a pixel", number(o.SNR, 1)))
	}
	return strings.Join(parts, "   ")
}
