package pipeline

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"

	"duskline/catalog"
)

// block is a run of objects that is written as a whole.
type block struct {
	number   int
	outcomes []Outcome // in order of the plan
	left     int       // objects not done yet
	internal int       // objects spoiled by an internal error
}

// blockNote is the file block.json of a finished block: what it belongs to and
// what its files must be.
type blockNote struct {
	Plan     string `json:"plan"` // digest of the plan
	Block    int    `json:"block"`
	Objects  int    `json:"objects"`
	Internal int    `json:"internal_errors"`
	// LineCounts has the number of rows of the line table for each object.
	LineCounts []int               `json:"line_counts"`
	Files      map[string]fileNote `json:"files"`
}

type fileNote struct {
	Size   int64  `json:"size"`
	SHA256 string `json:"sha256"`
}

const noteName = "block.json"

// blocks returns how many blocks the plan is cut into.
func (r *Run) blocks() int {
	size := int64(r.head.BlockSize)
	return int((r.totals.Objects + size - 1) / size)
}

// blockLen returns how many objects a block has.
func (r *Run) blockLen(number int) int {
	size := int64(r.head.BlockSize)
	return int(min(size, r.totals.Objects-int64(number)*size))
}

func (r *Run) blockFolder(number int) string {
	return filepath.Join(r.out, blocksName, fmt.Sprintf("%06d", number))
}

func (r *Run) provenance() catalog.Provenance {
	return catalog.NewProvenance(r.head.Program, r.head.Digests)
}

// writeBlock writes a block under a temporary name and renames it into place.
// If another process put the same block there first, that one stays: they are
// equal.
func (r *Run) writeBlock(b *block) error {
	err := r.tryBlock(b)
	if err == nil || r.checkBlock(b.number) == nil {
		return nil
	}
	return fmt.Errorf("block %d of %s cannot be written: %w; make room or mend the folder, then repeat the command to go on",
		b.number, r.job.Out, err)
}

func (r *Run) tryBlock(b *block) error {
	all := filepath.Join(r.out, blocksName)
	if err := os.MkdirAll(all, 0o777); err != nil {
		return err
	}
	tmp := filepath.Join(all, fmt.Sprintf("%s%06d-%s", unfinished, b.number, rand.Text()))
	if err := os.Mkdir(tmp, 0o777); err != nil {
		return err
	}
	defer os.RemoveAll(tmp)
	if err := r.fillBlock(tmp, b); err != nil {
		return err
	}
	final := r.blockFolder(b.number)
	if err := os.Rename(tmp, final); err != nil {
		if r.checkBlock(b.number) == nil {
			return nil
		}
		if err := discard(final); err != nil {
			return err
		}
		if err := os.Rename(tmp, final); err != nil {
			return err
		}
	}
	return syncFolder(all)
}

// fillBlock writes the files of a block and makes them last.
func (r *Run) fillBlock(folder string, b *block) error {
	note := blockNote{Plan: r.id, Block: b.number, Objects: len(b.outcomes), Internal: b.internal, Files: map[string]fileNote{}}
	var err error
	if note.Files[objectsName], err = writeTable(filepath.Join(folder, objectsName), r.provenance(), func(write func(*catalog.Object) error) error {
		for i := range b.outcomes {
			if err := write(&b.outcomes[i].Object); err != nil {
				return err
			}
			note.LineCounts = append(note.LineCounts, len(b.outcomes[i].Lines))
		}
		return nil
	}); err != nil {
		return err
	}
	if note.Files[linesName], err = writeTable(filepath.Join(folder, linesName), r.provenance(), func(write func(*catalog.Line) error) error {
		for i := range b.outcomes {
			for k := range b.outcomes[i].Lines {
				if err := write(&b.outcomes[i].Lines[k]); err != nil {
					return err
				}
			}
		}
		return nil
	}); err != nil {
		return err
	}
	text, err := json.Marshal(note)
	if err != nil {
		return err
	}
	if _, err := writeSynced(filepath.Join(folder, noteName), func(w io.Writer) error {
		_, err := w.Write(append(text, '\n'))
		return err
	}); err != nil {
		return err
	}
	return syncFolder(folder)
}

func writeTable[T catalog.Row](path string, p catalog.Provenance, rows func(write func(*T) error) error) (fileNote, error) {
	return writeSynced(path, func(w io.Writer) error {
		out, err := catalog.NewParquet[T](w, p)
		if err != nil {
			return err
		}
		if err := rows(out.Write); err != nil {
			return err
		}
		return out.Close()
	})
}

// writeSynced writes a new file, makes it last, and returns its size and
// digest.
func writeSynced(path string, write func(w io.Writer) error) (fileNote, error) {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return fileNote{}, err
	}
	defer f.Close()
	sum := sha256.New()
	if err := write(io.MultiWriter(f, sum)); err != nil {
		return fileNote{}, err
	}
	if err := f.Sync(); err != nil {
		return fileNote{}, err
	}
	info, err := f.Stat()
	if err != nil {
		return fileNote{}, err
	}
	return fileNote{info.Size(), hex.EncodeToString(sum.Sum(nil))}, f.Close()
}

// discard takes a folder out of the way and removes it.
func discard(folder string) error {
	aside := filepath.Join(filepath.Dir(folder), unfinished+rand.Text())
	if err := os.Rename(folder, aside); err != nil {
		if errors.Is(err, fs.ErrNotExist) {
			return nil
		}
		return err
	}
	return os.RemoveAll(aside)
}

// readNote reads and checks block.json. The error wraps fs.ErrNotExist if the
// block is not there and ErrDamaged if it is not as it must be.
func (r *Run) readNote(number int) (*blockNote, error) {
	folder := r.blockFolder(number)
	if _, err := os.Stat(folder); err != nil {
		return nil, err
	}
	damaged := func(format string, args ...any) error {
		return fmt.Errorf("block %d of %s is %w: %s", number, r.job.Out, ErrDamaged, fmt.Sprintf(format, args...))
	}
	text, err := os.ReadFile(filepath.Join(folder, noteName))
	if err != nil {
		return nil, damaged("%s", plain(err))
	}
	note := &blockNote{}
	if err := json.Unmarshal(text, note); err != nil {
		return nil, damaged("%s: %s", noteName, err)
	}
	switch {
	case note.Plan != r.id || note.Block != number:
		return nil, damaged("it belongs to block %d of another plan", note.Block)
	case note.Objects != r.blockLen(number) || len(note.LineCounts) != note.Objects:
		return nil, damaged("it has %d objects, want %d", note.Objects, r.blockLen(number))
	}
	return note, nil
}

// checkBlock returns nil if a block is there and its files are as they were
// written.
func (r *Run) checkBlock(number int) error {
	note, err := r.readNote(number)
	if err != nil {
		return err
	}
	for _, name := range []string{objectsName, linesName} {
		got, err := noteOf(filepath.Join(r.blockFolder(number), name))
		if err != nil {
			return fmt.Errorf("block %d of %s is %w: %s: %s", number, r.job.Out, ErrDamaged, name, plain(err))
		}
		if got != note.Files[name] {
			return fmt.Errorf("block %d of %s is %w: %s is not as it was written", number, r.job.Out, ErrDamaged, name)
		}
	}
	return nil
}

func noteOf(path string) (fileNote, error) {
	f, err := os.Open(path)
	if err != nil {
		return fileNote{}, err
	}
	defer f.Close()
	sum := sha256.New()
	n, err := io.Copy(sum, f)
	return fileNote{n, hex.EncodeToString(sum.Sum(nil))}, err
}

// finishedBlocks looks for the blocks that are there. Damaged ones are removed,
// to be done again.
func (r *Run) finishedBlocks(ctx context.Context) (map[int]bool, error) {
	there := map[int]bool{}
	var objects int64
	for number := range r.blocks() {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		err := r.checkBlock(number)
		switch {
		case err == nil:
			there[number] = true
			objects += int64(r.blockLen(number))
		case errors.Is(err, ErrDamaged):
			r.job.Log.Warn("a block is done again", "reason", err)
			if err := discard(r.blockFolder(number)); err != nil {
				return nil, fmt.Errorf("a damaged block cannot be removed: %w; remove it and repeat the command", err)
			}
		case !errors.Is(err, fs.ErrNotExist):
			return nil, err
		}
	}
	r.job.Progress.Working(r.totals.Objects, objects)
	return there, nil
}
