package redshift

import (
	"math"

	"gonum.org/v1/gonum/dsp/fourier"
)

// denseScan correlates composites with a spectrum at all lags by FFT, on
// binned pixels: a composite has thousands of them, all of which count, so that
// the gather of lines does not pay (Glazebrook, Offer & Deeley 1998). With r
// the residual of the spline, c the continuum, w the weights and T the composite
// without what the spline takes up,
//
//	num(k) = sum_i w_i r_i c_i T(i-k),  den(k) = sum_i w_i c_i^2 T(i-k)^2
//
// It only nominates; the binning costs a part of the contrast of lines narrower than a bin,
// no redshift.
type denseScan struct {
	fft        *fourier.FFT
	start      float64 // log10 wavelength of the first bin's center
	step       float64
	ready      bool // num and den belong to the spectrum at hand
	num, den   []complex128
	work       []complex128
	real       []float64
	kernels    map[*Composite]*kernel
	length     int // of the transforms
	corr, norm []float64
}

// kernel holds the conjugate transforms of a composite and of its square.
type kernel struct {
	shape, square []complex128
	start         float64 // log10 wavelength of its first bin's center
}

// denseBin is the bin in dex: a tenth of the width in which absorption lines
// of a galaxy are seen would be finer, at four times the cost.
const denseBin = 4e-4

// reset forgets the spectrum of before.
func (s *denseScan) reset() { s.ready = false }

// bins returns how many pixels of a level make a bin.
func (l *level) bins() int { return max(1, int(math.Round(denseBin/l.step))) }

// load transforms the spectrum.
func (s *denseScan) load(l *level) {
	factor := l.bins()
	n := (l.n + factor - 1) / factor
	step := l.step * float64(factor)
	longest := int(math.Ceil((tableEnd - tableStart) / step))
	length := 1
	for length < n+longest {
		length *= 2
	}
	if length != s.length || step != s.step {
		s.fft, s.length, s.kernels = fourier.NewFFT(length), length, map[*Composite]*kernel{}
		s.work, s.real = make([]complex128, length/2+1), make([]float64, length)
		s.num, s.den = make([]complex128, length/2+1), make([]complex128, length/2+1)
	}
	s.step, s.start = step, l.start+0.5*float64(factor-1)*l.step
	sum := func(dst []complex128, at func(i int) float64) {
		clear(s.real)
		for i := range l.n {
			s.real[i/factor] += at(i)
		}
		s.fft.Coefficients(dst, s.real)
	}
	sum(s.num, func(i int) float64 { return l.weight[i] * l.resid[i] * l.cont[i] })
	sum(s.den, func(i int) float64 { return l.weight[i] * l.cont[i] * l.cont[i] })
	s.ready = true
}

// kernel returns the transforms of a composite, made at first use.
func (s *denseScan) kernel(c *Composite) *kernel {
	if k := s.kernels[c]; k != nil {
		return k
	}
	k := &kernel{shape: make([]complex128, s.length/2+1), square: make([]complex128, s.length/2+1)}
	first := tableStart + float64(c.high.from)*tableStep
	k.start = first + 0.5*(s.step-tableStep)
	bins := int(float64(c.high.to-c.high.from)*tableStep/s.step) + 1
	mean := func(dst []complex128, of func(v float64) float64) {
		clear(s.real)
		// The nodes of the table that fall on each bin.
		count := make([]int, bins)
		for i := c.high.from; i < c.high.to; i++ {
			// A hair more, for a node on the border of two bins.
			if b := int(float64(i-c.high.from)*(tableStep/s.step) + 1e-6); b < bins {
				s.real[b] += of(c.high.values[i])
				count[b]++
			}
		}
		for b, n := range count {
			if n > 1 {
				s.real[b] /= float64(n)
			}
		}
		s.fft.Coefficients(dst, s.real)
		for i, v := range dst {
			dst[i] = complex(real(v), -imag(v))
		}
	}
	mean(k.shape, func(v float64) float64 { return v })
	mean(k.square, func(v float64) float64 { return v * v })
	s.kernels[c] = k
	return k
}

// correlate writes num and den of a composite for the shifts first + j steps of
// the level in log10(1+z), j below the length of the two, by linear
// interpolation between bins. Shifts at which the spectrum and the composite do not overlap get zero.
func (s *denseScan) correlate(num, den []float64, l *level, c *Composite, first float64) {
	if !s.ready {
		s.load(l)
	}
	k := s.kernel(c)
	s.corr, s.norm = grow(s.corr, s.length), grow(s.norm, s.length)
	s.multiply(s.corr, s.num, k.shape)
	s.multiply(s.norm, s.den, k.square)
	least := 0.0
	for _, v := range s.norm {
		least = math.Max(least, v)
	}
	least *= 1e-9 // rounding of the transforms
	for j := range num {
		p := (first + float64(j)*l.step - (s.start - k.start)) / s.step
		q := math.Floor(p)
		u := p - q
		a := ((int(q) % s.length) + s.length) % s.length
		b := (a + 1) % s.length
		num[j] = (1-u)*s.corr[a] + u*s.corr[b]
		den[j] = (1-u)*s.norm[a] + u*s.norm[b]
		if den[j] <= least {
			num[j], den[j] = 0, 0
		}
	}
}

// multiply writes the correlation of data with a kernel.
func (s *denseScan) multiply(dst []float64, data, kernel []complex128) {
	for i, v := range data {
		s.work[i] = v * kernel[i]
	}
	s.fft.Sequence(dst, s.work)
	scale := 1 / float64(s.length)
	for i := range dst {
		dst[i] *= scale
	}
}
