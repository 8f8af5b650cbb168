package redshift

import "math"

// fit is the answer of one joint fit.
type fit struct {
	drop   float64 // decrease of chi^2 against the spline alone
	active int     // components with a positive amplitude
	amp    [maxComponents]float64
}

// bench holds the scratch of joint fits.
type bench struct {
	draws    [maxComponents]drawing
	weighted []float64 // weight times template
	spline   []float64 // B^T W T, row-major size x m
	project  []float64 // A^-1 B^T W T
	g        [maxComponents * maxComponents]float64
	h, most  [maxComponents]float64
}

// evaluate fits spline and components of family f together at
// 1+z = 10^shift: spline coefficients free (projected out), amplitudes
// non-negative. With T the templates, B the spline basis and W the weights it
// minimizes a^T G a - 2 h^T a where
//
//	G = T^T W T - (B^T W T)^T (B^T W B)^-1 (B^T W T),  h = T^T W r
//
// and r is the residual of the spline alone.
func (b *bench) evaluate(l *level, f *Family, width, shift float64) fit {
	m := len(f.components)
	b.weighted = grow(b.weighted, l.n)
	b.spline, b.project = grow(b.spline, l.size*m), grow(b.project, l.size*m)
	clear(b.spline)
	for c := range f.components {
		comp := &f.components[c]
		comp.draw(&b.draws[c], l.n, l.start, l.step, shift, width)
		if comp.absorption {
			v := b.draws[c].values
			for _, r := range b.draws[c].runs {
				for i := r.lo; i < r.hi; i++ {
					v[i] *= l.cont[i]
				}
			}
		}
	}
	for c := 0; c < m; c++ {
		d := &b.draws[c]
		h, gg := 0.0, 0.0
		for _, r := range d.runs {
			for i := r.lo; i < r.hi; i++ {
				t := d.values[i]
				wt := l.weight[i] * t
				b.weighted[i] = wt
				if wt == 0 {
					continue
				}
				h += wt * l.resid[i]
				gg += wt * t
				j, v := int(l.first[i])*m+c, &l.value[i]
				b.spline[j] += wt * v[0]
				b.spline[j+m] += wt * v[1]
				b.spline[j+2*m] += wt * v[2]
				b.spline[j+3*m] += wt * v[3]
			}
		}
		b.h[c], b.most[c] = h, f.components[c].most
		b.g[c*maxComponents+c] = gg
		for e := c + 1; e < m; e++ {
			s := overlap(d.runs, b.draws[e].runs, b.weighted, b.draws[e].values)
			b.g[c*maxComponents+e] = s
			b.g[e*maxComponents+c] = s
		}
	}
	copy(b.project, b.spline)
	l.normal.SolveMany(b.project, m)
	for c := 0; c < m; c++ {
		before := b.g[c*maxComponents+c]
		for e := c; e < m; e++ {
			s := 0.0
			for j := 0; j < l.size; j++ {
				s += b.spline[j*m+c] * b.project[j*m+e]
			}
			b.g[c*maxComponents+e] -= s
			b.g[e*maxComponents+c] = b.g[c*maxComponents+e]
		}
		// What the spline can describe as well is not evidence.
		if b.g[c*maxComponents+c] < 1e-4*before {
			b.g[c*maxComponents+c] = 0
		}
	}
	var out fit
	out.drop, out.active = nnls(&out.amp, &b.g, &b.h, &b.most, m)
	return out
}

// overlap sums a*b over the pixels that two sorted lists of runs share.
func overlap(p, q []run, a, b []float64) float64 {
	s := 0.0
	for i, j := 0, 0; i < len(p) && j < len(q); {
		lo, hi := max(p[i].lo, q[j].lo), min(p[i].hi, q[j].hi)
		for k := lo; k < hi; k++ {
			s += a[k] * b[k]
		}
		if p[i].hi < q[j].hi {
			i++
		} else {
			j++
		}
	}
	return s
}

// residual writes flux minus the joint model of the last evaluate with
// amplitudes amp to dst, and returns its chi^2. Spline and templates are those
// of the best fit: the spline absorbs A^-1 B^T W T a.
func (b *bench) residual(dst []float64, l *level, m int, amp *[maxComponents]float64) float64 {
	copy(dst, l.resid)
	for c := 0; c < m; c++ {
		if amp[c] == 0 {
			continue
		}
		d := &b.draws[c]
		for _, r := range d.runs {
			for i := r.lo; i < r.hi; i++ {
				dst[i] -= amp[c] * d.values[i]
			}
		}
	}
	coef := make([]float64, l.size)
	for j := range coef {
		for c := 0; c < m; c++ {
			coef[j] += b.project[j*m+c] * amp[c]
		}
	}
	chi2 := 0.0
	for i := range dst {
		j, v := int(l.first[i]), &l.value[i]
		dst[i] += v[0]*coef[j] + v[1]*coef[j+1] + v[2]*coef[j+2] + v[3]*coef[j+3]
		chi2 += l.weight[i] * dst[i] * dst[i]
	}
	return chi2
}

// peak is a trial redshift with its joint fit.
type peak struct {
	family *Family
	width  float64
	shift  float64 // log10(1+z)
	fit    fit
	score  float64
}

func (p *peak) z() float64 { return math.Pow(10, p.shift) - 1 }

// climb moves a peak to the nearest maximum of its chi^2 drop with steps of h
// dex, then to the vertex of the parabola through the three last points. It
// stays inside the family's redshift range.
func (b *bench) climb(l *level, p *peak, h float64, moves int) {
	lo, hi := math.Log10(1+p.family.ZMin), math.Log10(1+p.family.ZMax)
	at := func(s float64) fit { return b.evaluate(l, p.family, p.width, s) }
	mid := p.fit
	left, right := at(p.shift-h), at(p.shift+h)
	for k := 0; k < moves; k++ {
		switch {
		case right.drop > mid.drop && right.drop >= left.drop && p.shift+h <= hi:
			left, mid = mid, right
			p.shift += h
			right = at(p.shift + h)
			continue
		case left.drop > mid.drop && p.shift-h >= lo:
			right, mid = mid, left
			p.shift -= h
			left = at(p.shift - h)
			continue
		}
		break
	}
	p.fit = mid
	den := left.drop - 2*mid.drop + right.drop
	if den < 0 {
		s := p.shift + 0.5*h*(left.drop-right.drop)/den
		if math.Abs(s-p.shift) < h && s >= lo && s <= hi {
			if f := at(s); f.drop > p.fit.drop {
				p.fit, p.shift = f, s
			}
		}
	}
}
