package crew

import (
	"context"
	"errors"
	"sync"
	"time"
)

var errOver = errors.New("the shift is over")

// A Job is work for one hand.
type Job func(ctx context.Context) error

// A Shift is a number of hands that carry out jobs until Close.
type Shift struct {
	ctx    context.Context
	cancel context.CancelFunc
	jobs   chan Job
	hands  sync.WaitGroup

	mu     sync.Mutex
	done   int
	failed []error
}

// Start calls hands to work.
func Start(ctx context.Context, hands int) *Shift {
	ctx, cancel := context.WithCancel(ctx)
	s := &Shift{ctx: ctx, cancel: cancel, jobs: make(chan Job)}
	for range hands {
		s.hands.Go(s.work)
	}
	return s
}

func (s *Shift) work() {
	for {
		select {
		case job := <-s.jobs:
			err := s.run(job, 0)
			s.mu.Lock()
			s.done++
			if err != nil {
				s.failed = append(s.failed, err)
			}
			s.mu.Unlock()
		case <-s.ctx.Done():
			return
		}
	}
}

// run carries out one job, in limit if that is not 0.
func (s *Shift) run(job Job, limit time.Duration) error {
	ctx, cancel := s.ctx, func() {}
	if limit > 0 {
		ctx, cancel = withLimit(ctx, limit)
	}
	defer func() { cancel() }()
	return job(ctx)
}

// withLimit is context.WithTimeout with room for the hand-over.
func withLimit(ctx context.Context, limit time.Duration) (context.Context, context.CancelFunc) {
	return context.WithTimeout(ctx, limit+limit/10)
}

// Put hands job to the next free hand.
func (s *Shift) Put(ctx context.Context, job Job) error {
	select {
	case s.jobs <- job:
		return nil
	case <-s.ctx.Done():
		return errOver
	case <-ctx.Done():
		return ctx.Err()
	}
}

// Do carries out job at once, outside the queue. It ends with the caller's context,
// and after limit if that is not 0.
func (s *Shift) Do(ctx context.Context, job Job, limit time.Duration) error {
	if s.ctx.Err() != nil {
		return errOver
	}
	ctx, cancel := context.WithCancel(ctx)
	if limit > 0 {
		ctx, cancel = context.WithTimeout(ctx, limit)
	}
	defer cancel()
	return job(ctx)
}

// Done returns how many jobs were carried out and what went wrong.
func (s *Shift) Done() (int, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.done, errors.Join(s.failed...)
}

// Close sends the hands home and waits until they have left.
func (s *Shift) Close() {
	s.cancel()
	s.hands.Wait()
}
