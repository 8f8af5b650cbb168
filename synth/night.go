package synth

import (
	"bytes"
	"compress/gzip"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path"
	"path/filepath"
	"time"

	"duskline/internal/fitsout"
	"duskline/spectrum"
)

// Options says how large a night is and which one of all possible nights.
type Options struct {
	Seed uint64
	// Objects is the number of spectra beside the broken files; 0 means 320. It
	// is rounded so that every layout has at least one.
	Objects int
}

const defaultObjects = 320

// ErrNotEmpty is wrapped by the error of Night for a folder that has files.
var ErrNotEmpty = errors.New("the folder is not empty")

// plate is a set of fibers observed together and written in one layout.
type plate struct {
	number  int
	layout  string
	share   int // of defaultObjects
	arms    func() []*arm
	write   func(w *fitsout.Writer, e *exposure) error // nil: all objects in one file
	gzip    int                                        // every so many files are compressed; 0 none
	ra, dec float64                                    // of the center
	// topocentric wavelengths are written as observed, without the correction
	// for the motion of the Earth.
	topocentric bool
}

var plates = []plate{
	{number: 1, layout: TableOfPixels, share: 80, arms: logArm, write: writeTable, ra: 118.4, dec: 24.6},
	{number: 2, layout: VectorCells, share: 50, arms: twoArms, write: writeCells, ra: 133.9, dec: 9.2},
	{number: 3, layout: ImageRows, share: 50, arms: logArm, write: writeRows, gzip: 4, ra: 151.2, dec: -3.8},
	{number: 4, layout: LinearImage, share: 50, arms: linearArm, write: writeLinear, ra: 168.7, dec: 17.5, topocentric: true},
	{number: 5, layout: ManyObjects, share: 40, arms: threeArms, ra: 187.3, dec: 31.1},
	{number: 6, layout: VOSpectrum, share: 50, arms: logArm, write: writeVO, gzip: 1, ra: 204.5, dec: 5.9},
}

// Night writes the night of 2031-03-14 into the folder dir, which is made if it
// is not there and must be empty: a folder a plate with FITS files, a folder
// with files that are broken, and the truth table TruthFile. It returns the
// truth in the order of the file names.
//
// The same options give the same bytes on the same machine. 320 objects take
// about two seconds and 23 MB.
func Night(dir string, opts Options) ([]Truth, error) {
	if opts.Objects == 0 {
		opts.Objects = defaultObjects
	}
	if opts.Objects < 0 {
		return nil, fmt.Errorf("synthetic night: %d objects; want 0 for the default or more", opts.Objects)
	}
	if err := emptyFolder(dir); err != nil {
		return nil, fmt.Errorf("synthetic night: %w", err)
	}
	var truth []Truth
	for i := range plates {
		p := &plates[i]
		n := max(1, (opts.Objects*p.share+defaultObjects/2)/defaultObjects)
		rows, err := p.observe(dir, opts.Seed, n)
		if err != nil {
			return nil, fmt.Errorf("synthetic night: plate %d: %w", p.number, err)
		}
		truth = append(truth, rows...)
	}
	rows, err := writeBroken(dir, opts.Seed)
	if err != nil {
		return nil, fmt.Errorf("synthetic night: %w", err)
	}
	truth = append(truth, rows...)
	var table bytes.Buffer
	if err := WriteTruth(&table, truth); err != nil {
		return nil, err
	}
	return truth, os.WriteFile(filepath.Join(dir, TruthFile), table.Bytes(), 0o644)
}

func emptyFolder(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	entries, err := os.ReadDir(dir)
	if err != nil {
		return err
	}
	if len(entries) > 0 {
		return fmt.Errorf("%s: %w; give a new one", dir, ErrNotEmpty)
	}
	return nil
}

// observe writes the files of a plate.
func (p *plate) observe(dir string, seed uint64, n int) ([]Truth, error) {
	folder := fmt.Sprintf("p%02d", p.number)
	if err := os.MkdirAll(filepath.Join(dir, folder), 0o755); err != nil {
		return nil, err
	}
	arms := p.arms()
	var truth []Truth
	var all []*exposure
	for i := range n {
		e, t := p.fiber(arms, seed, i)
		t.File = path.Join(folder, fmt.Sprintf("lr-20310314-p%02d-%03d.fits", p.number, firstFiber+i))
		if p.write == nil {
			t.File = path.Join(folder, fmt.Sprintf("lr-20310314-p%02d.fits", p.number))
			t.Row = i
			all = append(all, e)
			truth = append(truth, t)
			continue
		}
		content, err := encode(func(w *fitsout.Writer) error { return p.write(w, e) })
		if err != nil {
			return nil, err
		}
		if p.gzip > 0 && i%p.gzip == 0 {
			t.File += ".gz"
			if content, err = compress(content); err != nil {
				return nil, err
			}
		}
		if err := os.WriteFile(filepath.Join(dir, filepath.FromSlash(t.File)), content, 0o644); err != nil {
			return nil, err
		}
		truth = append(truth, t)
	}
	if p.write == nil {
		content, err := encode(func(w *fitsout.Writer) error { return writeMany(w, all) })
		if err != nil {
			return nil, err
		}
		return truth, os.WriteFile(filepath.Join(dir, filepath.FromSlash(truth[0].File)), content, 0o644)
	}
	return truth, nil
}

// firstFiber is the number of the first fiber of a plate.
const firstFiber = 101

// fiber observes the i-th object of the plate. Every fiber has a generator of its
// own, so that a smaller night is a part of a larger one.
func (p *plate) fiber(arms []*arm, seed uint64, i int) (*exposure, Truth) {
	r := rand.New(rand.NewPCG(seed, uint64(p.number)<<32|uint64(i)))
	e := &exposure{id: fmt.Sprintf("LR-p%02d-%03d", p.number, firstFiber+i), arms: arms}
	radius, angle := 1.4*math.Sqrt(r.Float64()), 2*math.Pi*r.Float64()
	e.dec = round(p.dec+radius*math.Sin(angle), 1e6)
	e.ra = round(p.ra+radius*math.Cos(angle)/math.Cos(p.dec*math.Pi/180), 1e6)
	// The first plate at 02:30 UTC, then one every 75 minutes.
	e.begin = nightBegin + (2.5+1.25*float64(p.number-1))/24
	if p.topocentric {
		e.velocity = spectrum.BarycentricVelocity(lanternRidge, e.middle(), e.ra, e.dec)
	}
	s := drawSource(r)
	t := s.truth()
	t.ObjectID, t.Layout = e.id, p.layout
	// From a generator of its own, so that all else of the night stays as it is.
	zero := calibrationMotion * rand.New(rand.NewPCG(seed, 1<<63|uint64(p.number)<<32|uint64(i))).NormFloat64()
	e.data, t.SNR = observe(r, arms, s.scene, e.velocity+zero, s.snr)
	return e, t
}

// nightBegin is the Julian date of 2031-03-14, 0h UTC.
const nightBegin = 2462939.5

// isoTime writes a Julian date as FITS does, to the nearest second.
func isoTime(jd float64) string {
	seconds := math.Round((jd - nightBegin) * 86400)
	return time.Date(2031, 3, 14, 0, 0, int(seconds), 0, time.UTC).Format("2006-01-02T15:04:05")
}

// encode returns the bytes of a FITS file.
func encode(write func(w *fitsout.Writer) error) ([]byte, error) {
	var m fitsout.Memory
	w, err := fitsout.NewWriter(&m)
	if err != nil {
		return nil, err
	}
	if err := write(w); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	return m.Bytes(), nil
}

// compress makes a gzip file without name and time.
func compress(content []byte) ([]byte, error) {
	var b bytes.Buffer
	z, err := gzip.NewWriterLevel(&b, gzip.BestSpeed)
	if err != nil {
		return nil, err
	}
	if _, err := z.Write(content); err != nil {
		return nil, err
	}
	if err := z.Close(); err != nil {
		return nil, err
	}
	return b.Bytes(), nil
}
