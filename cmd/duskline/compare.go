package main

import (
	"bufio"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"

	"duskline/catalog"
	"duskline/pipeline"
)

type compareCmd struct {
	Out        string  `placeholder:"DIR" help:"Also write the table of changed objects, changes.csv, and pictures into this folder."`
	MaxChanged string  `placeholder:"N" help:"Exit with code 4 if more than N objects changed, or N% of those in both runs."`
	Sigmas     float64 `default:"3" placeholder:"K" help:"Errors from which a redshift or an equivalent width counts as changed."`
	Rows       int     `default:"100000" placeholder:"N" help:"Most rows of the table, the most significant ones."`
	Quiet      bool    `short:"q" help:"Print nothing but errors."`
	Old        string  `arg:"" help:"Folder of the earlier run."`
	New        string  `arg:"" help:"Folder of the later run."`
}

// Help teaches by example.
func (compareCmd) Help() string {
	return `Says what changed from one catalog to another and why: answers that contradict each other first, then what became or ceased to be secure, other redshifts, classes and verdicts, flags, and equivalent widths line by line. Objects are joined by object_id.

Examples:
  duskline compare OLD NEW                       a summary
  duskline compare OLD NEW --out CHANGES         with changes.csv, ranked, and pictures
  duskline compare OLD NEW --max-changed 1% -q   for scripts: exit code 4 if more changed`
}

func (c *compareCmd) run(a *app) (int, error) {
	allowed, err := parseAllowance(c.MaxChanged)
	if err != nil {
		return 0, err
	}
	if !(c.Sigmas > 0) || c.Rows < 1 {
		return 0, &pipeline.InputError{Problems: []string{"--sigmas and --rows must be above zero"}}
	}
	cmp := catalog.NewComparison(c.Sigmas, c.Rows)
	causes, err := readSides(a, cmp, c.Old, c.New)
	if err != nil {
		return 0, err
	}
	if !c.Quiet {
		writeComparison(a.stdout, cmp, causes)
	}
	if c.Out != "" {
		if err := c.save(a, cmp, causes); err != nil {
			return 0, err
		}
	}
	if allowed(cmp) {
		return exitDone, nil
	}
	fmt.Fprintf(a.stderr, "duskline: %d of %d objects changed, more than --max-changed %s allows\n", cmp.Changed(),
		cmp.Matched+cmp.OnlyOld+cmp.OnlyNew, c.MaxChanged)
	return exitChanged, nil
}

// parseAllowance reads a number of objects or a percentage; empty allows all.
func parseAllowance(text string) (func(*catalog.Comparison) bool, error) {
	if text == "" {
		return func(*catalog.Comparison) bool { return true }, nil
	}
	number, isShare := strings.CutSuffix(text, "%")
	x, err := strconv.ParseFloat(number, 64)
	if err != nil || !(x >= 0) || isShare && x > 100 || !isShare && x != math.Trunc(x) {
		return nil, &pipeline.InputError{Problems: []string{fmt.Sprintf("--max-changed %s is not allowed; give a number of objects, or a percentage such as 0.5%%", text)}}
	}
	return func(c *catalog.Comparison) bool {
		most := x
		if isShare {
			most = x / 100 * float64(c.Matched)
		}
		return float64(c.Changed()) <= most
	}, nil
}

// catalogSide reads the objects of a catalog with their lines.
type catalogSide struct {
	objects, lines *os.File
	objectRows     *catalog.ParquetReader[catalog.Object]
	lineRows       *catalog.ParquetReader[catalog.Line]
	ahead          catalog.Line // the next line, if hasAhead
	hasAhead       bool
}

func openSide(folder, name string) (*catalogSide, error) {
	s := &catalogSide{}
	var err error
	if s.objects, s.objectRows, err = openRows[catalog.Object](folder, name, "objects.parquet"); err != nil {
		return nil, err
	}
	if s.lines, s.lineRows, err = openRows[catalog.Line](folder, name, "lines.parquet"); err != nil {
		s.close()
		return nil, err
	}
	return s, s.nextLine()
}

func openRows[T catalog.Row](folder, name, file string) (*os.File, *catalog.ParquetReader[T], error) {
	f, err := os.Open(filepath.Join(folder, file))
	if err != nil {
		return nil, nil, &pipeline.InputError{Problems: []string{fmt.Sprintf("%s has no %s: %s; give the folder of a finished run", name, file, errors.Unwrap(err))}}
	}
	info, err := f.Stat()
	if err == nil {
		var rows *catalog.ParquetReader[T]
		if rows, err = catalog.OpenParquet[T](f, info.Size()); err == nil {
			return f, rows, nil
		}
	}
	f.Close()
	return nil, nil, fmt.Errorf("%s: %w", f.Name(), err)
}

func (s *catalogSide) close() {
	if s.lineRows != nil {
		s.lineRows.Close()
		s.lines.Close()
	}
	s.objectRows.Close()
	s.objects.Close()
}

func (s *catalogSide) nextLine() error {
	err := s.lineRows.Next(&s.ahead)
	s.hasAhead = err == nil
	if errors.Is(err, io.EOF) {
		return nil
	}
	return err
}

// next returns an object with its lines, which come in the order of objects;
// io.EOF after the last.
func (s *catalogSide) next() (catalog.Entry, error) {
	var e catalog.Entry
	if err := s.objectRows.Next(&e.Object); err != nil {
		return e, err
	}
	for s.hasAhead && s.ahead.ObjectID == e.ObjectID {
		e.Lines = append(e.Lines, s.ahead)
		if err := s.nextLine(); err != nil {
			return e, err
		}
	}
	return e, nil
}

// readSides feeds both catalogs to a comparison, in turns, and returns what
// they were made with differently.
func readSides(a *app, cmp *catalog.Comparison, old, now string) ([]string, error) {
	var sides [2]*catalogSide
	for i, name := range []string{old, now} {
		s, err := openSide(a.locate(name), name)
		if err != nil {
			return nil, err
		}
		defer s.close()
		sides[i] = s
	}
	var ended [2]bool
	for !ended[0] || !ended[1] {
		if err := a.ctx.Err(); err != nil {
			return nil, err
		}
		for i, s := range sides {
			if ended[i] {
				continue
			}
			e, err := s.next()
			if errors.Is(err, io.EOF) {
				ended[i] = true
				continue
			}
			if err != nil {
				return nil, err
			}
			if err := cmp.Add(i, e); err != nil {
				return nil, err
			}
		}
	}
	if err := cmp.Finish(); err != nil {
		return nil, err
	}
	return catalog.Causes(sides[0].objectRows.Facts(), sides[1].objectRows.Facts()), nil
}

// save writes the table and the pictures.
func (c *compareCmd) save(a *app, cmp *catalog.Comparison, causes []string) error {
	folder := a.locate(c.Out)
	if err := os.MkdirAll(folder, 0o777); err != nil {
		return &pipeline.InputError{Problems: []string{fmt.Sprintf("--out %s cannot be made: %s", c.Out, errors.Unwrap(err))}}
	}
	path := filepath.Join(folder, "changes.csv")
	f, err := os.Create(path)
	if err != nil {
		return fmt.Errorf("the table cannot be written: %w", err)
	}
	defer f.Close()
	out := bufio.NewWriter(f)
	writeChanges(out, cmp, causes)
	if err := errors.Join(out.Flush(), f.Close()); err != nil {
		return fmt.Errorf("%s cannot be written: %w", path, err)
	}
	if err := saveComparison(folder, cmp); err != nil {
		return err
	}
	if !c.Quiet {
		fmt.Fprintf(a.stdout, "\n%s has the changed objects, most significant first; pictures beside it.\n", filepath.Join(c.Out, "changes.csv"))
	}
	return nil
}

// changeColumns are the columns of changes.csv.
var changeColumns = []string{"rank", "object_id", "weight", "what", "cause", "redshift_old", "redshift_new", "redshift_sigmas", "velocity_kms",
	"class_old", "class_new", "verdict_old", "verdict_new", "family_old", "family_new", "confidence_old", "confidence_new",
	"flags_gained", "flags_lost", "lines_changed", "line_most", "line_sigmas", "source_file", "source_row"}

func writeChanges(w io.Writer, cmp *catalog.Comparison, causes []string) {
	line := func(fields ...string) {
		for i, f := range fields {
			if strings.ContainsAny(f, ",\"\r\n") {
				fields[i] = `"` + strings.ReplaceAll(f, `"`, `""`) + `"`
			}
		}
		fmt.Fprintf(w, "%s\r\n", strings.Join(fields, ","))
	}
	line(slices.Clone(changeColumns)...)
	for i := range cmp.Changes {
		d := &cmp.Changes[i]
		line(strconv.Itoa(i+1), d.ObjectID, d.Weight.String(), d.What(cmp.Limit), d.Cause(causes),
			tableNumber(d.Old.Redshift, 7), tableNumber(d.New.Redshift, 7), tableNumber(d.Sigmas, 2), tableNumber(d.Kms, 1),
			d.Old.Class, d.New.Class, d.Old.Verdict, d.New.Verdict, d.Old.Family, d.New.Family,
			tableNumber(d.Old.Confidence, 5), tableNumber(d.New.Confidence, 5), d.Gained.String(), d.Lost.String(),
			strconv.Itoa(d.LinesMoved), d.Line, tableNumber(d.LineSigmas, 2), d.SourceFile, strconv.FormatInt(d.SourceRow, 10))
	}
}

// tableNumber prints a number of a table; one that is not known is empty, and
// without bound is written as "inf".
func tableNumber(x float64, decimals int) string {
	switch {
	case math.IsNaN(x):
		return ""
	case math.IsInf(x, 0):
		return "inf"
	}
	return strconv.FormatFloat(x, 'f', decimals, 64)
}
