package redshift

import "math"

// fit is the answer of one joint fit.
type fit struct {
	drop   float64 // decrease of chi^2 against the spline alone
	gain   float64 // the same less the price of the active components
	active int     // components with a positive amplitude
	amp    [maxComponents]float64
}

// bench holds the scratch of joint fits.
type bench struct {
	draws    [maxComponents]drawing
	veil     drawing   // transmission less one of the intergalactic medium
	row      []float64 // the same in the rest frame
	weighted []float64 // weight times template
	spline   []float64 // B^T W T, row-major size x m
	project  []float64 // A^-1 B^T W T
	g        [maxComponents * maxComponents]float64
	h, most  [maxComponents]float64
	coef     []float64
	used     [maxComponents]int // components inside the coverage, by column
	m        int                // number of them
}

// evaluate fits spline and components of family f together at
// 1+z = 10^shift: spline coefficients free (projected out), amplitudes
// non-negative. With T the templates, B the spline basis and W the weights it
// minimizes a^T G a - 2 h^T a where
//
//	G = T^T W T - (B^T W T)^T (B^T W B)^-1 (B^T W T),  h = T^T W r
//
// and r is the residual of the spline alone.
//
// Components that are not worth the price of the level are left out.
func (b *bench) evaluate(l *level, f *Family, width, shift float64) fit {
	return b.solve(l, f, width, shift, nil)
}

// solve is evaluate; with a fit given, just the components active in that one are used,
// at no price.
func (b *bench) solve(l *level, f *Family, width, shift float64, like *fit) fit {
	b.weighted = grow(b.weighted, l.n)
	b.draw(l, f, width, shift)
	m := b.m
	b.spline, b.project = grow(b.spline, l.size*m), grow(b.project, l.size*m)
	clear(b.spline)
	for k := 0; k < m; k++ {
		d := &b.draws[b.used[k]]
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
				j, v := int(l.first[i])*m+k, &l.value[i]
				b.spline[j] += wt * v[0]
				b.spline[j+m] += wt * v[1]
				b.spline[j+2*m] += wt * v[2]
				b.spline[j+3*m] += wt * v[3]
			}
		}
		b.h[k] = h
		b.g[k*maxComponents+k] = gg
		for e := k + 1; e < m; e++ {
			other := &b.draws[b.used[e]]
			b.g[k*maxComponents+e] = overlap(d.runs, other.runs, b.weighted, other.values)
		}
	}
	copy(b.project, b.spline)
	l.normal.SolveMany(b.project, m)
	for k := 0; k < m; k++ {
		before := b.g[k*maxComponents+k]
		row := b.g[k*maxComponents : k*maxComponents+m]
		for j := 0; j < l.size; j++ {
			s := b.spline[j*m+k]
			if s == 0 {
				continue
			}
			for e, v := range b.project[j*m+k : (j+1)*m] {
				row[k+e] -= s * v
			}
		}
		// What the spline can describe as well is not evidence.
		if row[k] < 1e-4*before {
			row[k] = 0
		}
		for e := k + 1; e < m; e++ {
			b.g[e*maxComponents+k] = row[e]
		}
	}
	var out fit
	var amp [maxComponents]float64
	var barred [maxComponents]bool
	price := l.price
	if like != nil {
		price = 0
		for k := range m {
			barred[k] = like.amp[b.used[k]] <= 0
		}
	}
	out.drop, out.active = economize(&amp, &b.g, &b.h, &b.most, &barred, m, price)
	out.gain = out.drop - l.price*float64(out.active)
	for k := 0; k < m; k++ {
		out.amp[b.used[k]] = amp[k]
	}
	return out
}

// draw draws the components of f that reach into the level, absorption times
// the continuum, and sets the bounds of their amplitudes. The forest takes its
// share of the continuum redward of Lyman-alpha: what is left blueward at high
// redshift is no continuum to take a share of. Where a family has a forest the
// blue sides of its emission lines are behind it too.
func (b *bench) draw(l *level, f *Family, width, shift float64) {
	b.m = 0
	b.veil.reset(l.n)
	if f.forested {
		forest().draw(&b.veil, &b.row, l.n, l.start-shift+f.proximity, l.step, math.Pow(10, shift)-1)
	}
	for c := range f.components {
		comp := &f.components[c]
		d := &b.draws[c]
		comp.draw(d, l.n, l.start, l.step, shift, width)
		if comp.forest {
			for _, r := range b.veil.runs {
				for i, v := range b.veil.values[r.lo:r.hi] {
					d.values[r.lo+i] += v
				}
				d.include(r.lo, r.hi)
			}
		}
		if len(d.runs) == 0 {
			continue
		}
		for _, r := range d.runs {
			v := d.values[r.lo:r.hi]
			switch {
			case comp.forest:
				red := l.cont[l.pixel(forestAnchor+shift)]
				for i := range v {
					v[i] *= red
				}
			case comp.absorption:
				for i, c := range l.cont[r.lo:r.hi] {
					v[i] *= c
				}
			default:
				for _, q := range b.veil.runs {
					for i := max(q.lo, r.lo); i < min(q.hi, r.hi); i++ {
						d.values[i] *= 1 + b.veil.values[i]
					}
				}
			}
		}
		b.used[b.m], b.most[b.m] = c, comp.bound(l, shift)
		b.m++
	}
}

// bound is the largest amplitude of a component: its own for absorption; for
// emission as many times the continuum at the strongest line inside the
// coverage, or nearest to it.
func (c *component) bound(l *level, shift float64) float64 {
	if c.absorption || c.most == 0 {
		return c.most
	}
	best, at, covered := 0.0, 0, false
	for i := range c.terms {
		t := &c.terms[i]
		in := l.covers(t.logWave + shift)
		if in && !covered || in == covered && t.amp > best {
			best, at, covered = t.amp, l.pixel(t.logWave+shift), in
		}
	}
	if best == 0 {
		return 0
	}
	return c.most * l.cont[at] / best
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

// residual writes flux minus the joint model of the last evaluate, whose
// answer was f, to dst: templates and the spline, which takes up
// A^-1 B^T W T a of its own fit.
func (b *bench) residual(dst []float64, l *level, f *fit) {
	copy(dst, l.resid)
	b.coef = grow(b.coef, l.size)
	clear(b.coef)
	for k := 0; k < b.m; k++ {
		a := f.amp[b.used[k]]
		if a == 0 {
			continue
		}
		d := &b.draws[b.used[k]]
		for _, r := range d.runs {
			for i := r.lo; i < r.hi; i++ {
				dst[i] -= a * d.values[i]
			}
		}
		for j := range b.coef {
			b.coef[j] += b.project[j*b.m+k] * a
		}
	}
	for i := range dst {
		c, v := b.coef[l.first[i]:], &l.value[i]
		dst[i] += v[0]*c[0] + v[1]*c[1] + v[2]*c[2] + v[3]*c[3]
	}
}

// norm returns the square norm of component c in the last evaluate, with the
// spline projected out; 0 if it lies outside the coverage.
func (b *bench) norm(c int) float64 {
	for k := 0; k < b.m; k++ {
		if b.used[k] == c {
			return b.g[k*maxComponents+k]
		}
	}
	return 0
}

// peak is a trial redshift with its joint fit.
type peak struct {
	family *Family
	index  int // of the family in its finder
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
		case right.gain > mid.gain && right.gain >= left.gain && p.shift+h <= hi:
			left, mid = mid, right
			p.shift += h
			right = at(p.shift + h)
			continue
		case left.gain > mid.gain && p.shift-h >= lo:
			right, mid = mid, left
			p.shift -= h
			left = at(p.shift - h)
			continue
		}
		break
	}
	p.fit = mid
	den := left.gain - 2*mid.gain + right.gain
	if den < 0 {
		s := p.shift + 0.5*h*(left.gain-right.gain)/den
		if math.Abs(s-p.shift) < h && s >= lo && s <= hi {
			if f := at(s); f.gain > p.fit.gain {
				p.fit, p.shift = f, s
			}
		}
	}
}
