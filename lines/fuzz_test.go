package lines

import (
	"math"
	"math/rand/v2"
	"testing"
)

// FuzzMeasure throws broken spectra at the meter: whatever they hold, every
// line in the coverage has one row, and rows keep their promises.
func FuzzMeasure(f *testing.F) {
	for seed := range uint64(64) {
		f.Add(seed, uint16(300), 0.3, seed%2 == 0)
	}
	f.Add(uint64(99), uint16(1), 0.0, false)
	f.Add(uint64(98), uint16(2), 0.0, true)
	f.Add(uint64(97), uint16(0), 5.0, true)
	m := fullMeter(f)
	var sc Scratch
	f.Fuzz(func(t *testing.T, seed uint64, n uint16, z float64, broad bool) {
		if !(z > -1) || math.IsInf(z, 0) || n > 2000 {
			t.Skip()
		}
		rng := rand.New(rand.NewPCG(seed, 1))
		arms := make([]Arm, 1+rng.IntN(3))
		for k := range arms {
			arms[k] = brokenArm(rng, int(n))
		}
		opt := Options{Z: z, Broad: broad}
		if rng.IntN(3) == 0 {
			opt.ContinuumSlack = -1
		}
		res := m.Measure(nil, arms, opt, &sc)
		i := 0
		for li := range m.lines {
			l := &m.lines[li]
			inside := false
			for k := range arms {
				w := arms[k].Wave
				inside = inside || (len(w) > 1 && l.Wave*(1+z) >= w[0] && l.Wave*(1+z) <= w[len(w)-1])
			}
			if !inside {
				continue
			}
			if i == len(res) || res[i].Name != l.Name {
				t.Fatalf("no row for %s", l.Name)
			}
			checkResult(t, &res[i])
			if i++; i < len(res) && res[i].Name == l.wings {
				checkResult(t, &res[i])
				i++
			}
		}
		if i != len(res) {
			t.Fatalf("%d rows too many", len(res)-i)
		}
	})
}

func checkResult(t *testing.T, r *Result) {
	t.Helper()
	for _, e := range []float64{r.EWRestErr, r.EWSumErr, r.FluxErr, r.OffsetErr, r.WidthErr, r.WidthKms, r.SNR, r.UpperLimit} {
		if e < 0 || math.IsInf(e, 0) {
			t.Fatalf("negative or infinite: %+v", r)
		}
	}
	for _, p := range [][2]float64{{r.EWRest, r.EWRestErr}, {r.EWSum, r.EWSumErr}, {r.Flux, r.FluxErr}} {
		if math.IsInf(p[0], 0) || math.IsNaN(p[0]) != math.IsNaN(p[1]) {
			t.Fatalf("value and error do not go together: %+v", r)
		}
	}
	switch r.Kind {
	case Emission, Absorption:
		if !(r.SNR >= 3) || (r.Flux > 0) != (r.Kind == Emission) || math.IsNaN(r.OffsetKms) {
			t.Fatalf("a line seen: %+v", r)
		}
	case Limit:
		if math.IsNaN(r.UpperLimit) || r.UpperLimit < math.Abs(r.EWRest) || r.SNR >= 3 && doubted(r.Reason) == "" {
			t.Fatalf("a limit: %+v", r)
		}
	case Unmeasured:
		if r.Reason == "" {
			t.Fatalf("no reason: %+v", r)
		}
	default:
		t.Fatalf("kind %q", r.Kind)
	}
}

// brokenArm returns a valid arm with everything that can be wrong in one.
func brokenArm(rng *rand.Rand, n int) Arm {
	a := Arm{Wave: make([]float64, n), Flux: make([]float64, n), Ivar: make([]float64, n), Cont: make([]float64, n)}
	w := math.Exp(rng.Float64()*4 + 6.5)
	step := math.Pow(10, -5+3*rng.Float64())
	scale := math.Pow(10, 40*rng.Float64()-25)
	odd := []float64{math.NaN(), math.Inf(1), math.Inf(-1), 0, -1, 1e300, -1e300, 1e-300}
	bad := rng.Float64() * 0.3
	if rng.IntN(3) == 0 {
		bad = 0
	}
	pick := func(v float64) float64 {
		if rng.Float64() < bad {
			return odd[rng.IntN(len(odd))]
		}
		return v
	}
	for i := range n {
		w *= 1 + step*(0.2+rng.Float64())
		if rng.IntN(200) == 0 {
			w *= 1.003
		}
		a.Wave[i] = w
		a.Cont[i] = pick(scale * (1 + 0.3*rng.NormFloat64()))
		a.Flux[i] = pick(scale * (1 + 3*rng.NormFloat64()))
		a.Ivar[i] = math.Abs(pick(100 / (scale * scale)))
		if rng.Float64() < bad {
			a.Ivar[i] = 0
		}
	}
	if rng.IntN(2) == 0 {
		a.ContErr = make([]float64, n)
		for i := range a.ContErr {
			a.ContErr[i] = pick(0.02 * scale)
		}
	}
	if n > 0 && rng.IntN(2) == 0 {
		a.Resolution = []float64{pick(3000)}
	}
	return a
}
