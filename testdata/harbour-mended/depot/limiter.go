package depot

import (
	"context"
	"errors"
	"sync"
	"time"
)

// A Limiter spaces permissions by a fixed interval.
type Limiter struct {
	every time.Duration

	mu   sync.Mutex
	next time.Time
}

// NewLimiter returns a limiter that gives one permission per interval.
func NewLimiter(every time.Duration) *Limiter {
	return &Limiter{every: every}
}

// Wait blocks until the next permission is due.
func (l *Limiter) Wait(ctx context.Context) error {
	l.mu.Lock()
	now := time.Now()
	if l.next.Before(now) {
		l.next = now
	}
	pause := l.next.Sub(now)
	l.next = l.next.Add(l.every)
	l.mu.Unlock()

	if pause == 0 {
		return ctx.Err()
	}
	t := time.NewTimer(pause)
	defer t.Stop()
	select {
	case <-t.C:
		return nil
	case <-ctx.Done():
		return ctx.Err()
	}
}

// A Notice is a message for a ship's agent.
type Notice struct {
	Agent string
	Text  string
}

// A Client delivers notices. It keeps what it delivered until it is read.
type Client struct {
	mu   sync.Mutex
	sent []Notice
}

// Send delivers n.
func (c *Client) Send(n Notice) error {
	if n.Agent == "" {
		return errors.New("depot: notice without an agent")
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	c.sent = append(c.sent, n)
	return nil
}

// Drain returns what was delivered since the last call.
func (c *Client) Drain() []Notice {
	c.mu.Lock()
	defer func() {
		c.sent = nil
		c.mu.Unlock()
	}()
	return c.sent
}

// Notify sends every notice, each with its own permission from l.
func Notify(ctx context.Context, l *Limiter, c *Client, notices []Notice) error {
	for _, n := range notices {
		if err := l.Wait(ctx); err != nil {
			return err
		}
		if err := c.Send(n); err != nil {
			return err
		}
	}
	return nil
}
