package crew

import (
	"context"
	"fmt"
	"sync"

	"example/harbour/depot"
	"example/harbour/lease"
	"example/harbour/meter"
)

// A Ticket is a place in the line for a tug.
type Ticket struct{ Number int }

// A Team tows ships with the tugs of a register.
type Team struct {
	tugs   *Register
	busy   *lease.Table
	gauges *meter.Vec
	line   *depot.Queue[Ticket]
}

// NewTeam returns a team for the tugs of r.
func NewTeam(r *Register, gauges *meter.Vec) *Team {
	return &Team{
		tugs:   r,
		busy:   lease.NewTable(),
		gauges: gauges,
		line:   depot.NewQueue(func(seq int) Ticket { return Ticket{seq} }),
	}
}

// Tow calls pull with the strongest tug that is registered.
func (t *Team) Tow(ctx context.Context, pull func(tug string) error) error {
	names := t.tugs.Strongest()
	if len(names) == 0 {
		return fmt.Errorf("no tug is registered")
	}
	name := names[0]
	if err := t.busy.Acquire(ctx, name); err != nil {
		return err
	}
	defer t.busy.Seal(name)
	g := t.gauges.With(name)
	g.Inc()
	defer g.Dec()
	return pull(name)
}

// Convoy tows ships, each with a ticket of its own, at most hands at a time, and
// returns how many arrived.
func (t *Team) Convoy(ctx context.Context, ships, hands int, pull func(Ticket) error) int {
	t.line.Put(ships)
	var (
		wg sync.WaitGroup
		mu sync.Mutex
		n  int
	)
	for range hands {
		wg.Add(1)
		go func() {
			defer wg.Done()
			for {
				ticket, ok := t.line.Take()
				if !ok {
					return
				}
				err := t.Tow(ctx, func(string) error { return pull(ticket) })
				if err != nil {
					continue
				}
				mu.Lock()
				n++
				mu.Unlock()
			}
		}()
	}
	wg.Wait()
	mu.Lock()
	defer mu.Unlock()
	return n
}
