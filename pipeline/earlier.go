package pipeline

import (
	"bufio"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"

	"duskline/catalog"
	"duskline/internal/spill"
)

// earlier is a run whose rows are taken over where nothing that they depend on
// has changed. It is safe for several goroutines.
type earlier struct {
	run    *Run
	reach  reach
	plan   *os.File  // of the earlier run, to read single lines of
	places spill.Map // of inputs, by their paths: where their line in the plan begins, and their first object

	mu     sync.Mutex
	blocks []*earlierBlock // used last comes last
	recent []*place        // the same
}

// place is where the objects of an input are in an earlier run.
type place struct {
	key   spill.Key
	known bool // the input is one of that run
	first int64
	many  bool // more than one object, which shapes names
	rows  int64
	skip  []int64
}

type earlierBlock struct {
	number   int
	load     sync.Once
	outcomes []Outcome // nil if the block cannot be used
}

// earlierBlocks bounds the memory: blocks kept at the same time.
const earlierBlocks = 4

// openEarlier finds out what of an earlier run may be taken over.
func openEarlier(job *Job, now *planHead) (*earlier, error) {
	run := &Run{job: Job{Out: job.Like, Base: job.Base}, out: locate(job.Base, job.Like)}
	run.plan = filepath.Join(run.out, planName)
	r, err := openPlan(run.plan)
	if err != nil {
		return nil, inputError("--like %s: %s; give the folder of a run", job.Like, plain(err))
	}
	defer r.Close()
	run.head = r.head
	e := &earlier{run: run, places: spill.Map{Folder: locate(job.Base, job.Out)}}
	var why []string
	if e.reach, why = reachOf(&run.head, now); e.reach != untouched {
		job.Log.Info("what changed since the earlier run", "like", job.Like, "changed", strings.Join(why, ", "),
			"rows_touched", map[reach]string{measured: "those with measured lines", every: "all"}[e.reach])
	}
	if e.reach == every {
		return e, nil
	}
	if err := e.index(r); err != nil {
		return nil, err
	}
	if _, _, run.id, err = readTotals(run.plan); err != nil {
		return nil, err
	}
	e.plan, err = os.Open(run.plan)
	return e, err
}

// index notes where every input of the earlier plan is.
func (e *earlier) index(r *planReader) error {
	for {
		at := r.at
		in, end, err := r.next()
		if errors.Is(err, io.EOF) {
			e.run.totals = end
			return nil
		}
		if err != nil {
			return err
		}
		if _, err := e.places.Put(pathKey(&in, e.run.head.Folder), spill.Value{at, e.run.totals.Objects}); err != nil {
			return fmt.Errorf("the inputs of the earlier run cannot be indexed: %w; make room, then repeat the command", err)
		}
		e.run.totals.Objects += in.Rows
	}
}

func (e *earlier) close() {
	if e == nil {
		return
	}
	e.places.Close()
	if e.plan != nil {
		e.plan.Close()
	}
}

// pathKey hashes a path both as it stands in catalogs and as it is opened.
func pathKey(in *planInput, folder string) spill.Key {
	return spill.KeyOf(fmt.Sprintf("%q %q", in.Path, in.file(folder)))
}

// recentPlaces is how many inputs are remembered: those that workers are at.
const recentPlaces = 64

// place finds an input in the earlier run.
func (e *earlier) place(key spill.Key) (*place, error) {
	e.mu.Lock()
	defer e.mu.Unlock()
	for _, p := range slices.Backward(e.recent) {
		if p.key == key {
			return p, nil
		}
	}
	p := &place{key: key}
	v, ok, err := e.places.Get(key)
	if err != nil {
		return nil, err
	}
	if ok {
		var in planLine
		text, err := bufio.NewReader(io.NewSectionReader(e.plan, v[0], 1<<62)).ReadBytes('\n')
		if err == nil {
			err = json.Unmarshal(text, &in)
		}
		if err != nil {
			return nil, err
		}
		*p = place{key: key, known: true, first: v[1], many: in.Rows > 1, rows: in.Rows, skip: in.Skip}
	}
	if e.recent = append(e.recent, p); len(e.recent) > recentPlaces {
		e.recent = slices.Delete(e.recent, 0, 1)
	}
	return p, nil
}

// outcome returns what the earlier run found for an object that was read, if
// the same would be found now.
func (e *earlier) outcome(in *planInput, folder string, row int, digest string) (Outcome, bool) {
	if e == nil || e.reach == every || digest == "" {
		return Outcome{}, false
	}
	p, err := e.place(pathKey(in, folder))
	if err != nil || !p.known || p.many != (in.Rows > 1) { // what cannot be looked up is computed
		return Outcome{}, false
	}
	object := int64(row)
	for _, s := range p.skip {
		switch {
		case s == int64(row):
			return Outcome{}, false
		case s < int64(row):
			object--
		}
	}
	if object >= p.rows {
		return Outcome{}, false // beyond a limit of the earlier run
	}
	object += p.first
	size := int64(e.run.head.BlockSize)
	outcomes := e.block(int(object / size))
	if outcomes == nil {
		return Outcome{}, false
	}
	out := outcomes[object%size]
	o := &out.Object
	if o.InputDigest != digest || o.SourceFile != catalog.CleanText(in.Path) || o.SourceRow != int64(row) ||
		o.Flags.Has(catalog.Unreadable) || strings.HasPrefix(o.Reason, internalPrefix) ||
		e.reach == measured && o.Verdict != catalog.None {
		return Outcome{}, false
	}
	return out, true
}

// block returns the outcomes of a block, nil if it is missing or damaged.
func (e *earlier) block(number int) []Outcome {
	e.mu.Lock()
	var b *earlierBlock
	for i, have := range e.blocks {
		if have.number == number {
			b = have
			e.blocks = append(e.blocks[:i], e.blocks[i+1:]...)
			break
		}
	}
	if b == nil {
		b = &earlierBlock{number: number}
	}
	e.blocks = append(e.blocks, b)
	if len(e.blocks) > earlierBlocks {
		e.blocks = e.blocks[1:]
	}
	e.mu.Unlock()
	b.load.Do(func() { b.outcomes = e.run.loadBlock(number) })
	return b.outcomes
}

// loadBlock reads a whole block back; nil if it is not there as it was written.
func (r *Run) loadBlock(number int) []Outcome {
	if r.checkBlock(number) != nil {
		return nil
	}
	note, err := r.readNote(number)
	if err != nil {
		return nil
	}
	folder := r.blockFolder(number)
	var out []Outcome
	if readTable(filepath.Join(folder, objectsName), func(o *catalog.Object) error {
		out = append(out, Outcome{Object: *o})
		return nil
	}) != nil || len(out) != note.Objects {
		return nil
	}
	if !loadOwned(filepath.Join(folder, linesName), note.LineCounts, func(i int, l *catalog.Line) {
		out[i].Lines = append(out[i].Lines, *l)
	}) || !loadOwned(filepath.Join(folder, absorbersName), note.AbsorberCounts, func(i int, a *catalog.Absorber) {
		out[i].Absorbers = append(out[i].Absorbers, *a)
	}) {
		return nil
	}
	if r.hasIndices() && !loadOwned(filepath.Join(folder, indicesName), note.IndexCounts, func(i int, x *catalog.Index) {
		out[i].Indices = append(out[i].Indices, *x)
	}) {
		return nil
	}
	return out
}

// loadOwned gives the rows of a file to the objects that own them.
func loadOwned[T catalog.Row](path string, counts []int, give func(owner int, row *T)) bool {
	owner, left := -1, 0
	err := readTable(path, func(row *T) error {
		for left == 0 {
			if owner++; owner == len(counts) {
				return ErrDamaged
			}
			left = counts[owner]
		}
		left--
		give(owner, row)
		return nil
	})
	return err == nil
}

// listEarlier yields the inputs of an earlier run in their order.
func (j *Job) listEarlier(yield func(candidate) error) error {
	r, err := openPlan(filepath.Join(locate(j.Base, j.Like), planName))
	if err != nil {
		return err
	}
	defer r.Close()
	for {
		in, _, err := r.next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		path := in.Path
		if in.Raw != nil {
			path = string(in.Raw)
		}
		if err := yield(candidate{path: path}); err != nil {
			return err
		}
	}
}
