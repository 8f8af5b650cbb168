package synth

import (
	"math"
	"path/filepath"

	"duskline/catalog"
	"duskline/spectrum"
)

// Tally counts the answers to the spectra of one class of truth.
type Tally struct {
	Class   string
	Objects int // spectra of this class with a row in the catalog
	// Right counts redshifts within Tolerance, whatever the verdict says of
	// them, unless it is none. For Sky and Broken it counts rows that are
	// rightly not secure, since there is no redshift to find.
	Right       int
	Secure      int // rows with verdict secure
	SecureRight int // of these, right ones
	// Pull is the rms of redshift less truth over the error, of SecureRight; NaN for none.
	Pull       float64
	ClassRight int // rows whose class is that of the truth; 0 for Sky and Broken
}

// Miss is a row that is secure and wrong.
type Miss struct {
	Truth  Truth
	Object catalog.Object
}

// Result is how a catalog stands against the truth.
type Result struct {
	// Classes has one tally each for galaxy, quasar, star, Sky and Broken, in
	// this order, empty ones included.
	Classes []Tally
	// Total sums Classes.
	Total     Tally
	Misses    []Miss // in the order of the catalog
	Missing   int    // truths without a row in the catalog
	Strangers int    // rows without a truth
}

// Score compares the rows of a catalog with the truth. A row belongs to the
// truth with the same file name, folders left aside, and the same source row.
// A redshift is right when c |z - z0| / (1 + z0) is within Tolerance of the true
// class. If a file and row comes twice in objects, the first one counts and the
// others are strangers.
func Score(truth []Truth, objects []catalog.Object) Result {
	type key struct {
		file string
		row  int64
	}
	index := make(map[key]int, len(truth))
	for i, t := range truth {
		index[key{filepath.Base(filepath.FromSlash(t.File)), int64(t.Row)}] = i
	}
	var res Result
	place := map[string]int{}
	for _, class := range []string{catalog.Galaxy, catalog.Quasar, catalog.Star, Sky, Broken} {
		place[class] = len(res.Classes)
		res.Classes = append(res.Classes, Tally{Class: class})
	}
	for _, o := range objects {
		k := key{filepath.Base(o.SourceFile), o.SourceRow}
		i, ok := index[k]
		if !ok {
			res.Strangers++
			continue
		}
		delete(index, k)
		t := truth[i]
		j, ok := place[t.Class]
		if !ok {
			res.Strangers++
			continue
		}
		right := IsRight(t, o)
		for _, n := range []*Tally{&res.Classes[j], &res.Total} {
			n.count(t, o, right)
		}
		if o.Verdict == catalog.Secure && !right {
			res.Misses = append(res.Misses, Miss{t, o})
		}
	}
	for i := range res.Classes {
		res.Classes[i].finish()
	}
	res.Total.finish()
	res.Missing = len(index)
	return res
}

func (n *Tally) count(t Truth, o catalog.Object, right bool) {
	n.Objects++
	if right {
		n.Right++
	}
	if o.Class == t.Class {
		n.ClassRight++
	}
	if o.Verdict == catalog.Secure {
		n.Secure++
		if right {
			n.SecureRight++
			pull := (o.Redshift - t.Redshift) / o.RedshiftErr
			n.Pull += pull * pull // the sum until finish
		}
	}
}

func (n *Tally) finish() { n.Pull = math.Sqrt(n.Pull / float64(n.SecureRight)) }

// IsRight reports whether a row answers its truth, by the rule of Tally.Right.
func IsRight(t Truth, o catalog.Object) bool {
	if t.Class == Sky || t.Class == Broken {
		return o.Verdict != catalog.Secure
	}
	dv := spectrum.SpeedOfLight * math.Abs(o.Redshift-t.Redshift) / (1 + t.Redshift)
	return o.Verdict != catalog.None && dv <= Tolerance(t.Class)
}
