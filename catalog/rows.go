// Package catalog holds the rows that a run leaves behind, the one table that
// says what every column means, and the writers and readers that are driven by
// that table: FITS, Parquet and CSV.
//
// A number that is not known is NaN in Go, NaN in FITS, null in Parquet and an
// empty field in CSV. Whole numbers and text are always present; text that is
// not known is empty.
package catalog

import (
	"fmt"
	"math/bits"
	"strings"
)

// The verdicts on a redshift.
const (
	Secure    = "secure"
	Uncertain = "uncertain"
	None      = "none"
)

// The classes of object.
const (
	Galaxy  = "galaxy"
	Quasar  = "quasar"
	Star    = "star"
	Nebula  = "nebula"
	Unknown = "unknown"
)

// Verdicts lists the verdicts, best first. It returns a new slice.
func Verdicts() []string { return []string{Secure, Uncertain, None} }

// Classes lists the classes. It returns a new slice.
func Classes() []string { return []string{Galaxy, Quasar, Star, Nebula, Unknown} }

// Flags is a set of doubts about one object. Bits are appended, never
// renumbered: they are written to catalogs.
type Flags uint32

// The flags, low bit first.
const (
	Unreadable     Flags = 1 << iota // the file or this spectrum in it could not be read
	FewPixels                        // too few usable pixels
	Faint                            // neither continuum nor lines stand above the noise
	Tied                             // another redshift fits nearly as well
	RangeEnd                         // the best redshift lies at the end of the searched range
	LoneLine                         // a single line carries the redshift
	Misfit                           // the best model leaves the spectrum badly described
	LinesUnseen                      // lines that should be strong are outside the coverage or masked
	LinesMissing                     // lines that should be strong and are covered are not there
	BelowZero                        // the continuum is negative over a good part
	Scattered                        // the lines disagree on the velocity
	OnSkyLine                        // a supporting line falls on a night-sky line or telluric band
	FrameAssumed                     // air/vacuum or velocity frame was not stated and was assumed
	NoiseEstimated                   // no errors in the input: noise was estimated from the flux
	WeightsSuspect                   // the stated errors disagree with the scatter
	Normalized                       // the input was divided by its continuum
	OutsideLimits                    // a better fit lies outside the manifest's limits
	Unexplained                      // features stand out that the model does not explain
	FewLines                         // fewer lines stand out than secure needs, none in emission where there must be, or our Galaxy's alone
	LowConfidence                    // the confidence is below what secure needs
)

// flagTable is in order of bits.
var flagTable = [...]struct{ name, says string }{
	{"unreadable", "the file or this spectrum in it could not be read"},
	{"few_pixels", "too few usable pixels"},
	{"faint", "neither continuum nor lines stand above the noise"},
	{"tied", "another redshift fits nearly as well"},
	{"range_end", "best redshift at the end of the searched range"},
	{"lone_line", "a single line carries the redshift"},
	{"misfit", "the best model describes the spectrum badly"},
	{"lines_unseen", "strong lines are outside the coverage or masked"},
	{"lines_missing", "strong lines are covered and not there"},
	{"below_zero", "the continuum is negative over a good part"},
	{"scattered", "the lines disagree on the velocity"},
	{"on_sky_line", "without lines on night-sky lines or in bands of the air fewer than two support the redshift"},
	{"frame_assumed", "air/vacuum or velocity frame was assumed"},
	{"noise_estimated", "noise was estimated from the flux"},
	{"weights_suspect", "the stated errors disagree with the scatter"},
	{"normalized", "the input looks divided by its continuum"},
	{"outside_limits", "a better fit lies outside the manifest's limits"},
	{"unexplained", "features stand out that the model does not explain"},
	{"few_lines", "too few lines stand out for secure"},
	{"low_confidence", "the confidence is too low for secure"},
}

// knownFlags has every defined bit set.
const knownFlags = Flags(1<<len(flagTable) - 1)

// FlagNames lists the names of all flags in order of their bits. It returns a
// new slice.
func FlagNames() []string {
	names := make([]string, len(flagTable))
	for bit, f := range flagTable {
		names[bit] = f.name
	}
	return names
}

// Has reports whether every flag of g is set in f.
func (f Flags) Has(g Flags) bool { return f&g == g }

// Names returns the names of the flags that are set, low bit first; nil if
// none is. A bit without a name appears as "bit_N".
func (f Flags) Names() []string {
	if f == 0 {
		return nil
	}
	names := make([]string, 0, bits.OnesCount32(uint32(f)))
	for rest := uint32(f); rest != 0; rest &= rest - 1 {
		bit := bits.TrailingZeros32(rest)
		if bit < len(flagTable) {
			names = append(names, flagTable[bit].name)
		} else {
			names = append(names, fmt.Sprintf("bit_%d", bit))
		}
	}
	return names
}

// String returns the names joined by "|", empty if no flag is set.
func (f Flags) String() string { return strings.Join(f.Names(), "|") }

// Object is one row of the object table: one spectrum and the answer to it.
// Numbers that are not known are NaN.
type Object struct {
	ObjectID   string
	SourceFile string
	SourceRow  int64   // index of the spectrum in its file, from 0
	RA, Dec    float64 // degrees, ICRS

	Class       string  // one of Classes
	Family      string  // template family of the best fit, may be empty
	Redshift    float64 // barycentric, from vacuum wavelengths
	RedshiftErr float64 // one sigma
	Confidence  float64 // probability that the redshift is right, 0 to 1
	Verdict     string  // one of Verdicts
	Flags       Flags

	RivalRedshift float64 // best answer at another redshift
	RivalFamily   string
	Gap           float64 // score of the best rival minus the best score
	RStat         float64 // Tonry & Davis (1979) r

	LinesSeen     int32   // features that stand out by themselves, a blend as one
	SNR           float64 // median signal-to-noise ratio a pixel
	PixelsUsed    int32
	WaveMin       float64 // vacuum Angstrom, barycentric
	WaveMax       float64
	Chi2Dof       float64 // chi^2 of the best model over its degrees of freedom
	VelocityFrame string  // frame of the input wavelengths, such as "barycentric"
	BaryVelocity  float64 // km/s, observer towards the source

	Reason      string // why there is no answer, and what had to be assumed
	InputDigest string // of the bytes that the spectrum was read from
	FluxUnit    string // of the input, may be empty

	Magnitude float64 // as the manifest gives it; NaN without
}

// Line is one row of the line table: one line of one object. Numbers that are
// not known are NaN.
type Line struct {
	ObjectID string  // key into the object table
	Line     string  // name in the line list
	RestWave float64 // vacuum Angstrom
	Kind     string  // "emission", "absorption", "limit" or "unmeasured"

	EWRest, EWRestErr float64 // rest-frame equivalent width of the profile fit, Angstrom, positive in absorption
	EWSum, EWSumErr   float64 // the same by direct sum
	Flux, FluxErr     float64 // integrated flux of the profile, input flux unit times Angstrom

	OffsetKms, OffsetErr float64 // center minus that of the redshift, km/s
	WidthKms, WidthErr   float64 // Gaussian sigma, km/s
	SNR                  float64
	Continuum            float64 // at the line, input flux unit
	UpperLimit           float64 // on the absolute rest-frame equivalent width where nothing is seen, Angstrom

	Blend  string // group of lines fitted together, empty for a line alone
	Pixels int32
	Reason string // words of package lines joined by "|"; empty when there is nothing to say

	// Shape of the profile, where a run asks for it; NaN without.
	H3, H3Err, H4, H4Err   float64 // Gauss-Hermite
	LorentzKms, LorentzErr float64 // Voigt
}
