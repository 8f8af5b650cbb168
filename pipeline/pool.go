package pipeline

import (
	"context"
	"errors"
	"io"

	"duskline/catalog"

	"golang.org/x/sync/errgroup"
)

// blocksInFlight bounds how many blocks are in memory: one that is filling,
// one whose last slow object is still awaited, one that is being written.
const blocksInFlight = 3

// Work does the blocks of the shard that are not there yet. Workers take single objects, so
// that one block keeps all of them busy; a block is written when its last
// object is done, whatever order they came in. When ctx is canceled the blocks
// in flight are dropped and the error is ctx's.
func (r *Run) Work(ctx context.Context) error {
	there, err := r.finishedBlocks(ctx)
	if err != nil {
		return err
	}
	g, ctx := errgroup.WithContext(ctx)
	tasks := make(chan task)
	results := make(chan result)
	full := make(chan *block)
	free := make(chan struct{}, blocksInFlight)

	g.Go(func() error {
		defer close(tasks)
		return r.dispatch(ctx, there, free, tasks)
	})
	workers := r.job.workers()
	files := &shelf{run: r, files: map[*planInput]*shelved{}}
	pool, _ := errgroup.WithContext(ctx)
	for range workers {
		pool.Go(func() error {
			w := &objectWorker{run: r, shelf: files}
			defer w.release()
			for t := range tasks {
				res := result{task: t}
				if t.elsewhere == 0 {
					res = w.do(t)
				}
				select {
				case results <- res:
				case <-ctx.Done():
					return ctx.Err()
				}
			}
			return nil
		})
	}
	g.Go(func() error {
		defer close(results)
		return pool.Wait()
	})
	g.Go(func() error {
		defer close(full)
		return r.collect(ctx, results, full)
	})
	g.Go(func() error {
		for b := range full {
			if err := r.writeBlock(b); err != nil {
				return err
			}
			r.job.Log.Debug("block written", "block", b.number, "spectra", len(b.outcomes), "taken_over", b.taken, "internal_errors", b.internal)
			<-free
		}
		return nil
	})
	err = g.Wait()
	r.allWhole = err == nil && r.job.Shard.Whole()
	r.earlier.close()
	r.earlier = nil
	return err
}

// dispatch cuts the plan into blocks and sends the objects of those that are
// not there.
func (r *Run) dispatch(ctx context.Context, there []bool, free chan struct{}, tasks chan<- task) error {
	plan, err := openPlan(r.plan)
	if err != nil {
		return err
	}
	defer plan.Close()
	var b *block
	var object int64
	size := int64(r.head.BlockSize)
	for {
		in, _, err := plan.next()
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		for row := range in.taken() {
			t := task{place: int(object % size), in: &in, row: int(row)}
			if t.place == 0 {
				if b, t.elsewhere, err = r.beginBlock(ctx, int(object/size), there, free); err != nil {
					return err
				}
			}
			object++
			if t.block = b; b == nil && t.elsewhere == 0 {
				continue
			}
			select {
			case tasks <- t:
			case <-ctx.Done():
				return ctx.Err()
			}
		}
	}
}

// beginBlock returns an empty block once there is room for one. It returns nil
// if the block is there already, and how many objects that saves if another
// process did it meanwhile.
func (r *Run) beginBlock(ctx context.Context, number int, there []bool, free chan struct{}) (*block, int, error) {
	if there[number] || !r.job.Shard.has(number) {
		return nil, 0, ctx.Err()
	}
	select {
	case free <- struct{}{}:
	case <-ctx.Done():
		return nil, 0, ctx.Err()
	}
	n := r.blockLen(number)
	if r.checkBlock(number) == nil {
		<-free
		return nil, n, nil
	}
	return &block{number: number, outcomes: make([]Outcome, n), left: n}, 0, nil
}

// collect puts results into the places of their blocks and passes on the
// blocks that are full.
func (r *Run) collect(ctx context.Context, results <-chan result, full chan<- *block) error {
	for res := range results {
		if res.elsewhere > 0 {
			r.job.Progress.Elsewhere(int64(res.elsewhere))
			continue
		}
		b := res.block
		b.outcomes[res.place] = res.outcome
		if res.internal {
			b.internal++
		}
		if res.taken {
			b.taken++
			r.taken++
		}
		if o := &res.outcome.Object; o.Flags.Has(catalog.Unreadable) {
			r.job.Log.Debug("spectrum unreadable", "block", b.number, "object", o.ObjectID, "file", o.SourceFile, "row", o.SourceRow, "reason", o.Reason)
		}
		r.job.Progress.Object(&res.outcome.Object)
		if b.left--; b.left > 0 {
			continue
		}
		select {
		case full <- b:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	return nil
}
