package main

import (
	"fmt"
	"io"
	"maps"
	"math"
	"slices"
	"strings"

	"duskline/catalog"
)

// weightText says what each weight of a change means.
var weightText = map[catalog.Weight]string{
	catalog.Contradiction: "secure in both, with another class or redshift",
	catalog.SecureChanged: "secure in one of the two, or moved beyond its error",
	catalog.AnswerChanged: "other redshift, class or verdict, not secure",
	catalog.DoubtsChanged: "same answer, other flags or template family",
	catalog.LinesMoved:    "same answer, other lines or equivalent widths",
}

// writeComparison prints what changed and why.
func writeComparison(w io.Writer, c *catalog.Comparison, causes []string) {
	fmt.Fprintf(w, "%d objects in both catalogs, %d only in the old one, %d only in the new one.\n", c.Matched, c.OnlyOld, c.OnlyNew)
	for side, name := range []string{"old", "new"} {
		if lone := c.Lone(side, 3); len(lone) > 0 {
			fmt.Fprintf(w, "Only in the %s one: %s ...\n", name, strings.Join(lone, ", "))
		}
	}
	switch {
	case len(causes) > 0:
		fmt.Fprintf(w, "Made with different:\n")
		for _, cause := range causes {
			fmt.Fprintf(w, "  %s\n", cause)
		}
	default:
		fmt.Fprintf(w, "Made with the same program, settings and recipes.\n")
	}
	if c.NewInputs > 0 {
		fmt.Fprintf(w, "The input of %s.\n", count(c.NewInputs, "object is another", "objects is another"))
	}
	fmt.Fprintf(w, "\n%d changed:\n", c.Changed())
	for _, weight := range catalog.Weights() {
		fmt.Fprintf(w, "%11d  %-14s %s\n", c.ByWeight[weight], weight, weightText[weight])
	}
	fmt.Fprintf(w, "%11d  %-14s moved by at most %g errors, not counted\n", c.Within, "within", c.Limit)
	fmt.Fprintf(w, "%11d  %-14s of the redshift changed by more than a tenth, not counted\n", c.ErrorsMoved, "error")
	writeMatrix(w, "verdict", catalog.Verdicts(), c.Verdicts)
	writeMatrix(w, "class", catalog.Classes(), c.Classes)
	writeFlags(w, c)
	writeShifts(w, c)
	if len(c.Changes) > 0 {
		fmt.Fprintf(w, "\nMost significant:\n")
	}
	for i := range min(len(c.Changes), 10) {
		d := &c.Changes[i]
		fmt.Fprintf(w, "  %-24s %s %s at %s, now %s %s at %s (%s)\n", d.ObjectID, d.Old.Verdict, d.Old.Class, tableNumber(d.Old.Redshift, 5),
			d.New.Verdict, d.New.Class, tableNumber(d.New.Redshift, 5), d.Cause(causes))
	}
}

// writeMatrix prints how many went from which word to which; nothing where all
// stayed.
func writeMatrix(w io.Writer, what string, words []string, counts map[[2]string]int64) {
	moved := false
	for pair := range counts {
		moved = moved || pair[0] != pair[1]
	}
	if !moved {
		return
	}
	fmt.Fprintf(w, "\n%-20s", what+": old below,")
	for _, now := range words {
		fmt.Fprintf(w, "%15s", "new "+now)
	}
	fmt.Fprintln(w)
	for _, old := range words {
		fmt.Fprintf(w, "%-20s", old)
		for _, now := range words {
			fmt.Fprintf(w, "%15d", counts[[2]string{old, now}])
		}
		fmt.Fprintln(w)
	}
}

func writeFlags(w io.Writer, c *catalog.Comparison) {
	if len(c.FlagsGained)+len(c.FlagsLost) == 0 {
		return
	}
	fmt.Fprintf(w, "\n%-20s%11s%11s\n", "flag", "gained", "lost")
	for _, name := range catalog.FlagNames() {
		if c.FlagsGained[name]+c.FlagsLost[name] > 0 {
			fmt.Fprintf(w, "%-20s%11d%11d\n", name, c.FlagsGained[name], c.FlagsLost[name])
		}
	}
}

// linesTold bounds the lines of the summary.
const linesTold = 20

// writeShifts prints the lines that changed somewhere.
func writeShifts(w io.Writer, c *catalog.Comparison) {
	names := shiftedLines(c)
	if len(names) == 0 {
		return
	}
	fmt.Fprintf(w, "\nEquivalent widths, new - old over the errors of both in quadrature:\n")
	fmt.Fprintf(w, "%-20s%11s%11s%11s%11s%11s%11s%11s\n", "line", "in both", "moved", "gained", "lost", "median", "16 %", "84 %")
	for i, name := range names {
		if i == linesTold {
			fmt.Fprintf(w, "and %d more\n", len(names)-i)
			break
		}
		s := c.Lines[name]
		fmt.Fprintf(w, "%-20s%11d%11d%11d%11d", name, s.Compared, s.Moved, s.Gained, s.Lost)
		for _, q := range []float64{0.5, 0.16, 0.84} {
			if x := s.Quantile(q); math.IsNaN(x) {
				fmt.Fprintf(w, "%11s", "-")
			} else {
				fmt.Fprintf(w, "%11.2f", x)
			}
		}
		fmt.Fprintln(w)
	}
}

// shiftedLines names the lines that changed, those that changed most first.
func shiftedLines(c *catalog.Comparison) []string {
	names := slices.DeleteFunc(slices.Sorted(maps.Keys(c.Lines)), func(name string) bool {
		s := c.Lines[name]
		return s.Moved+s.Gained+s.Lost == 0
	})
	slices.SortStableFunc(names, func(a, b string) int {
		x, y := c.Lines[a], c.Lines[b]
		return int(y.Moved + y.Gained + y.Lost - x.Moved - x.Gained - x.Lost)
	})
	return names
}
