package reduce

import (
	"context"
	"sync"
)

// outQueue hands strips of the cube to a sink, one after the other in a goroutine of its
// own, while the next is made.
type outQueue struct {
	free, full chan *outStrip
	done       sync.WaitGroup
	once       sync.Once
	failed     chan struct{} // closed when the sink fails
	err        error         // why, once failed or done
}

// outStrips is how many strips of the cube there are: one is made, one is written.
const outStrips = 2

func newOutQueue(ctx context.Context, s shape, rows int, sink func(context.Context, *outStrip) error) *outQueue {
	q := &outQueue{free: make(chan *outStrip, outStrips), full: make(chan *outStrip, outStrips), failed: make(chan struct{})}
	for range outStrips {
		q.free <- s.newOut(rows)
	}
	q.done.Go(func() {
		for out := range q.full {
			if q.err == nil {
				if q.err = sink(ctx, out); q.err != nil {
					close(q.failed)
				}
			}
			q.free <- out
		}
	})
	return q
}

// take gives a strip to be filled, or what the sink failed of.
func (q *outQueue) take(ctx context.Context) (*outStrip, error) {
	select {
	case <-q.failed:
		return nil, q.err
	case <-ctx.Done():
		return nil, ctx.Err()
	case out := <-q.free:
		return out, nil
	}
}

// give hands a strip that was filled to the sink.
func (q *outQueue) give(out *outStrip) { q.full <- out }

// close waits for the sink and gives its error. It may be called again.
func (q *outQueue) close() error {
	q.once.Do(func() {
		close(q.full)
		q.done.Wait()
	})
	return q.err
}
