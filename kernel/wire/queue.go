package wire

import (
	"context"
	"sync"
)

// A Queue is a first-in-first-out queue without a bound: zmq4 keeps ten messages a socket and then stops reading, which
// would hide from the kernel how many requests wait and would hold up an interrupt behind them. The zero value is not
// ready; use [NewQueue].
type Queue[T any] struct {
	ready chan struct{} // holds one token while items or the end wait to be seen

	mu    sync.Mutex
	items []T  // guarded by mu
	ended bool // guarded by mu
}

// NewQueue returns an empty queue.
func NewQueue[T any]() *Queue[T] { return &Queue[T]{ready: make(chan struct{}, 1)} }

// Put appends an item; after [Queue.End] it does nothing.
func (q *Queue[T]) Put(item T) {
	q.mu.Lock()
	defer q.mu.Unlock()
	if !q.ended {
		q.items = append(q.items, item)
		q.wake()
	}
}

// Get takes the first item; it waits for one. The result is false when ctx is over, or when the queue has ended and is
// empty.
func (q *Queue[T]) Get(ctx context.Context) (T, bool) {
	for {
		q.mu.Lock()
		if len(q.items) > 0 {
			item := q.items[0]
			q.items[0] = *new(T) // the array outlives the item
			q.items = q.items[1:]
			if len(q.items) == 0 {
				q.items = nil
			}
			if len(q.items) > 0 || q.ended {
				q.wake()
			}
			q.mu.Unlock()
			return item, true
		}
		ended := q.ended
		if ended {
			q.wake()
		}
		q.mu.Unlock()
		if ended {
			return *new(T), false
		}
		select {
		case <-q.ready:
		case <-ctx.Done():
			return *new(T), false
		}
	}
}

// Take takes all items that wait.
func (q *Queue[T]) Take() []T {
	q.mu.Lock()
	defer q.mu.Unlock()
	items := q.items
	q.items = nil
	return items
}

// End lets [Queue.Get] report the end once the queue is empty.
func (q *Queue[T]) End() {
	q.mu.Lock()
	defer q.mu.Unlock()
	q.ended = true
	q.wake()
}

func (q *Queue[T]) wake() {
	select {
	case q.ready <- struct{}{}:
	default:
	}
}
