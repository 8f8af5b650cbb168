package lines

import "math"

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
		case total.SNR < seenFrom:
			total.Kind, total.UpperLimit = Limit, math.Abs(total.EWRest)+3*total.EWRestErr
		case total.Flux > 0:
			total.Kind, total.UpperLimit = Emission, math.NaN()
		default:
			total.Kind, total.UpperLimit = Absorption, math.NaN()
		}
		out[n-1] = total
	}
	return out
}
