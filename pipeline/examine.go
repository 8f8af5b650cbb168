package pipeline

import (
	"context"
	"errors"
	"fmt"

	"golang.org/x/sync/errgroup"
)

// errEnough ends a listing early.
var errEnough = errors.New("enough inputs")

// listInputs finds the inputs of the job, examines them with as many
// goroutines as there are workers, and hands them to take in the order they
// were found, until take says that it has enough.
func (j *Job) listInputs(ctx context.Context, examine func(*Job, *planInput), take func(planInput) (bool, error)) error {
	type slot struct {
		in    planInput
		ready chan struct{}
	}
	g, ctx := errgroup.WithContext(ctx)
	order := make(chan *slot, 4*j.workers()) // bounds how far finding runs ahead
	work := make(chan *slot)
	g.Go(func() error {
		defer close(order)
		defer close(work)
		find := func(yield func(candidate) error) error {
			if len(j.Paths) == 0 && j.Like != "" {
				return j.listEarlier(yield)
			}
			return findInputs(ctx, j.Base, locate(j.Base, j.Out), j.Paths, yield)
		}
		return find(func(c candidate) error {
			s := &slot{newPlanInput(c), make(chan struct{})}
			for _, ch := range []chan<- *slot{order, work} {
				select {
				case ch <- s:
				case <-ctx.Done():
					return ctx.Err()
				}
			}
			return nil
		})
	})
	for range j.workers() {
		g.Go(func() error {
			for s := range work {
				examine(j, &s.in)
				close(s.ready)
			}
			return nil
		})
	}
	g.Go(func() error {
		for s := range order {
			select {
			case <-s.ready:
			case <-ctx.Done():
				return ctx.Err()
			}
			enough, err := take(s.in)
			if err != nil {
				return err
			}
			if enough {
				return errEnough
			}
		}
		return nil
	})
	if err := g.Wait(); !errors.Is(err, errEnough) {
		return err
	}
	return nil
}

// examineStat looks at a file from outside.
func (j *Job) examineStat(in *planInput) { in.fillStat(j.Base) }

// examineOpen opens a file and counts its spectra. One that cannot be opened
// stands for one object, whose row will say why.
func (j *Job) examineOpen(in *planInput) {
	in.fillStat(j.Base)
	in.Rows = 1
	if in.Trouble != "" {
		j.Manifest.siftUnopened(in, in.file(j.Base))
		return
	}
	defer func() {
		if p := recover(); p != nil {
			in.Rows, in.Trouble, in.Internal = 1, internalReason(p), true
		}
	}()
	f, err := j.Open(in.file(j.Base))
	if err != nil {
		bad := readFault(err, in.Path)
		in.Trouble, in.Internal = bad.reason, bad.internal
		j.Manifest.siftUnopened(in, in.file(j.Base))
		return
	}
	defer f.Close()
	if in.Rows = int64(f.Count()); in.Rows < 1 {
		in.Rows, in.Trouble = 1, fmt.Sprintf("%s: no spectrum was found in it", in.Path)
	}
	j.Manifest.sift(in, in.file(j.Base), f)
}
