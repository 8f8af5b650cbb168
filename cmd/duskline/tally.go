package main

import (
	"fmt"
	"io"
	"path/filepath"
	"strings"

	"duskline/catalog"
	"duskline/pipeline"
)

// writeTally prints what a run came to: a line a class, a column a verdict.
func writeTally(w io.Writer, s *pipeline.Summary) {
	verdicts := catalog.Verdicts()
	fmt.Fprintf(w, "%-10s", "class")
	for _, v := range verdicts {
		fmt.Fprintf(w, "%11s", v)
	}
	fmt.Fprintf(w, "%11s\n", "all")
	line := func(name string, counts map[string]int64) {
		var all int64
		fmt.Fprintf(w, "%-10s", name)
		for _, v := range verdicts {
			fmt.Fprintf(w, "%11d", counts[v])
			all += counts[v]
		}
		fmt.Fprintf(w, "%11d\n", all)
	}
	for _, class := range catalog.Classes() {
		line(class, s.Classes[class])
	}
	line("all", s.Verdicts)
	var flags []string
	for _, name := range catalog.FlagNames() {
		if n := s.Flags[name]; n > 0 {
			flags = append(flags, fmt.Sprintf("%s %d", name, n))
		}
	}
	if len(flags) > 0 {
		fmt.Fprintf(w, "\nflags: %s\n", strings.Join(flags, ", "))
	}
}

// writeWhere says where the files are and which rows a person should look at.
func writeWhere(w io.Writer, out string, s *pipeline.Summary) {
	fmt.Fprintf(w, "\n%s  objects and lines, for astronomers' tools\n", filepath.Join(out, pipeline.CatalogFITS))
	fmt.Fprintf(w, "%s   one row an object\n", filepath.Join(out, pipeline.CatalogCSV))
	fmt.Fprintf(w, "Beside them: objects.parquet, lines.parquet and absorbers.parquet for big tables, summary.json with these counts.\n")
	for _, advice := range advise(s) {
		fmt.Fprintf(w, "%s\n", advice)
	}
}

// advise names the rows that need a person's look, most urgent first.
func advise(s *pipeline.Summary) []string {
	var out []string
	if !s.Complete {
		out = append(out, fmt.Sprintf("NOT WHOLE: %d of %d spectra are missing, see missing_blocks in summary.json.", s.MissingObjects, s.Planned))
	}
	if s.InternalErrors > 0 {
		out = append(out, fmt.Sprintf("%s of this program: their reason begins with \"internal error\", and run.log has the details; please report them.",
			count(s.InternalErrors, "row was spoiled by an error", "rows were spoiled by errors")))
	}
	if s.Unreadable > 0 {
		out = append(out, fmt.Sprintf("%s be read: look for the flag unreadable; the column reason says what to do.",
			count(s.Unreadable, "spectrum could not", "spectra could not")))
	}
	if n := s.Verdicts[catalog.Uncertain]; n > 0 {
		out = append(out, fmt.Sprintf("Worth a look by a person: %s with verdict uncertain, those flagged tied or lone_line first.",
			count(n, "row", "rows")))
	}
	if n := s.Verdicts[catalog.None] - s.Unreadable - s.InternalErrors; n > 0 {
		out = append(out, fmt.Sprintf("%s no redshift: their flags say why.", count(n, "readable spectrum has", "readable spectra have")))
	}
	return out
}

func count(n int64, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, many)
}
