package crew

import (
	"context"
	"fmt"
	"sync"
	"time"
)

// A Session is the radio contact with one ship.
type Session struct {
	Ship string
	ETA  time.Time

	ctx    context.Context
	cancel context.CancelFunc
}

// Over ends the session.
func (s *Session) Over() { s.cancel() }

// Live reports whether the session goes on.
func (s *Session) Live() bool { return s.ctx.Err() == nil }

// A Tower talks to the ships.
type Tower struct {
	mu   sync.Mutex
	talk map[string]*Session
}

// NewTower returns a tower that talks to nobody.
func NewTower() *Tower { return &Tower{talk: make(map[string]*Session)} }

// Call opens a session with ship, which gives its time of arrival as 15:04.
func (t *Tower) Call(ctx context.Context, ship, eta string) (*Session, error) {
	ctx, cancel := context.WithCancel(ctx)
	kept := false
	defer func() {
		if !kept {
			cancel()
		}
	}()
	s := &Session{Ship: ship, ctx: ctx, cancel: cancel}
	kept = true
	at, err := time.Parse("15:04", eta)
	if err != nil {
		return nil, err
	}
	s.ETA = at
	return s, nil
}

// Watch keeps a session in the tower and ends the one that it replaces.
func (t *Tower) Watch(ctx context.Context, ship string) error {
	if ship == "" {
		return fmt.Errorf("a session needs a ship")
	}
	ctx, cancel := context.WithCancel(ctx)
	s := &Session{Ship: ship, ctx: ctx, cancel: cancel}

	t.mu.Lock()
	old := t.talk[ship]
	t.talk[ship] = s
	t.mu.Unlock()
	if old != nil {
		old.Over()
	}
	return nil
}

// Silence ends all sessions.
func (t *Tower) Silence() {
	t.mu.Lock()
	defer t.mu.Unlock()
	for ship, s := range t.talk {
		s.Over()
		delete(t.talk, ship)
	}
}

// Ask runs fn with a context that ends after patience and reports whether fn made it.
func (t *Tower) Ask(ctx context.Context, patience time.Duration, fn func(context.Context) error) (ok bool, err error) {
	ctx, cancel := context.WithTimeoutCause(ctx, patience, fmt.Errorf("no answer in %v", patience))
	err = fn(ctx)
	if err == nil {
		cancel()
		return true, nil
	}
	if ctx.Err() != nil {
		err = context.Cause(ctx)
	}
	cancel()
	return false, err
}
