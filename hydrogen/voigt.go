package hydrogen

import "math"

// Faddeeva returns w(z) = exp(-z^2) erfc(-i z) to a relative accuracy of about
// 1e-14 in the upper half plane, for the real and the imaginary part alone. In
// the lower half plane w(z) = 2 exp(-z^2) - w(-z), which overflows to infinity
// where w does and is less accurate near its zeros. NaN gives NaN. It does not
// allocate.
//
// Method: trapezoidal rule for the integral over exp(-t^2)/(z-t), corrected by
// the residue of the pole (Chiarella & Reichel 1968), on whichever of two
// interlaced node sets keeps away from z (Hunter & Regan 1972; Al Azah &
// Chandler-Wilde 2021). The sums over +t and -t are joined so that neither part
// loses digits where it is small.
func Faddeeva(z complex128) complex128 {
	x, y := real(z), imag(z)
	if math.IsNaN(x) || math.IsNaN(y) {
		return complex(math.NaN(), math.NaN())
	}
	if y < 0 {
		re, im := faddeevaUpper(-x, -y)
		er, ei := expMinusSquare(x, y)
		return complex(2*er-re, 2*ei-im)
	}
	re, im := faddeevaUpper(x, y)
	return complex(re, im)
}

// VoigtReference returns H(a,u) = Re w(u + i a) to a relative accuracy of about
// 1e-14, for checks and for tables; Voigt is the fast one. a >= 0; NaN for
// negative a.
func VoigtReference(a, u float64) float64 {
	if !(a >= 0) || math.IsNaN(u) {
		return math.NaN()
	}
	re, _ := faddeevaUpper(u, a)
	return re
}

// expMinusSquare returns exp(-(x + i y)^2).
func expMinusSquare(x, y float64) (re, im float64) {
	// -(x^2 - y^2) as a product keeps the digits where x and y are close.
	m := math.Exp((y - x) * (y + x))
	s, c := math.Sincos(2 * x * y)
	if s == 0 {
		return m * c, 0
	}
	return m * c, -m * s
}

// maxNodes is the most node pairs that a rule uses.
const maxNodes = 14

// trapezoid is a quadrature rule for w(z): step h and the weights
// (2h/pi) exp(-t^2) at the nodes t = k h (whole) and t = (k + 1/2) h (half).
type trapezoid struct {
	h           float64
	n           int
	whole, half [maxNodes]float64
}

// fineRule has a discretization error of exp(-(pi/h)^2) = 7e-18 and leaves out
// less than exp(-6.5^2) = 5e-19; the error of coarseRule is 2e-8 and that of
// its last node 1e-9.
var (
	fineRule   = newTrapezoid(0.5, 13)
	coarseRule = newTrapezoid(0.75, 6)
)

func newTrapezoid(h float64, n int) trapezoid {
	r := trapezoid{h: h, n: n}
	for k := 0; k < n; k++ {
		t := h * float64(k)
		r.whole[k] = 2 * h / math.Pi * math.Exp(-t*t)
		t += h / 2
		r.half[k] = 2 * h / math.Pi * math.Exp(-t*t)
	}
	r.whole[0] /= 2 // t = 0 has no partner
	return r
}

// faddeevaUpper returns w(x + i y) for y >= 0.
func faddeevaUpper(x, y float64) (re, im float64) {
	negative := x < 0
	x = math.Abs(x)
	switch {
	case math.IsInf(x, 0) || math.IsInf(y, 0):
		return 0, 0
	case x > 1e8 || y > 1e8:
		// i/(sqrt(pi) z); the next term is smaller by 1/(2 z^2).
		m := math.Max(x, y)
		p, q := x/m, y/m
		d := math.Sqrt(math.Pi) * m * (p*p + q*q)
		re, im = q/d, p/d
	default:
		re, im = fineRule.apply(x, y)
	}
	if negative {
		im = -im
	}
	return re, im
}

// apply returns w(x + i y) for finite x >= 0, y >= 0. The pair of nodes +-t adds
// g (y (|z|^2 + t^2) + i x (|z|^2 - t^2)) / |z^2 - t^2|^2.
func (r *trapezoid) apply(x, y float64) (re, im float64) {
	phase := x / r.h
	phase -= math.Floor(phase)
	t, weights, sign := r.h/2, &r.half, 1.0
	if phase >= 0.25 && phase <= 0.75 {
		t, weights, sign = 0, &r.whole, -1.0
	}
	y2 := y * y
	norm := x*x + y2
	for k := 0; k < r.n; k++ {
		minus, plus := x-t, x+t
		g := weights[k] / ((minus*minus + y2) * (plus*plus + y2))
		re += g * (norm + t*t)
		im += g * (minus*plus + y2)
		t += r.h
	}
	re *= y
	im *= x
	if y < math.Pi/r.h && x < 27.5 { // beyond, exp(-z^2) is below every digit
		er, ei := expMinusSquare(x, y)
		s, c := math.Sincos(2 * math.Pi * phase)
		e := sign * math.Exp(2*math.Pi/r.h*y)
		dr, di := 1+e*c, -e*s
		d := 2 / (dr*dr + di*di)
		re += d * (er*dr + ei*di)
		im += d * (ei*dr - er*di)
	}
	return re, im
}

// Voigt returns the Voigt function H(a,u) = Re w(u + i a), normalized so that
// H(0,u) = exp(-u^2) and the integral over u is sqrt(pi), to a relative accuracy
// of 1e-6 everywhere, the far wings at small a included. a is the damping
// parameter, u the distance from the center in Doppler widths. a >= 0; NaN for
// negative a and for NaN. It does not allocate.
//
// Inside |z| = 8 the trapezoidal rule of Faddeeva with a coarser step; outside,
// the sixth convergent of the continued fraction of Laplace, which is the
// Gauss-Hermite rule of six nodes (Gautschi 1970).
func Voigt(a, u float64) float64 {
	if !(a >= 0) || math.IsNaN(u) {
		return math.NaN()
	}
	u = math.Abs(u)
	norm := u*u + a*a
	if norm < 64 || (a < 1e-18 && u < 27.5) {
		if a == 0 {
			return math.Exp(-u * u)
		}
		re, _ := coarseRule.apply(u, a)
		return re
	}
	if norm > 1e16 {
		re, _ := faddeevaUpper(u, a)
		return re
	}
	// w = i z (s^2 - 7 s + 33/4) / (s^3 - 15/2 s^2 + 45/4 s - 15/8) / sqrt(pi), s = z^2.
	sr, si := (u-a)*(u+a), 2*u*a
	// Numerator n = s (s - 7) + 33/4, times i z.
	nr, ni := sr*(sr-7)-si*si+8.25, si*(2*sr-7)
	pr, pi := -a*nr-u*ni, u*nr-a*ni
	// Denominator d = ((s - 15/2) s + 45/4) s - 15/8.
	qr, qi := (sr-7.5)*sr-si*si+11.25, si*(2*sr-7.5)
	dr, di := qr*sr-qi*si-1.875, qr*si+qi*sr
	return (pr*dr + pi*di) / (dr*dr + di*di) / sqrtPi
}

const sqrtPi = 1.77245385090551602729816748334114518
