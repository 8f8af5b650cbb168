package absorbers

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"duskline/linelist"
)

func fullFinder(t testing.TB) *Finder {
	t.Helper()
	text, err := os.ReadFile("../configs/lines.toml")
	if err != nil {
		t.Fatal(err)
	}
	list, err := linelist.Parse(text)
	if err != nil {
		t.Fatal(err)
	}
	return NewFinder(list)
}

func hydrogenOnly(systems []System) (out []System) {
	for _, s := range systems {
		if s.Kind == Hydrogen {
			out = append(out, s)
		}
	}
	return out
}

// tally of one cell of column and S/N.
type tally struct {
	n, found, false1 float64
	sum, square      float64 // of log N found minus true
	pull, pull2      float64
}

func (c *tally) add(d, err float64) {
	c.found++
	c.sum += d
	c.square += d * d
	c.pull += d / err
	c.pull2 += d * d / (err * err)
}

func (c *tally) pullSD() float64 {
	m := c.pull / c.found
	return math.Sqrt(c.pull2/c.found - m*m)
}

// Damped systems of log N 19.5 to 21.7 in front of quasars of S/N 2 to 20 a
// pixel, seven in ten with one system: what is found, what is made up, and how
// right the columns and their errors are. DUSKLINE_LONG=1 takes 500 quasars
// instead of 160.
func TestSyntheticQuasars(t *testing.T) {
	if testing.Short() {
		t.Skip("simulation of some seconds")
	}
	quasars := 160
	if os.Getenv("DUSKLINE_LONG") == "1" {
		quasars = 500
	}
	f := fullFinder(t)
	r := rand.New(rand.NewPCG(2031, 314))
	var sc Scratch
	cells := map[[2]int]*tally{}
	cell := func(logN, sn float64) *tally {
		k := [2]int{int(math.Floor((logN - 19.5) / 0.4)), 0}
		if sn > 4 {
			k[1] = 1
		}
		if sn > 9 {
			k[1] = 2
		}
		if cells[k] == nil {
			cells[k] = &tally{}
		}
		return cells[k]
	}
	var clear tally // log N above 20.3, S/N above 4
	for i := range quasars {
		sn := 2 * math.Pow(10, r.Float64())
		var columns []float64
		if i%10 < 7 {
			columns = []float64{19.5 + 2.2*r.Float64()}
		}
		q := makeQuasar(r, sn, columns...)
		systems := hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc))
		used := -1
		for _, truth := range q.clouds {
			cell(truth.logN, sn).n++
			for k, s := range systems {
				// Half the width of the narrowest of these lines.
				if math.Abs(s.Z-truth.z)*c/(1+truth.z) < 800 {
					used = k
					cell(truth.logN, sn).add(s.LogN-truth.logN, s.LogErr)
					if truth.logN > 20.3 && sn > 4 {
						clear.add(s.LogN-truth.logN, s.LogErr)
					}
					break
				}
			}
			if truth.logN > 20.3 && sn > 4 {
				clear.n++
			}
		}
		for k, s := range systems {
			if k != used {
				cell(s.LogN, sn).false1++
				if s.LogN > 20.3 && sn > 4 {
					clear.false1++
				}
			}
		}
	}
	t.Log("log N | S/N 2-4 | 4-9 | 9-20: found of all (made up)")
	for k := -1; k < 6; k++ {
		line := fmt.Sprintf("%.1f-%.1f", 19.5+0.4*float64(k), 19.9+0.4*float64(k))
		for b := range 3 {
			v := cells[[2]int{k, b}]
			if v == nil {
				v = &tally{}
			}
			line += fmt.Sprintf(" | %2.0f of %2.0f (%.0f)", v.found, v.n, v.false1)
		}
		t.Log(line)
	}
	bias, sd := clear.sum/clear.found, clear.pullSD()
	t.Logf("log N > 20.3, S/N > 4: %.0f of %.0f, %.0f made up, bias %.4f, pulls %.2f +- %.2f", clear.found, clear.n, clear.false1, bias,
		clear.pull/clear.found, sd)
	if clear.found < 0.95*clear.n {
		t.Errorf("%.0f of %.0f found", clear.found, clear.n)
	}
	if clear.false1 > 0.05*clear.n {
		t.Errorf("%.0f made up beside %.0f", clear.false1, clear.n)
	}
	// Of all columns and S/N: without the chain of dark runs three times as many.
	made := 0.0
	for k, v := range cells {
		made += v.false1
		if k[0] < -1 {
			t.Logf("%.0f breaks made up", v.false1)
		}
	}
	if made > 0.13*float64(quasars) {
		t.Errorf("%.0f systems made up in %d quasars", made, quasars)
	}
	if math.Abs(bias) > 0.05 {
		t.Errorf("bias %.3f, want 0 +- 0.05", bias)
	}
	// With 45 systems the standard error of the deviation is 10 %.
	if sd < 0.75 || sd > 1.3 {
		t.Errorf("pulls %.2f, want 1 +- 0.3", sd)
	}
}

// The forest of the made-up quasars has the mean transmission that was measured:
// Becker et al. (2013), formula from memory, within 8 % from redshift 2.2 to 3.6.
func TestForestMean(t *testing.T) {
	for _, z := range []float64{2.4, 2.8, 3.2, 3.6} {
		var sum, n float64
		for k := range uint64(12) {
			a := makeQuasarBehind(rand.New(rand.NewPCG(55, k)), forestGroup, z, 1e4)
			b := makeQuasarBehind(rand.New(rand.NewPCG(55, k)), 0, z, 1e4)
			for i, w := range a.arm.Wave {
				if rest := w / (1 + z); rest > 1050 && rest < 1180 {
					sum += a.arm.Flux[i] / b.arm.Flux[i]
					n++
				}
			}
		}
		at := (1 + z) * 1115 / 1215.67 // 1 + redshift of the middle of the range
		want := math.Exp(0.132 - 0.751*math.Pow(at/4.5, 2.90))
		if got := sum / n; math.Abs(got/want-1) > 0.08 {
			t.Errorf("redshift %.1f: transmission %.3f, want %.3f", z, got, want)
		}
	}
}

// In front of quasars at redshift 5 to 6 without any system, few are made up: the
// forest there hardly lets light through, and is not searched.
func TestOpaqueForest(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	for _, z := range []float64{5, 5.5, 6} {
		made := 0
		const n = 12
		for k := range uint64(n) {
			q := makeQuasarAt(rand.New(rand.NewPCG(57, k)), z, 20)
			made += len(hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)))
		}
		t.Logf("redshift %.1f: %d made up in %d quasars", z, made, n)
		if made > n {
			t.Errorf("redshift %.1f: %d systems made up in %d quasars", z, made, n)
		}
	}
}

// A damped system that falls towards the quasar, 2,500 km/s beyond its redshift, is
// found, marked as proximate; so is one 1,500 km/s in front of it.
func TestProximate(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	for _, v := range []float64{-1500, 2500} {
		found := 0
		const n = 12
		for k := range uint64(n) {
			r := rand.New(rand.NewPCG(61, k))
			q := makeQuasarAt(r, 2.8, 15)
			z := q.z + (1+q.z)*v/c
			dimQuasar(r, &q, cloudTruth{z, 20.8, 30})
			for _, s := range hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)) {
				if math.Abs(s.Z-z)*c/(1+z) < 500 && math.Abs(s.LogN-20.8) < 0.3 {
					found++
					if s.Flags&Proximate == 0 {
						t.Errorf("%+.0f km/s: not marked as proximate", v)
					}
				}
			}
		}
		t.Logf("%+.0f km/s: %d of %d", v, found, n)
		if found < 10 {
			t.Errorf("%+.0f km/s: found with the right column in %d of %d", v, found, n)
		}
	}
}

// dimQuasar multiplies the Lyman lines of a system into a quasar, with a little more
// noise.
func dimQuasar(r *rand.Rand, q *madeUp, clouds ...cloudTruth) {
	for i, w := range q.arm.Wave {
		for _, x := range clouds {
			for _, line := range seriesForTests[:3] {
				q.arm.Flux[i] *= math.Exp(-line.OpticalDepth(math.Pow(10, x.logN), x.b, w/(1+x.z)))
			}
		}
		q.arm.Flux[i] += 0.02 * r.NormFloat64()
		q.arm.Ivar[i] = 1 / (1/q.arm.Ivar[i] + 0.02*0.02)
	}
}

// Two systems whose wings overlap are fitted together and both come out.
func TestOverlap(t *testing.T) {
	f := fullFinder(t)
	var sc Scratch
	seen := 0
	for k := range uint64(12) {
		r := rand.New(rand.NewPCG(5, k))
		q := makeQuasar(r, 20)
		zLow := q.z - 0.45
		a, b := cloudTruth{zLow, 20.7, 30}, cloudTruth{zLow + 0.06, 20.5, 30} // 5,000 km/s apart
		dimQuasar(r, &q, a, b)
		systems := hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc))
		both := 0
		for _, x := range []cloudTruth{a, b} {
			for _, s := range systems {
				if math.Abs(s.Z-x.z)*c/(1+x.z) < 400 && math.Abs(s.LogN-x.logN) < max(4*s.LogErr, 0.15) {
					if s.Flags&Overlaps == 0 {
						t.Errorf("system at %.4f is not marked as overlapping", s.Z)
					}
					both++
				}
			}
		}
		if both == 2 {
			seen++
		}
	}
	if seen < 11 {
		t.Errorf("both systems found with the right columns in %d of 12", seen)
	}
}

// Same input, same result whatever the scratch has seen; nothing at all in
// spectra that have no forest, and no panic on bad ones.
func TestFindDegenerate(t *testing.T) {
	f := fullFinder(t)
	q := makeQuasar(rand.New(rand.NewPCG(9, 9)), 10, 20.8)
	fresh := f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, nil)
	var sc Scratch
	other := makeQuasar(rand.New(rand.NewPCG(9, 10)), 10, 20.3, 21.2)
	f.Find(nil, []Arm{other.arm}, Options{Z: other.z}, &sc)
	used := f.Find(nil, []Arm{q.arm}, Options{Z: q.z}, &sc)
	if fmt.Sprint(fresh) != fmt.Sprint(used) || len(hydrogenOnly(fresh)) == 0 {
		t.Errorf("a used scratch changes the result:\n%v\n%v", fresh, used)
	}
	if n := testing.AllocsPerRun(5, func() { used = f.Find(used[:0], []Arm{q.arm}, Options{Z: q.z}, &sc) }); n > 40 {
		t.Errorf("%v allocations a spectrum", n)
	}
	if got := hydrogenOnly(f.Find(nil, []Arm{q.arm}, Options{Z: 0.1}, &sc)); len(got) > 0 {
		t.Errorf("hydrogen at a redshift where none is covered: %+v", got)
	}
	for name, spoil := range map[string]func(a *Arm){
		"no weight": func(a *Arm) { clear(a.Ivar) },
		"zero":      func(a *Arm) { clear(a.Flux) },
		"negative": func(a *Arm) {
			for i := range a.Flux {
				a.Flux[i] = -1
			}
		},
		"nan": func(a *Arm) {
			for i := range a.Flux {
				a.Flux[i] = math.NaN()
			}
		},
		"huge": func(a *Arm) {
			for i := range a.Flux {
				a.Flux[i] *= 1e200
				a.Ivar[i] *= 1e-200
			}
		},
		"short": func(a *Arm) { a.Wave, a.Flux, a.Ivar = a.Wave[:3], a.Flux[:3], a.Ivar[:3] },
		"empty": func(a *Arm) { *a = Arm{} },
	} {
		a := Arm{Wave: q.arm.Wave, Flux: append([]float64(nil), q.arm.Flux...), Ivar: append([]float64(nil), q.arm.Ivar...)}
		spoil(&a)
		for _, s := range f.Find(nil, []Arm{a}, Options{Z: q.z}, &sc) {
			if math.IsInf(s.LogN, 0) || math.IsInf(s.EW, 0) || math.IsNaN(s.Z) {
				t.Errorf("%s: %+v", name, s)
			}
		}
	}
	if got := f.Find(nil, nil, Options{Z: 3}, nil); len(got) > 0 {
		t.Errorf("no arms: %+v", got)
	}
}

// One quasar of S/N 10 with its forest alone, without and with a damped system, and
// a whole survey spectrum to 9800 Angstrom with emission lines and two doublets, and
// a galaxy at redshift 0.6.
func BenchmarkFind(b *testing.B) {
	f := fullFinder(b)
	none := makeQuasar(rand.New(rand.NewPCG(4, 4)), 10)
	one := makeQuasar(rand.New(rand.NewPCG(4, 4)), 10, 20.8)
	red := redSide(rand.New(rand.NewPCG(4, 5)), one.z, 10)
	paintDoublet(&red, f.doublets[0], 1.6, 14, 50)
	paintDoublet(&red, f.doublets[1], one.z-0.2, 14.3, 50)
	for _, bc := range []struct {
		name string
		opt  Options
		arms []Arm
	}{{"none", Options{Z: none.z}, []Arm{none.arm}}, {"one", Options{Z: one.z}, []Arm{one.arm}}, {"whole", Options{Z: one.z}, []Arm{one.arm, red}},
		{"galaxy", Options{Z: 0.6, Before: BeforeGalaxy}, []Arm{bare(10)}}} {
		b.Run(bc.name, func(b *testing.B) {
			var sc Scratch
			out := f.Find(nil, bc.arms, bc.opt, &sc)
			b.ReportAllocs()
			for b.Loop() {
				out = f.Find(out[:0], bc.arms, bc.opt, &sc)
			}
			b.ReportMetric(float64(len(sc.track.x)), "pixels")
			b.ReportMetric(float64(len(out)), "systems")
		})
	}
}
