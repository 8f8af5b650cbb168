package lines

import (
	"math"
	"strings"
)

// Fold joins the second component of every line, the row that follows it, to
// its first and returns the shortened slice: for objects whose lines are one
// profile that a single Gaussian does not describe, as the Balmer lines of hot
// stars. Equivalent widths and fluxes add, their errors in quadrature; offset,
// width and sum are those of the broader part, with the other's profile added
// to the sum.
func Fold(results []Result) []Result {
	out := results[:0]
	for _, r := range results {
		n := len(out)
		if n == 0 || r.Name != out[n-1].Name+wingsSuffix {
			out = append(out, r)
			continue
		}
		a := &out[n-1]
		if a.Kind == Unmeasured || math.IsNaN(a.EWRest) || math.IsNaN(r.EWRest) {
			continue
		}
		b := r
		if a.WidthKms > b.WidthKms {
			a, b = &b, out[n-1]
		}
		total := b // the broader part
		total.Name, total.Blend = out[n-1].Name, out[n-1].Blend
		total.EWRest, total.EWRestErr = a.EWRest+b.EWRest, math.Hypot(a.EWRestErr, b.EWRestErr)
		total.Flux, total.FluxErr = a.Flux+b.Flux, math.Hypot(a.FluxErr, b.FluxErr)
		total.EWSum = b.EWSum + a.EWRest
		total.EWSumErr = math.Hypot(b.EWSumErr, a.EWRestErr)
		total.SNR = math.Abs(total.Flux) / total.FluxErr
		switch {
		case total.Flux > 0 && out[n-1].Kind != Emission && r.Kind != Emission && doubted(out[n-1].Reason, r.Reason) != "":
			total.Kind = Limit
			total.bound()
			total.Reason = doubted(out[n-1].Reason, r.Reason)
		case total.SNR < seenFrom:
			total.Kind = Limit
			total.bound()
		case total.Flux > 0:
			total.Kind, total.UpperLimit = Emission, math.NaN()
		default:
			total.Kind, total.UpperLimit = Absorption, math.NaN()
		}
		if total.Kind != Limit && doubted(total.Reason) != "" {
			total.Reason = "" // of a part that does not count
		}
		if total.Kind != Limit && math.IsNaN(total.OffsetKms) {
			total.OffsetKms, total.OffsetErr = a.OffsetKms, a.OffsetErr
		}
		out[n-1] = total
	}
	return out
}

// doubted returns the first of two reasons that takes emission back, empty for none.
func doubted(reasons ...string) string {
	for _, r := range reasons {
		switch strings.TrimPrefix(r, ReasonSum+"|") {
		case ReasonCrowded, ReasonNoCompanion, ReasonWrongSign, ReasonAtBound:
			return r
		}
	}
	return ""
}
