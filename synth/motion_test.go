package synth

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The lines of many quasars scatter as published, and each group by itself.
func TestQuasarMotion(t *testing.T) {
	const n = 4000
	r := rand.New(rand.NewPCG(5, 6))
	waves := map[float64]float64{1549.5: windMotion, 1240.8: windMotion, 1215.67: 0.5 * windMotion, 1908.7: carbonMotion,
		2799.1: magnesiumMotion, 4862.68: balmerMotion, 6564.61: balmerMotion}
	squares, cross := map[float64]float64{}, 0.0
	for range n {
		m := newQuasarMotion(r)
		for w := range waves {
			squares[w] += m.of(w) * m.of(w) / n
		}
		cross += m.of(1549.5) * m.of(4862.68) / (n * windMotion * balmerMotion)
	}
	for w, want := range waves {
		// Four standard errors of a standard deviation of n draws: 1/sqrt(2n) each.
		if got := math.Sqrt(squares[w]); math.Abs(got-want) > 4*want/math.Sqrt(2*n) {
			t.Errorf("the line at %g scatters by %.0f km/s, want %.0f", w, got, want)
		}
	}
	if math.Abs(cross) > 4/math.Sqrt(n) {
		t.Errorf("C IV and H-beta are correlated by %.3f, want 0 within %.3f", cross, 4/math.Sqrt(n))
	}
}

func TestMoved(t *testing.T) {
	// 1 + z' = (1 + z)(1 + v/c), exact.
	if got, want := moved(2, 600), 3*(1+600/299792.458)-1; math.Abs(got-want) > 1e-12 {
		t.Errorf("moved to %.9f, want %.9f", got, want)
	}
}

// Near a quasar the forest is thinner: half of the optical depth is left at the zone.
func TestForestNearQuasar(t *testing.T) {
	const z = 3.0
	light := func(zone float64) []float64 {
		c := &canvas{z: z, wave: make([]float64, 2000)}
		for i := range c.wave {
			c.wave[i] = 1215.67 * (1 + z) * math.Exp(-float64(i+1)*20/299792.458) // every 20 km/s
		}
		c.flux = make([]float64, len(c.wave))
		for i := range c.flux {
			c.flux[i] = 1
		}
		f := newForest(rand.New(rand.NewPCG(7, 8)))
		f.zone = zone
		f.dim(c)
		return c.flux
	}
	far, near := light(0), light(1000)
	at := 49 // 1,000 km/s
	if got := math.Log(near[at]) / math.Log(far[at]); math.Abs(got-0.5) > 1e-6 {
		t.Errorf("%.6f of the optical depth is left at the zone, want 0.5", got)
	}
	for i := range far {
		if near[i] < far[i] {
			t.Fatalf("pixel %d: %g of the light with the zone, %g without", i, near[i], far[i])
		}
	}
}
