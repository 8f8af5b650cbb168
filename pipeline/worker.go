package pipeline

import (
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"runtime"
	"runtime/debug"
	"strings"

	"duskline/catalog"
	"duskline/fitsread"
	"duskline/spectrum"
)

// task is one object to be worked on: row of an input, for a place in a block.
type task struct {
	block *block
	place int
	in    *planInput
	row   int
	// elsewhere is the length of a block that another process did; the task
	// is then nothing but this news on its way to the collector.
	elsewhere int
}

// result is a finished task.
type result struct {
	task
	outcome  Outcome
	internal bool // the row reports a defect of the program
	taken    bool // the row was taken over from an earlier run
}

// objectWorker turns tasks into results. It keeps hold of the last file: the
// spectra of one file mostly come one after another.
type objectWorker struct {
	run     *Run
	shelf   *shelf
	held    *shelved
	science Worker
}

// fault is why an object has no spectrum.
type fault struct {
	reason   string
	internal bool
}

// do works on one object. Whatever is wrong with it becomes a row.
func (w *objectWorker) do(t task) result {
	s, from, bad := w.read(t)
	if bad != nil {
		r := result{task: t, internal: bad.internal}
		r.outcome.Object = w.run.unreadObject(t.in, t.row)
		r.outcome.Object.Flags = catalog.Unreadable
		r.outcome.Object.Reason = bad.reason
		if math.IsNaN(from.magnitude) {
			from.magnitude = r.outcome.Object.Magnitude
		}
		r.complete(from)
		return r
	}
	s.SourceFile, s.SourceRow = t.in.Path, t.row
	id, ra, dec := s.ObjectID, s.RA, s.Dec
	r := result{task: t}
	if out, same := w.run.earlier.outcome(t.in, w.run.head.Folder, t.row, from.digest); same {
		r.outcome, r.taken = out, true
		return r
	}
	if r.outcome, bad = w.process(s); bad == nil {
		if r.outcome.Object.ObjectID == "" {
			r.outcome.Object.ObjectID = id
		}
		r.complete(from)
		bad = w.inspect(&r)
	}
	if bad != nil {
		r.internal = true
		r.outcome = Outcome{Object: blankObject()}
		o := &r.outcome.Object
		o.ObjectID, o.RA, o.Dec, o.Reason = id, ra, dec, bad.reason
		r.complete(from)
	}
	return r
}

// complete fills in what the engine knows better than the science.
func (r *result) complete(from origin) {
	o := &r.outcome.Object
	o.SourceFile, o.SourceRow = r.in.Path, int64(r.row)
	if o.ObjectID == "" {
		o.ObjectID = fallbackID(r.in, r.row)
	}
	if o.InputDigest == "" {
		o.InputDigest = from.digest
	}
	o.Magnitude = from.magnitude
	if !(o.RA >= 0 && o.RA <= 360 && o.Dec >= -90 && o.Dec <= 90) {
		o.RA, o.Dec = math.NaN(), math.NaN() // headers of surveys hold -999 and the like
	}
	o.Reason = strings.Join(strings.Fields(o.Reason), " ")
	for i := range r.outcome.Lines {
		r.outcome.Lines[i].ObjectID = o.ObjectID
	}
	for i := range r.outcome.Absorbers {
		r.outcome.Absorbers[i].ObjectID = o.ObjectID
	}
	for i := range r.outcome.Indices {
		r.outcome.Indices[i].ObjectID = o.ObjectID
	}
}

// inspect makes sure that the rows may be written: one that breaks the rules
// of the catalog must not sink the block.
func (w *objectWorker) inspect(r *result) *fault {
	err := catalog.Check(&r.outcome.Object)
	for i := range r.outcome.Lines {
		if err == nil {
			err = catalog.Check(&r.outcome.Lines[i])
		}
	}
	for i := range r.outcome.Absorbers {
		if err == nil {
			err = catalog.Check(&r.outcome.Absorbers[i])
		}
	}
	for i := range r.outcome.Indices {
		if err == nil {
			err = catalog.Check(&r.outcome.Indices[i])
		}
	}
	if err == nil {
		return nil
	}
	w.run.job.Log.Error("an object came out with values that a catalog must not hold",
		"block", r.block.number, "object", r.outcome.Object.ObjectID, "file", r.in.Path, "row", r.row, "error", err)
	return &fault{internalPrefix + err.Error(), true}
}

// read returns the spectrum of a task and where it comes from, or what is wrong
// with it.
func (w *objectWorker) read(t task) (s *spectrum.Spectrum, from origin, bad *fault) {
	from.magnitude = math.NaN()
	if t.in.Trouble != "" {
		return nil, from, &fault{t.in.Trouble, t.in.Internal}
	}
	if w.held == nil || w.held.in != t.in {
		w.release()
		w.held = w.shelf.take(t.in)
	}
	if w.held.fault != nil {
		return nil, from, w.held.fault
	}
	defer func() {
		if p := recover(); p != nil {
			s, bad = nil, w.run.report(t.in.Path, t.row, p)
		}
	}()
	s, from, err := w.run.readObject(t.in, w.held.file, t.row)
	if err != nil {
		return nil, from, readFault(err, t.in.Path)
	}
	return s, from, nil
}

func (w *objectWorker) release() {
	if w.held != nil {
		w.shelf.giveBack(w.held)
		w.held = nil
	}
}

// process runs the science on one spectrum. After a panic the worker's scratch
// cannot be trusted and is replaced.
func (w *objectWorker) process(s *spectrum.Spectrum) (out Outcome, bad *fault) {
	defer func() {
		if p := recover(); p != nil {
			bad = w.run.report(s.SourceFile, s.SourceRow, p)
			w.science = nil
		}
	}()
	if w.science == nil {
		w.science = w.run.job.Processor.NewWorker()
	}
	return w.science.Process(s), nil
}

// report logs a panic with its stack and returns what the row says.
func (r *Run) report(file string, row int, p any) *fault {
	r.job.Log.Error("an internal error stopped one object; the run goes on",
		"file", file, "row", row, "panic", fmt.Sprint(p), "stack", string(debug.Stack()))
	return &fault{internalReason(p), true}
}

// internalPrefix begins the reason of a row that a defect of the program spoiled.
const internalPrefix = "internal error: "

// internalReason describes a recovered panic by its value and the place of
// its cause, without anything that changes from run to run. It is called by
// the deferred function that recovered.
func internalReason(p any) string {
	pcs := make([]uintptr, 64)
	frames := runtime.CallersFrames(pcs[:runtime.Callers(0, pcs)])
	where, raised := "", false
	for {
		f, more := frames.Next()
		switch {
		case strings.HasPrefix(f.Function, "runtime."):
			raised = raised || f.Function == "runtime.gopanic"
		case raised:
			where = fmt.Sprintf(" (%s:%d)", filepath.Base(f.File), f.Line)
		}
		if where != "" || !more {
			return fmt.Sprintf("%s%v%s", internalPrefix, p, where)
		}
	}
}

// readFault says why an input could not be read. It names the file as the plan
// does, wherever the run is repeated.
func readFault(err error, path string) *fault {
	var re *fitsread.ReadError
	if !errors.As(err, &re) {
		return &fault{fmt.Sprintf("%s: %s", path, plain(err)), false}
	}
	named := *re
	named.File = path
	return &fault{named.Error(), errors.Is(err, fitsread.ErrInternal)}
}

// fallbackID names an object whose file does not.
func fallbackID(in *planInput, row int) string {
	name := filepath.Base(in.Path)
	for _, suffix := range []string{".gz", ".fz", ".fits", ".fit", ".fts"} {
		if len(name) > len(suffix) && strings.EqualFold(name[len(name)-len(suffix):], suffix) {
			name = name[:len(name)-len(suffix)]
		}
	}
	if in.Rows > 1 {
		return fmt.Sprintf("%s-%d", name, row)
	}
	return name
}

// blankObject is a row of which nothing is known.
func blankObject() catalog.Object {
	nan := math.NaN()
	return catalog.Object{
		RA: nan, Dec: nan, Class: catalog.Unknown, Redshift: nan, RedshiftErr: nan, Confidence: nan, Verdict: catalog.None,
		RivalRedshift: nan, Gap: nan, RStat: nan, SNR: nan, WaveMin: nan, WaveMax: nan, Chi2Dof: nan, BaryVelocity: nan, Magnitude: nan,
	}
}
