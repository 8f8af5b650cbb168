package hydrogen

import (
	"math"
	"sort"
	"sync"
)

// starkComponent is one pair of components of a line in an electric field, at
// shift +-s in units of (3/2) e a_0 F/h, with their joint share of the strength.
type starkComponent struct {
	s     int
	share float64
}

// maxStark is the highest upper level of pressure-broadened Balmer lines.
const maxStark = 20

// starkPatterns holds the patterns of the Balmer lines by upper level.
var starkPatterns = sync.OnceValue(func() *[maxStark + 1][]starkComponent {
	p := new([maxStark + 1][]starkComponent)
	for upper := 3; upper <= maxStark; upper++ {
		p[upper] = starkPattern(upper)
	}
	return p
})

// starkPattern returns the linear Stark pattern of the line 2-upper, averaged
// over directions, in order of s; the shares add to one (Schroedinger 1926;
// Bethe & Salpeter 1957, sections 51 and 65). Parabolic states are written in
// spherical ones, whose radial integrals are known.
func starkPattern(upper int) []starkComponent {
	const lower = 2
	var up, down [MaxLevel + 1]float64
	radialIntegrals(lower, upper, &up, &down)
	strength := map[int]float64{}
	total := 0.0
	eachParabolic(lower, func(k, m int) {
		eachParabolic(upper, func(kk, mm int) {
			if mm-m < -1 || mm-m > 1 {
				return
			}
			amplitude := 0.0
			for l := abs(m); l < lower; l++ {
				c := parabolicWeight(lower, k, l, m)
				if l+1 >= abs(mm) {
					amplitude += c * parabolicWeight(upper, kk, l+1, mm) * up[l] * dipoleAngle(l, m, l+1, mm)
				}
				if l >= 1 && l-1 >= abs(mm) {
					amplitude += c * parabolicWeight(upper, kk, l-1, mm) * down[l] * dipoleAngle(l, m, l-1, mm)
				}
			}
			power := amplitude * amplitude
			if mm != m {
				power /= 2 // |x|^2 + |y|^2 = (|x+iy|^2 + |x-iy|^2)/2
			}
			strength[abs(upper*kk-lower*k)] += power
			total += power
		})
	})
	pattern := make([]starkComponent, 0, len(strength))
	for s, power := range strength {
		if power > 1e-14*total { // forbidden by symmetry up to rounding
			pattern = append(pattern, starkComponent{s, power / total})
		}
	}
	sort.Slice(pattern, func(i, j int) bool { return pattern[i].s < pattern[j].s })
	return pattern
}

// eachParabolic calls f for all n^2 parabolic states; k = n1 - n2.
func eachParabolic(n int, f func(k, m int)) {
	for m := -(n - 1); m <= n-1; m++ {
		top := n - 1 - abs(m)
		for k := -top; k <= top; k += 2 {
			f(k, m)
		}
	}
}

// dipoleAngle returns the angular integral of cos(theta) for mm = m, and of
// sin(theta) exp(+-i phi) for mm = m+-1, between Y_lm and Y_kmm, k = l+-1
// (Bethe & Salpeter 1957, appendix A).
func dipoleAngle(l, m, k, mm int) float64 {
	big := float64(max(l, k))
	norm := math.Sqrt((2*big - 1) * (2*big + 1))
	fm := float64(m)
	q := float64(mm - m)
	switch {
	case q == 0:
		return math.Sqrt(big*big-fm*fm) / norm
	case k > l:
		return -q * math.Sqrt((big+q*fm)*(big+q*fm+1)) / norm
	default:
		return q * math.Sqrt((big-q*fm)*(big-q*fm-1)) / norm
	}
}

// parabolicWeight returns the amplitude of the spherical state (n, l, m) in the
// parabolic state (n, k, m): the Clebsch-Gordan coefficient of two spins j =
// (n-1)/2 with projections (m-k)/2 and (m+k)/2 coupled to l (Park 1960), by the
// sum of Racah.
func parabolicWeight(n, k, l, m int) float64 {
	twoJ := n - 1
	a, b := (twoJ+m-k)/2, (twoJ+m+k)/2 // j + m1, j + m2
	f := factorial
	front := float64(2*l+1) * f(twoJ-l) * f(l) * f(l) / f(twoJ+l+1) *
		f(l+m) * f(l-m) * f(a) * f(twoJ-a) * f(b) * f(twoJ-b)
	sum := 0.0
	for i := 0; i <= twoJ-l; i++ {
		p, q := twoJ-a-i, b-i
		r, t := l-twoJ+a+i, l-b+i
		if p < 0 || q < 0 || r < 0 || t < 0 {
			continue
		}
		term := 1 / (f(i) * f(twoJ-l-i) * f(p) * f(q) * f(r) * f(t))
		if i%2 == 1 {
			term = -term
		}
		sum += term
	}
	return math.Sqrt(front) * sum
}

func factorial(n int) float64 {
	p := 1.0
	for i := 2; i <= n; i++ {
		p *= float64(i)
	}
	return p
}

func abs(n int) int {
	if n < 0 {
		return -n
	}
	return n
}
