// Package berth knows the slots along the quays and who lies in them.
package berth

import (
	"errors"
	"fmt"
	"sync"
)

var (
	// ErrTaken is returned when a slot is not free.
	ErrTaken = errors.New("slot is taken")
	// ErrNoSlot is returned for a slot that the harbour does not have.
	ErrNoSlot = errors.New("no such slot")
)

// A Slot is a place for one ship. Its fields are guarded by its lock, which callers
// take themselves so that they can look and act in one go.
type Slot struct {
	Name  string
	Depth int // decimetres at low water

	mu     sync.Mutex
	ship   string
	hours  int
	laidUp bool // the ship stays for the season
}

// Lock takes the slot's lock.
func (s *Slot) Lock() { s.mu.Lock() }

// TryLock takes the slot's lock if it is free, and reports whether it did.
func (s *Slot) TryLock() bool { return s.mu.TryLock() }

// Unlock releases the slot's lock.
func (s *Slot) Unlock() { s.mu.Unlock() }

// put moors ship. The caller must hold the lock.
func (s *Slot) put(ship string, hours int) error {
	if s.ship != "" {
		return fmt.Errorf("%s: %w by %s", s.Name, ErrTaken, s.ship)
	}
	s.ship, s.hours = ship, hours
	return nil
}

// clear casts off. The caller must hold the lock.
func (s *Slot) clear() {
	s.ship, s.hours, s.laidUp = "", 0, false
}

// Ship returns the ship in the slot, "" if it is free.
func (s *Slot) Ship() string {
	s.Lock()
	defer s.Unlock()
	return s.ship
}

// LayUp marks the ship in the slot as staying for the season.
func (s *Slot) LayUp() error {
	s.Lock()
	defer s.Unlock()
	if s.ship == "" {
		return fmt.Errorf("%s is free", s.Name)
	}
	s.laidUp = true
	return nil
}
