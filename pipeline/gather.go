package pipeline

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"duskline/catalog"
	"duskline/internal/shards"
)

// Gather joins the blocks, in order, into the catalogs and counts them. The
// catalogs replace older ones when all of them are whole; where those are of
// the same blocks already nothing is written. Equal plans give equal bytes. The
// error is a *MissingError if a block is not there or damaged.
//
// Objects whose object_id came before get a number after it, such as "x#2", so
// that object_id is a key; their lines, absorbers and indices follow.
func (r *Run) Gather(ctx context.Context) (*Summary, error) { return r.gather(ctx, false) }

// GatherPresent does as Gather without the blocks that are missing. Catalogs
// and summary say what is not in them.
func (r *Run) GatherPresent(ctx context.Context) (*Summary, error) { return r.gather(ctx, true) }

func (r *Run) gather(ctx context.Context, accept bool) (*Summary, error) {
	r.job.Progress.Gathering()
	whole, err := r.wholeBlocks(ctx)
	if err != nil {
		return nil, err
	}
	g := &gathering{Run: r, summary: newSummary(r)}
	for number, ok := range whole {
		if ok {
			g.blocks = append(g.blocks, number)
		} else {
			g.summary.MissingBlocks = append(g.summary.MissingBlocks, number)
			g.summary.MissingObjects += int64(r.blockLen(number))
		}
	}
	missing := g.summary.MissingBlocks
	if len(missing) > 0 && !accept {
		return nil, &MissingError{Out: r.job.Out, Blocks: missing, Of: r.blocks()}
	}
	g.summary.Complete = len(missing) == 0
	r.sweep(g.summary.Complete)
	if err := g.all(ctx); err != nil {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		return nil, fmt.Errorf("the catalogs of %s cannot be written: %w; make room or mend the folder, then repeat the command to go on", r.job.Out, err)
	}
	return g.summary, nil
}

// wholeBlocks tells for every block whether it is there and as it was written.
func (r *Run) wholeBlocks(ctx context.Context) ([]bool, error) {
	if r.allWhole {
		whole := make([]bool, r.blocks())
		for i := range whole {
			whole[i] = true
		}
		return whole, nil
	}
	whole, damaged, err := r.verify(ctx, Shard{})
	for _, d := range damaged {
		r.job.Log.Warn("a block cannot be used", "block", d.block, "reason", d.err)
	}
	return whole, err
}

// gathering is one Gather at work.
type gathering struct {
	*Run
	blocks  []int // present ones
	summary *Summary
	widths  catalog.Widths
	names   *names
}

func (g *gathering) all(ctx context.Context) error {
	shop, err := openWorkshop(g.out)
	if err != nil {
		return err
	}
	defer shop.close()
	if g.names, err = newNames(shop.path, g.totals.Objects, idsAPart); err != nil {
		return err
	}
	defer g.names.close()
	if err := g.survey(ctx); err != nil {
		return err
	}
	if old := g.inPlace(); old != nil {
		g.summary = old
		return nil
	}
	out, err := shop.openCatalogs(g.catalogFiles(), g.provenance(g.missingText()), &g.widths)
	defer out.close()
	if err != nil {
		return err
	}
	if err := fanOut(ctx, g.eachObjects(ctx), out.fits.WriteObject, out.csv.Write, out.objects.Write); err != nil {
		return err
	}
	if err := fanOut(ctx, eachOwned(ctx, g, linesName, func(n *blockNote) []int { return n.LineCounts },
		func(l *catalog.Line) *string { return &l.ObjectID }), out.fits.WriteLine, out.lines.Write); err != nil {
		return err
	}
	if err := fanOut(ctx, eachOwned(ctx, g, absorbersName, func(n *blockNote) []int { return n.AbsorberCounts },
		func(a *catalog.Absorber) *string { return &a.ObjectID }), out.fits.WriteAbsorber, out.absorbers.Write); err != nil {
		return err
	}
	if g.hasIndices() {
		if err := out.fits.BeginIndices(); err != nil {
			return err
		}
		if err := fanOut(ctx, eachOwned(ctx, g, indicesName, func(n *blockNote) []int { return n.IndexCounts },
			func(i *catalog.Index) *string { return &i.ObjectID }), out.fits.WriteIndex, out.indices.Write); err != nil {
			return err
		}
	}
	if g.summary.Files, err = out.finish(g.out); err != nil {
		return err
	}
	text, err := g.summary.json()
	if err != nil {
		return err
	}
	return shop.place(g.out, summaryName, text)
}

func (g *gathering) missingText() string {
	if g.summary.Complete {
		return ""
	}
	return fmt.Sprintf("%d of %d objects, blocks %s", g.summary.MissingObjects, g.summary.Planned, shards.Ranges(g.summary.MissingBlocks, ", "))
}

// survey is the first pass: it counts, finds repeated IDs and the widths of
// the FITS columns, all from the notes of the blocks.
func (g *gathering) survey(ctx context.Context) error {
	sum := sha256.New()
	for _, number := range g.blocks {
		if err := ctx.Err(); err != nil {
			return err
		}
		note, digest, err := g.readNoteSum(number)
		if err != nil {
			return err
		}
		fmt.Fprintf(sum, "%d %s\n", number, digest)
		g.summary.addAll(note.Counts)
		g.summary.InternalErrors += int64(note.Internal)
		g.widths.Merge(note.Widths)
		for _, id := range note.IDs {
			if err := g.names.add(id); err != nil {
				return err
			}
		}
	}
	if err := g.names.settle(); err != nil {
		return err
	}
	g.summary.RepeatedIDs = g.names.Repeated
	g.widths.LengthenIDs(g.names.extra())
	g.summary.Blocks = hex.EncodeToString(sum.Sum(nil)[:8])
	return nil
}

// inPlace returns the summary of catalogs that are of the same blocks and
// still there; nil if they have to be written.
func (g *gathering) inPlace() *Summary {
	old, err := ReadSummary(filepath.Join(g.out, summaryName))
	if err != nil || old.Run != g.id || old.Complete != g.summary.Complete || old.Blocks != g.summary.Blocks {
		return nil
	}
	for _, name := range g.catalogFiles() {
		info, err := os.Stat(filepath.Join(g.out, name))
		if err != nil || info.Size() != old.Files[name] {
			return nil
		}
	}
	return old
}

// eachObjects yields the objects of every block with unique IDs.
func (g *gathering) eachObjects(ctx context.Context) func(yield func([]catalog.Object) error) error {
	return func(yield func([]catalog.Object) error) error {
		return g.eachBlock(ctx, func(number int, ids *nameCursor) error {
			var batch []catalog.Object
			if err := readTable(filepath.Join(g.blockFolder(number), objectsName), func(o *catalog.Object) (err error) {
				batch = append(batch, *o)
				o = &batch[len(batch)-1]
				o.ObjectID, err = ids.unique(o.ObjectID)
				return err
			}); err != nil {
				return err
			}
			return yield(batch)
		})
	}
}

// eachBlock visits the blocks in order, with what makes the IDs of their objects
// unique.
func (g *gathering) eachBlock(ctx context.Context, visit func(number int, ids *nameCursor) error) error {
	ids, err := g.names.cursor()
	if err != nil {
		return err
	}
	for _, number := range g.blocks {
		if err := ctx.Err(); err != nil {
			return err
		}
		if err := visit(number, ids); err != nil {
			return err
		}
	}
	return nil
}

// rowsABatch bounds the memory of rows on their way to the writers.
const rowsABatch = 4096

// eachOwned yields the rows of every block that belong to objects, with the IDs
// that eachObjects gives these.
func eachOwned[T catalog.Row](ctx context.Context, g *gathering, file string, counts func(*blockNote) []int,
	owner func(*T) *string) func(yield func([]T) error) error {
	return func(yield func([]T) error) error {
		return g.eachBlock(ctx, func(number int, ids *nameCursor) error {
			note, err := g.readNote(number)
			if err != nil {
				return err
			}
			for i := range note.IDs {
				if note.IDs[i], err = ids.unique(note.IDs[i]); err != nil {
					return err
				}
			}
			object, left := -1, 0
			var batch []T
			if err := readTable(filepath.Join(g.blockFolder(number), file), func(row *T) error {
				for left == 0 {
					if object++; object == len(note.IDs) {
						return fmt.Errorf("block %d is %w: %s has more rows than it counts", number, ErrDamaged, file)
					}
					left = counts(note)[object]
				}
				left--
				*owner(row) = note.IDs[object]
				if batch = append(batch, *row); len(batch) < rowsABatch {
					return nil
				}
				full := batch
				batch = make([]T, 0, rowsABatch)
				return yield(full)
			}); err != nil {
				return err
			}
			return yield(batch)
		})
	}
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

// provenance says what the rows of a catalog depend on.
func (r *Run) provenance(missing string) catalog.Provenance {
	return catalog.NewProvenance(catalog.Origin{Program: r.head.Program, Build: r.head.Build, Run: r.id,
		Settings: r.head.Settings, Keys: settingLines(r.head.Settings), Digests: r.head.Digests, Missing: missing})
}

// settingLines turns the text of settings into lines "section.key = value".
func settingLines(text string) []string {
	var out []string
	section := ""
	for line := range strings.Lines(text) {
		line = strings.TrimSpace(line)
		switch {
		case line == "":
		case strings.HasPrefix(line, "["):
			section = strings.Trim(line, "[]")
		default:
			out = append(out, section+"."+line)
		}
	}
	return out
}
