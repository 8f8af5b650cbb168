// Package fitsread reads one-dimensional spectra from FITS files of many
// layouts. It is the only room that knows FITS input.
//
// Open walks the headers, checks every size they claim against the file and
// chooses a layout; Read brings one spectrum to the contract of package
// spectrum. What had to be assumed travels as warnings; a redshift is never read.
//
// # Order of trust
//
// The layout that Options.Force names; the layouts of the settings that fit, in
// their order: by [match], or without one by having all they name; then the
// built-in ones:
//
//	ivoa-spectrum  tables that VOCLASS calls spectra, columns by IVOA utypes, UCDs
//	               or names; tables of other classes are not read
//	ivoa-columns   table columns with IVOA Spectrum utypes or UCDs
//	named-columns  table columns named as wavelength, flux, error, ...
//	named-images   images whose EXTNAME says FLUX, WAVELENGTH, IVAR, ..., with
//	               a common prefix an arm each
//	spectral-axis  image with a spectral axis in its header (FITS Paper III and
//	               the older log10 conventions)
//	guessed        a table's first two columns, when the first runs in order
//
// A table holds a pixel a row, or arrays in its cells and a spectrum a row; rows
// with distinct echelle order numbers and no targets are segments of one
// spectrum. Of several tables, arms of a common name join, a coadd or an optimal
// extraction stands for the others, and each further one is a spectrum.
//
// # What is assumed
//
// An assumption is a warning, never an error. Air or vacuum that nothing states:
// vacuum where any wavelength lies below 2000 Angstrom; air for spectra from the
// ground that are not on a logarithmic grid; else vacuum. A velocity frame that
// nothing states: topocentric for single exposures from the ground with the time
// in the header, else barycentric; data that say they were corrected are never
// corrected again. Errors that are not there are estimated from the scatter of the
// flux (Stoehr et al. 2008); stated ones that are off by more than a factor 3
// against it raise a warning. Zero, negative or missing errors, padding at the
// ends and pixels that flags of standard meaning call bad weigh zero; masks of
// many bits do not count beside inverse variances, which mark bad pixels themselves.
//
// # Compressed images and tables
//
// Lines of tile-compressed images (RICE_1, GZIP_1, GZIP_2, PLIO_1) are unpacked as
// they are read, see tiles; compressed tables whole, when they are first read from,
// see packed. Other methods, and compressed tables of arrays on the heap, are
// refused with the command that unpacks them.
//
// # Layout files
//
// A layout is TOML; docs/reading.md lists every key, configs/layouts has one for
// every convention, and DraftLayout writes one for a file. hdu is a number from 0
// or an EXTNAME; line counts image lines from 1 and is left out where every object
// has its own line.
package fitsread
