// Package lease hands out exclusive, named leases.
package lease

import (
	"context"
	"errors"
	"fmt"
	"sync"
)

// ErrClosed is returned by Acquire once the table is closed.
var ErrClosed = errors.New("lease: table is closed")

// A Table holds at most one lease per key.
type Table struct {
	mu     sync.Mutex
	held   map[string]chan struct{} // closed when the lease is sealed
	closed bool
}

// NewTable returns an empty table.
func NewTable() *Table {
	return &Table{held: make(map[string]chan struct{})}
}

// Acquire waits until key is free and takes it. A nil error obliges the caller
// to Seal the same key.
func (t *Table) Acquire(ctx context.Context, key string) error {
	for {
		t.mu.Lock()
		if t.closed {
			t.mu.Unlock()
			return ErrClosed
		}
		gone, busy := t.held[key]
		if !busy {
			t.held[key] = make(chan struct{})
			t.mu.Unlock()
			return nil
		}
		t.mu.Unlock()

		select {
		case <-gone:
		case <-ctx.Done():
			return fmt.Errorf("lease %s: %w", key, ctx.Err())
		}
	}
}

// Seal gives key back. It panics if nobody holds it.
func (t *Table) Seal(key string) {
	t.mu.Lock()
	defer t.mu.Unlock()
	gone, ok := t.held[key]
	if !ok {
		panic("lease: Seal of " + key + ", which is not held")
	}
	delete(t.held, key)
	close(gone)
}

// With runs fn while it holds key.
func (t *Table) With(ctx context.Context, key string, fn func() error) error {
	if err := t.Acquire(ctx, key); err != nil {
		return err
	}
	defer t.Seal(key)
	return fn()
}

// Held reports how many leases are out.
func (t *Table) Held() int {
	t.mu.Lock()
	n := len(t.held)
	t.mu.Unlock()
	return n
}

// Close refuses all later calls of Acquire. Leases that are out stay out.
func (t *Table) Close() {
	t.mu.Lock()
	t.closed = true
	t.mu.Unlock()
}
