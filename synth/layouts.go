package synth

import (
	"math"

	"duskline/internal/fitsout"
	"duskline/spectrum"
)

// The layouts that a night is written in, as the truth table names them.
const (
	TableOfPixels = "table, a row a pixel"   // log10 wavelength, flux, inverse variance, flag
	VectorCells   = "vector cells, two arms" // one row an arm, air, standard deviation
	ImageRows     = "rows of an image"       // flux, inverse variance, flag; WAVE-LOG axis
	LinearImage   = "image, linear axis"     // topocentric, error in an extension
	ManyObjects   = "many objects, three arms"
	VOSpectrum    = "IVOA spectrum" // nm, variance
)

const fluxUnit = "10**-17 erg s-1 cm-2 Angstrom-1"

// Lantern Ridge does not exist; this is where it would be.
var lanternRidge = spectrum.Site{LonDeg: -112.6417, LatDeg: 34.2083, HeightM: 2140}

// exposure is what one fiber recorded, ready to be written.
type exposure struct {
	id      string
	ra, dec float64
	begin   float64 // Julian date, UTC
	// velocity of the observer towards the source in km/s that the wavelengths
	// still contain: 0 where they are written as barycentric.
	velocity float64
	arms     []*arm
	data     []pixels
}

const exposureSeconds = 2700

func (e *exposure) middle() float64 { return e.begin + exposureSeconds/2/86400.0 }

// describe fills the cards that say what was observed.
func (e *exposure) describe(h *fitsout.Header) {
	night(h, e.begin)
	h.Text("OBJECT", e.id, "target")
	h.Float("RA", e.ra, "[deg] right ascension")
	h.Float("DEC", e.dec, "[deg] declination")
}

func night(h *fitsout.Header, begin float64) {
	h.Comment("Synthetic data: there is no such survey, place or object.")
	h.Text("TELESCOP", "Lantern Ridge", "invented")
	h.Text("RADESYS", "ICRS", "")
	h.Text("TIMESYS", "UTC", "")
	h.Text("DATE-OBS", isoTime(begin), "start of exposure")
	h.Float("MJD-AVG", round(spectrum.JDToMJD(begin+exposureSeconds/2/86400.0), 1e7), "[d] middle of exposure")
	h.Float("EXPTIME", exposureSeconds, "[s]")
}

// round keeps a number to a fraction of one, so that headers stay readable.
func round(v, perUnit float64) float64 { return math.Round(v*perUnit) / perUnit }

// barycentric says that the wavelengths are in that frame.
func barycentric() *fitsout.Header {
	h := &fitsout.Header{}
	h.Text("SPECSYS", "BARYCENT", "wavelengths are barycentric")
	return h
}

// writeTable writes one row a pixel.
func writeTable(w *fitsout.Writer, e *exposure) error {
	primary := &fitsout.Header{}
	e.describe(primary)
	if err := w.Empty(primary); err != nil {
		return err
	}
	t, err := w.Table(barycentric(), "SPECTRUM", []fitsout.Column{
		{Name: "LOG_WAVE", Kind: fitsout.Float64, Unit: "log(Angstrom)", UCD: "em.wl", Comment: "log10 of the vacuum wavelength"},
		{Name: "FLUX", Kind: fitsout.Float32, Unit: fluxUnit},
		{Name: "IVAR", Kind: fitsout.Float32, Comment: "inverse variance of FLUX"},
		{Name: "MASK", Kind: fitsout.Int16, Comment: "0 good, 1 bad"},
	})
	if err != nil {
		return err
	}
	p := e.data[0]
	for i, wave := range e.arms[0].wave {
		t.Float(math.Log10(wave))
		t.Float(p.flux[i])
		t.Float(p.ivar[i])
		t.Int(p.flag(i))
		if err := t.EndRow(); err != nil {
			return err
		}
	}
	return t.Close()
}

// writeCells writes a table of one row for every arm.
func writeCells(w *fitsout.Writer, e *exposure) error {
	primary := &fitsout.Header{}
	e.describe(primary)
	if err := w.Empty(primary); err != nil {
		return err
	}
	for k, a := range e.arms {
		n := len(a.wave)
		t, err := w.Table(barycentric(), a.name, []fitsout.Column{
			{Name: "WAVELENGTH", Kind: fitsout.Float64, Repeat: n, Unit: "Angstrom", UCD: "em.wl;obs.atmos", Comment: "in air"},
			{Name: "FLUX", Kind: fitsout.Float32, Repeat: n, Unit: fluxUnit, UCD: "phot.flux.density;em.wl"},
			{Name: "SIGMA", Kind: fitsout.Float32, Repeat: n, Unit: fluxUnit, UCD: "stat.error;phot.flux.density;em.wl", Comment: "0 where bad"},
		})
		if err != nil {
			return err
		}
		t.Floats(a.wave)
		t.Floats(e.data[k].flux)
		t.Floats(e.data[k].sigma())
		if err := t.EndRow(); err != nil {
			return err
		}
		if err := t.Close(); err != nil {
			return err
		}
	}
	return nil
}

// writeRows writes the rows of one image. It does not say in which velocity
// frame the wavelengths are, as happens in life.
func writeRows(w *fitsout.Writer, e *exposure) error {
	h := &fitsout.Header{}
	e.describe(h)
	wave, p := e.arms[0].wave, e.data[0]
	n := len(wave)
	h.Text("CTYPE1", "WAVE-LOG", "vacuum wavelength, uniform in its logarithm")
	h.Text("CUNIT1", "Angstrom", "")
	h.Float("CRPIX1", 1, "")
	h.Float("CRVAL1", wave[0], "")
	h.Float("CDELT1", wave[0]*math.Log(wave[n-1]/wave[0])/float64(n-1), "")
	h.Text("CTYPE2", "", "rows as ROW1 to ROW3 say")
	h.Text("ROW1", "FLUX", "")
	h.Text("ROW2", "IVAR", "inverse variance")
	h.Text("ROW3", "MASK", "0 good, 1 bad")
	h.Text("BUNIT", fluxUnit, "of row 1")
	data := make([]float32, 3*n)
	for i := range n {
		data[i] = float32(p.flux[i])
		data[n+i] = float32(p.ivar[i])
		data[2*n+i] = float32(p.flag(i))
	}
	return fitsout.WriteImage(w, h, "", []int{n, 3}, data)
}

// writeLinear writes a topocentric spectrum with its standard deviation in an
// extension, and where and when it was taken.
func writeLinear(w *fitsout.Writer, e *exposure) error {
	axis := func(h *fitsout.Header) {
		h.Text("CTYPE1", "WAVE", "vacuum wavelength")
		h.Text("CUNIT1", "Angstrom", "")
		h.Float("CRPIX1", 1, "")
		h.Float("CRVAL1", e.arms[0].wave[0], "")
		h.Float("CDELT1", round(e.arms[0].wave[1]-e.arms[0].wave[0], 1e9), "")
		h.Text("SPECSYS", "TOPOCENT", "wavelengths as observed")
		h.Text("BUNIT", fluxUnit, "")
	}
	h := &fitsout.Header{}
	e.describe(h)
	axis(h)
	h.Float("OBSGEO-L", lanternRidge.LonDeg, "[deg] east longitude")
	h.Float("OBSGEO-B", lanternRidge.LatDeg, "[deg] geodetic latitude")
	h.Float("OBSGEO-H", lanternRidge.HeightM, "[m] height")
	p := e.data[0]
	n := len(p.flux)
	if err := fitsout.WriteImage(w, h, "", []int{n}, single(p.flux)); err != nil {
		return err
	}
	ext := &fitsout.Header{}
	axis(ext)
	return fitsout.WriteImage(w, ext, "ERROR", []int{n}, single(p.sigma()))
}

// writeVO writes the table of an IVOA spectrum (Spectrum data model 1.2) in
// nanometers with the variance of the flux.
func writeVO(w *fitsout.Writer, e *exposure) error {
	primary := &fitsout.Header{}
	e.describe(primary)
	if err := w.Empty(primary); err != nil {
		return err
	}
	h := barycentric()
	h.Text("VOCLASS", "SPECTRUM 1.00", "data model")
	h.Text("VOPUB", "Lantern Ridge", "publisher, invented")
	h.Text("TITLE", "Lantern Ridge 2031-03-14 "+e.id, "")
	h.Text("OBJECT", e.id, "target")
	h.Float("RA_TARG", e.ra, "[deg]")
	h.Float("DEC_TARG", e.dec, "[deg]")
	h.Float("TMID", round(spectrum.JDToMJD(e.middle()), 1e7), "[d] MJD of mid-exposure")
	h.Float("TELAPSE", exposureSeconds, "[s]")
	t, err := w.Table(h, "SPECTRUM", []fitsout.Column{
		{Name: "WAVE", Kind: fitsout.Float64, Unit: "nm", UCD: "em.wl", Utype: "Spectrum.Data.SpectralAxis.Value"},
		{Name: "FLUX", Kind: fitsout.Float32, Unit: fluxUnit, UCD: "phot.flux.density;em.wl", Utype: "Spectrum.Data.FluxAxis.Value"},
		{Name: "VARIANCE", Kind: fitsout.Float32, Unit: "10**-34 erg2 s-2 cm-4 Angstrom-2", UCD: "stat.variance;phot.flux.density;em.wl"},
		{Name: "QUALITY", Kind: fitsout.Int16, UCD: "meta.code.qual;phot.flux.density;em.wl", Utype: "Spectrum.Data.FluxAxis.Quality"},
	})
	if err != nil {
		return err
	}
	p := e.data[0]
	sigma := p.sigma()
	for i, wave := range e.arms[0].wave {
		t.Float(wave / 10)
		t.Float(p.flux[i])
		t.Float(sigma[i] * sigma[i])
		t.Int(p.flag(i))
		if err := t.EndRow(); err != nil {
			return err
		}
	}
	return t.Close()
}

// writeMany writes all exposures into one file: for every arm an image with an
// object a row, its inverse variance and the wavelengths; then the targets.
func writeMany(w *fitsout.Writer, all []*exposure) error { return writeManyOf(w, all, 0) }

// writeManyOf also states the resolving power, if it is not 0.
func writeManyOf(w *fitsout.Writer, all []*exposure, power float64) error {
	primary := &fitsout.Header{}
	night(primary, all[0].begin)
	if power > 0 {
		primary.Float("SPEC_RP", power, "resolving power")
	}
	if err := w.Empty(primary); err != nil {
		return err
	}
	for k, a := range all[0].arms {
		n := len(a.wave)
		flux := make([]float32, 0, n*len(all))
		ivar := make([]float32, 0, n*len(all))
		for _, e := range all {
			flux = append(flux, single(e.data[k].flux)...)
			ivar = append(ivar, single(e.data[k].ivar)...)
		}
		h := barycentric()
		h.Text("BUNIT", "Angstrom", "")
		h.Comment("Vacuum wavelengths of the columns of " + a.name + "_FLUX.")
		if err := fitsout.WriteImage(w, h, a.name+"_WAVELENGTH", []int{n}, a.wave); err != nil {
			return err
		}
		h = &fitsout.Header{}
		h.Text("BUNIT", fluxUnit, "")
		if err := fitsout.WriteImage(w, h, a.name+"_FLUX", []int{n, len(all)}, flux); err != nil {
			return err
		}
		if err := fitsout.WriteImage(w, nil, a.name+"_IVAR", []int{n, len(all)}, ivar); err != nil {
			return err
		}
	}
	t, err := w.Table(nil, "TARGETS", []fitsout.Column{
		{Name: "TARGET_ID", Kind: fitsout.Text, Repeat: 16, UCD: "meta.id;meta.main"},
		{Name: "RA", Kind: fitsout.Float64, Unit: "deg", UCD: "pos.eq.ra;meta.main"},
		{Name: "DEC", Kind: fitsout.Float64, Unit: "deg", UCD: "pos.eq.dec;meta.main"},
	})
	if err != nil {
		return err
	}
	for _, e := range all {
		t.Text(e.id)
		t.Float(e.ra)
		t.Float(e.dec)
		if err := t.EndRow(); err != nil {
			return err
		}
	}
	return t.Close()
}

// flag is 1 for a bad pixel.
func (p *pixels) flag(i int) int64 {
	if p.bad[i] {
		return 1
	}
	return 0
}

// sigma returns standard deviations, 0 for bad pixels.
func (p *pixels) sigma() []float64 {
	out := make([]float64, len(p.ivar))
	for i, v := range p.ivar {
		if v > 0 {
			out[i] = 1 / math.Sqrt(v)
		}
	}
	return out
}

func single(values []float64) []float32 {
	out := make([]float32, len(values))
	for i, v := range values {
		out[i] = float32(v)
	}
	return out
}
