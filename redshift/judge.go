package redshift

import "math"

// Verdict is the final word on a redshift.
type Verdict int

// The verdicts.
const (
	None      Verdict = iota // no redshift can be told
	Uncertain                // a redshift that a person should look at
	Secure                   // a redshift that can be used as it stands
)

// String returns "none", "uncertain" or "secure".
func (v Verdict) String() string { return [...]string{"none", "uncertain", "secure"}[v] }

// Judge sets confidence and verdict of a result. This first confidence comes
// from the gap alone, in units of the misfit.
func Judge(r *Result) {
	if !r.Found {
		r.Verdict = None
		return
	}
	r.Confidence = 1 - 0.5*math.Exp(-r.Gap/4.5)
	switch {
	case r.Confidence > 0.99 && r.LinesSeen >= 2:
		r.Verdict = Secure
	default:
		r.Verdict = Uncertain
	}
}
