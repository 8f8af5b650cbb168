package lines

import (
	"bytes"
	"encoding/json"
	"math/rand/v2"
	"os"
	"os/exec"
	"testing"

	"duskline/internal/outside"
)

// fitScript fits two Gaussians of one offset and width plus a straight line to
// the pixels on its input and prints parameters and errors. It integrates over
// the pixels by differences of the error function.
const fitScript = `
import sys, json
import numpy as np
from scipy.optimize import curve_fit
from scipy.special import erf
d = json.load(sys.stdin)
lo, hi, y, s = (np.array(d[k]) for k in ("lo", "hi", "y", "s"))
mid, half, lam0 = d["mid"], d["half"], d["lam0"]
c = 299792.458
def model(x, a, b, v, w, p, q):
    f = p + q * (0.5 * (lo + hi) - mid) / half
    for flux, l in ((a, lam0[0]), (b, lam0[1])):
        mu, sg = l * (1 + v / c), l * w / c * np.sqrt(2)
        f = f + flux * 0.5 * (erf((hi - mu) / sg) - erf((lo - mu) / sg)) / (hi - lo)
    return f
p, cov = curve_fit(model, y, y, p0=d["start"], sigma=s, absolute_sigma=True, xtol=1e-12, ftol=1e-12, gtol=1e-12)
json.dump({"p": list(p), "e": list(np.sqrt(np.diag(cov)))}, sys.stdout)
`

// The fit of a tied pair must agree with scipy.optimize.curve_fit on the same
// pixels, values and errors. Both minimize the same sum but for a prior of 100
// on the straight line, and stop within 1e-2 of an error; covariances are taken
// a hair apart.
func TestAgainstScipy(t *testing.T) {
	cmd := exec.Command(outside.Python(t, "scipy.optimize"), "-c", fitScript)
	m := parse(t, `
[[line]]
name = "A"
ion = "X I"
wave = 5000.0
group = "AB"
seen = "both"
source = "invented"
[[line]]
name = "B"
ion = "X I"
wave = 5012.0
group = "AB"
seen = "both"
source = "invented"
`)
	clean := newArm(grid(5006, 50, 161), 1, 0.05, profileTruth{5000.5, 2.5, 8}, profileTruth{5012.5, 2.5, 4})
	var a Arm
	noisy(&a, clean, rand.New(rand.NewPCG(11, 12)))
	a.ContErr = make([]float64, len(a.Wave))
	for i := range a.ContErr {
		a.ContErr[i] = 100
	}
	// The window covers the whole of the arm.
	res := m.Measure(nil, []Arm{a}, Options{WindowKms: 5000}, nil)
	in := map[string]any{"lam0": []float64{5000, 5012}, "start": []float64{6, 3, 0, 120, 0, 0}}
	var lo, hi, y, s []float64
	for i := range a.Wave {
		p, q := pixelEdges(a.Wave, i)
		lo, hi, y, s = append(lo, p), append(hi, q), append(y, a.Flux[i]-1), append(s, 0.05)
	}
	in["lo"], in["hi"], in["y"], in["s"] = lo, hi, y, s
	in["mid"], in["half"] = 5006.0, 60.0
	text, err := json.Marshal(in)
	if err != nil {
		t.Fatal(err)
	}
	cmd.Stdin = bytes.NewReader(text)
	cmd.Stderr = os.Stderr
	reply, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	var fit struct{ P, E []float64 }
	if err := json.Unmarshal(reply, &fit); err != nil {
		t.Fatal(err)
	}
	got := []float64{res[0].Flux, res[1].Flux, res[0].OffsetKms, res[0].WidthKms}
	gotErr := []float64{res[0].FluxErr, res[1].FluxErr, res[0].OffsetErr, res[0].WidthErr}
	for i, name := range []string{"flux of A", "flux of B", "offset", "width"} {
		near(t, name, got[i], fit.P[i], 0.02*fit.E[i])
		near(t, "error of "+name, gotErr[i], fit.E[i], 0.01*fit.E[i])
	}
}
