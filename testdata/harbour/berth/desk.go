package berth

import (
	"fmt"
	"sync"

	"example/harbour/meter"
)

// A Desk takes bookings of slots.
type Desk struct {
	roster *Roster
	level  *meter.Vec

	mu      sync.Mutex
	version int
	booked  map[string]string // ship to slot
	changed chan struct{}     // closed and replaced when others should look again
}

// NewDesk returns a desk for the slots of roster.
func NewDesk(roster *Roster, level *meter.Vec) *Desk {
	return &Desk{
		roster:  roster,
		level:   level,
		booked:  make(map[string]string),
		changed: make(chan struct{}),
	}
}

// Book moors ship in the slot called name. A quiet booking wakes nobody who waits
// for a change.
func (d *Desk) Book(ship, name string, hours int, quiet bool) error {
	d.mu.Lock()
	defer d.settle(quiet)
	g := d.level.With("desk")
	g.Inc()
	defer g.Dec()
	if at, ok := d.booked[ship]; ok {
		return fmt.Errorf("%s lies in %s", ship, at)
	}
	s, err := d.roster.Slot(name)
	if err != nil {
		return err
	}
	if err := s.moor(ship, hours); err != nil {
		return err
	}
	d.booked[ship] = name
	return nil
}

// settle ends a booking: it counts it and tells those who wait.
func (d *Desk) settle(quiet bool) {
	d.version++
	if quiet {
		return
	}
	close(d.changed)
	d.changed = make(chan struct{})
	d.mu.Unlock()
}

// moor takes the lock of s just long enough to put ship into it.
func (s *Slot) moor(ship string, hours int) error {
	s.Lock()
	err := s.put(ship, hours)
	s.Unlock()
	return err
}

// Leave casts ship off.
func (d *Desk) Leave(ship string) error {
	d.mu.Lock()
	defer d.mu.Unlock()
	name, ok := d.booked[ship]
	if !ok {
		return fmt.Errorf("%s is not here", ship)
	}
	s, err := d.roster.Slot(name)
	if err != nil {
		return err
	}
	s.Lock()
	s.clear()
	s.Unlock()
	delete(d.booked, ship)
	return nil
}

// Changed returns the number of changes so far and a channel that is closed at the
// next one that is not quiet.
func (d *Desk) Changed() (version int, next <-chan struct{}) {
	d.mu.Lock()
	version, next = d.version, d.changed
	d.mu.Unlock()
	return version, next
}

// Where returns the slot of ship, "" if it is not here.
func (d *Desk) Where(ship string) (slot string) {
	d.locked(func() { slot = d.booked[ship] })
	return slot
}

// locked runs fn with the lock held.
func (d *Desk) locked(fn func()) {
	d.mu.Lock()
	defer d.mu.Unlock()
	fn()
}
