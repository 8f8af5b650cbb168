package pipeline

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"duskline/catalog"

	"golang.org/x/sync/errgroup"
)

// catalogNames are the files that Gather writes, beside the summary.
var catalogNames = [...]string{CatalogFITS, CatalogCSV, objectsName, linesName, absorbersName}

// workshop is a folder in the run folder for what is not whole yet. Its lock
// tells other commands that it is in use.
type workshop struct {
	path string
	lock *os.File
}

const lockName = "lock"

func openWorkshop(out string) (*workshop, error) {
	for {
		w := &workshop{path: filepath.Join(out, unfinished+"catalogs-"+rand.Text())}
		if err := os.Mkdir(w.path, 0o777); err != nil {
			return nil, err
		}
		var err error
		if w.lock, err = os.Create(filepath.Join(w.path, lockName)); err == nil {
			if tryLock(w.lock) {
				if _, err = os.Stat(w.lock.Name()); err == nil {
					return w, nil
				}
			}
			w.lock.Close()
		}
		// Another command may have swept it away before the lock was held.
		if err != nil && !errors.Is(err, os.ErrNotExist) {
			os.RemoveAll(w.path)
			return nil, err
		}
	}
}

func (w *workshop) close() {
	os.RemoveAll(w.path)
	w.lock.Close()
}

// place makes a file last and puts it into the run folder.
func (w *workshop) place(out, name string, text []byte) error {
	path := filepath.Join(w.path, name)
	if _, err := writeSynced(path, func(f io.Writer) error {
		_, err := f.Write(text)
		return err
	}); err != nil {
		return err
	}
	if err := os.Rename(path, filepath.Join(out, name)); err != nil {
		return fmt.Errorf("%s cannot be put into place: %w", name, err)
	}
	return syncFolder(out)
}

// clearWorkshop removes a workshop in which nobody works any more.
func clearWorkshop(path string) error {
	lock, err := os.Open(filepath.Join(path, lockName))
	if err != nil {
		return os.Remove(path) // only if it is empty
	}
	defer lock.Close()
	if !tryLock(lock) {
		return nil
	}
	return os.RemoveAll(path)
}

// catalogs are the files that Gather writes, none of them in place yet.
type catalogs struct {
	shop    *workshop
	files   []*os.File
	closers []io.Closer // of the writers, in order of files

	fits      *catalog.FITS
	csv       *catalog.CSV[catalog.Object]
	objects   *catalog.Parquet[catalog.Object]
	lines     *catalog.Parquet[catalog.Line]
	absorbers *catalog.Parquet[catalog.Absorber]
	indices   *catalog.Parquet[catalog.Index] // nil where the run has none
	names     []string
}

// openCatalogs opens the files of those names, which are catalogNames, or
// these and indicesName.
func (w *workshop) openCatalogs(names []string, p catalog.Provenance, widths *catalog.Widths) (*catalogs, error) {
	c := &catalogs{shop: w, names: names}
	open := func(name string, begin func(f *os.File) (io.Closer, error)) error {
		f, err := os.OpenFile(filepath.Join(w.path, name), os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
		if err != nil {
			return err
		}
		c.files = append(c.files, f)
		writer, err := begin(f)
		c.closers = append(c.closers, writer)
		return err
	}
	err := errors.Join(
		open(CatalogFITS, func(f *os.File) (w io.Closer, err error) {
			c.fits, err = catalog.NewFITS(f, p, widths)
			return c.fits, err
		}),
		open(CatalogCSV, func(f *os.File) (w io.Closer, err error) {
			c.csv, err = catalog.NewCSV[catalog.Object](f)
			return c.csv, err
		}),
		open(objectsName, func(f *os.File) (w io.Closer, err error) {
			c.objects, err = catalog.NewParquet[catalog.Object](f, p)
			return c.objects, err
		}),
		open(linesName, func(f *os.File) (w io.Closer, err error) {
			c.lines, err = catalog.NewParquet[catalog.Line](f, p)
			return c.lines, err
		}),
		open(absorbersName, func(f *os.File) (w io.Closer, err error) {
			c.absorbers, err = catalog.NewParquet[catalog.Absorber](f, p)
			return c.absorbers, err
		}))
	if err == nil && len(names) > len(catalogNames) {
		err = open(indicesName, func(f *os.File) (w io.Closer, err error) {
			c.indices, err = catalog.NewParquet[catalog.Index](f, p)
			return c.indices, err
		})
	}
	return c, err
}

// finish makes all files last before the first of them is put into place, and
// returns their sizes.
func (c *catalogs) finish(out string) (map[string]int64, error) {
	sizes := map[string]int64{}
	for i, w := range c.closers {
		err := w.Close()
		if err == nil {
			err = c.files[i].Sync()
		}
		if err != nil {
			return nil, fmt.Errorf("%s cannot be completed: %w", c.names[i], err)
		}
		info, err := c.files[i].Stat()
		if err != nil {
			return nil, err
		}
		sizes[c.names[i]] = info.Size()
	}
	for _, name := range c.names {
		if err := os.Rename(filepath.Join(c.shop.path, name), filepath.Join(out, name)); err != nil {
			return nil, fmt.Errorf("%s cannot be put into place: %w", name, err)
		}
	}
	return sizes, syncFolder(out)
}

func (c *catalogs) close() {
	for _, f := range c.files {
		f.Close()
	}
}

// fanOut hands every batch of rows that read yields to all writers, each a
// goroutine of its own: they are the larger part of the work of Gather. The
// writers must not change the rows.
func fanOut[T any](ctx context.Context, read func(yield func([]T) error) error, writers ...func(*T) error) error {
	g, ctx := errgroup.WithContext(ctx)
	queues := make([]chan []T, len(writers))
	for i, write := range writers {
		queue := make(chan []T, 1)
		queues[i] = queue
		g.Go(func() error {
			for batch := range queue {
				for k := range batch {
					if err := write(&batch[k]); err != nil {
						return err
					}
				}
			}
			return nil
		})
	}
	g.Go(func() error {
		defer func() {
			for _, queue := range queues {
				close(queue)
			}
		}()
		return read(func(batch []T) error {
			for _, queue := range queues {
				select {
				case queue <- batch:
				case <-ctx.Done():
					return ctx.Err()
				}
			}
			return nil
		})
	})
	return g.Wait()
}

// sweep removes what killed commands left unfinished, as far as that can be
// done: an owner who is alive after all removes its own. What is half a block may
// belong to a command at work, which would have to begin it anew: it goes only
// when no block is wanted any more.
func (r *Run) sweep(complete bool) {
	r.sweepFolder(r.out, func(path string) error {
		if strings.HasPrefix(filepath.Base(path), unfinished+"catalogs-") {
			return clearWorkshop(path)
		}
		return os.RemoveAll(path)
	})
	if complete {
		r.sweepFolder(filepath.Join(r.out, blocksName), os.RemoveAll)
		for _, name := range []string{settingsName, r.head.Manifest} { // as writeAtomic names what is not whole
			if left, err := filepath.Glob(filepath.Join(escapePattern(r.out), "."+name+"[0-9]*")); err == nil && name != "" {
				for _, path := range left {
					os.Remove(path)
				}
			}
		}
	}
}

func (r *Run) sweepFolder(folder string, remove func(path string) error) {
	entries, err := os.ReadDir(folder)
	for _, e := range entries {
		if strings.HasPrefix(e.Name(), unfinished) {
			err = errors.Join(err, remove(filepath.Join(folder, e.Name())))
		}
	}
	if err != nil {
		r.job.Log.Debug("unfinished files are left", "reason", err)
	}
}
