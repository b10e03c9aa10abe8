package berth

import (
	"fmt"
	"io"
	"sort"
	"sync"
)

// A Plan says which ship is to get which slot tomorrow.
type Plan struct {
	mu   sync.RWMutex
	next map[string]string // slot to ship
	done bool
}

// NewPlan returns an empty plan.
func NewPlan() *Plan { return &Plan{next: make(map[string]string)} }

// Claim gives slot to ship unless somebody else has claimed it, and reports
// whether ship has it now.
func (p *Plan) Claim(slot, ship string) bool {
	p.mu.RLock()
	cur := p.next[slot]
	p.mu.RUnlock()
	if cur != "" {
		return cur == ship
	}
	p.mu.Lock()
	if got := p.next[slot]; got != "" {
		return got == ship
	}
	p.next[slot] = ship
	p.mu.Unlock()
	return true
}

// access runs fn with the lock that it needs.
func (p *Plan) access(change bool, fn func(next map[string]string)) {
	if change {
		p.mu.Lock()
	} else {
		p.mu.RLock()
	}
	fn(p.next)
	if change {
		p.mu.Unlock()
	} else {
		p.mu.RUnlock()
	}
}

// Drop takes ship out of the plan.
func (p *Plan) Drop(ship string) {
	p.access(true, func(next map[string]string) {
		for slot, s := range next {
			if s == ship {
				delete(next, slot)
			}
		}
	})
}

// Slots returns the claimed slots in order.
func (p *Plan) Slots() []string {
	var slots []string
	p.access(false, func(next map[string]string) {
		for slot := range next {
			slots = append(slots, slot)
		}
	})
	sort.Strings(slots)
	return slots
}

// Print writes the plan. The lock is not held while w is slow.
func (p *Plan) Print(w io.Writer) error {
	for _, slot := range p.Slots() {
		p.mu.RLock()
		ship, ok := p.next[slot]
		p.mu.RUnlock()
		if !ok {
			continue
		}
		if _, err := fmt.Fprintf(w, "%s\t%s\n", slot, ship); err != nil {
			return err
		}
	}
	return nil
}

// Finish closes the plan once and returns how many slots it gives away.
func (p *Plan) Finish() (int, error) {
	if !p.mu.TryLock() {
		return 0, fmt.Errorf("the plan is in use")
	}
	defer p.mu.Unlock()
	if p.done {
		return 0, fmt.Errorf("the plan is finished")
	}
	p.done = true
	return len(p.next), nil
}
