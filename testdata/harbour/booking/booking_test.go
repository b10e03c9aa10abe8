package booking

import (
	"context"
	"errors"
	"testing"
)

func TestAddIsAtomic(t *testing.T) {
	b, err := NewBooks(t.Name())
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	ctx := context.Background()
	if err := b.Add(ctx, Booking{"Alma", "n1", 4}, Booking{"Brig", "n2", 0}); err == nil {
		t.Error("a booking of 0 hours was stored")
	}
	if n, err := b.Hours(ctx); err != nil || n != 0 {
		t.Errorf("after a failed Add: %d hours, %v", n, err)
	}
	if err := b.Add(ctx, Booking{"Alma", "n1", 4}); err != nil {
		t.Fatal(err)
	}
	in, err := b.InSlot(ctx, "n1")
	if err != nil || len(in) != 1 || in[0].Ship != "Alma" {
		t.Errorf("got %v, %v", in, err)
	}
	if err := b.Remove(ctx, "Brig"); !errors.Is(err, ErrNone) {
		t.Errorf("got %v, want %v", err, ErrNone)
	}
	if err := b.Remove(ctx, "Alma"); err != nil {
		t.Error(err)
	}
}
