package linelist_test

import (
	"math"
	"slices"
	"strings"
	"testing"

	"duskline/configs"
	"duskline/hydrogen"
	"duskline/internal/checkvalues"
	"duskline/linelist"
)

func builtIn(t *testing.T) *linelist.List {
	t.Helper()
	list, err := linelist.Parse(configs.Lines())
	if err != nil {
		t.Fatal(err)
	}
	return list
}

// The built-in list is in order, has distinct names, and finds every line.
func TestBuiltInList(t *testing.T) {
	list := builtIn(t)
	lines := list.Lines()
	if len(lines) < 90 {
		t.Errorf("%d lines, configs/lines.toml has more than 90", len(lines))
	}
	for i, l := range lines {
		if i > 0 && l.Wave < lines[i-1].Wave {
			t.Errorf("%s stands after %s", l.Name, lines[i-1].Name)
		}
		if found, ok := list.Find(l.Name); !ok || found != l {
			t.Errorf("Find(%q) = %+v, %v", l.Name, found, ok)
		}
		if l.Source == "" || l.Ion == "" {
			t.Errorf("%s: source %q, ion %q", l.Name, l.Source, l.Ion)
		}
	}
	if _, ok := list.Find("Ha "); ok {
		t.Error("found a line that is not there")
	}
}

// Lines that are fitted together belong together: no group is wider than the
// broadest blend that can be told apart no more, 12,000 km/s (Lyman alpha with
// N V: 6,700).
func TestGroupsAreClose(t *testing.T) {
	first := map[string]linelist.Line{}
	members := map[string]int{}
	for _, l := range builtIn(t).Lines() {
		if l.Group == "" {
			continue
		}
		members[l.Group]++
		if f, ok := first[l.Group]; !ok {
			first[l.Group] = l
		} else if v := 299792.458 * math.Log(l.Wave/f.Wave); v > 12000 {
			t.Errorf("group %s: %s and %s are %.0f km/s apart", l.Group, f.Name, l.Name, v)
		}
	}
	for group, n := range members {
		if n < 2 {
			t.Errorf("group %s has a single line, %s", group, first[group].Name)
		}
	}
}

type published struct {
	ion, label   string
	wave, memory float64
	used         bool
}

// readWavelengths reads testdata/wavelengths.csv, whose comment and column
// vac_A_source name the sources.
func readWavelengths(t *testing.T) []*published {
	t.Helper()
	var rows []*published
	for _, rec := range checkvalues.Rows(t, "testdata/wavelengths.csv")[1:] {
		rows = append(rows, &published{ion: rec[0], label: rec[1], wave: checkvalues.Number(t, rec[2]), memory: checkvalues.Number(t, rec[3])})
	}
	return rows
}

// Every line that is not computed agrees with both columns of the table within
// 5 km/s, the largest disagreement of the table's own columns (O VI 1031, 4.1
// km/s), and every row of the table is in the list.
func TestWavelengths(t *testing.T) {
	const tol = 5.0
	rows := readWavelengths(t)
	if len(rows) < 70 {
		t.Fatalf("only %d rows", len(rows))
	}
	kms := func(a, b float64) float64 { return 299792.458 * math.Abs(a/b-1) }
	for _, l := range builtIn(t).Lines() {
		if l.Ion == "H I" {
			continue
		}
		var best *published
		for _, p := range rows {
			if p.ion == l.Ion && (best == nil || kms(l.Wave, p.wave) < kms(l.Wave, best.wave)) {
				best = p
			}
		}
		if best == nil {
			t.Errorf("%s: the table has no line of %s", l.Name, l.Ion)
			continue
		}
		if best.used {
			t.Errorf("%s: two lines match %s %s", l.Name, best.ion, best.label)
		}
		best.used = true
		if a, b := kms(l.Wave, best.wave), kms(l.Wave, best.memory); a > tol || b > tol {
			t.Errorf("%s at %.4f is %.1f and %.1f km/s from the table's %.4f and %.4f", l.Name, l.Wave, a, b, best.wave, best.memory)
		}
	}
	for _, p := range rows {
		if !p.used {
			t.Errorf("%s %s of the table is not in the list", p.ion, p.label)
		}
	}
}

// Rare lines are not among those that are measured, and no line of the list lies within 50 km/s of one: it
// would be the same. Their air wavelengths are from memory, to 0.5 Angstrom (25 km/s).
func TestRareLines(t *testing.T) {
	list := builtIn(t)
	if len(list.Rare()) < 16 {
		t.Errorf("%d rare lines, configs/lines.toml has 16", len(list.Rare()))
	}
	last := 0.0
	for _, r := range list.Rare() {
		if _, ok := list.Find(r.Name); ok {
			t.Errorf("%s is found among the lines that are measured", r.Name)
		}
		if r.Wave < last {
			t.Errorf("%s is out of order", r.Name)
		}
		last = r.Wave
		for _, l := range list.Lines() {
			if math.Abs(l.Wave/r.Wave-1)*299792.458 < 50 {
				t.Errorf("%s is %s", r.Name, l.Name)
			}
		}
	}
	for _, c := range []struct {
		name string
		air  float64 // Angstrom, NIST ASD, from memory
	}{{"NI_5198", 5197.90}, {"FeVII_6087", 6087.0}, {"FeX_6374", 6374.5}, {"OII_7320", 7319.99}, {"FeXI_7892", 7891.8}} {
		k := slices.IndexFunc(list.Rare(), func(l linelist.Line) bool { return l.Name == c.name })
		// Vacuum wavelengths are longer by a factor of 1.000276 to 1.000279 from 5,000 to 8,000 Angstrom (Ciddor 1996).
		if k < 0 || math.Abs(list.Rare()[k].Wave/c.air-1.0002775) > 1e-4 {
			t.Errorf("%s is not at %g in air", c.name, c.air)
		}
	}
}

// The brightest lines of the night sky are there: [O I], sodium, mercury, and those of OH (Osterbrock et al. 1996, PASP 108, 277, from memory, air
// wavelengths; mercury NIST, from memory). An angstrom is half the width of a line at R = 2000, and OH lines are blends of two.
func TestNightSky(t *testing.T) {
	night := builtIn(t).Night()
	for _, air := range []float64{4358.33, 5460.74, 5577.34, 5889.95, 5895.92, 6300.30, 6363.78, 6863.96, 7276.41, 7340.89, 7750.64, 7794.11, 7821.50, 7913.71,
		7964.65, 7993.33, 8344.60, 8399.17, 8430.17, 8465.36, 8827.10, 8885.85, 8919.64, 8958.08, 9375.96, 9439.67, 9476.9, 9791.4} {
		want := air * (1 + 2.77e-4) // Ciddor 1996, within 3e-6 from 4300 to 10000 Angstrom
		k, _ := slices.BinarySearch(night, want)
		near := math.Inf(1)
		for _, i := range []int{k - 1, k} {
			if i >= 0 && i < len(night) {
				near = math.Min(near, math.Abs(night[i]-want))
			}
		}
		if near > 1 {
			t.Errorf("no line within an angstrom of %.2f, %.1f away", want, near)
		}
	}
}

// Gas of our Galaxy is strong in Ca II and Na I in the optical.
func TestGalacticLines(t *testing.T) {
	var names []string
	for _, l := range builtIn(t).Lines() {
		if l.Galactic {
			names = append(names, l.Name)
		}
	}
	if want := []string{"CaII_K", "CaII_H", "NaI_D2", "NaI_D1"}; !slices.Equal(names, want) {
		t.Errorf("galactic lines are %v, want %v", names, want)
	}
}

// Hydrogen is computed: the rows carry what package hydrogen says, exactly.
func TestHydrogenRows(t *testing.T) {
	list := builtIn(t)
	numbers := map[string][2]int{
		"Lya": {1, 2}, "Lyb": {1, 3}, "Lyg": {1, 4}, "Lyd": {1, 5}, "Lye": {1, 6}, "Ly6": {1, 7}, "Ly7": {1, 8},
		"Ha": {2, 3}, "Hb": {2, 4}, "Hg": {2, 5}, "Hd": {2, 6}, "H7": {2, 7}, "H8": {2, 8}, "H9": {2, 9}, "H10": {2, 10},
		"H11": {2, 11}, "H12": {2, 12},
		"Paa": {3, 4}, "Pab": {3, 5}, "Pag": {3, 6}, "Pad": {3, 7}, "Pa8": {3, 8}, "Pa9": {3, 9},
		"Pa10": {3, 10}, "Pa11": {3, 11}, "Pa12": {3, 12}, "Pa13": {3, 13}, "Pa14": {3, 14}, "Pa15": {3, 15}, "Pa16": {3, 16},
	}
	for _, l := range list.Lines() {
		if l.Ion != "H I" {
			continue
		}
		n, ok := numbers[l.Name]
		if !ok {
			t.Errorf("%s: not a name of this test", l.Name)
			continue
		}
		delete(numbers, l.Name)
		tr, err := hydrogen.NewTransition(n[0], n[1])
		if err != nil {
			t.Fatal(err)
		}
		if l.Wave != tr.Wave || l.F != tr.F || l.Gamma != tr.Gamma {
			t.Errorf("%s: %v, %v, %v, want %v, %v, %v", l.Name, l.Wave, l.F, l.Gamma, tr.Wave, tr.F, tr.Gamma)
		}
	}
	for name := range numbers {
		t.Errorf("no hydrogen line %s", name)
	}
}

func TestDigest(t *testing.T) {
	text := configs.Lines()
	a, err := linelist.Parse(text)
	if err != nil {
		t.Fatal(err)
	}
	b, err := linelist.Parse(slices.Clone(text))
	if err != nil {
		t.Fatal(err)
	}
	c, err := linelist.Parse(append(slices.Clone(text), "# another comment\n"...))
	if err != nil {
		t.Fatal(err)
	}
	if a.Digest() != b.Digest() || len(a.Digest()) != 16 {
		t.Errorf("digests %q and %q of the same text, want 16 equal digits", a.Digest(), b.Digest())
	}
	if a.Digest() == c.Digest() {
		t.Errorf("another text has the same digest %q", c.Digest())
	}
	// SHA-256 of the text below by sha256sum (GNU coreutils 9.1), first 16 digits.
	d, err := linelist.Parse([]byte("hydrogen = [{ name = \"Ha\", lower = 2, upper = 3, seen = \"both\" }]\n"))
	if err != nil {
		t.Fatal(err)
	}
	if want := "016c18a7ec81f61f"; d.Digest() != want {
		t.Errorf("digest %q, want %q", d.Digest(), want)
	}
}

const goodLine = `
[[line]]
name = "X_5000"
ion = "X I"
wave = 5000.0
seen = "both"
source = "invented"
`

func TestParseRefuses(t *testing.T) {
	line := func(old, replacement string) string { return strings.Replace(goodLine, old, replacement, 1) }
	for _, c := range []struct {
		name, text string
		want       []string // all in the error
	}{
		{"nothing", "", []string{"no lines"}},
		{"not TOML", "[[line]\n", []string{"line list"}},
		{"unknown key", line("seen", "sight"), []string{"unknown keys", "sight"}},
		{"no name", line(`name = "X_5000"`, ``), []string{"X I", "5000", "no name"}},
		{"twice", goodLine + goodLine, []string{"X_5000", "twice"}},
		{"wave in nanometers of X-rays", line("5000.0", "5.0"), []string{"X_5000", "wave = 5", "100 and 1e6"}},
		{"wave not a number", line("5000.0", "nan"), []string{"X_5000", "wave = NaN"}},
		{"wave without end", line("5000.0", "inf"), []string{"X_5000", "wave = +Inf"}},
		{"negative f", line(`seen`, "f = -0.1\nseen"), []string{"X_5000", "not negative"}},
		{"f not a number", line(`seen`, "f = nan\nseen"), []string{"X_5000", "not negative"}},
		{"negative gamma", line(`seen`, "gamma = -1.0\nseen"), []string{"X_5000", "not negative"}},
		{"gamma not a number", line(`seen`, "gamma = nan\nseen"), []string{"X_5000", "not negative"}},
		{"f without end", line(`seen`, "f = inf\nseen"), []string{"X_5000", "f = +Inf"}},
		{"unknown seen", line(`"both"`, `"sometimes"`), []string{"X_5000", `seen = "sometimes"`, "emission, absorption or both"}},
		{"source is missing", line(`source = "invented"`, ``), []string{"X_5000", "source is missing"}},
		{"hydrogen upside down", `hydrogen = [{ name = "Q", lower = 3, upper = 2, seen = "both" }]`, []string{`"Q"`}},
		{"hydrogen level zero", `hydrogen = [{ name = "Q", lower = 0, upper = 2, seen = "both" }]`, []string{`"Q"`}},
		{"a hydrogen name again", `hydrogen = [{ name = "X_5000", lower = 2, upper = 3, seen = "both" }]` + goodLine, []string{"X_5000", "twice"}},
		{"a rare line by the name of another", goodLine + strings.Replace(goodLine, "line", "rare", 1), []string{"X_5000", "twice"}},
		{"a rare line without a source", goodLine + strings.Replace(strings.ReplaceAll(line(`source = "invented"`, ``), "X_5000", "Y"), "line", "rare", 1), []string{`"Y"`, "source is missing"}},
		{"a night sky without a source", goodLine + "[night]\nlines = [5578.9]\n", []string{"night", "source is missing"}},
		{"a night sky out of order", goodLine + "[night]\nsource = \"invented\"\nlines = [6302.0, 5578.9]\n", []string{"night", "line 2", "5578.9"}},
		{"a night sky of nothing", goodLine + "[night]\nsource = \"invented\"\nlines = [nan]\n", []string{"night", "line 1", "NaN"}},
		{"several at once", line("5000.0", "-1.0") + strings.ReplaceAll(line(`"both"`, `"no"`), "X_5000", "Y") + `
[[hydrogen]]
name = "Q"
lower = 4
upper = 4
seen = "both"
`, []string{"X_5000", "wave = -1", `"Y"`, `seen = "no"`, `"Q"`}},
	} {
		list, err := linelist.Parse([]byte(c.text))
		if err == nil {
			t.Errorf("%s: accepted %d lines", c.name, len(list.Lines()))
			continue
		}
		for _, want := range c.want {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%s: the error does not say %q:\n%v", c.name, want, err)
			}
		}
	}
	if _, err := linelist.Parse([]byte(goodLine)); err != nil {
		t.Errorf("the line that the cases above break: %v", err)
	}
}

// A line with two faults is reported with both.
func TestParseReportsEveryProblemOfALine(t *testing.T) {
	text := strings.NewReplacer("5000.0", "-1.0", `"both"`, `"no"`, "seen", "f = -1.0\nseen", `"invented"`, `""`).Replace(goodLine)
	_, err := linelist.Parse([]byte(text))
	if err == nil {
		t.Fatal("accepted")
	}
	for _, want := range []string{"wave = -1", "not negative", `seen = "no"`, "source is missing"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("the error does not say %q:\n%v", want, err)
		}
	}
}
