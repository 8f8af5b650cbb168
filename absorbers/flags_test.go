package absorbers

import (
	"math"
	"math/rand/v2"
	"testing"
)

// flagsOf finds the hydrogen system of a column in front of copies of a quasar and
// returns in how many of them it is found, and in how many of these each flag is
// set.
func flagsOf(t *testing.T, n int, quasar func(k uint64) (q madeUp, z float64)) (found int, set map[Flags]int) {
	t.Helper()
	f := fullFinder(t)
	set = map[Flags]int{}
	var sc Scratch
	for k := range uint64(n) {
		q, z := quasar(k)
		for _, s := range hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)) {
			if math.Abs(s.Z-z)*c/(1+z) > 800 {
				continue
			}
			found++
			for bit := range 12 {
				if s.Flags&(1<<bit) != 0 {
					set[1<<bit]++
				}
			}
		}
	}
	return found, set
}

// Every flag of a hydrogen system is set where its reason is, and is not where the
// system is plain: log N = 20.8 with Lyman beta covered, far from the quasar.
func TestHydrogenFlags(t *testing.T) {
	plain := func(k uint64, spoil func(r *rand.Rand, q *madeUp, z float64)) (madeUp, float64) {
		r := rand.New(rand.NewPCG(71, k))
		q := makeQuasarAt(r, 3.2, 15)
		z := 2.9
		dimQuasar(r, &q, cloudTruth{z, 20.8, 30})
		if spoil != nil {
			spoil(r, &q, z)
		}
		return q, z
	}
	near := func(a *Arm, rest, z, reach float64, change func(i int)) {
		for i, w := range a.Wave {
			if math.Abs(w/(rest*(1+z))-1)*c < reach {
				change(i)
			}
		}
	}
	const n = 10
	for _, tc := range []struct {
		name  string
		flag  Flags
		spoil func(r *rand.Rand, q *madeUp, z float64)
	}{
		{"one line", OneLine, func(_ *rand.Rand, q *madeUp, z float64) {
			near(&q.arm, 1025.72, z, 6000, func(i int) { q.arm.Ivar[i] = 0 })
		}},
		{"partly hidden", PartlyHidden, func(_ *rand.Rand, q *madeUp, z float64) {
			near(&q.arm, 1219.5, z, 400, func(i int) { q.arm.Ivar[i] = 0 })
		}},
		{"overlaps", Overlaps, func(r *rand.Rand, q *madeUp, z float64) {
			dimQuasar(r, q, cloudTruth{z + 0.05, 20.6, 30})
		}},
	} {
		found, set := flagsOf(t, n, func(k uint64) (madeUp, float64) { return plain(k, tc.spoil) })
		clean, unset := flagsOf(t, n, func(k uint64) (madeUp, float64) { return plain(k, nil) })
		t.Logf("%s: found %d, set in %d; plain: found %d, set in %d", tc.name, found, set[tc.flag], clean, unset[tc.flag])
		if found < n/2 || set[tc.flag] < found*7/10 {
			t.Errorf("%s: found %d of %d, flag set in %d", tc.name, found, n, set[tc.flag])
		}
		if clean < n-1 || unset[tc.flag] > 2 {
			t.Errorf("%s: plain system found %d of %d, flag set in %d", tc.name, clean, n, unset[tc.flag])
		}
	}
}

// Where the error of log N is above 0.3 the system is called degenerate, and no
// Doppler parameter is given where the lines do not fix it.
func TestFlatPartFlag(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	sc.damp.found = append(sc.damp.found, cloud{x: c * math.Log1p(2.9), logN: 19.4, lnB: math.Log(30), nErr: 0.4, bErr: 0.3, dof: 10, chi2: 10, lines: 1})
	sc.damp.found = append(sc.damp.found, cloud{x: c * math.Log1p(3.0), logN: 20.4, lnB: math.Log(30), nErr: 0.1, bErr: 0.1, dof: 10, chi2: 20, lines: 2, bound: true})
	got := sc.reportHydrogen(nil, f, Options{Z: 3.2})
	if got[0].Flags&FlatPart == 0 || got[1].Flags&FlatPart != 0 {
		t.Errorf("errors of log N %.2f and %.2f: flags %b and %b", got[0].LogErr, got[1].LogErr, got[0].Flags, got[1].Flags)
	}
	if !math.IsNaN(got[0].B) || math.IsNaN(got[1].B) {
		t.Errorf("Doppler parameters %g and %g", got[0].B, got[1].B)
	}
	if got[0].Flags&PoorFit != 0 || got[1].Flags&PoorFit == 0 {
		t.Errorf("poor fit: flags %b and %b", got[0].Flags, got[1].Flags)
	}
	if got[0].Flags&AtBound != 0 || got[1].Flags&AtBound == 0 {
		t.Errorf("at bound: flags %b and %b", got[0].Flags, got[1].Flags)
	}
}

// chi^2 per degree of freedom, by which a fit is called poor, is about 1 where the
// model is right: noise and scatter of single bins. A misplaced model has more.
func TestDescribe(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	var plain, wrong float64
	const n = 10
	for k := range uint64(n) {
		r := rand.New(rand.NewPCG(71, k))
		q := makeQuasarAt(r, 3.2, 15)
		dimQuasar(r, &q, cloudTruth{2.9, 20.8, 30})
		if len(hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc))) == 0 {
			t.Fatalf("quasar %d: nothing found", k)
		}
		at := 0
		for m, c0 := range sc.damp.found {
			if math.Abs(c0.x-c*math.Log1p(2.9)) < math.Abs(sc.damp.found[at].x-c*math.Log1p(2.9)) {
				at = m
			}
		}
		if !sc.fitClouds(f, at) {
			t.Fatalf("quasar %d: fit fails", k)
		}
		plain += sc.damp.found[at].chi2 / sc.damp.found[at].dof / n
		for m := range sc.joint.members {
			sc.joint.p[3*m] += 1500 // km/s
		}
		chi2, bins := sc.describe(f)
		wrong += chi2 / bins / n
	}
	t.Logf("chi^2/dof %.2f, misplaced %.2f", plain, wrong)
	if plain < 0.6 || plain > 1.4 {
		t.Errorf("chi^2/dof %.2f, want about 1", plain)
	}
	if wrong < poorFrom {
		t.Errorf("chi^2/dof %.2f of misplaced models would not be called poor", wrong)
	}
}

// Three damped systems in one spectrum come out together.
func TestSeveralSystems(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	right := 0
	const n = 10
	for k := range uint64(n) {
		r := rand.New(rand.NewPCG(73, k))
		q := makeQuasarAt(r, 3.4, 15)
		truth := []cloudTruth{{2.75, 20.4, 30}, {2.95, 21.0, 30}, {3.2, 20.7, 30}}
		dimQuasar(r, &q, truth...)
		for _, x := range truth {
			for _, s := range hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)) {
				if math.Abs(s.Z-x.z)*c/(1+x.z) < 400 && math.Abs(s.LogN-x.logN) < max(4*s.LogErr, 0.15) {
					right++
				}
			}
		}
	}
	t.Logf("%d of %d", right, 3*n)
	if right < 3*n-3 {
		t.Errorf("%d of %d systems found with their columns", right, 3*n)
	}
}

// The remarks on doublets: equal lines are saturated, an extra line on the weaker one
// makes the ratio impossible, masked pixels hide a part.
func TestDoubletFlags(t *testing.T) {
	f := fullFinder(t)
	const z = 1.1
	r := rand.New(rand.NewPCG(75, 7))
	for _, tc := range []struct {
		name         string
		flag         Flags
		strong, weak float64
		beside       float64 // width of another line 120 km/s from the weaker
		hide         bool
	}{
		{"plain", 0, 1.0, 0.65, 0, false}, {"saturated", Saturated, 1.0, 1.0, 0, false}, {"ratio", RatioOff, 1.0, 0.9, 0.6, false}, {"hidden", PartlyHidden, 1.0, 0.65, 0, true},
	} {
		found, set, other := 0, 0, 0
		for range 40 {
			a := noisyCopy(bare(40, [4]float64{2796.3522, z, tc.strong, 90}, [4]float64{2803.531, z, tc.weak, 90}, [4]float64{2803.531 * (1 + 120/c), z, tc.beside, 90}), r)
			if tc.hide {
				for i, w := range a.Wave {
					if math.Abs(w/(2796.3522*(1+z)*(1+120/c))-1)*c < 40 {
						a.Ivar[i] = 0
					}
				}
			}
			for _, s := range f.Find(nil, []Arm{a}, Options{Z: 1.9}, nil) {
				if s.Kind != MgII || math.Abs(s.Z-z)*c/(1+z) > 100 {
					continue
				}
				found++
				if s.Flags&tc.flag != 0 {
					set++
				}
				if s.Flags&^(tc.flag|Saturated) != 0 {
					other++
				}
			}
			if tc.hide { // Ivar is shared between copies of one arm
				for i := range a.Ivar {
					a.Ivar[i] = 40 * 40
				}
			}
		}
		t.Logf("%s: found %d of 40, set in %d, others in %d", tc.name, found, set, other)
		least := 20
		if tc.flag == RatioOff {
			least = 8 // most such pairs are refused
		}
		if found < least || tc.flag != 0 && set < found*7/10 || other > 8 {
			t.Errorf("%s: found %d of 40, flag set in %d, others in %d", tc.name, found, set, other)
		}
	}
}
