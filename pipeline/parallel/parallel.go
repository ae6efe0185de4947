// Package parallel shares work among goroutines.
package parallel

import (
	"context"
	"sync"
	"sync/atomic"
)

// Do runs work(worker, i) for every i below n, by so many workers at
// once, and gives the error of the lowest i that failed, so that the same fault
// gives the same sentence. After an error or the end of ctx no new work begins.
func Do(ctx context.Context, workers, n int, work func(worker, i int) error) error {
	workers = max(1, min(workers, n))
	var (
		next   atomic.Int64
		stop   atomic.Bool
		mu     sync.Mutex
		lowest = n
		first  error
		all    sync.WaitGroup
	)
	for w := range workers {
		all.Go(func() {
			for !stop.Load() && ctx.Err() == nil {
				i := int(next.Add(1) - 1)
				if i >= n {
					return
				}
				if err := work(w, i); err != nil {
					stop.Store(true)
					mu.Lock()
					if i < lowest {
						lowest, first = i, err
					}
					mu.Unlock()
				}
			}
		})
	}
	all.Wait()
	if first == nil {
		first = ctx.Err()
	}
	return first
}
