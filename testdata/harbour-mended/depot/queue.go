package depot

import "sync"

// A Queue numbers its items: Put enqueues the next n of them, Take builds the
// oldest one that was not taken yet.
type Queue[T any] struct {
	build func(seq int) T

	mu    sync.Mutex
	put   int
	taken int
}

// NewQueue returns an empty queue whose items are made by build.
func NewQueue[T any](build func(seq int) T) *Queue[T] {
	return &Queue[T]{build: build}
}

// Put enqueues the next n items.
func (q *Queue[T]) Put(n int) {
	q.mu.Lock()
	defer q.mu.Unlock()
	q.put += n
}

// Take returns the oldest item, false if there is none.
func (q *Queue[T]) Take() (T, bool) {
	q.mu.Lock()
	if q.taken == q.put {
		q.mu.Unlock()
		var none T
		return none, false
	}
	q.taken++
	seq := q.taken
	q.mu.Unlock()
	return q.build(seq), true
}

// Len returns the number of items that wait.
func (q *Queue[T]) Len() int {
	q.mu.Lock()
	defer q.mu.Unlock()
	return q.put - q.taken
}
