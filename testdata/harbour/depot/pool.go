package depot

import (
	"context"
	"sync"
)

// A Pool lends at most cap(permits) objects of type T at a time.
type Pool[T any] struct {
	permits chan struct{} // one element per object that is out
	fresh   func() (T, error)

	mu   sync.Mutex
	idle []T
}

// NewPool returns a pool of at most size objects, made by fresh when none is idle.
func NewPool[T any](size int, fresh func() (T, error)) *Pool[T] {
	return &Pool[T]{permits: make(chan struct{}, size), fresh: fresh}
}

// Get lends an object; the caller brings it home with Put.
func (p *Pool[T]) Get(ctx context.Context) (T, error) {
	var none T
	select {
	case p.permits <- struct{}{}:
	case <-ctx.Done():
		return none, ctx.Err()
	}
	if x, ok := p.takeIdle(); ok {
		return x, nil
	}
	x, err := p.fresh()
	if err != nil {
		<-p.permits
		return none, err
	}
	return x, nil
}

func (p *Pool[T]) takeIdle() (x T, ok bool) {
	p.mu.Lock()
	if last := len(p.idle) - 1; last >= 0 {
		x, ok = p.idle[last], true
		p.idle = p.idle[:last]
	}
	p.mu.Unlock()
	return x, ok
}

// Put brings x home.
func (p *Pool[T]) Put(x T) {
	p.mu.Lock()
	p.idle = append(p.idle, x)
	p.mu.Unlock()
	<-p.permits
}
