package catalog

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"pgregory.net/rapid"
)

var nan = math.NaN()

// someObjects covers every class and verdict, missing numbers, and text that
// each format has to take care of.
func someObjects() []Object {
	full := Object{ObjectID: "lr-20310314-p03-117", SourceFile: "night/lr-20310314-p03.fits", SourceRow: 116,
		RA: 210.1234567, Dec: -5.7654321, Class: Galaxy, Family: "emission", Redshift: 0.1234567, RedshiftErr: 0.0000123,
		Confidence: 0.99876, Verdict: Secure, Flags: LoneLine | FrameAssumed, RivalRedshift: 0.7654321, RivalFamily: "quasar",
		Gap: 43.125, RStat: 8.25, LinesSeen: 7, SNR: 4.5, PixelsUsed: 4321, WaveMin: 3600.125, WaveMax: 9799.875,
		Chi2Dof: 1.0625, VelocityFrame: "topocentric", BaryVelocity: -12.34567, InputDigest: "0123456789abcdef", Magnitude: 21.375}
	quasar := full
	quasar.ObjectID, quasar.Class, quasar.Verdict, quasar.Flags = "lr-20310314-p03-118", Quasar, Uncertain, 0
	quasar.Redshift, quasar.RA, quasar.Dec, quasar.BaryVelocity = 3.25, nan, nan, nan
	star := full
	star.ObjectID, star.Class, star.Redshift, star.Family = `star, "variable"`, Star, -0.00000004, ` hot\star `
	star.SourceFile = "caf\u00e9/\u661f.fits"
	nebula := full
	nebula.ObjectID, nebula.Class, nebula.Flags = "nebula", Nebula, knownFlags&^Unreadable
	unread := Object{ObjectID: "broken", SourceFile: "night/bad\nname\xff.fits", RA: nan, Dec: nan, Class: Unknown, Redshift: nan,
		RedshiftErr: nan, Confidence: nan, Verdict: None, Flags: Unreadable, RivalRedshift: nan, Gap: nan, RStat: nan, SNR: nan,
		WaveMin: nan, WaveMax: nan, Chi2Dof: nan, BaryVelocity: nan, Magnitude: nan, Reason: "header cut short at byte 1,440, HDU 2"}
	return []Object{full, quasar, star, nebula, unread}
}

func someLines() []Line {
	seen := Line{ObjectID: "lr-20310314-p03-117", Line: "Ha", RestWave: 6564.6081, Kind: "emission", EWRest: -12.5, EWRestErr: 0.25,
		EWSum: -12.25, EWSumErr: 0.5, Flux: 1.25e-16, FluxErr: 2.5e-18, OffsetKms: -3.5, OffsetErr: 1.25, WidthKms: 81.5, WidthErr: 2.5,
		SNR: 50, Continuum: 1e-17, UpperLimit: nan, Blend: "Ha_NII", Pixels: 31}
	limit := Line{ObjectID: "lr-20310314-p03-117", Line: "Hd", RestWave: 4102.8922, Kind: "limit", EWRest: nan, EWRestErr: nan,
		EWSum: 0.125, EWSumErr: 0.5, Flux: nan, FluxErr: nan, OffsetKms: nan, OffsetErr: nan, WidthKms: nan, WidthErr: nan,
		SNR: 0.25, Continuum: -1e-19, UpperLimit: 1.5, Pixels: 29}
	return []Line{seen, limit}
}

// cleaned is the row with its texts as formats hold them.
func cleaned[T Row](row T) T {
	for _, c := range tableOf[T]().columns {
		if p, ok := c.field(&row).(*string); ok {
			*p = CleanText(*p)
		}
	}
	return row
}

func diff[T Row](want, got T) string { return cmp.Diff(want, got, cmpopts.EquateNaNs()) }

// anyNumber draws a number or NaN.
func anyNumber(low, high float64) *rapid.Generator[float64] {
	return rapid.OneOf(rapid.Just(nan), rapid.Float64Range(low, high))
}

var anyText = rapid.OneOf(rapid.String(), rapid.StringMatching(`[ -~]{0,40}`),
	rapid.Map(rapid.SliceOf(rapid.Byte()), func(b []byte) string { return string(b) }))

func drawObject(t *rapid.T) Object {
	big := anyNumber(-1e300, 1e300)
	o := Object{ObjectID: "x" + anyText.Draw(t, "id"), SourceFile: anyText.Draw(t, "file"), SourceRow: rapid.Int64Min(0).Draw(t, "row"),
		RA: nan, Dec: nan, Class: rapid.SampledFrom(Classes()).Draw(t, "class"), Family: anyText.Draw(t, "family"),
		Redshift: anyNumber(-0.9, 1e4).Draw(t, "z"), RedshiftErr: anyNumber(0, 1e10).Draw(t, "zerr"),
		Confidence: anyNumber(0, 1).Draw(t, "confidence"), Verdict: None,
		Flags:         Flags(rapid.Uint32Range(0, uint32(knownFlags)).Draw(t, "flags")),
		RivalRedshift: anyNumber(-0.9, 1e4).Draw(t, "rival"), RivalFamily: anyText.Draw(t, "rival family"),
		Gap: big.Draw(t, "gap"), RStat: big.Draw(t, "r"), LinesSeen: rapid.Int32Min(0).Draw(t, "lines"), SNR: big.Draw(t, "snr"),
		PixelsUsed: rapid.Int32Min(0).Draw(t, "pixels"), WaveMin: anyNumber(0, 5e3).Draw(t, "min"), WaveMax: anyNumber(5e3, 1e6).Draw(t, "max"),
		Chi2Dof: anyNumber(0, 1e300).Draw(t, "chi2"), VelocityFrame: anyText.Draw(t, "frame"), BaryVelocity: big.Draw(t, "bary"),
		Reason: "x" + anyText.Draw(t, "reason"), InputDigest: anyText.Draw(t, "digest"), Magnitude: anyNumber(-50, 100).Draw(t, "magnitude")}
	if rapid.Bool().Draw(t, "placed") {
		o.RA, o.Dec = rapid.Float64Range(0, 360).Draw(t, "ra"), rapid.Float64Range(-90, 90).Draw(t, "dec")
	}
	if !math.IsNaN(o.Redshift) && !o.Flags.Has(Unreadable) {
		o.Verdict = rapid.SampledFrom(Verdicts()).Draw(t, "verdict")
	}
	return o
}

func drawLine(t *rapid.T) Line {
	big, size := anyNumber(-1e300, 1e300), anyNumber(0, 1e300)
	return Line{ObjectID: "x" + anyText.Draw(t, "id"), Line: "x" + anyText.Draw(t, "line"), RestWave: rapid.Float64Range(1, 1e6).Draw(t, "wave"),
		Kind: anyText.Draw(t, "kind"), EWRest: big.Draw(t, "ew"), EWRestErr: size.Draw(t, "ewe"), EWSum: big.Draw(t, "ews"),
		EWSumErr: size.Draw(t, "ewse"), Flux: big.Draw(t, "flux"), FluxErr: size.Draw(t, "fluxe"), OffsetKms: big.Draw(t, "off"),
		OffsetErr: size.Draw(t, "offe"), WidthKms: size.Draw(t, "width"), WidthErr: size.Draw(t, "widthe"), SNR: big.Draw(t, "snr"),
		Continuum: big.Draw(t, "cont"), UpperLimit: size.Draw(t, "limit"), Blend: anyText.Draw(t, "blend"),
		Pixels: rapid.Int32Min(0).Draw(t, "pixels")}
}

func TestFlags(t *testing.T) {
	// Bits and names are a promise to readers of old catalogs: this list
	// repeats the published table and must only ever grow.
	for bit, want := range map[Flags]string{Unreadable: "unreadable", FewPixels: "few_pixels", Faint: "faint", Tied: "tied",
		RangeEnd: "range_end", LoneLine: "lone_line", Misfit: "misfit", LinesUnseen: "lines_unseen", LinesMissing: "lines_missing",
		BelowZero: "below_zero", Scattered: "scattered", OnSkyLine: "on_sky_line", FrameAssumed: "frame_assumed",
		NoiseEstimated: "noise_estimated", WeightsSuspect: "weights_suspect",
		Normalized: "normalized", OutsideLimits: "outside_limits", Unexplained: "unexplained",
		FewLines: "few_lines", LowConfidence: "low_confidence"} {
		if got := bit.String(); got != want {
			t.Errorf("Flags(%d) = %q, want %q", bit, got, want)
		}
	}
	if Unreadable != 1 || WeightsSuspect != 1<<14 || Normalized != 1<<15 || OutsideLimits != 1<<16 || Unexplained != 1<<17 || FewLines != 1<<18 || LowConfidence != 1<<19 || knownFlags != 1<<20-1 {
		t.Errorf("bits moved: unreadable %d, normalized %d, unexplained %d, few_lines %d, low_confidence %d, all %d", Unreadable, Normalized, Unexplained, FewLines, LowConfidence, knownFlags)
	}
	if got := Flags(0); got.String() != "" || got.Names() != nil {
		t.Errorf("no flag: %q, %q", got.String(), got.Names())
	}
	if got := (Tied | 1<<20).String(); got != "tied|bit_20" {
		t.Errorf("undefined bit: %q", got)
	}
	if got := (Tied | Faint | Normalized).String(); got != "faint|tied|normalized" {
		t.Errorf("names %q", got)
	}
}

func TestCheckAcceptsSound(t *testing.T) {
	for _, o := range someObjects() {
		if err := Check(&o); err != nil {
			t.Error(err)
		}
	}
	for _, l := range someLines() {
		if err := Check(&l); err != nil {
			t.Error(err)
		}
	}
}

func TestCheckNamesWhatIsBroken(t *testing.T) {
	for want, spoil := range map[string]func(*Object){
		"object_id":      func(o *Object) { o.ObjectID = "" },
		"source_row":     func(o *Object) { o.SourceRow = -1 },
		"ra":             func(o *Object) { o.RA = 360.1 },
		"dec":            func(o *Object) { o.Dec = -91 },
		"ra and dec":     func(o *Object) { o.Dec = nan },
		"class":          func(o *Object) { o.Class = "comet" },
		"verdict":        func(o *Object) { o.Verdict = "" },
		"flags":          func(o *Object) { o.Flags = knownFlags + 1 },
		"redshift":       func(o *Object) { o.Redshift = -1 },
		"rival_redshift": func(o *Object) { o.RivalRedshift = -2 },
		"redshift_err":   func(o *Object) { o.RedshiftErr = -1e-9 },
		"confidence":     func(o *Object) { o.Confidence = 1.01 },
		"secure without": func(o *Object) { o.Redshift = nan },
		"lines_seen":     func(o *Object) { o.LinesSeen = -1 },
		"pixels_used":    func(o *Object) { o.PixelsUsed = -1 },
		"wave_min":       func(o *Object) { o.WaveMin = 99999 },
		"chi2_dof":       func(o *Object) { o.Chi2Dof = -1 },
		"gap":            func(o *Object) { o.Gap = math.Inf(1) },
		"unreadable":     func(o *Object) { o.Flags = Unreadable },
	} {
		o := someObjects()[0]
		spoil(&o)
		if err := Check(&o); !errors.Is(err, ErrRow) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: error %v", want, err)
		}
	}
	for want, spoil := range map[string]func(*Line){
		"object_id":   func(l *Line) { l.ObjectID = "" },
		"line":        func(l *Line) { l.Line = "" },
		"rest_wave":   func(l *Line) { l.RestWave = nan },
		"ew_rest":     func(l *Line) { l.EWRest = math.Inf(-1) },
		"ew_rest_err": func(l *Line) { l.EWRestErr = -1 },
		"ew_sum_err":  func(l *Line) { l.EWSumErr = -1 },
		"flux_err":    func(l *Line) { l.FluxErr = -1 },
		"offset_err":  func(l *Line) { l.OffsetErr = -1 },
		"width_kms":   func(l *Line) { l.WidthKms = -1 },
		"width_err":   func(l *Line) { l.WidthErr = -1 },
		"upper_limit": func(l *Line) { l.UpperLimit = -1 },
		"pixels":      func(l *Line) { l.Pixels = -1 },
	} {
		l := someLines()[0]
		spoil(&l)
		if err := Check(&l); !errors.Is(err, ErrRow) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: error %v", want, err)
		}
	}
}

func TestCleanText(t *testing.T) {
	for in, want := range map[string]string{
		"":                        "",
		`plain \n stays`:          `plain \n stays`,
		"caf\u00e9 \u661f \u00a0": "caf\u00e9 \u661f \u00a0",
		"a\nb\tc\r\x00\x1b\x7f":   `a\nb\tc\r\x00\x1b\x7f`,
		"\u0085 bad\xff\xc3":      `\u0085 bad\xff\xc3`,
	} {
		if got := CleanText(in); got != want {
			t.Errorf("CleanText(%q) = %q, want %q", in, got, want)
		}
	}
	rapid.Check(t, func(t *rapid.T) {
		s := CleanText(anyText.Draw(t, "text"))
		if again := CleanText(s); again != s {
			t.Errorf("cleaning twice: %q then %q", s, again)
		}
	})
}

// The order of the columns is published; a reader may count on it.
func TestColumnOrder(t *testing.T) {
	names := func(columns []Column) string {
		var out []string
		for _, c := range columns {
			out = append(out, c.Name)
		}
		return strings.Join(out, " ")
	}
	const objects = "object_id source_file source_row ra dec class family redshift redshift_err confidence verdict flags flag_names " +
		"rival_redshift rival_family gap r_stat lines_seen snr pixels_used wave_min wave_max chi2_dof velocity_frame bary_velocity " +
		"reason input_digest flux_unit magnitude"
	const lines = "object_id line rest_wave kind ew_rest ew_rest_err ew_sum ew_sum_err flux flux_err offset_kms offset_err width_kms " +
		"width_err snr continuum upper_limit blend pixels reason h3 h3_err h4 h4_err lorentz_kms lorentz_err"
	if got := names(objectColumnsTold()); got != objects {
		t.Errorf("object columns: %s", got)
	}
	if got := names(lineColumnsTold()); got != lines {
		t.Errorf("line columns: %s", got)
	}
}

// Every field of a row has a column of its own: none is forgotten, none is
// pointed to twice.
func TestColumnsCoverFields(t *testing.T) {
	check := func(name string, fields []any, want int) {
		var seen []string
		for _, f := range fields {
			seen = append(seen, fmt.Sprintf("%p", f))
		}
		slices.Sort(seen)
		if got := len(slices.Compact(seen)); got != want {
			t.Errorf("%s: columns reach %d fields of %d", name, got, want)
		}
	}
	var o Object
	var fields []any
	for _, c := range objectColumns() {
		fields = append(fields, c.field(&o))
	}
	check("Object", fields, 28) // 29 columns, flags and flag_names share a field
	var l Line
	fields = nil
	for _, c := range lineColumns() {
		fields = append(fields, c.field(&l))
	}
	check("Line", fields, 26)
}
