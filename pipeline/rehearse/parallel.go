package rehearse

import (
	"context"
	"sync"
	"sync/atomic"
)

// parallel calls work(worker, i) for i = 0..n-1 on so many goroutines and waits
// for them. worker counts from 0 and tells whose scratch to use. The error is
// that of the lowest i that failed, or the context's.
func parallel(ctx context.Context, workers, n int, work func(worker, i int) error) error {
	var (
		next atomic.Int64
		stop atomic.Bool
		wait sync.WaitGroup
	)
	failed := make([]error, n)
	for worker := range max(1, min(workers, n)) {
		wait.Go(func() {
			for {
				i := int(next.Add(1)) - 1
				if i >= n || stop.Load() || ctx.Err() != nil {
					return
				}
				if failed[i] = work(worker, i); failed[i] != nil {
					stop.Store(true)
				}
			}
		})
	}
	wait.Wait()
	for _, err := range failed {
		if err != nil {
			return err
		}
	}
	return ctx.Err()
}
