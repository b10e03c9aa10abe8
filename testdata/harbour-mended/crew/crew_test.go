package crew

import (
	"context"
	"errors"
	"testing"

	"example/harbour/meter"
)

func TestConvoyTowsAll(t *testing.T) {
	team := NewTeam(NewRegister(&Tug{"Bull", 900}, &Tug{"Calf", 300}), meter.NewVec("tugs"))
	got := team.Convoy(context.Background(), 5, 2, func(k Ticket) error {
		if k.Number == 3 {
			return errors.New("line parted")
		}
		return nil
	})
	if got != 4 {
		t.Errorf("%d ships arrived, want 4", got)
	}
}

func TestShiftCountsJobs(t *testing.T) {
	s := Start(context.Background(), 2)
	ran := make(chan bool)
	for range 3 {
		if err := s.Put(context.Background(), func(context.Context) error { ran <- true; return nil }); err != nil {
			t.Fatal(err)
		}
		<-ran
	}
	s.Close()
	if n, err := s.Done(); n != 3 || err != nil {
		t.Errorf("%d jobs, %v", n, err)
	}
	if err := s.Put(context.Background(), nil); err == nil {
		t.Error("a job was taken after Close")
	}
}

func TestGateAndCrane(t *testing.T) {
	var g Gate
	for _, cmd := range []string{"open", "shut", "lock"} {
		if err := g.Apply(cmd); err != nil {
			t.Errorf("%s: %v", cmd, err)
		}
	}
	if err := g.Apply("open"); !errors.Is(err, ErrLocked) {
		t.Errorf("got %v, want %v", err, ErrLocked)
	}
	c := NewCrane("C1", 10)
	if err := c.Lift(8); err != nil {
		t.Error(err)
	}
	if err := c.Hold(12); err == nil {
		t.Error("12 tons hang on a hook for 10")
	}
	if n := c.Service(); n != 8 {
		t.Errorf("lifted %d tons, want 8", n)
	}
}

func TestPilots(t *testing.T) {
	p := NewPilots("Ida")
	err := p.With("Alma", func(string) error { return nil })
	if err != nil || len(p.free) != 1 {
		t.Errorf("%v, %d pilots free", err, len(p.free))
	}
}
