package berth

import (
	"context"
	"errors"
	"slices"
	"testing"

	"example/harbour/meter"
)

func TestDeskBooksOnce(t *testing.T) {
	d := NewDesk(NewRoster(2, 60), meter.NewVec("desk"))
	if err := d.Book("Alma", "n1", 3, false); err != nil {
		t.Fatal(err)
	}
	if err := d.Book("Brig", "n1", 3, false); !errors.Is(err, ErrTaken) {
		t.Errorf("got %v, want %v", err, ErrTaken)
	}
	if err := d.Book("Brig", "n9", 3, false); !errors.Is(err, ErrNoSlot) {
		t.Errorf("got %v, want %v", err, ErrNoSlot)
	}
	if at := d.Where("Alma"); at != "n1" {
		t.Errorf("Alma lies in %q", at)
	}
	if err := d.Leave("Alma"); err != nil {
		t.Error(err)
	}
	if v, _ := d.Changed(); v != 3 {
		t.Errorf("version %d after three bookings", v)
	}
}

func TestSweepAndShift(t *testing.T) {
	r := NewRoster(3, 60)
	for _, ship := range []string{"Alma", "Brig"} {
		if _, err := r.MoorAnywhere(ship, 2); err != nil {
			t.Fatal(err)
		}
	}
	if err := r.Shift(r.slots[0], r.slots[2]); err != nil {
		t.Fatal(err)
	}
	if free := r.Free(50); !slices.Equal(free, []string{"n1"}) {
		t.Errorf("free: %v", free)
	}
	if n := r.Sweep(2); n != 2 {
		t.Errorf("Sweep freed %d slots, want 2", n)
	}
}

func TestBoardPlanTariff(t *testing.T) {
	var b Board
	b.Post(Row{Slot: "n2", Ship: "Brig"})
	b.Post(Row{Slot: "n1", Ship: "Alma", ETA: "06:00"})
	if n := len(b.Snapshot()); n != 2 || b.Expected() != 1 {
		t.Errorf("%d rows, %d expected", n, b.Expected())
	}
	if s := b.SlotOf("nobody"); s != "" {
		t.Errorf("nobody is expected in %q", s)
	}
	if !b.Trim(func(r Row) bool { return r.ETA != "" }) {
		t.Error("nothing was trimmed")
	}
	p := NewPlan()
	if !p.Claim("n1", "Alma") || p.Claim("n1", "Brig") {
		t.Error("claims are not exclusive")
	}
	if n, err := p.Finish(); n != 1 || err != nil {
		t.Errorf("got %d, %v", n, err)
	}
	f := NewTariff(map[string]int{"small": 200})
	if c, err := f.Raise("small", 10); c != 220 || err != nil {
		t.Errorf("got %d, %v", c, err)
	}
}

func TestLedgerAndBasin(t *testing.T) {
	var got []string
	l := NewLedger(func(e Entry) { got = append(got, e.Text) })
	l.Pause()
	l.Record("one")
	if l.Pending() != 1 || len(got) != 0 {
		t.Error("a paused ledger handed an entry over")
	}
	b := NewBasin(1)
	ctx, cancel := context.WithCancel(context.Background())
	if err := b.Enter(ctx); err != nil {
		t.Fatal(err)
	}
	cancel()
	if err := b.Enter(ctx); !errors.Is(err, context.Canceled) {
		t.Errorf("got %v", err)
	}
	b.Exit()
}
