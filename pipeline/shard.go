package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"strconv"
	"strings"

	"duskline/internal/shards"

	"golang.org/x/sync/errgroup"
)

// Shard is the part of a run that one of several commands does: of every
// Count blocks in a row the one with number Index, from 0. The zero value is
// the whole run.
type Shard struct{ Index, Count int }

// ParseShard reads "I/N", I from 0 to N-1. The error is an *InputError.
func ParseShard(text string) (Shard, error) {
	i, n, _ := strings.Cut(text, "/")
	index, err := strconv.Atoi(i)
	count, err2 := strconv.Atoi(n)
	if err != nil || err2 != nil || count < 1 || index < 0 || index >= count {
		return Shard{}, inputError("%q is no shard; give I/N, I from 0 to N-1, such as 0/8 to 7/8", text)
	}
	return Shard{index, count}, nil
}

// Whole reports whether the shard is the whole run.
func (s Shard) Whole() bool { return s.Count <= 1 }

func (s Shard) has(block int) bool { return s.Whole() || shards.Of(block, s.Count) == s.Index }

// String returns "I/N", empty for the whole run.
func (s Shard) String() string {
	if s.Whole() {
		return ""
	}
	return fmt.Sprintf("%d/%d", s.Index, s.Count)
}

// damage is a block that is there and not as it must be.
type damage struct {
	block int
	err   error
}

// verify looks at all blocks of a shard, several at a time: whether each is
// there and as it was written, and which are damaged.
func (r *Run) verify(ctx context.Context, shard Shard) (whole []bool, damaged []damage, err error) {
	whole = make([]bool, r.blocks())
	errs := make([]error, len(whole))
	var g errgroup.Group
	g.SetLimit(r.job.workers())
	for number := range whole {
		if !shard.has(number) {
			continue
		}
		g.Go(func() error {
			if err := ctx.Err(); err != nil {
				return err
			}
			err := r.checkBlock(number)
			whole[number] = err == nil
			switch {
			case errors.Is(err, ErrDamaged):
				errs[number] = err
			case err != nil && !errors.Is(err, fs.ErrNotExist):
				return err
			}
			return nil
		})
	}
	if err := g.Wait(); err != nil {
		return nil, nil, err
	}
	for number, err := range errs {
		if err != nil {
			damaged = append(damaged, damage{number, err})
		}
	}
	return whole, damaged, nil
}

// finishedBlocks looks for the blocks of the shard that are there. Damaged ones
// are removed, to be done again.
func (r *Run) finishedBlocks(ctx context.Context) ([]bool, error) {
	whole, damaged, err := r.verify(ctx, r.job.Shard)
	if err != nil {
		return nil, err
	}
	for _, d := range damaged {
		r.job.Log.Warn("a block is done again", "block", d.block, "reason", d.err)
		// Another command may have done it since.
		if r.checkBlock(d.block) == nil {
			whole[d.block] = true
			continue
		}
		if err := discard(r.blockFolder(d.block)); err != nil {
			return nil, fmt.Errorf("damaged block %d of %s cannot be removed: %w; remove it and repeat the command", d.block, r.job.Out, err)
		}
	}
	var total, there int64
	for number, ok := range whole {
		if !r.job.Shard.has(number) {
			continue
		}
		n := int64(r.blockLen(number))
		total += n
		if ok {
			there += n
		}
	}
	r.job.Progress.Working(total, there)
	return whole, nil
}
