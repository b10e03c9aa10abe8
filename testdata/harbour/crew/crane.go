// Package crew has the people and machines that work at the quays.
package crew

import (
	"fmt"
	"sync"
)

// A Crane lifts cargo up to its limit.
type Crane struct {
	name  string
	limit int // tons

	mu     sync.Mutex
	hook   int // tons on the hook
	lifted int // tons, since the last service
}

// NewCrane returns a crane for limit tons.
func NewCrane(name string, limit int) *Crane {
	return &Crane{name: name, limit: limit}
}

// Lift takes tons onto the hook and lands them.
func (c *Crane) Lift(tons int) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("crane %s: %v", c.name, r)
		}
	}()
	c.mu.Lock()
	c.load(tons)
	c.lifted += tons
	c.hook = 0
	c.mu.Unlock()
	return nil
}

// load puts tons onto the hook. It panics if that is more than the crane can bear.
func (c *Crane) load(tons int) {
	if c.hook+tons > c.limit {
		panic(fmt.Sprintf("%d tons on a hook for %d", c.hook+tons, c.limit))
	}
	c.hook += tons
}

// Hold leaves tons on the hook for a later Lift.
func (c *Crane) Hold(tons int) (err error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("crane %s cannot hold: %v", c.name, r)
		}
	}()
	c.load(tons)
	return nil
}

// Service starts the count of lifted tons again and returns the old one.
func (c *Crane) Service() int {
	c.mu.Lock()
	old := c.lifted
	c.lifted = 0
	c.mu.Unlock()
	return old
}
