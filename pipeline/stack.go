package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strings"

	"duskline/catalog"
	"duskline/internal/fitsout"
	"duskline/redshift"
	"duskline/spectrum"

	"golang.org/x/sync/errgroup"
)

// StackJob asks for the rest-frame composite of a run's secure objects.
type StackJob struct {
	Run  string // run folder
	Base string // absolute folder that relative paths start from
	Out  string // FITS file to write

	Family string // only objects of this family, all if empty
	Class  string // only objects of this class, all if empty
	MinSNR float64
	// Exclude names objects to leave out, by object_id or source_file.
	Exclude map[string]bool
	// ExcludeDigest identifies the list of them.
	ExcludeDigest string
	Clip          float64 // sigmas beyond which a pixel of an object is left out, 0 for never
	MinObjects    int     // objects that a pixel of the composite needs
	MaxError      float64 // error from the noise alone that it may have, a fraction of the continuum
	Workers       int     // spectra worked on at the same time, 0 for one a processor; changes no result
	Program       string  // version of the program
}

// StackReport says what went into a composite.
type StackReport struct {
	Objects    int // in the composite
	Excluded   int // named by Exclude
	Missed     int // names of Exclude that no object of the whole run has
	Unreadable int // secure objects that are not as the run read them, or cannot be read
	Unfit      int // without a continuum
	Why        []string
	Pixels     int     // of the composite
	First      float64 // rest wavelengths, Angstrom
	Last       float64
	Clipped    float64 // fraction of the objects' pixels that were clipped
}

// clipRounds is how often pixels far from the mean are left out and the mean is
// taken again.
const clipRounds = 2

// maxWhy bounds the reasons that a report repeats.
const maxWhy = 5

// Stack makes the composite. Each spectrum is read again, laid on the grid of
// the run, divided by the continuum of the redshift search, and shifted to rest
// on the grid of redshift.CompositeStep; then the weighted mean over objects is
// taken, once as it is and clipRounds times without what lies more than Clip
// sigmas from the mean before, sigma being error and scatter in quadrature.
// Every round reads the inputs again, so that memory does not grow with their
// number. The sums are in order of the run: the same bytes for any number of
// workers.
//
// The error is an *InputError when the command has to be changed.
func Stack(ctx context.Context, job StackJob) (*StackReport, error) {
	st, err := newStacker(job)
	if err != nil {
		return nil, err
	}
	sums := &stackSums{}
	for round := 0; round <= clipRounds; round++ {
		if round > 0 && job.Clip <= 0 {
			break
		}
		next := newStackSums()
		if round > 0 {
			next.reference(sums, job.Clip)
		}
		st.begin()
		err := st.eachSpectrum(ctx, func(r *restSpectrum) error {
			next.add(r)
			return nil
		})
		if err != nil {
			return nil, err
		}
		sums = next
	}
	rep := &st.report
	for name := range job.Exclude {
		if !st.named[name] {
			rep.Missed++
		}
	}
	first, last := sums.trim(job.MinObjects, job.MaxError)
	if first >= last {
		return nil, inputError("no rest wavelength has the %d objects that --min-objects and the error of %g that --max-error asks for: %d secure objects of %s in %s can be stacked; take another family or a larger run",
			job.MinObjects, job.MaxError, rep.Objects, st.what(), job.Run)
	}
	rep.Pixels = last - first
	rep.First, rep.Last = sums.wave(first), sums.wave(last-1)
	if sums.seen > 0 {
		rep.Clipped = float64(sums.clipped) / float64(sums.seen)
	}
	return rep, st.write(ctx, sums, first, last)
}

// stacker goes through the members of a composite.
type stacker struct {
	job    StackJob
	out    string // run folder, absolute
	head   planHead
	planID string
	chain  *Chain
	open   func(string) (SpectrumFile, error)
	run    Run // as far as reading needs it
	report StackReport
	named  map[string]bool // names of the exclude list that were met
	lost   map[int64]bool  // rows of the catalog that could not be used
	idLen  int             // longest texts of the members
	path   int
}

func newStacker(job StackJob) (*stacker, error) {
	st := &stacker{job: job, out: locate(job.Base, job.Run), named: map[string]bool{}}
	plan := filepath.Join(st.out, planName)
	var err error
	st.head, _, st.planID, err = readTotals(plan)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, inputError("%s holds no run; give the folder of a finished run", job.Run)
	}
	if err != nil {
		return nil, err
	}
	if _, err := os.Stat(filepath.Join(st.out, objectsName)); err != nil {
		return nil, inputError("%s has no %s: the run is not finished; finish it with duskline run --out %s", job.Run, objectsName, job.Run)
	}
	set, err := ParseSettings([]byte(st.head.Settings))
	if err != nil {
		return nil, fmt.Errorf("%s was begun with settings of another version: %w", job.Run, err)
	}
	if set.Grid.Step > redshift.CompositeStep*(1+1e-6) {
		return nil, inputError("%s has grid.step = %g, coarser than the %g dex of composites; stack a run with a finer grid", job.Run, set.Grid.Step, redshift.CompositeStep)
	}
	if st.chain, err = NewChain(set, st.head.Recipes...); err != nil {
		return nil, err
	}
	if job.Family == "" && job.Class == "" {
		return nil, inputError("give --family or --class: what is to be stacked")
	}
	known := []string{}
	for _, f := range st.chain.finder.Families() {
		known = append(known, f.Name)
		if f.Name == job.Family {
			known = nil
			break
		}
	}
	if job.Family != "" && known != nil {
		return nil, inputError("%s knows no family %q; its families are %s", job.Run, job.Family, strings.Join(known, ", "))
	}
	st.run.head = st.head
	if st.head.Manifest != "" {
		if st.run.job.Manifest, err = ReadManifest(filepath.Join(st.out, st.head.Manifest), st.head.Manifest); err != nil {
			return nil, err
		}
	}
	st.open, err = openWith(st.head.Layouts)
	return st, err
}

// what names the objects that are stacked.
func (st *stacker) what() string {
	var parts []string
	if st.job.Family != "" {
		parts = append(parts, "family "+st.job.Family)
	}
	if st.job.Class != "" {
		parts = append(parts, "class "+st.job.Class)
	}
	return strings.Join(parts, " and ")
}

func (st *stacker) begin() {
	st.report, st.lost, st.idLen, st.path = StackReport{}, map[int64]bool{}, 1, 1
}

// member is an object to be stacked and the file that holds it.
type member struct {
	row    int64 // in the catalog
	named  bool  // on the list of those left out
	in     planInput
	object catalog.Object
}

// eachMember visits the secure objects asked for, in order of the run. The rows
// of the catalog are the spectra of the plan, in its order.
func (st *stacker) eachMember(visit func(m *member) error) error {
	plan, err := openPlan(filepath.Join(st.out, planName))
	if err != nil {
		return err
	}
	defer plan.Close()
	var m member
	var left int64
	return readTable(filepath.Join(st.out, objectsName), func(o *catalog.Object) error {
		for left == 0 {
			if m.in, _, err = plan.next(); err != nil {
				return fmt.Errorf("%s has more rows than its plan: %w", st.job.Run, ErrDamaged)
			}
			left = m.in.Rows
		}
		left--
		m.row++
		m.object, m.named = *o, st.excluded(o)
		if o.Verdict != catalog.Secure || math.IsNaN(o.Redshift) || !(o.SNR >= st.job.MinSNR) ||
			st.job.Family != "" && o.Family != st.job.Family || st.job.Class != "" && o.Class != st.job.Class {
			return nil
		}
		return visit(&m)
	})
}

// excluded reports whether an object is on the list of those left out.
func (st *stacker) excluded(o *catalog.Object) bool {
	out := false
	for _, name := range []string{o.ObjectID, o.SourceFile} {
		if st.job.Exclude[name] {
			st.named[name], out = true, true
		}
	}
	return out
}

// restSpectrum is one object in the rest frame.
type restSpectrum struct {
	member member
	grid   spectrum.Grid // divided by the continuum
	lo, hi int           // pixels of the composite that it reaches
	flux   []float64
	weight []float64
	cover  []float64

	bench      *Bench
	unreadable error
	unfit      bool
}

// eachSpectrum visits the members in order, read and shifted. A few at a time
// are worked on together.
func (st *stacker) eachSpectrum(ctx context.Context, visit func(r *restSpectrum) error) error {
	workers := st.job.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	slots := make([]restSpectrum, 2*workers)
	filled := 0
	flush := func() error {
		if err := ctx.Err(); err != nil {
			return err
		}
		var g errgroup.Group
		g.SetLimit(workers)
		for i := range slots[:filled] {
			g.Go(func() error {
				st.prepare(&slots[i])
				return nil
			})
		}
		if err := g.Wait(); err != nil {
			return err
		}
		for i := range slots[:filled] {
			if !st.count(&slots[i]) {
				continue
			}
			if err := visit(&slots[i]); err != nil {
				return err
			}
		}
		filled = 0
		return nil
	}
	err := st.eachMember(func(m *member) error {
		if m.named {
			st.report.Excluded++
			return nil
		}
		slots[filled].member = *m
		if filled++; filled == len(slots) {
			return flush()
		}
		return nil
	})
	if err != nil {
		return err
	}
	return flush()
}

// count books a member and reports whether it can be stacked.
func (st *stacker) count(r *restSpectrum) bool {
	o := &r.member.object
	switch {
	case r.unreadable != nil:
		st.lost[r.member.row] = true
		st.report.Unreadable++
		if len(st.report.Why) < maxWhy {
			st.report.Why = append(st.report.Why, fmt.Sprintf("%s: %v", o.SourceFile, r.unreadable))
		}
		return false
	case r.unfit:
		st.lost[r.member.row] = true
		st.report.Unfit++
		return false
	}
	st.report.Objects++
	st.idLen, st.path = max(st.idLen, len(fitsout.ASCII(o.ObjectID))), max(st.path, len(fitsout.ASCII(o.SourceFile)))
	return true
}

// prepare reads one member again and brings it to rest.
func (st *stacker) prepare(r *restSpectrum) {
	r.unreadable, r.unfit = nil, false
	if r.bench == nil {
		r.bench = st.chain.NewBench()
	}
	s, err := st.read(&r.member)
	if err != nil {
		r.unreadable = err
		return
	}
	b := r.bench
	b.lay(s)
	if !st.chain.finder.Normalize(&r.grid, &b.grid, b.scratch) {
		r.unfit = true
		return
	}
	r.shift(math.Log10(1 + r.member.object.Redshift))
	r.unfit = r.lo >= r.hi
}

// read reads a spectrum again and makes sure that its bytes are those of the
// run.
func (st *stacker) read(m *member) (s *spectrum.Spectrum, err error) {
	defer func() {
		if p := recover(); p != nil {
			s, err = nil, fmt.Errorf("the reader stopped on it: %v", p)
		}
	}()
	f, err := st.open(m.in.file(st.head.Folder))
	if err != nil {
		return nil, errors.New(plainRead(err))
	}
	defer f.Close()
	row := int(m.object.SourceRow)
	if row < 0 || row >= f.Count() {
		return nil, fmt.Errorf("has no spectrum %d any more", row)
	}
	s, from, err := st.run.readObject(&m.in, f, row)
	if err == nil && from.digest != m.object.InputDigest {
		return nil, errors.New("was written to since the run")
	}
	return s, err
}
