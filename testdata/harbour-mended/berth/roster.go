package berth

import (
	"fmt"
	"sort"
)

// A Roster is the fixed list of slots.
type Roster struct {
	slots []*Slot
}

// NewRoster returns the slots n1 … nCount and gives each its depth.
func NewRoster(count, depth int) *Roster {
	r := new(Roster)
	for i := range count {
		r.slots = append(r.slots, &Slot{Name: fmt.Sprintf("n%d", i+1), Depth: depth})
	}
	return r
}

// Slot returns the slot called name.
func (r *Roster) Slot(name string) (*Slot, error) {
	for _, s := range r.slots {
		if s.Name == name {
			return s, nil
		}
	}
	return nil, fmt.Errorf("%q: %w", name, ErrNoSlot)
}

// Sweep lets hours pass and casts off every ship whose time is over. It returns how
// many slots became free.
func (r *Roster) Sweep(hours int) int {
	freed := 0
	for _, s := range r.slots {
		s.Lock()
		if s.laidUp {
			s.Unlock()
			continue
		}
		if s.ship != "" {
			s.hours -= hours
			if s.hours <= 0 {
				s.clear()
				freed++
			}
		}
		s.Unlock()
	}
	return freed
}

// Free returns the names of the free slots that are at least depth deep.
func (r *Roster) Free(depth int) []string {
	var names []string
	for _, s := range r.slots {
		if s.Depth < depth {
			continue
		}
		s.Lock()
		if s.ship != "" {
			s.Unlock()
			continue
		}
		s.Unlock()
		names = append(names, s.Name)
	}
	sort.Strings(names)
	return names
}

// MoorAnywhere puts ship into the first slot that is free and that nobody is busy
// with, and returns its name.
func (r *Roster) MoorAnywhere(ship string, hours int) (string, error) {
	for _, s := range r.slots {
		if !s.TryLock() {
			continue
		}
		err := s.put(ship, hours)
		s.Unlock()
		if err == nil {
			return s.Name, nil
		}
	}
	return "", fmt.Errorf("%s: %w", ship, ErrTaken)
}

// Shift moves the ship in from to the free slot to. The locks are taken in the
// order of the names, so that two shifts never wait for each other.
func (r *Roster) Shift(from, to *Slot) error {
	if from == to {
		return nil
	}
	first, second := from, to
	if second.Name < first.Name {
		first, second = second, first
	}
	first.Lock()
	defer first.Unlock()
	second.Lock()
	defer second.Unlock()
	if err := to.put(from.ship, from.hours); err != nil {
		return err
	}
	from.clear()
	return nil
}
