package pipeline

import (
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
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
	taken    int       // objects taken over from an earlier run
}

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
	if err := r.makeBlocks(all); err != nil {
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

// makeBlocks makes the folder of blocks, and its name last.
func (r *Run) makeBlocks(all string) error {
	if _, err := os.Stat(all); err == nil {
		return nil
	}
	if err := os.MkdirAll(all, 0o777); err != nil {
		return err
	}
	return syncFolder(r.out)
}

// fillBlock writes the files of a block and makes them last.
func (r *Run) fillBlock(folder string, b *block) error {
	note := newBlockNote(r, b)
	if err := errors.Join(
		writeTable(note, r, folder, objectsName, b, func(o *Outcome) []catalog.Object { return []catalog.Object{o.Object} }),
		writeTable(note, r, folder, linesName, b, func(o *Outcome) []catalog.Line { return o.Lines }),
		writeTable(note, r, folder, absorbersName, b, func(o *Outcome) []catalog.Absorber { return o.Absorbers }),
	); err != nil {
		return err
	}
	if r.hasIndices() {
		if err := writeTable(note, r, folder, indicesName, b, func(o *Outcome) []catalog.Index { return o.Indices }); err != nil {
			return err
		}
	}
	text, err := note.text()
	if err != nil {
		return err
	}
	if _, err := writeSynced(filepath.Join(folder, noteName), func(w io.Writer) error {
		_, err := w.Write(text)
		return err
	}); err != nil {
		return err
	}
	return syncFolder(folder)
}

// writeTable writes one table of a block and notes what the file must be.
func writeTable[T catalog.Row](note *blockNote, r *Run, folder, name string, b *block, rows func(*Outcome) []T) error {
	var err error
	note.Files[name], err = writeSynced(filepath.Join(folder, name), func(w io.Writer) error {
		out, err := catalog.NewParquet[T](w, r.provenance(""))
		if err != nil {
			return err
		}
		for i := range b.outcomes {
			all := rows(&b.outcomes[i])
			for k := range all {
				if err := out.Write(&all[k]); err != nil {
					return err
				}
			}
		}
		return out.Close()
	})
	return err
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

// checkBlock returns nil if a block is there and its files are as they were
// written. The error wraps fs.ErrNotExist if the block is not there and
// ErrDamaged if it is not as it must be.
func (r *Run) checkBlock(number int) error {
	note, err := r.readNote(number)
	if err != nil {
		return err
	}
	for _, name := range r.blockFiles() {
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
