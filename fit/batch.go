package fit

import (
	"context"
	"runtime"

	"golang.org/x/sync/errgroup"
)

// InOrder runs work(0) … work(n−1) on up to jobs goroutines and hands each
// result to emit in rising order, whatever order they finish in, so that the
// output is the same for any number of jobs. Results wait only within a
// window of a few per job: memory does not grow with n. The first error of
// emit or of the context stops it and is returned. jobs below 1 means the
// processors.
func InOrder[T any](ctx context.Context, n, jobs int, work func(i int) T, emit func(i int, result T) error) error {
	if jobs < 1 {
		jobs = runtime.GOMAXPROCS(0)
	}
	group, ctx := errgroup.WithContext(ctx)
	// pending holds, in order, a channel for each result under way; its
	// capacity is the window.
	pending := make(chan chan T, 4*jobs)
	slots := make(chan struct{}, jobs)
	group.Go(func() error {
		defer close(pending)
		for i := range n {
			result := make(chan T, 1)
			select {
			case slots <- struct{}{}:
			case <-ctx.Done():
				return ctx.Err()
			}
			go func() {
				defer func() { <-slots }()
				result <- work(i)
			}()
			select {
			case pending <- result:
			case <-ctx.Done():
				return ctx.Err()
			}
		}
		return nil
	})
	group.Go(func() error {
		i := 0
		for result := range pending {
			select {
			case r := <-result:
				if err := emit(i, r); err != nil {
					return err
				}
			case <-ctx.Done():
				return ctx.Err()
			}
			i++
		}
		return nil
	})
	return group.Wait()
}
