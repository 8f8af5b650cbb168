// Package synth makes synthetic spectra of known truth: the night of 2031-03-14
// of the invented Lantern Ridge survey, as a folder of FITS files in six
// layouts, and small sets for tests and benchmarks.
//
// The spectra are painted from models of their own (blackbodies, power laws,
// steps, lines with strengths chosen here), never from the templates that
// measure redshifts, so that an answer is not found because it was put in.
// Noise follows a night sky with airglow lines; pixels die, cosmic rays hit, the
// flux calibration is off by a few percent. Lines stand off the redshift by as much as in
// real objects (motion.go). Every number comes from a seeded
// generator: the same seed gives the same bytes.
//
// Strengths, shapes and frequencies of occurrence are chosen by eye to look
// like a survey's night and are of no other use. Line wavelengths are from
// memory unless computed by package hydrogen.
package synth
