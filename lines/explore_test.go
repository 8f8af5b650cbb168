package lines

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

func TestExplore(t *testing.T) {
	m := parse(t, oneLine)
	var sc Scratch
	for _, sg := range []float64{0.6, 1, 2, 3, 10, 30} {
		for _, depth := range []float64{-0.5, 0.7, 3} {
			for _, sn := range []float64{3, 10, 30, 100} {
				step := 20.0
				wave := grid(5000, step, 1201)
				ls := sg * step / c * 5000
				flux := depth * math.Sqrt(2*math.Pi) * ls
				// expected S/N (Cayrel)
				exp := math.Abs(flux) / (1.503 * math.Sqrt(2.3548*ls*step/c*5000) / sn)
				if exp < 6 {
					continue
				}
				clean := newArm(wave, 1, 1/sn, profileTruth{5000 * (1 + 13/c), ls, flux})
				var a Arm
				rng := rand.New(rand.NewPCG(1, 2))
				var pf, ps, pv, pw, bias moments
				var kinds = map[string]int{}
				N := 2000
				var res []Result
				for range N {
					noisy(&a, clean, rng)
					res = m.Measure(res[:0], []Arm{a}, Options{ContinuumSlack: 0.05}, &sc)
					r := res[0]
					kinds[r.Kind+r.Reason]++
					if math.IsNaN(r.EWRest) {
						continue
					}
					pf.add((r.EWRest + flux) / r.EWRestErr)
					ps.add((r.EWSum + flux) / r.EWSumErr)
					bias.add(r.EWRest / -flux)
					if !math.IsNaN(r.OffsetErr) {
						pv.add((r.OffsetKms - 13) / r.OffsetErr)
						pw.add((r.WidthKms - sg*step) / r.WidthErr)
					}
				}
				fmt.Printf("sig %4.1f depth %4.1f sn %3g exp %6.1f | fit %6.3f %.3f %.3f | sum %6.3f %.3f | v %.3f %.3f w %.3f %.3f | ratio %.4f %v\n", sg, depth, sn, exp,
					pf.mean(), pf.sd(), pf.inside/pf.n, ps.mean(), ps.sd(), pv.mean(), pv.sd(), pw.mean(), pw.sd(), bias.mean(), kinds)
			}
		}
	}
}
