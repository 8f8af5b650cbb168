// Package lines measures spectral lines at a known redshift: equivalent widths
// by direct sum and by profile fit, fluxes, velocity offsets, widths, and upper
// limits where nothing is seen.
//
// # Definitions
//
// The equivalent width is W = 1/(1+z) * integral of (1 - F/Fc) dlambda, in
// rest-frame Angstrom: positive in absorption, negative in emission. The
// continuum Fc is the caller's, plus a straight line of its own in every fit
// window. Flux is the integral of F - Fc over observed wavelength: positive in
// emission.
//
// # The way of one spectrum
//
//  1. search.go looks at every line with boxes of many widths and offsets, on
//     running sums, and keeps the most significant: a start, not an answer.
//     expectation.go says which lines an object has.
//  2. plan.go joins lines into blends: those of one group of the line list and
//     those within a few widths of one another. Lines of one ion in a blend
//     share offset and width.
//  3. solve.go fits each blend: Gaussians averaged over the pixels
//     (profile.go) plus the straight lines, by Levenberg-Marquardt
//     (marquardt.go). unresolved.go finds the lines that only their sum is
//     known of, refit.go whether two have changed places, split.go second
//     components. lots.go takes the mean over the
//     posterior for such sums, marginal.go where lines are crowded. Of broad lines,
//     stray.go tells which is in the place of another, broadsum.go what only their sum is known of.
//  4. sum.go sums the pixels of every line, with the fitted neighbors taken
//     away.
//  5. Blends in which nothing was seen come last, with the offset and width of
//     the strongest line of the spectrum, as linear fits.
//  6. crowding.go takes back what is no line: emission that is the gap between
//     absorption lines (relief.go) or that other lines of its ion deny, a wrong
//     sign, an offset at its limit. Where others may gain by it, again.go measures
//     their blends once more without.
//
// docs/lines.md tells the same to the user of the table of lines.
package lines
