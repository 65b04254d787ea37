package fit

import (
	"context"
	"runtime"
	"sync/atomic"

	"golang.org/x/sync/errgroup"
)

// InOrder runs work(0) … work(n−1) on up to jobs goroutines and hands each
// result to emit in rising order, whatever order they finish in, so that the
// output is the same for any number of jobs. Results wait only within a
// window of a few per job: memory does not grow with n. The first error of
// emit or of the context stops it and is returned. jobs below 1 means the
// processors; one job, or one piece of work, needs no other goroutine.
func InOrder[T any](ctx context.Context, n, jobs int, work func(i int) T, emit func(i int, result T) error) error {
	if jobs < 1 {
		jobs = runtime.GOMAXPROCS(0)
	}
	if jobs = min(jobs, n); jobs <= 1 {
		for i := range n {
			if err := ctx.Err(); err != nil {
				return err
			}
			if err := emit(i, work(i)); err != nil {
				return err
			}
		}
		return nil
	}
	group, ctx := errgroup.WithContext(ctx)
	// Result i waits in place i of the window, taken anew when it is emitted.
	// Who works on i has a token; as there are no more than places, and a token
	// comes back when its result leaves, the place is empty.
	window := make([]chan T, 4*jobs)
	for i := range window {
		window[i] = make(chan T, 1)
	}
	tokens := make(chan struct{}, len(window))
	var next atomic.Int64
	for range jobs {
		group.Go(func() error {
			for {
				select {
				case tokens <- struct{}{}:
				case <-ctx.Done():
					return ctx.Err()
				}
				i := int(next.Add(1)) - 1
				if i >= n {
					return nil
				}
				window[i%len(window)] <- work(i)
			}
		})
	}
	group.Go(func() error {
		for i := range n {
			select {
			case r := <-window[i%len(window)]:
				if err := emit(i, r); err != nil {
					return err
				}
				<-tokens
			case <-ctx.Done():
				return ctx.Err()
			}
		}
		return nil
	})
	return group.Wait()
}
