// Package fitsread reads one-dimensional spectra from FITS files of many
// layouts. It is the only room that knows FITS input.
//
// Open walks the headers, checks every size they claim against the file and
// chooses a layout; Read brings one spectrum to the contract of package
// spectrum. What had to be assumed travels as warnings; a redshift is never read.
//
// # Order of trust
//
// The layout that Options.Force names; the layouts of the settings whose [match]
// fits, in their order; then the built-in ones:
//
//	ivoa-columns   table columns with IVOA Spectrum 1.2 utypes or UCDs
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
// # Layout files
//
// A layout is TOML. hdu is a number from 0 or an EXTNAME; line counts image
// lines from 1 and is left out where every object has its own line.
//
//	rows = "spectra"            # or "orders": rows are segments of one spectrum
//	[match]                     # when to use it without being asked; optional
//	hdu = "NAME"
//	columns = ["loglam"]        # must be in that HDU
//	cards = { TELESCOP = "X" }  # in it or the first; "" for any value
//	[wavelength]
//	hdu = 1
//	column = "loglam"           # or line = 1, or axis = true for the header's axis,
//	                            # or start = "W0" and step = "DW": columns or cards
//	unit = "Angstrom"           # Angstrom nm micron m Hz eV keV cm-1 ...
//	scale = "log10"             # linear, log10 or ln
//	medium = "vacuum"           # or air
//	[flux]
//	hdu = 1
//	column = "flux"             # or line
//	unit = "erg/s/cm2/Angstrom"
//	[weight]
//	hdu = 1
//	column = "ivar"             # or line
//	kind = "inverse_variance"   # or sigma or variance
//	[mask]
//	hdu = 1
//	column = "flag"             # or line
//	bad = "nonzero"             # or zero
//	bits = 5                    # only these bits; optional
//	[resolution]
//	power = 2000.0              # one R, or hdu with column or line and
//	kind = "fwhm"               # power, fwhm (Angstrom) or pixels (sigma)
//	[frame]
//	velocity = "barycentric"    # heliocentric geocentric topocentric rest
//	[object]
//	hdu = 0
//	id = "TARGET"               # columns or cards
//	ra = "RA"                   # degrees or hh:mm:ss
//	dec = "DEC"
//
// For several arms, [[arm]] with name, and [arm.wavelength], [arm.flux] and so on
// below it. The file configs/layouts/example.toml is a whole one.
package fitsread
