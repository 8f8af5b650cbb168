package redshift

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"duskline/hydrogen"
)

const starkFamily = `name = "lamp"
class = "star"
summary = "for tests"
redshift = [-0.01, 0.01]
widths = [300.0]
expected = ["Hb"]

[[component]]
name = "glass"
kind = "absorption"
source = "computed"
width = 120.0
stark = { density = 2.0e15, temperature = 11000.0, strength = 1.5, upper = 14 }

[[component]]
name = "rim"
kind = "absorption"
source = "computed"
stark = { density = 2.0e15, temperature = 11000.0, strength = 1.5, upper = 14, jump = true }
`

func starkLamp(t testing.TB) *Family {
	t.Helper()
	f, err := ParseRecipe("lamp.toml", []byte(starkFamily), builtInLines(t))
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// What is drawn is the depth of the atmosphere, broadened by the width of the component or, without one,
// by that of the instrument, over its deepest place.
func TestStarkDrawsTheAtmosphere(t *testing.T) {
	f := starkLamp(t)
	star, err := hydrogen.NewBalmerAtmosphere(2e15, 11000, 1.5, 14)
	if err != nil {
		t.Fatal(err)
	}
	for c, part := range []struct {
		at          func(float64) float64
		sigma       float64
		first, last float64
	}{{star.Lines, 120, 3600, 7400}, {star.Jump, designSigma, 3000, 5000}} {
		broadened := func(wave float64) float64 {
			sum, norm := 0.0, 0.0
			for u := -5.0; u <= 5; u += 0.02 {
				g := math.Exp(-0.5 * u * u)
				sum += g * part.at(wave*math.Exp(u*part.sigma/speedOfLight))
				norm += g
			}
			return sum / norm
		}
		const n, start = 2000, 3.47
		step := (3.88 - start) / n
		shift := math.Log10(1 + 0.003)
		var d drawing
		f.components[c].draw(&d, n, start, step, shift, 300)
		want, most := make([]float64, n), 0.0
		for i := range want {
			want[i] = broadened(math.Pow(10, start+float64(i)*step-shift))
			most = math.Max(most, want[i])
		}
		for i, w := range want {
			wave := math.Pow(10, start+float64(i)*step-shift)
			if wave < part.first || wave > part.last {
				continue
			}
			// Linear interpolation of a core of 120 km/s over 69 km/s: (69/120)^2/8 = 4 % of what is
			// as narrow as that, here some tenths of a core. The deepest place may lie between two pixels of this test.
			if math.Abs(d.values[i]+w/most) > 0.015 {
				t.Fatalf("%s at %.2f Angstrom: %.4f, want %.4f", f.components[c].name, wave, d.values[i], -w/most)
			}
		}
	}
}

// The Gaussians that stand for the lines have their names, places and contrasts, and
// are not drawn on top of them.
func TestStarkStandIns(t *testing.T) {
	f := starkLamp(t)
	glass, rim := &f.components[0], &f.components[1]
	if len(rim.terms) != 0 || !rim.wide() || !glass.wide() {
		t.Errorf("the jump has %d lines", len(rim.terms))
	}
	var names []string
	for i := range glass.terms {
		q := &glass.terms[i]
		if q.name != "" {
			names = append(names, q.name)
			if l, _ := builtInLines(t).Find(q.name); math.Abs(l.Wave-pow10(q.logWave)) > 1e-6 {
				t.Errorf("%s stands at %.4f Angstrom, want %.4f", q.name, pow10(q.logWave), l.Wave)
			}
		}
		// The contrast to the places half-way to the neighbors, by the table.
		at := func(logWave float64) float64 {
			return -glass.dense.values[int(math.Round((logWave-tableStart)/tableStep))]
		}
		line, err := hydrogen.NewTransition(2, i+3)
		if err != nil {
			t.Fatal(err)
		}
		next, err := hydrogen.NewTransition(2, i+4)
		if err != nil {
			t.Fatal(err)
		}
		half := math.Min(standInReach, 0.5*math.Log10(line.Wave/next.Wave))
		contrast := at(q.logWave) - 0.5*(at(q.logWave-half)+at(q.logWave+half))
		// A Gaussian leaves out the tip of a line with wide wings.
		if !(q.amp > 0.6*contrast && q.amp < 1.3*contrast) {
			t.Errorf("2-%d: height %.3f, contrast %.3f", i+3, q.amp, contrast)
		}
	}
	if want := []string{"Ha", "Hb", "Hg", "Hd", "H7", "H8", "H9", "H10"}; len(names) < len(want) || !slices.Equal(names[:len(want)], want) {
		t.Errorf("lines %v, want %v", names, want)
	}
	bare := *glass
	bare.terms = nil
	var a, b drawing
	glass.draw(&a, 3000, 3.56, 1e-4, 0, 300)
	bare.draw(&b, 3000, 3.56, 1e-4, 0, 300)
	if !slices.Equal(a.values, b.values) {
		t.Error("the stand-ins are drawn")
	}
}

// A star drawn from the atmosphere itself is found, line by line; where it has
// no lines none is seen.
func TestStarkFound(t *testing.T) {
	f := starkLamp(t)
	finder := newTestFinder(t, []*Family{f})
	s := finder.NewScratch()
	star, err := hydrogen.NewBalmerAtmosphere(2e15, 11000, 1.5, 14)
	if err != nil {
		t.Fatal(err)
	}
	r := rand.New(rand.NewPCG(7, 1))
	const z, snr = 0.0021, 30.0
	for _, strength := range []float64{1, 0} {
		g := blank(4000)
		for i := range g.Flux {
			wave := math.Pow(10, g.LogWave(i)) / (1 + z)
			g.Flux[i] = 1 - strength*star.Lines(wave) + r.NormFloat64()/snr
			g.Ivar[i] = snr * snr
		}
		res := finder.Find(g, s)
		if strength == 0 {
			if res.LinesSeen > 0 {
				t.Errorf("%d lines seen in noise", res.LinesSeen)
			}
			continue
		}
		if v := velocity(res.Redshift, z); !(v < 20) || res.LinesSeen < 6 || res.LinesMissing > 0 {
			t.Errorf("off by %.1f km/s, %d lines seen, %d missing", v, res.LinesSeen, res.LinesMissing)
		}
	}
}

func TestStarkRefused(t *testing.T) {
	list := builtInLines(t)
	for _, c := range []struct{ old, replacement, want string }{
		{"density = 2.0e15", "density = 0.0", "density = 0, want"},
		{"density = 2.0e15", "density = -1.0", "density = -1, want"},
		{"density = 2.0e15", "density = nan", "density = NaN, want"},
		{"density = 2.0e15, ", "", "density = 0, want"},
		{"temperature = 11000.0", "temperature = 11.0", "temperature = 11, want"},
		{"temperature = 11000.0", "temperature = inf", "temperature = +Inf, want"},
		{"strength = 1.5", "strength = -1.5", "strength = -1.5, want"},
		{"strength = 1.5, ", "", "strength = 0, want"},
		{"upper = 14", "upper = 2", "upper = 2, want 3 to 20"},
		{"upper = 14", "upper = 21", "upper = 21, want 3 to 20"},
		{"upper = 14", "upper = [14]", "line"},
		{"upper = 14", "uper = 14", "uper"},
		{`kind = "absorption"`, `kind = "emission"`, "kind must be absorption"},
	} {
		text := strings.Replace(starkFamily, c.old, c.replacement, 1)
		_, err := ParseRecipe("lamp.toml", []byte(text), list)
		if err == nil {
			t.Errorf("%s: accepted", c.replacement)
			continue
		}
		for _, want := range []string{"lamp.toml", `component "glass"`, c.want} {
			if !strings.Contains(err.Error(), want) {
				t.Errorf("%s: the error does not say %q:\n%v", c.replacement, want, err)
			}
		}
	}
}

func TestStarkView(t *testing.T) {
	f := starkLamp(t)
	v := f.View(300)
	glass, rim := v[0].Shapes[0], v[1].Shapes[0]
	if glass.Kind != "stark" || glass.Density != 2e15 || glass.Temperature != 11000 || glass.Strength != 1.5 || glass.Upper != 14 || glass.Width != 120 {
		t.Errorf("shown as %+v", glass)
	}
	if rim.Kind != "jump" || rim.Wave != hydrogen.BalmerLimit || rim.Width != designSigma {
		t.Errorf("shown as %+v", rim)
	}
	if ha := v[0].Shapes[1]; ha.Kind != "line" || ha.Name != "Ha" {
		t.Errorf("the first line is shown as %+v", ha)
	}
	if first, last := f.Span(300); !(first < 3650 && first > 3000 && last > 6564) {
		t.Errorf("spans %.0f to %.0f Angstrom", first, last)
	}
}

// Depths of helium in the recipes are those of a gray atmosphere (hydrogen.BalmerAtmosphere) in
// which a line absorbs eta times as much as the continuum at all depths: light comes from
// tau = (2/3)/(1 + eta), eta going as g f exp(-E/kT) lambda over the lambda^2 of the continuum.
// E in eV, g and f of He I from NIST, from memory; He II has the f of hydrogen.
func TestHeliumDepths(t *testing.T) {
	type line struct{ wave, g, f, e float64 }
	neutral := []line{{3889.749, 3, 0.0645, 19.8196}, {4027.328, 9, 0.0474, 20.9641}, {4389.16, 3, 0.0436, 21.2180}, {4472.734, 9, 0.1229, 20.9641},
		{4714.46, 9, 0.0118, 20.9641}, {4923.30, 3, 0.1203, 21.2180}, {5017.08, 1, 0.1514, 20.6158}, {5877.253, 9, 0.6102, 20.9641},
		{6679.995, 3, 0.7110, 21.2180}, {7067.142, 9, 0.0695, 20.9641}}
	var ion []line
	for _, q := range []struct {
		wave         float64
		lower, upper int
	}{{4687.0215, 3, 4}, {5413.03, 4, 7}} {
		h, err := hydrogen.NewTransition(q.lower, q.upper)
		if err != nil {
			t.Fatal(err)
		}
		n2 := float64(q.lower * q.lower)
		ion = append(ion, line{q.wave, 2 * n2, h.F, 54.418 * (1 - 1/n2)})
	}
	const kelvin = 8.617333e-5 // eV
	planck := func(wave, tau, tempK float64) float64 {
		temp := tempK * math.Pow(0.75*(tau*math.Pow(5500/wave, 2)+2.0/3), 0.25)
		return 1 / math.Expm1(1.438776877e8/(wave*temp))
	}
	for _, c := range []struct {
		family, component string
		lines             []line
		norm              float64 // wavelength of the line with ratio 1
		eta, tempK        float64
	}{
		{"helium", "helium", neutral, 4472.734, 1, 15000},
		{"helium", "saturated", neutral, 4472.734, 30, 15000},
		{"helium", "ions", ion, 4687.0215, 30, 40000},
		{"hot", "helium", neutral, 4472.734, 3, 20000},
		{"hot", "helium_ion", ion, 4687.0215, 30, 40000},
	} {
		families := builtInFamilies(t)
		f := families[slices.IndexFunc(families, func(f *Family) bool { return f.Name == c.family })]
		k := slices.IndexFunc(f.components, func(q component) bool { return q.name == c.component })
		if k < 0 {
			t.Fatalf("%s has no component %s", c.family, c.component)
		}
		opacity := func(q line) float64 { return q.g * q.f * math.Exp(-q.e/(kelvin*c.tempK)) / q.wave }
		depth := func(q, norm line) float64 {
			eta := c.eta * opacity(q) / opacity(norm)
			return 1 - planck(q.wave, 2.0/3/(1+eta), c.tempK)/planck(q.wave, 2.0/3, c.tempK)
		}
		norm := c.lines[slices.IndexFunc(c.lines, func(q line) bool { return q.wave == c.norm })]
		for _, q := range f.components[k].terms {
			i := slices.IndexFunc(c.lines, func(l line) bool { return math.Abs(l.wave/pow10(q.logWave)-1) < 1e-5 })
			if i < 0 {
				t.Errorf("%s, %s: a line at %.2f Angstrom", c.family, c.component, pow10(q.logWave))
				continue
			}
			// The recipes have two digits.
			if want := depth(c.lines[i], norm) / depth(norm, norm); math.Abs(q.amp-want) > 0.0055 {
				t.Errorf("%s, %s: %.2f Angstrom at a depth of %.3f, want %.3f", c.family, c.component, c.lines[i].wave, q.amp, want)
			}
		}
	}
}
