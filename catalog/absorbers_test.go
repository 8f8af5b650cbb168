package catalog

import (
	"errors"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func someAbsorbers() []Absorber {
	damped := Absorber{ObjectID: "lr-20310314-p03-118", ZAbs: 2.4291234, ZAbsErr: 0.000123, LogNHI: 20.625, LogNHIErr: 0.0625,
		BKms: nan, BErr: nan, LinesUsed: "Lya+Lyb", Flags: FlatPart | Overlaps, Kind: Hydrogen, EWRest: 15.5, EWRestErr: 0.5,
		EWSecond: nan, EWSecondErr: nan, Significance: 31.25}
	doublet := Absorber{ObjectID: "lr-20310314-p03-118", ZAbs: 0.75, ZAbsErr: 0.00005, LogNHI: nan, LogNHIErr: nan, BKms: nan, BErr: nan,
		LinesUsed: "MgII_2796+MgII_2803", Kind: MgII, EWRest: 1.25, EWRestErr: 0.125, EWSecond: 0.875, EWSecondErr: 0.125, Significance: 9.5}
	return []Absorber{damped, doublet}
}

func drawAbsorber(t *rapid.T) Absorber {
	big, size := anyNumber(-1e300, 1e300), anyNumber(0, 1e300)
	return Absorber{ObjectID: "x" + anyText.Draw(t, "id"), ZAbs: rapid.Float64Range(-0.5, 20).Draw(t, "z"), ZAbsErr: size.Draw(t, "ze"),
		LogNHI: anyNumber(0, 30).Draw(t, "n"), LogNHIErr: size.Draw(t, "ne"), BKms: size.Draw(t, "b"), BErr: size.Draw(t, "be"),
		LinesUsed: "x" + anyText.Draw(t, "lines"), Flags: AbsorberFlags(rapid.Uint32Range(0, uint32(knownAbsorberFlags)).Draw(t, "flags")),
		Kind: rapid.SampledFrom(AbsorberKinds()).Draw(t, "kind"), EWRest: big.Draw(t, "ew"), EWRestErr: size.Draw(t, "ewe"),
		EWSecond: big.Draw(t, "ew2"), EWSecondErr: size.Draw(t, "ew2e"), Significance: big.Draw(t, "s")}
}

func TestAbsorberRoundTrips(t *testing.T) {
	t.Run("CSV", rapid.MakeCheck(func(t *rapid.T) { csvRoundTrip(t, drawAbsorber) }))
	t.Run("Parquet", rapid.MakeCheck(func(t *rapid.T) { parquetRoundTrip(t, drawAbsorber) }))
}

func TestAbsorberCheck(t *testing.T) {
	for i, a := range someAbsorbers() {
		if err := Check(&a); err != nil {
			t.Errorf("row %d: %v", i, err)
		}
	}
	for want, breakIt := range map[string]func(*Absorber){
		"object_id":   func(a *Absorber) { a.ObjectID = "" },
		"z_abs":       func(a *Absorber) { a.ZAbs = nan },
		"z_abs_err":   func(a *Absorber) { a.ZAbsErr = -1 },
		"log_nhi":     func(a *Absorber) { a.LogNHI = 31 },
		"kind":        func(a *Absorber) { a.Kind = "metal" },
		"lines_used":  func(a *Absorber) { a.LinesUsed = "" },
		"flags":       func(a *Absorber) { a.Flags = 1 << 30 },
		"b_kms":       func(a *Absorber) { a.BKms = -1 },
		"ew_rest_err": func(a *Absorber) { a.EWRestErr = -1 },
	} {
		a := someAbsorbers()[0]
		breakIt(&a)
		if err := Check(&a); !errors.Is(err, ErrRow) || !strings.Contains(err.Error(), want) {
			t.Errorf("%s broken: error %v", want, err)
		}
	}
}

// Bits, names and order of columns are published.
func TestAbsorberNames(t *testing.T) {
	const flags = "flat_part|poor_fit|at_bound|one_line|break_only|lower_limit|overlaps|ratio_off|saturated|proximate|in_forest|partly_hidden"
	if got := knownAbsorberFlags.String(); got != flags {
		t.Errorf("flags: %s", got)
	}
	if PartlyHidden != 1<<11 || FlatPart != 1 {
		t.Errorf("bits moved: %d, %d", FlatPart, PartlyHidden)
	}
	const columns = "object_id z_abs z_abs_err log_nhi log_nhi_err b_kms b_err lines_used flags flag_names kind ew_rest ew_rest_err " +
		"ew_second ew_second_err significance"
	var names []string
	for _, c := range absorberColumnsTold() {
		names = append(names, c.Name)
	}
	if got := strings.Join(names, " "); got != columns {
		t.Errorf("columns: %s", got)
	}
}
