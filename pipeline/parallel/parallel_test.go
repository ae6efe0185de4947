package parallel

import (
	"context"
	"errors"
	"fmt"
	"sync/atomic"
	"testing"

	"github.com/stretchr/testify/require"
)

func TestParallel(t *testing.T) {
	for _, workers := range []int{1, 2, 5, 100} {
		for _, n := range []int{0, 1, 7, 64} {
			seen := make([]atomic.Int32, n)
			busy := make([]atomic.Bool, workers)
			err := Do(context.Background(), workers, n, func(worker, i int) error {
				if busy[worker].Swap(true) {
					return errors.New("a worker does two things at once")
				}
				defer busy[worker].Store(false)
				seen[i].Add(1)
				return nil
			})
			require.NoError(t, err)
			for i := range seen {
				require.Equal(t, int32(1), seen[i].Load(), "%d workers, item %d of %d", workers, i, n)
			}
		}
	}
}

// The error is the one of the lowest item that failed among those begun, which is
// the first where all fail.
func TestParallelErrors(t *testing.T) {
	for range 50 {
		err := Do(context.Background(), 4, 100, func(_, i int) error { return fmt.Errorf("item %d", i) })
		require.EqualError(t, err, "item 0")
	}
	ctx, cancel := context.WithCancel(context.Background())
	var done atomic.Int32
	err := Do(ctx, 2, 1000, func(int, int) error {
		if done.Add(1) == 10 {
			cancel()
		}
		return nil
	})
	require.ErrorIs(t, err, context.Canceled)
	require.Less(t, done.Load(), int32(20))
}
