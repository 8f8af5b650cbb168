package redshift

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"
)

// problem is a quadratic form a^T G a - 2 h^T a from random templates.
type problem struct {
	m       int
	g       [maxComponents * maxComponents]float64
	h, most [maxComponents]float64
}

// drawProblem makes G = T^T T and h = T^T r of m random templates with some
// correlation, some of them absent (zero).
func drawProblem(t *rapid.T, bounded bool) *problem {
	m := rapid.IntRange(1, 6).Draw(t, "components")
	r := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
	return randomProblem(r, m, rapid.Float64Range(0, 2).Draw(t, "common part"), bounded)
}

// randomProblem makes the problem of m templates that share a common part.
func randomProblem(r *rand.Rand, m int, common float64, bounded bool) *problem {
	const n = 12
	p := &problem{m: m}
	var templates [maxComponents][n]float64
	var data, shared [n]float64
	for i := range n {
		data[i], shared[i] = 10*r.NormFloat64(), r.NormFloat64()
	}
	for k := range p.m {
		for i := range n {
			templates[k][i] = r.NormFloat64() + common*shared[i]
		}
		if r.IntN(10) == 0 {
			templates[k] = [n]float64{}
		}
		if bounded && r.IntN(2) == 0 {
			p.most[k] = 5 * r.Float64()
		}
	}
	for i := range p.m {
		for k := range n {
			p.h[i] += templates[i][k] * data[k]
			for j := range p.m {
				p.g[i*maxComponents+j] += templates[i][k] * templates[j][k]
			}
		}
	}
	return p
}

func (p *problem) drop(a *[maxComponents]float64) float64 {
	s := 0.0
	for i := range p.m {
		s += a[i] * (p.h[i] + p.gradient(a, i))
	}
	return s
}

// gradient is half the derivative of the drop.
func (p *problem) gradient(a *[maxComponents]float64, i int) float64 {
	d := p.h[i]
	for j := range p.m {
		d -= p.g[i*maxComponents+j] * a[j]
	}
	return d
}

// best tries every choice of amplitudes that are zero, free, or at their
// bound, and returns the largest drop of a feasible one.
func (p *problem) best() float64 {
	states := make([]int, p.m)
	best := 0.0
	var visit func(k int)
	visit = func(k int) {
		if k < p.m {
			for s := range 3 {
				if s == 2 && p.most[k] == 0 || s == 1 && p.g[k*maxComponents+k] == 0 {
					continue
				}
				states[k] = s
				visit(k + 1)
			}
			return
		}
		var a [maxComponents]float64
		var free []int
		for i, s := range states {
			switch s {
			case 1:
				free = append(free, i)
			case 2:
				a[i] = p.most[i]
			}
		}
		if len(free) > 0 {
			g, h := mat.NewSymDense(len(free), nil), mat.NewVecDense(len(free), nil)
			for i, fi := range free {
				h.SetVec(i, p.gradient(&a, fi))
				for j := i; j < len(free); j++ {
					g.SetSym(i, j, p.g[fi*maxComponents+free[j]])
				}
			}
			var chol mat.Cholesky
			if !chol.Factorize(g) {
				return
			}
			var x mat.VecDense
			if chol.SolveVecTo(&x, h) != nil {
				return
			}
			for i, fi := range free {
				v := x.AtVec(i)
				if v < 0 || p.most[fi] > 0 && v > p.most[fi] {
					return
				}
				a[fi] = v
			}
		}
		best = math.Max(best, p.drop(&a))
	}
	visit(0)
	return best
}

// The answer is the best of all subsets and satisfies the conditions of Karush,
// Kuhn and Tucker: no gradient where an amplitude is free, none upward where it
// is zero, none downward where it is at its bound.
func TestNNLSIsOptimal(t *testing.T) {
	for _, c := range []struct {
		name    string
		bounded bool
	}{{"unbounded", false}, {"bounded", true}} {
		t.Run(c.name, func(t *testing.T) {
			rapid.Check(t, func(t *rapid.T) {
				p := drawProblem(t, c.bounded)
				var a [maxComponents]float64
				drop, active := nnls(&a, &p.g, &p.h, &p.most, new([maxComponents]bool), p.m)
				// Drops are up to 12*10^2; the solver takes gradients below
				// 1e-9 of a template's norm for zero.
				const tol = 1e-7
				if got := p.drop(&a); math.Abs(got-drop) > tol {
					t.Fatalf("says the drop is %.10g, it is %.10g", drop, got)
				}
				if best := p.best(); math.Abs(drop-best) > tol {
					t.Fatalf("drop %.10g, the best of all subsets is %.10g", drop, best)
				}
				positive := 0
				for i := range p.m {
					d := p.gradient(&a, i)
					switch norm := math.Sqrt(p.g[i*maxComponents+i]); {
					case a[i] < 0 || p.most[i] > 0 && a[i] > p.most[i]:
						t.Fatalf("amplitude %d is %g, outside 0 to %g", i, a[i], p.most[i])
					case a[i] == 0 && d > tol*norm:
						t.Fatalf("amplitude %d is zero with gradient %g", i, d)
					case p.most[i] > 0 && a[i] == p.most[i]:
						if d < -tol*norm {
							t.Fatalf("amplitude %d is at its bound with gradient %g", i, d)
						}
					case a[i] > 0 && math.Abs(d) > tol*norm:
						t.Fatalf("amplitude %d is free with gradient %g", i, d)
					}
					if a[i] > 0 {
						positive++
					}
				}
				if positive != active {
					t.Fatalf("says %d amplitudes are positive, %d are", active, positive)
				}
			})
		})
	}
}

// Equal templates share an amplitude between them; the drop is that of one.
func TestNNLSCollinear(t *testing.T) {
	p := &problem{m: 3}
	for i := range 3 {
		p.h[i] = 6
		for j := range 3 {
			p.g[i*maxComponents+j] = 4
		}
	}
	var a [maxComponents]float64
	drop, active := nnls(&a, &p.g, &p.h, &p.most, new([maxComponents]bool), p.m)
	if math.Abs(drop-9) > 1e-9 || active != 1 {
		t.Errorf("drop %g with %d amplitudes, want 9 with 1", drop, active)
	}
}

func BenchmarkNNLS(b *testing.B) {
	r := rand.New(rand.NewPCG(1, 1))
	p := &problem{m: 8}
	var templates [8][20]float64
	for k := range templates {
		for i := range templates[k] {
			templates[k][i] = r.NormFloat64()
		}
	}
	for i := range p.m {
		p.h[i] = r.NormFloat64()
		for j := range p.m {
			for q := range 20 {
				p.g[i*maxComponents+j] += templates[i][q] * templates[j][q]
			}
		}
	}
	var a [maxComponents]float64
	b.ReportAllocs()
	for b.Loop() {
		nnls(&a, &p.g, &p.h, &p.most, new([maxComponents]bool), p.m)
	}
}
