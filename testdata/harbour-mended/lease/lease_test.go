package lease

import (
	"context"
	"errors"
	"testing"
)

func TestAcquireExcludes(t *testing.T) {
	tab := NewTable()
	ctx := context.Background()
	if err := tab.Acquire(ctx, "north"); err != nil {
		t.Fatal(err)
	}
	late, cancel := context.WithCancel(ctx)
	cancel()
	if err := tab.Acquire(late, "north"); !errors.Is(err, context.Canceled) {
		t.Errorf("second Acquire: got %v, want %v", err, context.Canceled)
	}
	tab.Seal("north")
	if n := tab.Held(); n != 0 {
		t.Errorf("%d leases are out after Seal, want 0", n)
	}
	tab.Close()
	if err := tab.Acquire(ctx, "north"); !errors.Is(err, ErrClosed) {
		t.Errorf("after Close: got %v, want %v", err, ErrClosed)
	}
}
