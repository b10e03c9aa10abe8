package depot

import (
	"context"
	"fmt"
	"sync"
)

// Bytes is a memory budget. Reserve waits for room, Return makes room.
type Bytes struct {
	size int

	mu   sync.Mutex
	free int
	wake chan struct{} // closed and replaced at every Return
}

// NewBytes returns a budget of size bytes, all of them free.
func NewBytes(size int) *Bytes {
	return &Bytes{size: size, free: size, wake: make(chan struct{})}
}

// Reserve takes n bytes out of the budget and waits until they are free. After a
// nil error the caller owes Return(n).
func (b *Bytes) Reserve(ctx context.Context, n int) error {
	if n > b.size {
		return fmt.Errorf("depot: %d bytes never fit into a budget of %d", n, b.size)
	}
	b.mu.Lock()
	for b.free < n {
		wake := b.wake
		b.mu.Unlock()
		select {
		case <-wake:
		case <-ctx.Done():
			return ctx.Err()
		}
		b.mu.Lock()
	}
	b.free -= n
	b.mu.Unlock()
	return nil
}

// Return gives n bytes back.
func (b *Bytes) Return(n int) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.free += n
	close(b.wake)
	b.wake = make(chan struct{})
}

// Free returns the number of bytes nobody has reserved.
func (b *Bytes) Free() int {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.free
}
