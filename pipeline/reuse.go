package pipeline

import (
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"path/filepath"
	"strings"
	"sync"

	"duskline/catalog"
)

// reach says which rows of an earlier run a change of what it was made with
// can have touched.
type reach int

const (
	untouched reach = iota // no row
	measured               // rows whose lines were measured: all but those of verdict none
	every                  // all rows
)

// reachOf compares two plans. What is not known here touches every row.
//
//   - Program, build, the line list, a template family, anything unknown: every
//     row. Each family takes part in the judgment of each object.
//   - Settings of section lines and those of continuum that only shape the
//     continuum under the lines: rows whose lines were measured.
//   - The other settings: every row, but section run has no say in results.
//   - Layouts and the manifest: none, since the digest of each input covers how
//     it was read and what the manifest says of it.
func reachOf(old, now *planHead) (reach, []string) {
	worst := untouched
	var why []string
	note := func(r reach, what string) {
		worst = max(worst, r)
		why = append(why, what)
	}
	if old.Program != now.Program || old.Build != now.Build {
		note(every, "program")
	}
	for name := range union(old.Digests, now.Digests) {
		if old.Digests[name] == now.Digests[name] {
			continue
		}
		switch name {
		case settingsDigest, calibrationDigest, layoutsDigest, manifestDigest:
		default:
			note(every, name)
		}
	}
	before, err := ParseSettings([]byte(old.Settings))
	after, err2 := ParseSettings([]byte(now.Settings))
	if err != nil || err2 != nil {
		note(every, settingsDigest)
		return worst, why
	}
	for _, d := range before.Differences(after) {
		key, _, _ := strings.Cut(d, " ")
		section, _, _ := strings.Cut(key, ".")
		switch {
		case section == "run":
		case section == "lines" || onlyMeasures[key]:
			note(measured, key)
		default:
			note(every, key)
		}
	}
	return worst, why
}

// onlyMeasures are settings outside section lines that have no part in finding
// the redshift.
var onlyMeasures = map[string]bool{
	"continuum.clip_low": true, "continuum.clip_high": true, "continuum.iterations": true, "continuum.mask_widths": true,
}

func union(a, b map[string]string) map[string]bool {
	names := map[string]bool{}
	for _, m := range []map[string]string{a, b} {
		for name := range m {
			names[name] = true
		}
	}
	return names
}

// earlier is a run whose rows are taken over where nothing that they depend on
// has changed. It is safe for several goroutines.
type earlier struct {
	run    *Run
	reach  reach
	places map[uint64]place // of inputs, by hashes of their paths

	mu     sync.Mutex
	blocks []*earlierBlock // used last comes last
}

// place is where the objects of an input are.
type place struct {
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
	e := &earlier{run: run, places: map[uint64]place{}}
	var why []string
	if e.reach, why = reachOf(&run.head, now); e.reach != untouched {
		job.Log.Info("what changed since the earlier run", "like", job.Like, "changed", strings.Join(why, ", "),
			"rows_touched", map[reach]string{measured: "those with measured lines", every: "all"}[e.reach])
	}
	if e.reach == every {
		return e, nil
	}
	for {
		in, end, err := r.next()
		if errors.Is(err, io.EOF) {
			run.totals = end
			break
		}
		if err != nil {
			return nil, err
		}
		e.places[pathKey(&in, run.head.Folder)] = place{run.totals.Objects, in.Rows > 1, in.Rows, in.Skip}
		run.totals.Objects += in.Rows
	}
	_, _, run.id, err = readTotals(run.plan)
	return e, err
}

// pathKey hashes a path both as it stands in catalogs and as it is opened.
func pathKey(in *planInput, folder string) uint64 {
	sum := sha256.Sum256(fmt.Appendf(nil, "%q %q", in.Path, in.file(folder)))
	return binary.LittleEndian.Uint64(sum[:])
}

// outcome returns what the earlier run found for an object that was read, if
// the same would be found now.
func (e *earlier) outcome(in *planInput, folder string, row int, digest string) (Outcome, bool) {
	if e == nil || e.reach == every || digest == "" {
		return Outcome{}, false
	}
	p, ok := e.places[pathKey(in, folder)]
	if !ok || p.many != (in.Rows > 1) {
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
