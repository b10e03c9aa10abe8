package crew

import (
	"errors"
	"fmt"
	"sync"
)

// ErrLocked is returned when a gate cannot move.
var ErrLocked = errors.New("gate is locked")

// A Gate is the lock gate of a basin.
type Gate struct {
	mu     sync.Mutex
	open   bool
	locked bool
	moves  int
}

// Apply carries out a command: open, shut, lock, test.
func (g *Gate) Apply(cmd string) error {
	g.mu.Lock()
	switch cmd {
	case "open":
		if g.locked {
			g.mu.Unlock()
			return ErrLocked
		}
		g.open = true
	case "shut":
		g.open = false
	case "lock":
		if g.open {
			g.mu.Unlock()
			return errors.New("an open gate cannot be locked")
		}
		g.locked = true
	case "test":
		return nil
	default:
		g.mu.Unlock()
		return fmt.Errorf("unknown command %q", cmd)
	}
	g.moves++
	g.mu.Unlock()
	return nil
}

// State returns one word about the gate.
func (g *Gate) State() string {
	g.mu.Lock()
	switch {
	case g.locked:
		g.mu.Unlock()
		return "locked"
	case g.open:
		g.mu.Unlock()
		return "open"
	}
	g.mu.Unlock()
	return "shut"
}
