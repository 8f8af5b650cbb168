package pipeline

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"

	"duskline/catalog"

	"github.com/google/renameio/v2"
)

// Gather joins the blocks, in order, into the catalogs and counts them. All
// blocks must be there. The catalogs replace older ones when all of them are
// whole. Equal plans give equal bytes.
//
// Objects whose object_id came before get a number after it, such as "x#2", so
// that object_id is a key; their lines follow.
func (r *Run) Gather(ctx context.Context) (*Summary, error) {
	r.job.Progress.Gathering()
	summary := newSummary(r.head, r.totals)
	var widths catalog.Widths
	if err := r.measure(ctx, summary, &widths); err != nil {
		return nil, err
	}
	out, err := r.openCatalogs(&widths)
	if err != nil {
		return nil, err
	}
	defer out.cleanup()
	if err := r.eachObject(ctx, out.object); err != nil {
		return nil, err
	}
	if err := r.eachLine(ctx, out.line); err != nil {
		return nil, err
	}
	if err := out.finish(); err != nil {
		return nil, err
	}
	text, err := summary.json()
	if err != nil {
		return nil, err
	}
	if err := writeAtomic(filepath.Join(r.out, summaryName), func(w io.Writer) error {
		_, err := w.Write(text)
		return err
	}); err != nil {
		return nil, err
	}
	return summary, r.sweep()
}

// measure is the first pass: it checks every block, counts, and finds the
// widths of the FITS columns.
func (r *Run) measure(ctx context.Context, summary *Summary, widths *catalog.Widths) error {
	for number := range r.blocks() {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := r.checkBlock(number); err != nil {
			return fmt.Errorf("the catalogs cannot be written: %w; repeat the command to do the block again", err)
		}
		note, err := r.readNote(number)
		if err != nil {
			return err
		}
		summary.InternalErrors += int64(note.Internal)
	}
	if err := r.eachObject(ctx, func(o *catalog.Object, repeated bool) error {
		summary.add(o)
		if repeated {
			summary.RepeatedIDs++
		}
		widths.AddObject(o)
		return nil
	}); err != nil {
		return err
	}
	return r.eachLine(ctx, func(l *catalog.Line) error {
		summary.Lines++
		widths.AddLine(l)
		return nil
	})
}

// eachObject visits the objects of all blocks in order, with unique IDs.
func (r *Run) eachObject(ctx context.Context, visit func(o *catalog.Object, repeated bool) error) error {
	ids := idGiver{}
	for number := range r.blocks() {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := readTable(filepath.Join(r.blockFolder(number), objectsName), func(o *catalog.Object) error {
			var repeated bool
			o.ObjectID, repeated = ids.unique(o.ObjectID)
			return visit(o, repeated)
		}); err != nil {
			return err
		}
	}
	return nil
}

// eachLine visits the lines of all blocks in order, with the IDs that
// eachObject gives.
func (r *Run) eachLine(ctx context.Context, visit func(*catalog.Line) error) error {
	ids := idGiver{}
	for number := range r.blocks() {
		if err := ctx.Err(); err != nil {
			return err
		}
		note, err := r.readNote(number)
		if err != nil {
			return err
		}
		owners := make([]string, 0, note.Objects)
		if err := readTable(filepath.Join(r.blockFolder(number), objectsName), func(o *catalog.Object) error {
			id, _ := ids.unique(o.ObjectID)
			owners = append(owners, id)
			return nil
		}); err != nil {
			return err
		}
		object, left := -1, 0
		if err := readTable(filepath.Join(r.blockFolder(number), linesName), func(l *catalog.Line) error {
			for left == 0 {
				if object++; object == len(owners) {
					return fmt.Errorf("block %d of %s is %w: it has more lines than it counts", number, r.job.Out, ErrDamaged)
				}
				left = note.LineCounts[object]
			}
			left--
			l.ObjectID = owners[object]
			return visit(l)
		}); err != nil {
			return err
		}
	}
	return nil
}

// readTable visits the rows of one Parquet file.
func readTable[T catalog.Row](path string, visit func(*T) error) error {
	f, err := os.Open(path)
	if err != nil {
		return err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return err
	}
	table, err := catalog.OpenParquet[T](f, info.Size())
	if err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	defer table.Close()
	for {
		var row T
		if err := table.Next(&row); errors.Is(err, io.EOF) {
			return nil
		} else if err != nil {
			return fmt.Errorf("%s: %w", path, err)
		}
		if err := visit(&row); err != nil {
			return err
		}
	}
}

// idGiver tells repeated IDs apart. It holds hashes: a survey has millions of
// IDs, and two that share a hash are only told apart needlessly.
type idGiver map[uint64]int32

func (g idGiver) unique(id string) (string, bool) {
	key := hashID(id)
	g[key]++
	if g[key] == 1 {
		return id, false
	}
	for {
		numbered := id + "#" + strconv.Itoa(int(g[key]))
		if other := hashID(numbered); g[other] == 0 {
			g[other] = 1
			return numbered, true
		}
		g[key]++
	}
}

func hashID(id string) uint64 {
	sum := sha256.Sum256([]byte(id))
	return binary.LittleEndian.Uint64(sum[:])
}

// catalogs are the files that Gather writes, none of them in place yet.
type catalogs struct {
	pending []*renameio.PendingFile
	closers []io.Closer // of the writers, in order of pending

	fits    *catalog.FITS
	csv     *catalog.CSV[catalog.Object]
	objects *catalog.Parquet[catalog.Object]
	lines   *catalog.Parquet[catalog.Line]
}

func (r *Run) openCatalogs(widths *catalog.Widths) (*catalogs, error) {
	c := &catalogs{}
	open := func(name string, begin func(f *renameio.PendingFile) (io.Closer, error)) error {
		path := filepath.Join(r.out, name)
		f, err := renameio.NewPendingFile(path, renameio.WithTempDir(r.out), renameio.WithPermissions(0o666))
		if err != nil {
			return fmt.Errorf("%s cannot be written: %w", path, err)
		}
		c.pending = append(c.pending, f)
		w, err := begin(f)
		c.closers = append(c.closers, w)
		return err
	}
	p := r.provenance()
	err := errors.Join(
		open(CatalogFITS, func(f *renameio.PendingFile) (w io.Closer, err error) {
			c.fits, err = catalog.NewFITS(f, p, widths)
			return c.fits, err
		}),
		open(CatalogCSV, func(f *renameio.PendingFile) (w io.Closer, err error) {
			c.csv, err = catalog.NewCSV[catalog.Object](f)
			return c.csv, err
		}),
		open(objectsName, func(f *renameio.PendingFile) (w io.Closer, err error) {
			c.objects, err = catalog.NewParquet[catalog.Object](f, p)
			return c.objects, err
		}),
		open(linesName, func(f *renameio.PendingFile) (w io.Closer, err error) {
			c.lines, err = catalog.NewParquet[catalog.Line](f, p)
			return c.lines, err
		}))
	if err != nil {
		c.cleanup()
		return nil, err
	}
	return c, nil
}

func (c *catalogs) object(o *catalog.Object, _ bool) error {
	if err := c.fits.WriteObject(o); err != nil {
		return err
	}
	if err := c.csv.Write(o); err != nil {
		return err
	}
	return c.objects.Write(o)
}

func (c *catalogs) line(l *catalog.Line) error {
	if err := c.fits.WriteLine(l); err != nil {
		return err
	}
	return c.lines.Write(l)
}

// finish completes all files before the first of them is put into place.
func (c *catalogs) finish() error {
	for i, w := range c.closers {
		if err := w.Close(); err != nil {
			return fmt.Errorf("%s cannot be completed: %w; make room and repeat the command", c.pending[i].Name(), err)
		}
	}
	for _, f := range c.pending {
		if err := f.CloseAtomicallyReplace(); err != nil {
			return fmt.Errorf("%s cannot be put into place: %w", f.Name(), err)
		}
	}
	return nil
}

// cleanup removes what is not in place.
func (c *catalogs) cleanup() {
	for _, f := range c.pending {
		f.Cleanup()
	}
}

// sweep removes what killed commands left unfinished. A command still at work
// on the same run finds its block finished and goes on.
func (r *Run) sweep() error {
	for _, folder := range []string{r.out, filepath.Join(r.out, blocksName)} {
		entries, err := os.ReadDir(folder)
		if err != nil {
			return err
		}
		for _, e := range entries {
			if strings.HasPrefix(e.Name(), unfinished) {
				if err := os.RemoveAll(filepath.Join(folder, e.Name())); err != nil {
					return err
				}
			}
		}
	}
	return nil
}
