package berth

import (
	"errors"
	"sync"
)

// A Tariff is the price of an hour, by length class.
type Tariff struct {
	mu     sync.Mutex
	cents  map[string]int
	frozen bool
}

// NewTariff returns a tariff with the given prices.
func NewTariff(cents map[string]int) *Tariff {
	t := &Tariff{cents: make(map[string]int, len(cents))}
	for class, c := range cents {
		t.cents[class] = c
	}
	return t
}

// hold takes the lock and returns the function that releases it.
func (t *Tariff) hold() (release func()) {
	t.mu.Lock()
	return func() { t.mu.Unlock() }
}

// Price returns the price of hours in class, false if there is no such class.
func (t *Tariff) Price(class string, hours int) (int, bool) {
	defer t.hold()()
	c, ok := t.cents[class]
	return c * hours, ok
}

// Freeze keeps all prices as they are.
func (t *Tariff) Freeze() {
	release := t.hold()
	t.frozen = true
	release()
}

// Raise raises the price of class by percent and returns the new one.
func (t *Tariff) Raise(class string, percent int) (int, error) {
	release := t.hold()
	old, ok := t.cents[class]
	if !ok {
		release()
		return 0, errors.New("no such class")
	}
	if t.frozen && percent > 0 {
		release()
		return old, errors.New("prices are frozen")
	}
	now := old + old*percent/100
	t.cents[class] = now
	release()
	return now, nil
}
