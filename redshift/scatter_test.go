package redshift

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
)

// A group of lines that is displaced moves the least-squares redshift by what
// lineDoubt says, found here by trying redshifts on spectra made with the
// displacement.
func TestLineDoubtAgainstDisplacedLines(t *testing.T) {
	r := rand.New(rand.NewPCG(7, 1))
	for trial := range 20 {
		const n = 2000
		var s Scratch
		s.full = *bareLevel(n)
		l := &s.full
		f := &Family{ZMin: -0.1, ZMax: 0.1}
		names := []string{"a", "b", "c", "d"}
		for c := range 2 {
			comp := component{absorption: c == 1, scale: 1}
			for k := range 2 {
				comp.terms = append(comp.terms, term{name: names[2*c+k], amp: 0.3 + r.Float64(), width: kmsPixel * (4 + 20*r.Float64()),
					logWave: logWaveAt(l, 300+900*float64(c)+450*float64(k)+100*r.Float64())})
			}
			f.components = append(f.components, comp)
		}
		for i := range n {
			l.weight[i], l.cont[i] = 0.5+r.Float64(), 1+0.3*math.Sin(float64(i)/200)
		}
		moved := []string{"b", "c"}
		const by = 0.1 // pixels
		f.scatters = []ScatterRecipe{{Lines: moved, Kms: by * kmsPixel}}
		p := peak{family: f, width: 300}
		p.fit.amp = [maxComponents]float64{0.5 + r.Float64(), 0.5 + r.Float64()}
		model := func(shift, moved float64) []float64 {
			out := make([]float64, n)
			for c, comp := range f.components {
				for k, q := range comp.terms {
					at := (q.logWave-l.start)/l.step + shift
					if 2*c+k == 1 || 2*c+k == 2 {
						at += moved
					}
					for i := range out {
						v := p.fit.amp[c] * gaussianAt(i, at, q.width/kmsPixel, q.amp)
						if comp.absorption {
							v *= -l.cont[i]
						}
						out[i] += v
					}
				}
			}
			return out
		}
		data := model(0, by)
		chi2 := func(shift float64) float64 {
			sum := 0.0
			for i, v := range model(shift, 0) {
				sum += l.weight[i] * (data[i] - v) * (data[i] - v)
			}
			return sum
		}
		// The vertex of a parabola, again about itself.
		at, h := 0.0, 0.1
		for range 3 {
			a, b, c := chi2(at-h), chi2(at), chi2(at+h)
			at += 0.5 * h * (a - c) / (a - 2*b + c)
			h /= 4
		}
		// The derivative is a difference over a pixel of lines of 4 pixels and
		// more, and the response is linear to by/sigma.
		got := s.lineDoubt(&p) / kmsPixel
		if math.Abs(got-at) > 0.02*by {
			t.Errorf("trial %d: %.5f pixels, the fit moves by %.5f", trial, got, at)
		}
	}
}

// Two equal lines: one that wanders moves the redshift by half, both as one by
// the whole, both by themselves by the root of a half; none by nothing.
func TestLineDoubtOfGroups(t *testing.T) {
	var s Scratch
	s.full = *bareLevel(1000)
	f := &Family{components: []component{{scale: 1}}}
	for k, name := range []string{"a", "b"} {
		f.components[0].terms = append(f.components[0].terms, term{name: name, amp: 1, logWave: logWaveAt(&s.full, 300+400*float64(k))})
	}
	p := peak{family: f, width: 500}
	p.fit.amp[0] = 2
	for _, c := range []struct {
		groups []ScatterRecipe
		want   float64
	}{
		{nil, 0},
		{[]ScatterRecipe{{Lines: []string{"a"}, Kms: 700}}, 350},
		{[]ScatterRecipe{{Lines: []string{"a", "b"}, Kms: 700}}, 700},
		{[]ScatterRecipe{{Lines: []string{"a"}, Kms: 700}, {Lines: []string{"b"}, Kms: 700}}, 700 / math.Sqrt2},
	} {
		f.scatters = c.groups
		if got := s.lineDoubt(&p); math.Abs(got-c.want) > 1e-6*c.want {
			t.Errorf("%v: %.4f km/s, want %.4f", c.groups, got, c.want)
		}
	}
	p.fit.amp[0] = 0
	if got := s.lineDoubt(&p); got != 0 {
		t.Errorf("%g km/s without lines", got)
	}
}

func TestScatterRefusals(t *testing.T) {
	list := builtInLines(t)
	_, texts := builtInRecipes(t)
	text := string(texts["quasar.toml"])
	cut := strings.Index(text, "[[component]]")
	for _, c := range []struct{ add, want string }{
		{"[[scatter]]\nlines = [\"Nope\"]\nkms = 1.0\nsource = \"x\"\n", `lines: no line "Nope" in the line list`},
		{"[[scatter]]\nlines = []\nkms = 1.0\nsource = \"x\"\n", "lines is empty"},
		{"[[scatter]]\nlines = [\"Ha\"]\nkms = 1.0\nsource = \"x\"\n", "Ha stands in two groups"},
		{"[[scatter]]\nlines = [\"Pab\"]\nkms = 0.0\nsource = \"x\"\n", "kms = 0, want above 0"},
		{"[[scatter]]\nlines = [\"Pab\"]\nkms = nan\nsource = \"x\"\n", "kms = NaN, want above 0"},
		{"[[scatter]]\nlines = [\"Pab\"]\nkms = 10.0\n", "source is missing"},
	} {
		_, err := ParseRecipe("r.toml", []byte(text[:cut]+c.add+text[cut:]), list)
		if err == nil || !strings.Contains(err.Error(), c.want) || !strings.Contains(err.Error(), "r.toml: scatter ") {
			t.Errorf("%q: %v, want %q", c.add, err, c.want)
		}
	}
}
