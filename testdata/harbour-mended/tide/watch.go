package tide

import (
	"context"
	"errors"
	"sync"
	"time"
)

// A Watch asks for the level of a port again and again.
type Watch struct {
	client *Client
	port   string
	every  time.Duration
	cancel context.CancelFunc
	ended  chan struct{}

	mu    sync.Mutex
	level int
	err   error
}

// NewWatch starts to watch port. The caller ends it with Close.
func NewWatch(ctx context.Context, c *Client, port string, every time.Duration) (*Watch, error) {
	ctx, cancel := context.WithCancel(ctx)
	w := &Watch{
		client: c,
		port:   port,
		every:  every,
		cancel: cancel,
		ended:  make(chan struct{}),
	}
	if every < time.Second {
		cancel()
		return nil, errors.New("a watch asks once a second at most")
	}
	go w.loop(ctx)
	return w, nil
}

func (w *Watch) loop(ctx context.Context) {
	defer close(w.ended)
	tick := time.NewTicker(w.every)
	defer tick.Stop()
	for {
		w.ask(ctx)
		select {
		case <-tick.C:
		case <-ctx.Done():
			return
		}
	}
}

func (w *Watch) ask(ctx context.Context) {
	ctx, cancel := context.WithTimeout(ctx, w.every/2)
	defer cancel()
	level, err := w.client.Level(ctx, w.port)
	w.mu.Lock()
	if err == nil {
		w.level = level
	}
	w.err = err
	w.mu.Unlock()
}

// Level returns the last level and the error of the last question.
func (w *Watch) Level() (int, error) {
	w.mu.Lock()
	defer w.mu.Unlock()
	return w.level, w.err
}

// Close ends the watch and waits for its last question.
func (w *Watch) Close() {
	w.cancel()
	<-w.ended
}
