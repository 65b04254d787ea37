package fit

import (
	"context"
	"errors"
	"fmt"
	"slices"
	"sync/atomic"
	"testing"
	"time"
)

func TestInOrder(t *testing.T) {
	for _, jobs := range []int{0, 1, 2, 7} {
		var got []int
		err := InOrder(context.Background(), 100, jobs,
			func(i int) int {
				if i%7 == 0 {
					time.Sleep(time.Millisecond) // so that later ones finish first
				}
				return i * i
			},
			func(i, r int) error {
				if r != i*i {
					t.Errorf("jobs %d: result %d of %d", jobs, r, i)
				}
				got = append(got, i)
				return nil
			})
		if err != nil || len(got) != 100 || !slices.IsSorted(got) {
			t.Errorf("jobs %d: %d results, sorted %v, error %v", jobs, len(got), slices.IsSorted(got), err)
		}
	}
}

// An error of emit stops the work within the window; no result is emitted
// after it.
func TestInOrderStops(t *testing.T) {
	stop := errors.New("stop")
	var started atomic.Int64
	emitted := 0
	err := InOrder(context.Background(), 1_000_000, 2,
		func(i int) int { started.Add(1); return i },
		func(i, _ int) error {
			emitted++
			if i == 10 {
				return stop
			}
			return nil
		})
	if !errors.Is(err, stop) || emitted != 11 || started.Load() > 1000 {
		t.Errorf("error %v after %d results, %d started", err, emitted, started.Load())
	}
}

// BenchmarkInOrder hands over results of hardly any work.
func BenchmarkInOrder(b *testing.B) {
	for _, jobs := range []int{1, 2} {
		b.Run(fmt.Sprintf("jobs=%d", jobs), func(b *testing.B) {
			b.ReportAllocs()
			sum := 0
			if err := InOrder(context.Background(), b.N, jobs,
				func(i int) int { return i },
				func(_, r int) error { sum += r; return nil }); err != nil {
				b.Fatal(err)
			}
		})
	}
}
