package pipeline

import (
	"context"
	"errors"
	"io"
)

// Missing returns the numbers of the blocks that are not there as they were
// written, in order.
func (r *Run) Missing(ctx context.Context) ([]int, error) {
	whole, _, err := r.verify(ctx, Shard{})
	if err != nil {
		return nil, err
	}
	var missing []int
	for number, ok := range whole {
		if !ok {
			missing = append(missing, number)
		}
	}
	return missing, nil
}

// BlockSize returns how many objects a block has, but for the last.
func (r *Run) BlockSize() int { return r.head.BlockSize }

// Sample works on up to n objects, evenly spread over the plan, one after
// another and for nothing but to see how long it takes. It calls begin after
// the first of them, which pays for what the others share, and returns how many
// came after it.
func (r *Run) Sample(ctx context.Context, n int, begin func()) (int, error) {
	plan, err := openPlan(r.plan)
	if err != nil {
		return 0, err
	}
	defer plan.Close()
	w := &objectWorker{run: r, shelf: &shelf{run: r, files: map[*planInput]*shelved{}}}
	defer w.release()
	step := max(r.totals.Objects/int64(max(n, 1)), 1)
	var object int64
	done := 0
	for {
		in, _, err := plan.next()
		if errors.Is(err, io.EOF) {
			return max(done-1, 0), nil
		}
		if err != nil {
			return 0, err
		}
		for row := range in.taken() {
			if object++; (object-1)%step != 0 {
				continue
			}
			if err := ctx.Err(); err != nil {
				return 0, err
			}
			w.do(task{block: &block{}, in: &in, row: int(row)})
			if done++; done == 1 {
				begin()
			}
			if done > n {
				return n, nil
			}
		}
	}
}
