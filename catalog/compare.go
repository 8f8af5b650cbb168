package catalog

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// Weight is how much a change of one object matters, least first.
type Weight int

// The weights.
const (
	Unchanged     Weight = iota
	LinesMoved           // equivalent widths beyond their errors, or lines seen that were not, or the reverse
	DoubtsChanged        // flags or the template family
	AnswerChanged        // class, verdict, or redshift beyond its error, not secure before or after
	SecureChanged        // secure before or after, not both, or secure and moved within 1,000 km/s
	Contradiction        // secure before and after, with another class or redshift
)

var weightNames = [...]string{"unchanged", "lines", "doubts", "answer", "secure", "contradiction"}

// String returns the name that tables use.
func (w Weight) String() string { return weightNames[w] }

// Weights lists all weights but Unchanged, greatest first.
func Weights() []Weight {
	return []Weight{Contradiction, SecureChanged, AnswerChanged, DoubtsChanged, LinesMoved}
}

// sameKms is the change of velocity from which two secure redshifts are
// different answers (common practice, no source), km/s.
const sameKms = 1000

const lightKms = 299792.458 // SI definition of the meter

// Entry is one object of a catalog with its lines.
type Entry struct {
	Object
	Lines []Line
}

// Answer is what one catalog says of an object, as far as changes are told by it.
type Answer struct {
	Class, Verdict, Family            string
	Redshift, RedshiftErr, Confidence float64
}

// Answer returns what a row says.
func (o *Object) Answer() Answer {
	return Answer{o.Class, o.Verdict, o.Family, o.Redshift, o.RedshiftErr, o.Confidence}
}

// Change is one object that differs between two catalogs.
type Change struct {
	ObjectID   string
	SourceFile string // of the later catalog
	SourceRow  int64
	Old, New   Answer
	Weight     Weight
	// Sigmas is the change of redshift over the errors of both in quadrature;
	// +Inf where there is one redshift only, 0 where there is none.
	Sigmas       float64
	Kms          float64 // change of redshift as a velocity, c dz / (1 + z); NaN where there is one redshift only
	Gained, Lost Flags
	LinesMoved   int     // lines whose width moved beyond its error, or that were gained or lost
	Line         string  // the one that moved most
	LineSigmas   float64 // by so many errors
	SameInput    bool
}

// LineShift sums up one line over all objects that have it in both catalogs.
type LineShift struct {
	Compared, Moved int64
	Gained, Lost    int64 // seen in one catalog only
	hist            [2*shiftBins + 1]int32
}

// Shifts are counted in bins of a tenth of an error, centered on 0, up to 10.
const (
	shiftBins  = 100
	shiftScale = 10
)

// Quantile returns the q-th quantile of (new - old) / error, to a bin of 0.1.
func (s *LineShift) Quantile(q float64) float64 {
	want, sum := q*float64(s.Compared), 0.0
	for i, n := range s.hist {
		if sum += float64(n); sum >= want && n > 0 {
			return float64(i-shiftBins) / shiftScale
		}
	}
	return math.NaN()
}

// Each calls visit for every bin of 0.1 with its lower end, from -10.05 on; the
// first and the last hold all beyond.
func (s *LineShift) Each(visit func(low float64, n int64)) {
	for i, n := range s.hist {
		visit((float64(i-shiftBins)-0.5)/shiftScale, int64(n))
	}
}

func (s *LineShift) add(sigmas float64) {
	s.Compared++
	i := int(math.Round(sigmas*shiftScale)) + shiftBins
	s.hist[min(max(i, 0), len(s.hist)-1)]++
}

// Comparison holds two catalogs against each other. Give it all entries of
// both with Add, in any order; it is fastest where the two have the same order.
// Then Finish, and read the fields. Memory is bounded, but for Keep changes:
// what is too much goes to files without names in Folder.
type Comparison struct {
	Limit  float64 // errors beyond which a number has changed
	Keep   int     // most changes that are kept
	Folder string  // empty for that of temporary files

	Matched, OnlyOld, OnlyNew int64
	NewInputs                 int64 // matched objects whose input is another
	Within                    int64 // redshifts that moved, but within the limit
	ErrorsMoved               int64 // of redshifts, by more than a tenth
	ByWeight                  [Contradiction + 1]int64
	Verdicts                  map[[2]string]int64 // old and new
	Classes                   map[[2]string]int64
	FlagsGained, FlagsLost    map[string]int64
	Lines                     map[string]*LineShift
	Redshifts                 LineShift // changes over their errors
	Changes                   []Change  // most significant first
	join                      join
	lone                      [2][]string // first IDs of those on one side only
}

// NewComparison returns a comparison of nothing yet.
func NewComparison(limit float64, keep int) *Comparison {
	c := &Comparison{Limit: limit, Keep: keep, Verdicts: map[[2]string]int64{}, Classes: map[[2]string]int64{},
		FlagsGained: map[string]int64{}, FlagsLost: map[string]int64{}, Lines: map[string]*LineShift{}}
	c.join = join{most: waitingBytes, pair: c.pair, lone: c.addLone}
	return c
}

// waitingBytes is how much of two catalogs in different orders waits in memory.
const waitingBytes = 32 << 20

// Changed returns the number of objects that changed or stand in one catalog
// only.
func (c *Comparison) Changed() int64 {
	n := c.OnlyOld + c.OnlyNew
	for _, w := range Weights() {
		n += c.ByWeight[w]
	}
	return n
}

// Sides of a comparison.
const (
	OldSide = 0
	NewSide = 1
)

// Add takes an entry of one side. The error is of a file that takes no more.
func (c *Comparison) Add(side int, e Entry) error {
	c.join.folder = c.Folder
	return c.join.add(side, e)
}

// Finish closes the comparison once all entries were added. The error is of a
// file that cannot be read back.
func (c *Comparison) Finish() error {
	if err := c.join.finish(); err != nil {
		return err
	}
	c.trim(c.Keep)
	return nil
}

func (c *Comparison) addLone(side int, id string) {
	if side == OldSide {
		c.OnlyOld++
	} else {
		c.OnlyNew++
	}
	c.lone[side] = firstFew(c.lone[side], id, loneKept)
}

// Lone returns the first few IDs, in order, at most ten, that stand on one side
// only.
func (c *Comparison) Lone(side, most int) []string {
	return c.lone[side][:min(most, len(c.lone[side]))]
}

func (c *Comparison) pair(old, now *Entry) {
	c.Matched++
	c.Verdicts[[2]string{old.Verdict, now.Verdict}]++
	c.Classes[[2]string{old.Class, now.Class}]++
	d := Change{ObjectID: now.ObjectID, SourceFile: now.SourceFile, SourceRow: now.SourceRow, Old: old.Answer(), New: now.Answer(), Gained: now.Flags &^ old.Flags, Lost: old.Flags &^ now.Flags,
		SameInput: old.InputDigest == now.InputDigest, Kms: math.NaN()}
	if !d.SameInput {
		c.NewInputs++
	}
	for _, name := range d.Gained.Names() {
		c.FlagsGained[name]++
	}
	for _, name := range d.Lost.Names() {
		c.FlagsLost[name]++
	}
	c.redshift(&d)
	c.lines(&d, old.Lines, now.Lines)
	d.Weight = c.weigh(&d)
	c.ByWeight[d.Weight]++
	if d.Weight == Unchanged {
		return
	}
	c.Changes = append(c.Changes, d)
	if len(c.Changes) >= c.Keep+c.Keep/8+1000 {
		c.trim(c.Keep)
	}
}

// redshift measures how far the redshift went.
func (c *Comparison) redshift(d *Change) {
	z0, z1 := d.Old.Redshift, d.New.Redshift
	switch {
	case math.IsNaN(z0) && math.IsNaN(z1):
		return
	case math.IsNaN(z0) || math.IsNaN(z1):
		d.Sigmas = math.Inf(1)
		return
	}
	d.Kms = lightKms * (z1 - z0) / (1 + z0)
	if math.Abs(math.Log(d.New.RedshiftErr/d.Old.RedshiftErr)) > 0.1 {
		c.ErrorsMoved++
	}
	if z0 == z1 {
		c.Redshifts.add(0)
		return
	}
	sigma := math.Hypot(d.Old.RedshiftErr, d.New.RedshiftErr)
	signed := (z1 - z0) / sigma
	if !(sigma > 0) {
		signed = math.Inf(cmp.Compare(z1, z0))
	}
	c.Redshifts.add(math.Min(math.Max(signed, -1e6), 1e6))
	if d.Sigmas = math.Abs(signed); d.Sigmas <= c.Limit {
		c.Within++
	}
}

// lineKey tells lines of one object apart: emission may fill the core of an
// absorption line of the same name.
type lineKey struct{ line, kind string }

// lines compares the lines of one object that are seen.
func (c *Comparison) lines(d *Change, old, now []Line) {
	before := make(map[lineKey]*Line, len(old))
	for i := range old {
		if l := &old[i]; seen(l) {
			before[lineKey{l.Line, l.Kind}] = l
		}
	}
	moved := func(name string, sigmas float64) {
		d.LinesMoved++
		if sigmas > d.LineSigmas || sigmas == d.LineSigmas && name < d.Line {
			d.Line, d.LineSigmas = name, sigmas
		}
	}
	for i := range now {
		l := &now[i]
		if !seen(l) {
			continue
		}
		key := lineKey{l.Line, l.Kind}
		o, ok := before[key]
		if !ok {
			c.shift(l.Line).Gained++
			moved(l.Line, l.SNR)
			continue
		}
		delete(before, key)
		sigmas := (l.EWRest - o.EWRest) / math.Hypot(l.EWRestErr, o.EWRestErr)
		switch {
		case l.EWRest == o.EWRest || math.IsNaN(l.EWRest) && math.IsNaN(o.EWRest):
			sigmas = 0
		case math.IsNaN(sigmas):
			sigmas = math.Inf(1)
		}
		s := c.shift(l.Line)
		s.add(math.Min(math.Max(sigmas, -1e6), 1e6))
		if math.Abs(sigmas) > c.Limit {
			s.Moved++
			moved(l.Line, math.Abs(sigmas))
		}
	}
	for key, o := range before { // counts and the largest: the order does not matter
		c.shift(key.line).Lost++
		moved(key.line, o.SNR)
	}
}

func seen(l *Line) bool { return l.Kind == "emission" || l.Kind == "absorption" }

func (c *Comparison) shift(name string) *LineShift {
	s := c.Lines[name]
	if s == nil {
		s = &LineShift{}
		c.Lines[name] = s
	}
	return s
}

func (c *Comparison) weigh(d *Change) Weight {
	moved := d.Sigmas > c.Limit
	far := moved && !(math.Abs(d.Kms) < sameKms)
	was, is := d.Old.Verdict == Secure, d.New.Verdict == Secure
	switch {
	case was && is && (far || d.Old.Class != d.New.Class):
		return Contradiction
	case was != is, was && moved:
		return SecureChanged
	case moved, d.Old.Class != d.New.Class, d.Old.Verdict != d.New.Verdict:
		return AnswerChanged
	case d.Gained|d.Lost != 0, d.Old.Family != d.New.Family:
		return DoubtsChanged
	case d.LinesMoved > 0:
		return LinesMoved
	}
	return Unchanged
}

// trim sorts the changes and keeps the first ones.
func (c *Comparison) trim(keep int) {
	slices.SortFunc(c.Changes, func(a, b Change) int {
		return cmp.Or(cmp.Compare(b.Weight, a.Weight), cmp.Compare(b.Sigmas, a.Sigmas), cmp.Compare(b.LineSigmas, a.LineSigmas),
			cmp.Compare(a.ObjectID, b.ObjectID))
	})
	if len(c.Changes) > keep {
		clear(c.Changes[keep:])
		c.Changes = c.Changes[:keep]
	}
}

// What says in words what changed.
func (d *Change) What(limit float64) string {
	var out []string
	if d.Old.Verdict != d.New.Verdict {
		out = append(out, "verdict")
	}
	if d.Old.Class != d.New.Class {
		out = append(out, "class")
	}
	if d.Sigmas > limit {
		out = append(out, "redshift")
	}
	if d.Old.Family != d.New.Family {
		out = append(out, "family")
	}
	if d.Gained|d.Lost != 0 {
		out = append(out, "flags")
	}
	if d.LinesMoved > 0 {
		out = append(out, fmt.Sprintf("%d lines", d.LinesMoved))
	}
	return strings.Join(out, " ")
}
