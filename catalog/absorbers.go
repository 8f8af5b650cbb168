package catalog

import (
	"math/bits"
	"strings"
)

// Absorber is one row of the absorber table: one absorption system in front of
// one object. Numbers that are not known are NaN.
type Absorber struct {
	ObjectID     string  // key into the object table
	ZAbs         float64 // redshift of the absorber
	ZAbsErr      float64
	LogNHI       float64 // log10 of the neutral hydrogen column density in cm^-2; NaN for metal doublets
	LogNHIErr    float64
	BKms, BErr   float64 // Doppler parameter, km/s, where the lines fix it
	LinesUsed    string  // names of the lines that carry the fit, joined by "+"
	Flags        AbsorberFlags
	Kind         string  // one of AbsorberKinds
	EWRest       float64 // rest-frame equivalent width of Lyman-alpha or the stronger line of the doublet, Angstrom
	EWRestErr    float64
	EWSecond     float64 // of the weaker line of the doublet
	EWSecondErr  float64
	Significance float64 // standard errors by which the system stands out
}

// The kinds of absorber.
const (
	Hydrogen = "hydrogen"
	MgII     = "MgII"
	CIV      = "CIV"
	SiIV     = "SiIV"
	AlIII    = "AlIII"
)

// AbsorberKinds lists the kinds. It returns a new slice.
func AbsorberKinds() []string { return []string{Hydrogen, MgII, CIV, SiIV, AlIII} }

// AbsorberFlags is a set of remarks on one absorber. Bits are appended, never
// renumbered.
type AbsorberFlags uint32

// The flags of an absorber, low bit first.
const (
	FlatPart     AbsorberFlags = 1 << iota // column density and Doppler parameter cannot be told apart
	PoorFit                                // the profile describes the pixels badly
	AtBound                                // a parameter ended at the limit of its range
	OneLine                                // a single line carries the system
	BreakOnly                              // the column density comes from the Lyman limit alone
	LowerLimit                             // the column density is at least the value given
	Overlaps                               // fitted together with another absorber whose lines overlap
	RatioOff                               // the doublet ratio is outside what atomic physics allows
	Saturated                              // the doublet ratio is that of saturated lines
	Proximate                              // within 3,000 km/s of the object
	InForest                               // bluer than Lyman-alpha of the object, where chance pairs are common
	PartlyHidden                           // pixels of its lines are masked or outside the coverage
)

var absorberFlagTable = [...]struct{ name, says string }{
	{"flat_part", "column density and Doppler parameter are degenerate"},
	{"poor_fit", "the profile describes the pixels badly"},
	{"at_bound", "a parameter ended at the limit of its range"},
	{"one_line", "a single line carries the system"},
	{"break_only", "column density from the Lyman limit alone"},
	{"lower_limit", "the column density is at least the value given"},
	{"overlaps", "fitted together with an overlapping absorber"},
	{"ratio_off", "doublet ratio outside what physics allows"},
	{"saturated", "doublet ratio of saturated lines"},
	{"proximate", "within 3,000 km/s of the object"},
	{"in_forest", "bluer than Lyman-alpha: chance pairs are common"},
	{"partly_hidden", "pixels masked or outside the coverage"},
}

const knownAbsorberFlags = AbsorberFlags(1<<len(absorberFlagTable) - 1)

// Has reports whether every flag of g is set in f.
func (f AbsorberFlags) Has(g AbsorberFlags) bool { return f&g == g }

// String returns the names of the flags that are set, low bit first, joined by
// "|". A bit without a name is left out: Check refuses it.
func (f AbsorberFlags) String() string {
	var names []string
	for rest := uint32(f & knownAbsorberFlags); rest != 0; rest &= rest - 1 {
		names = append(names, absorberFlagTable[bits.TrailingZeros32(rest)].name)
	}
	return strings.Join(names, "|")
}

// absorberFlagText is a view of AbsorberFlags as their names.
type absorberFlagText AbsorberFlags

func absorberColumns() []column[Absorber] {
	type A = Absorber
	return []column[A]{
		{Column{Name: "object_id", UCD: "meta.id.parent", Description: "object, key into the object table"},
			func(a *A) any { return &a.ObjectID }},
		{Column{Name: "z_abs", UCD: "src.redshift", Display: "F12.7", Description: "redshift of the absorber"},
			func(a *A) any { return &a.ZAbs }},
		{Column{Name: "z_abs_err", UCD: "stat.error;src.redshift", Display: "F12.8", Description: "one-sigma error of z_abs"},
			func(a *A) any { return &a.ZAbsErr }},
		{Column{Name: "log_nhi", UCD: "phys.columnDensity", Display: "F8.4", Description: "log10 of the neutral hydrogen column density in cm**-2"},
			func(a *A) any { return &a.LogNHI }},
		{Column{Name: "log_nhi_err", UCD: "stat.error;phys.columnDensity", Display: "F8.4", Description: "one-sigma error of log_nhi"},
			func(a *A) any { return &a.LogNHIErr }},
		{Column{Name: "b_kms", Unit: "km/s", UCD: "phys.veloc.dispersion", Display: "F10.3", Description: "Doppler parameter where the lines fix it"},
			func(a *A) any { return &a.BKms }},
		{Column{Name: "b_err", Unit: "km/s", UCD: "stat.error;phys.veloc.dispersion", Display: "F10.3", Description: "one-sigma error of b_kms"},
			func(a *A) any { return &a.BErr }},
		{Column{Name: "lines_used", UCD: "meta.id;spect.line", Description: "lines that carry the fit, joined by +"},
			func(a *A) any { return &a.LinesUsed }},
		{Column{Name: "flags", UCD: "meta.code.qual", Description: "bit mask of remarks"},
			func(a *A) any { return &a.Flags }},
		{Column{Name: "flag_names", UCD: "meta.code.qual", Description: "the same as names joined by |"},
			func(a *A) any { return (*absorberFlagText)(&a.Flags) }},
		{Column{Name: "kind", UCD: "meta.code.class", Description: "hydrogen, or the ion of a metal doublet"},
			func(a *A) any { return &a.Kind }},
		{Column{Name: "ew_rest", Unit: "Angstrom", UCD: "spect.line.eqWidth", Display: "F12.4", Description: "rest-frame equivalent width of Lyman-alpha or the stronger line of the doublet"},
			func(a *A) any { return &a.EWRest }},
		{Column{Name: "ew_rest_err", Unit: "Angstrom", UCD: "stat.error;spect.line.eqWidth", Display: "F12.4", Description: "one-sigma error of ew_rest"},
			func(a *A) any { return &a.EWRestErr }},
		{Column{Name: "ew_second", Unit: "Angstrom", UCD: "spect.line.eqWidth", Display: "F12.4", Description: "rest-frame equivalent width of the weaker line of the doublet"},
			func(a *A) any { return &a.EWSecond }},
		{Column{Name: "ew_second_err", Unit: "Angstrom", UCD: "stat.error;spect.line.eqWidth", Display: "F12.4", Description: "one-sigma error of ew_second"},
			func(a *A) any { return &a.EWSecondErr }},
		{Column{Name: "significance", UCD: "stat.snr", Display: "F10.3", Description: "standard errors by which the system stands out"},
			func(a *A) any { return &a.Significance }},
	}
}

func (c *checker) absorber(a *Absorber) {
	if a.ObjectID == "" {
		c.add("object_id is empty")
	}
	if !(a.ZAbs > -1) {
		c.add("z_abs = %g, want above -1", a.ZAbs)
	}
	c.oneOf("kind", a.Kind, AbsorberKinds())
	if a.LinesUsed == "" && !a.Flags.Has(BreakOnly) {
		c.add("lines_used is empty")
	}
	if bad := a.Flags &^ knownAbsorberFlags; bad != 0 {
		c.add("flags has undefined bits %#x", uint32(bad))
	}
	c.notNegative("z_abs_err", a.ZAbsErr)
	c.within("log_nhi", a.LogNHI, 0, 30)
	c.notNegative("log_nhi_err", a.LogNHIErr)
	c.notNegative("b_kms", a.BKms)
	c.notNegative("b_err", a.BErr)
	c.notNegative("ew_rest_err", a.EWRestErr)
	c.notNegative("ew_second_err", a.EWSecondErr)
}
