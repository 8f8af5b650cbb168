// Package spectrum holds the value that travels through the pipeline: one
// object's one-dimensional spectrum with everything that is known, and
// everything that had to be assumed, about its wavelengths, errors and frame.
//
// It also brings wavelengths to vacuum and to the solar-system barycenter, and
// lays spectra on a logarithmic grid. It knows nothing of files.
package spectrum

import (
	"fmt"
	"math"
)

// SpeedOfLight is c in km/s (exact, SI definition of the meter).
const SpeedOfLight = 299792.458

// Medium says in what the wavelengths are measured.
type Medium int

// The media a wavelength axis can be stated in.
const (
	Vacuum Medium = iota
	Air
)

// String returns "vacuum" or "air".
func (m Medium) String() string {
	if m == Air {
		return "air"
	}
	return "vacuum"
}

// Frame is the velocity frame (standard of rest) of the wavelength axis,
// following FITS Paper III (Greisen et al. 2006), table 12.
type Frame int

// The frames that duskline tells apart.
const (
	Barycentric  Frame = iota // SPECSYS BARYCENT
	Heliocentric              // SPECSYS HELIOCEN; within 14 m/s of barycentric
	Geocentric                // SPECSYS GEOCENTR
	Topocentric               // SPECSYS TOPOCENT, as observed
	RestFrame                 // SPECSYS SOURCE: the source's redshift was taken out
	OtherFrame                // SPECSYS LSRK, LSRD, GALACTOC, LOCALGRP, CMBDIPOL
)

// String returns the lower-case name of the frame.
func (f Frame) String() string {
	switch f {
	case Barycentric:
		return "barycentric"
	case Heliocentric:
		return "heliocentric"
	case Geocentric:
		return "geocentric"
	case Topocentric:
		return "topocentric"
	case RestFrame:
		return "rest"
	}
	return "other"
}

// Code identifies one kind of doubt about an input. Codes are stable: they are
// written to catalogs and logs and are never reused.
type Code string

// The doubts that reading and preparing a spectrum can raise.
const (
	MediumAssumed   Code = "medium_assumed"  // air or vacuum was not stated
	FrameAssumed    Code = "frame_assumed"   // velocity frame was not stated
	UnitAssumed     Code = "unit_assumed"    // wavelength unit was not stated
	LayoutAssumed   Code = "layout_assumed"  // columns or axes were guessed
	NoiseEstimated  Code = "noise_estimated" // no errors in the input
	WeightsSuspect  Code = "weights_suspect" // stated errors disagree with the scatter
	PixelsDropped   Code = "pixels_dropped"  // repeated, unordered or non-finite wavelengths dropped
	ValuesDropped   Code = "values_dropped"  // fluxes impossibly far from the others dropped
	CoverageCut     Code = "coverage_cut"    // wavelengths outside the supported range cut
	ArmsRescaled    Code = "arms_rescaled"   // arms brought to a common flux level
	FrameUncertain  Code = "frame_uncertain" // correction stated in words only, or contradictory cards
	RestFrameStated Code = "rest_frame"      // the file says the redshift was already taken out
)

// Warning is a doubt that travels with its spectrum to the catalog row.
type Warning struct {
	Code Code
	Text string // one clause for people, such as "air or vacuum not stated; vacuum assumed"
}

// Loss is why pixels of an input must not be used.
type Loss struct {
	Cause  string // what is wrong, such as "flux NaN or infinite"
	Where  string // such as "column FLUX of HDU 1", may be empty
	Pixels int
}

// String tells a loss in words, such as "50 flux NaN or infinite (column FLUX of HDU 1)".
func (l Loss) String() string {
	if l.Where == "" {
		return fmt.Sprintf("%d %s", l.Pixels, l.Cause)
	}
	return fmt.Sprintf("%d %s (%s)", l.Pixels, l.Cause, l.Where)
}

// Segment is one contiguous piece of a spectrum: the whole of it for most
// files, one arm or one echelle order for others.
//
// The slices have equal length. Wave is strictly increasing and finite, in
// Angstrom. Ivar is the inverse variance of Flux, zero where a pixel must not
// be used; Flux is finite wherever Ivar > 0. Units of Flux are the file's own.
type Segment struct {
	Name string // arm or order, may be empty
	Wave []float64
	Flux []float64
	Ivar []float64
	// Resolution is the resolving power R = wavelength / FWHM, either one
	// value for the segment or one per pixel; empty when not known.
	Resolution []float64
	// LogUniform is true when Wave is uniform in log10 as read.
	LogUniform bool
}

// Len returns the number of pixels.
func (s *Segment) Len() int { return len(s.Wave) }

// Good returns the number of pixels with positive inverse variance.
func (s *Segment) Good() int {
	n := 0
	for _, w := range s.Ivar {
		if w > 0 {
			n++
		}
	}
	return n
}

// Check returns an error naming the first broken promise of the Segment
// contract, or nil. A Segment that fails it never leaves fitsread.
func (s *Segment) Check() error {
	n := len(s.Wave)
	if len(s.Flux) != n || len(s.Ivar) != n {
		return fmt.Errorf("lengths differ: %d wavelengths, %d fluxes, %d weights", n, len(s.Flux), len(s.Ivar))
	}
	if k := len(s.Resolution); k != 0 && k != 1 && k != n {
		return fmt.Errorf("%d resolution values for %d pixels", k, n)
	}
	for i, w := range s.Wave {
		if !(w > 0) || math.IsInf(w, 0) {
			return fmt.Errorf("pixel %d: wavelength %g is not positive and finite", i, w)
		}
		if i > 0 && w <= s.Wave[i-1] {
			return fmt.Errorf("pixel %d: wavelength %g does not increase", i, w)
		}
		v := s.Ivar[i]
		if !(v >= 0) || math.IsInf(v, 0) {
			return fmt.Errorf("pixel %d: inverse variance %g is not finite and non-negative", i, v)
		}
		if v > 0 && (math.IsNaN(s.Flux[i]) || math.IsInf(s.Flux[i], 0)) {
			return fmt.Errorf("pixel %d: flux %g with weight %g", i, s.Flux[i], v)
		}
	}
	return nil
}

// Spectrum is one object as read from one file.
type Spectrum struct {
	ObjectID   string // from the file where it has one, else made from its name and row
	SourceFile string
	SourceRow  int     // index of the spectrum in its file, from 0
	RA, Dec    float64 // degrees, ICRS; NaN when not known

	Segments []Segment // at least one

	Medium Medium // of the wavelengths now in Segments
	Frame  Frame  // of the wavelengths now in Segments
	// BaryVelocity is the velocity of the observer towards the source in km/s
	// that the header implies (1+z_bary = (1+z_obs)(1+v/c)); NaN when the
	// header has not what it needs. It is applied by ToStandard, once, only
	// when Frame is Topocentric, Geocentric or OtherFrame.
	BaryVelocity float64
	// FluxUnit is the file's own unit string, may be empty.
	FluxUnit string

	// Limits restricts the search for the redshift; nil for none.
	Limits *Limits

	Layout string // name of the layout that was used to read it
	// InputDigest is of the bytes that it was read from and of how, 16 hexadecimal
	// digits: equal ones mean equal spectra.
	InputDigest string
	Warnings    []Warning
	// Pixels is how many the input has, and Losses are those that must not be used.
	Pixels int
	Losses []Loss
}

// Warn appends a warning unless the same code is already present.
func (s *Spectrum) Warn(code Code, format string, args ...any) {
	for _, w := range s.Warnings {
		if w.Code == code {
			return
		}
	}
	s.Warnings = append(s.Warnings, Warning{code, fmt.Sprintf(format, args...)})
}

// Has reports whether a warning of the given code is present.
func (s *Spectrum) Has(code Code) bool {
	for _, w := range s.Warnings {
		if w.Code == code {
			return true
		}
	}
	return false
}

// Lose notes n pixels that must not be used; those of one cause and place are added up.
func (s *Spectrum) Lose(cause, where string, n int) {
	if n <= 0 {
		return
	}
	for i := range s.Losses {
		if l := &s.Losses[i]; l.Cause == cause && l.Where == where {
			l.Pixels += n
			return
		}
	}
	s.Losses = append(s.Losses, Loss{cause, where, n})
}
