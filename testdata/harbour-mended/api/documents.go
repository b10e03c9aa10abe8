package api

import (
	"context"
	"io"
	"net/http"
	"sync"
	"time"

	"example/harbour/depot"
	"example/harbour/logbook"
)

// A Rules is a document that many requests read at a time and that may be replaced
// at any moment.
type Rules struct {
	mu  sync.RWMutex
	cur *depot.Handle
}

// Replace makes the document at path the current one.
func (d *Rules) Replace(path string) error {
	h, err := depot.NewHandle(path)
	if err != nil {
		return err
	}
	d.mu.Lock()
	old := d.cur
	d.cur = h
	d.mu.Unlock()
	if old != nil {
		old.Release()
	}
	return nil
}

// use returns the current document with one more user, nil if there is none.
func (d *Rules) use() *depot.Handle {
	d.mu.RLock()
	defer d.mu.RUnlock()
	if d.cur != nil {
		d.cur.Retain()
	}
	return d.cur
}

// ServeHTTP writes the current document.
func (d *Rules) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	h := d.use()
	if h == nil {
		http.NotFound(w, r)
		return
	}
	defer h.Release()
	io.Copy(w, h.Read())
}

// A Night is the work of the dark hours. It can be broken off.
type Night struct {
	h *Harbour

	mu   sync.Mutex
	stop context.CancelFunc // nil by day
}

// Begin starts the night, which lasts for d at most. It reports whether it was day.
func (n *Night) Begin(ctx context.Context, d time.Duration) bool {
	n.mu.Lock()
	defer n.mu.Unlock()
	if n.stop != nil {
		return false
	}
	ctx, n.stop = context.WithTimeout(ctx, d)
	go n.sweep(ctx)
	return true
}

// sweep lets the hours pass.
func (n *Night) sweep(ctx context.Context) {
	tick := time.NewTicker(time.Hour)
	defer tick.Stop()
	for {
		select {
		case <-tick.C:
			n.h.Roster.Sweep(1)
		case <-ctx.Done():
			return
		}
	}
}

// End ends the night.
func (n *Night) End() {
	n.mu.Lock()
	stop := n.stop
	n.stop = nil
	n.mu.Unlock()
	if stop != nil {
		stop()
	}
}

// Archive sends the segments of the log with post and closes the day with a stamp.
func Archive(ctx context.Context, log *logbook.Book, post func(ctx context.Context, r io.Reader) error) (int, error) {
	names, err := log.Segments()
	if err != nil {
		return 0, err
	}
	sent := logbook.ShipAll(names, func(r io.Reader) error {
		ctx, cancel := context.WithTimeout(ctx, time.Minute)
		defer cancel()
		return post(ctx, r)
	})
	if sent < len(names) {
		return sent, nil
	}
	_, err = log.Stamp("archived")
	return sent, err
}
