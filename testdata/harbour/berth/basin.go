package berth

import (
	"context"
	"sync"
)

// A Basin has water for a number of ships on the move at a time.
type Basin struct {
	mu     sync.Mutex
	room   int
	queued []chan struct{}
}

// NewBasin returns a basin for room ships.
func NewBasin(room int) *Basin { return &Basin{room: room} }

// Enter waits until there is room.
func (b *Basin) Enter(ctx context.Context) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	for b.room == 0 {
		if err := b.wait(ctx); err != nil {
			return err
		}
	}
	b.room--
	return nil
}

// wait sleeps until a ship has left. The caller must hold mu, and holds it again
// when wait returns.
func (b *Basin) wait(ctx context.Context) error {
	turn := make(chan struct{})
	b.queued = append(b.queued, turn)
	b.mu.Unlock()
	defer b.mu.Lock()
	select {
	case <-turn:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// Exit makes room.
func (b *Basin) Exit() {
	b.mu.Lock()
	b.room++
	queued := b.queued
	b.queued = nil
	b.mu.Unlock()
	for _, turn := range queued {
		close(turn)
	}
}
