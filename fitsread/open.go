package fitsread

import (
	"crypto/sha256"
	"errors"
	"fmt"
	"math"
	"slices"
	"sort"

	"duskline/spectrum"
)

// Options says how files are read. The zero value reads everything that is
// understood without settings.
type Options struct {
	// Layouts are tried before the built-in ones, in their order.
	Layouts []Layout
	// Force names the one layout, of Layouts or built in, that must be used.
	Force string
	// MaxPixels bounds the pixels of one array; 0 means 4,194,304.
	MaxPixels int
	// MaxUnpacked bounds the bytes that a gzipped file may unpack to, all of
	// them in memory; 0 means 1 GiB.
	MaxUnpacked int64
}

// File is an open FITS file whose layout has been chosen. Its methods may be
// called from several goroutines.
type File struct {
	path string
	opts Options
	src  *source
	hdus []*hdu
	plan *plan
	base [sha256.Size]byte // digest of what all spectra share
}

// Open reads the headers of a file and chooses its layout. Gzipped files are told
// by their first bytes. Every error is a *ReadError; pipes, devices and folders
// are refused without being opened.
func Open(path string, opts Options) (f *File, err error) {
	if opts.MaxPixels <= 0 {
		opts.MaxPixels = 1 << 22
	}
	if opts.MaxUnpacked <= 0 {
		opts.MaxUnpacked = 1 << 30
	}
	f = &File{path: path, opts: opts}
	defer func() {
		if err != nil {
			if f.src != nil {
				f.src.close()
			}
			f = nil
		}
	}()
	defer f.guard(&err)
	if f.src, err = openSource(path, opts.MaxUnpacked); err != nil {
		return f, err
	}
	return f, f.load()
}

// load walks the source and chooses the layout.
func (f *File) load() (err error) {
	if f.hdus, err = walk(f.src, f.src.size); err != nil {
		return err
	}
	heard, rec := f.recorded()
	if err := rec.heard(heard.choose()); err != nil {
		return err
	}
	f.plan = heard.plan
	f.base = f.baseDigest(rec.sum)
	return nil
}

// guard gives errors the file's name and, as a last resort, turns a panic that a
// hostile file may yet cause into an error: one bad file must not end a run.
func (f *File) guard(err *error) {
	if r := recover(); r != nil {
		*err = fault(ErrInternal, -1, "report this file to the maintainers", "the reader stopped on it: %v", r)
	}
	*err = named(*err, f.path)
}

// Close closes the file.
func (f *File) Close() error { return f.src.close() }

// Count returns the number of spectra in the file, at least 1.
func (f *File) Count() int { return int(f.plan.count()) }

// Read returns spectrum i, from 0. Every Segment obeys spectrum.Segment.Check; a
// spectrum without a single good pixel is returned as such. Errors are *ReadError.
//
// Panics if i is not below Count.
func (f *File) Read(i int) (*spectrum.Spectrum, error) { return f.ReadAs(i, Nobody()) }

// Identity is the name and the position of an object: degrees, NaN where not known.
type Identity struct {
	ObjectID string
	RA, Dec  float64
}

// Nobody is an identity of which nothing is known.
func Nobody() Identity { return Identity{RA: math.NaN(), Dec: math.NaN()} }

// Identity returns the name and position of spectrum i as the file has them,
// without reading the spectrum. The error is that of a disk that gives them not.
//
// Panics if i is not below Count.
func (f *File) Identity(i int) (Identity, error) {
	heard, rec := f.recorded()
	g, row := heard.locate(i)
	who := Identity{ObjectID: heard.identify(g, int64(i), row)}
	who.RA, who.Dec = heard.position(g, row)
	return who, named(rec.heard(nil), f.path)
}

func (f *File) locate(i int) (*group, int64) {
	if i < 0 || i >= f.Count() {
		panic(fmt.Sprintf("fitsread: spectrum %d of %d", i, f.Count()))
	}
	return f.plan.locate(int64(i))
}

// ReadAs is Read for an object of whom more is known than the file says: what who
// has goes before the name and position of the file, also where wavelengths are
// to be corrected for the motion of the Earth.
func (f *File) ReadAs(i int, who Identity) (*spectrum.Spectrum, error) {
	heard, rec := f.recorded()
	s, err := heard.readAs(i, who)
	if err = named(rec.heard(err), f.path); err != nil {
		return nil, err
	}
	s.InputDigest = f.finish(rec.sum, i)
	return s, nil
}

func (f *File) readAs(i int, who Identity) (s *spectrum.Spectrum, err error) {
	g, row := f.locate(i)
	defer f.guard(&err)
	s = &spectrum.Spectrum{SourceFile: f.path, SourceRow: i, Layout: f.plan.layout,
		FluxUnit: g.arms[0].fluxUnit, BaryVelocity: math.NaN()}
	s.ObjectID = f.identify(g, int64(i), row)
	s.RA, s.Dec = f.position(g, row)
	if who.ObjectID != "" {
		s.ObjectID = who.ObjectID
	}
	if !math.IsNaN(who.RA) && !math.IsNaN(who.Dec) {
		s.RA, s.Dec = who.RA, who.Dec
	}
	for _, note := range f.plan.guesses {
		s.Warn(spectrum.LayoutAssumed, "%s", note)
	}
	if err := f.readSegments(s, g, row); err != nil {
		return nil, err
	}
	f.settleMedium(s, g)
	f.settleFrame(s, g)
	if err := f.src.unchanged(); err != nil {
		return nil, err
	}
	return s, nil
}

// readSegments reads all arms, or all orders, shortest wavelength first. A piece
// that cannot be used is left out as long as another can.
func (f *File) readSegments(s *spectrum.Spectrum, g *group, row int64) error {
	var firstErr error
	add := func(a *arm, row int64, name string) error {
		pixels, losses := s.Pixels, slices.Clone(s.Losses)
		seg, err := f.segment(s, a, row)
		if errors.Is(err, ErrBadData) {
			s.Pixels, s.Losses = pixels, losses
			if firstErr == nil {
				firstErr = err
			}
			return nil
		}
		if err != nil {
			return err
		}
		if name != "" {
			seg.Name = name
		}
		if seg.Resolution == nil && g.obs.power > 0 {
			seg.Resolution = []float64{g.obs.power}
		}
		s.Segments = append(s.Segments, seg)
		return nil
	}
	for k := range g.arms {
		a := &g.arms[k]
		if g.orders == 0 {
			if err := add(a, row, ""); err != nil {
				return err
			}
			continue
		}
		for r := range g.orders {
			if err := add(a, r, fmt.Sprintf("row %d", r)); err != nil {
				return err
			}
		}
	}
	if len(s.Segments) == 0 {
		return firstErr
	}
	if firstErr != nil {
		s.Warn(spectrum.PixelsDropped, "a part was left out: %v", firstErr)
	}
	sort.SliceStable(s.Segments, func(i, j int) bool { return s.Segments[i].Wave[0] < s.Segments[j].Wave[0] })
	return nil
}

// settleMedium takes air or vacuum from what is written with the wavelengths,
// from the header, or from the rule of assumeMedium.
func (f *File) settleMedium(s *spectrum.Spectrum, g *group) {
	w := &g.arms[0].wave
	switch {
	case w.mediumKnown:
		s.Medium = w.medium
	case g.obs.mediumKnown:
		s.Medium = g.obs.medium
	default:
		s.Medium = g.obs.assumeMedium(s.Segments[0].Wave[0], s.Segments[0].LogUniform)
		s.Warn(spectrum.MediumAssumed, "air or vacuum not stated; %s assumed", s.Medium)
	}
}

func (f *File) settleFrame(s *spectrum.Spectrum, g *group) {
	s.Frame = g.obs.frame
	if g.arms[0].wave.atRest {
		s.Frame = spectrum.RestFrame
		s.Warn(spectrum.RestFrameStated, "the wavelengths are named as in the rest frame")
		return
	}
	switch g.obs.frameDoubt {
	case "":
	case spectrum.RestFrameStated:
		s.Warn(spectrum.RestFrameStated, "%s", g.obs.frameWhy)
	default:
		s.Warn(g.obs.frameDoubt, "%s", g.obs.frameWhy)
	}
	var doubt string
	if s.BaryVelocity, doubt = g.obs.baryVelocity(s.RA, s.Dec); doubt != "" {
		s.Warn(spectrum.FrameUncertain, "%s", doubt)
	}
	if g.obs.frameDoubt == spectrum.FrameAssumed && math.IsNaN(s.BaryVelocity) {
		s.Frame = spectrum.Barycentric // nothing to correct with: the same doubt, one name
	}
}
