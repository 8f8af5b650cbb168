// Package absorbers finds and measures absorption systems in front of a
// bright background: neutral hydrogen by its Lyman series and its limit, and
// metals by their resonance doublets.
//
// # The way of one spectrum
//
//  1. sight.go lays the arms end to end on one grid, uniform in log wavelength.
//  2. baseline.go fits the mean level that the forest of thin lines leaves of the
//     background, and the scatter about it; a galaxy's own lines are left out
//     (ownlines.go).
//  3. damped.go looks for damped and sub-damped systems along that level with
//     the likelihood of a set of column densities, against runs of dark bins that
//     a crowded forest has by itself (darkrun.go).
//  4. joint.go fits systems whose lines overlap together, with all Lyman lines in
//     the coverage, by Voigt profiles convolved with the instrument.
//  5. limit.go looks for the break of a Lyman-limit system.
//  6. doublets.go looks for Mg II, C IV, Si IV and Al III on a continuum that
//     follows emission lines (envelope.go), with errors that match the scatter
//     (noise.go). pairfit.go judges each pair, doubletsum.go measures both lines,
//     doubletlink.go joins the parts of one system.
//
// growth.go turns equivalent widths into column densities.
//
// Wavelengths are vacuum Angstrom, velocities km/s, column densities cm^-2, and
// equivalent widths rest-frame Angstrom, positive in absorption.
package absorbers
