package crew

import (
	"errors"
	"slices"
	"sync"
)

// ErrNoPilot is returned when all pilots are out.
var ErrNoPilot = errors.New("no pilot is free")

// Pilots is the list of those on duty.
type Pilots struct {
	mu   sync.Mutex
	free []string
	out  map[string]string // pilot to ship
}

// NewPilots returns a list on which all are free.
func NewPilots(names ...string) *Pilots {
	return &Pilots{free: slices.Clone(names), out: make(map[string]string)}
}

// Assign sends a pilot to ship.
func (p *Pilots) Assign(ship string) (string, error) {
	p.mu.Lock()
	if len(p.free) == 0 {
		p.mu.Unlock()
		return "", ErrNoPilot
	}
	defer p.mu.Unlock()
	name := p.free[0]
	p.free = p.free[1:]
	p.out[name] = ship
	return name, nil
}

// Back notes that a pilot is free again.
func (p *Pilots) Back(name string) {
	p.mu.Lock()
	_, ok := p.out[name]
	if !ok {
		p.mu.Unlock()
		return
	}
	defer p.mu.Unlock()
	delete(p.out, name)
	p.free = append(p.free, name)
}

// With runs fn while a pilot is aboard ship.
func (p *Pilots) With(ship string, fn func(pilot string) error) error {
	name, err := p.Assign(ship)
	if err != nil {
		return err
	}
	defer p.Back(name)
	return fn(name)
}
