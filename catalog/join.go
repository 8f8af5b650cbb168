package catalog

import (
	"bufio"
	"encoding/gob"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"

	"duskline/internal/spill"
)

// join brings the entries of two catalogs together by object_id. Those whose
// partner has not come yet wait in memory; when they are too many, all of them
// go to files by the hash of their ID, and each file is joined by itself at the
// end. Catalogs of one order wait for nothing.
type join struct {
	folder string
	most   int // bytes that wait in memory
	depth  int // of files within files
	pair   func(old, now *Entry)
	lone   func(side int, id string)

	waiting [2]map[string]Entry
	bytes   int
	parts   []*part // nil before anything went to files
}

// part is a file of entries.
type part struct {
	file *os.File
	out  *bufio.Writer
	enc  *gob.Encoder
}

// sided is an entry on its way through a file.
type sided struct {
	Side  int
	Entry Entry
}

// Files of files of files: a terabyte of entries, with 32 MB at a time in memory.
const (
	joinParts = 32
	joinDepth = 3
)

// What an entry and each of its lines take in memory, with their texts, bytes:
// the sizes of Object and Line on 64 bits are 296 and 200.
const (
	entryCost = 550
	lineCost  = 300
)

func (j *join) add(side int, e Entry) error {
	if other, ok := j.waiting[1-side][e.ObjectID]; ok {
		delete(j.waiting[1-side], e.ObjectID)
		j.bytes -= cost(&other)
		if side == NewSide {
			j.pair(&other, &e)
		} else {
			j.pair(&e, &other)
		}
		return nil
	}
	if j.waiting[side] == nil {
		j.waiting[side] = map[string]Entry{}
	}
	if again, ok := j.waiting[side][e.ObjectID]; ok {
		j.bytes -= cost(&again)
	}
	j.waiting[side][e.ObjectID] = e
	if j.bytes += cost(&e); j.bytes < j.most || j.depth == joinDepth {
		return nil
	}
	return j.spill()
}

func cost(e *Entry) int { return entryCost + lineCost*len(e.Lines) }

// spill moves all that wait to files.
func (j *join) spill() error {
	if j.parts == nil {
		j.parts = make([]*part, joinParts)
	}
	for side, waiting := range j.waiting {
		for id, e := range waiting { // into files that are joined whole: the order does not matter
			key := spill.KeyOf(id)
			p := &j.parts[int(key[j.depth%len(key)])%joinParts]
			if *p == nil {
				f, err := spill.File(j.folder)
				if err != nil {
					return fmt.Errorf("the catalogs are in different orders and too large to be compared in memory: %w", err)
				}
				out := bufio.NewWriterSize(f, 1<<16)
				*p = &part{f, out, gob.NewEncoder(out)}
			}
			if err := (*p).enc.Encode(sided{side, e}); err != nil {
				return err
			}
		}
	}
	j.waiting, j.bytes = [2]map[string]Entry{}, 0
	return nil
}

// finish pairs what is in the files, and tells what has no partner.
func (j *join) finish() error {
	defer j.close()
	if j.parts == nil {
		for side, waiting := range j.waiting {
			for id := range waiting {
				j.lone(side, id)
			}
		}
		j.waiting = [2]map[string]Entry{}
		return nil
	}
	if err := j.spill(); err != nil { // so that partners are in the same file
		return err
	}
	for _, p := range j.parts {
		if p == nil {
			continue
		}
		if err := j.finishPart(p); err != nil {
			return err
		}
	}
	return nil
}

func (j *join) finishPart(p *part) error {
	if err := p.out.Flush(); err != nil {
		return err
	}
	if _, err := p.file.Seek(0, io.SeekStart); err != nil {
		return err
	}
	inner := &join{folder: j.folder, most: j.most, depth: j.depth + 1, pair: j.pair, lone: j.lone}
	defer inner.close()
	dec := gob.NewDecoder(bufio.NewReaderSize(p.file, 1<<16))
	for {
		var s sided
		if err := dec.Decode(&s); errors.Is(err, io.EOF) {
			return inner.finish()
		} else if err != nil {
			return err
		}
		if err := inner.add(s.Side, s.Entry); err != nil {
			return err
		}
	}
}

func (j *join) close() {
	for _, p := range j.parts {
		if p != nil {
			p.file.Close()
		}
	}
	j.parts = nil
}

// loneKept is how many IDs of either side are kept of those that stand on one
// side only.
const loneKept = 10

// firstFew keeps the first few of a list of texts, in order.
func firstFew(list []string, text string, most int) []string {
	at, _ := slices.BinarySearch(list, text)
	if at == most {
		return list
	}
	list = slices.Insert(list, at, text)
	return list[:min(len(list), most)]
}
