package depot

import (
	"context"
	"path/filepath"
	"testing"
)

func TestApplyIsAllOrNothing(t *testing.T) {
	s, err := Open(filepath.Join(t.TempDir(), "store"))
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if err := Apply(s, func(c *Change) error { c.Add("good"); c.Add(""); return nil }); err == nil {
		t.Error("a change with an empty line was accepted")
	}
	if err := Apply(s, func(c *Change) error { c.Add("slot %d", 7); return nil }); err != nil {
		t.Fatal(err)
	}
	var got []string
	if err := s.Lines(func(l string) bool { got = append(got, l); return true }); err != nil {
		t.Fatal(err)
	}
	if len(got) != 1 || got[0] != "slot 7" {
		t.Errorf("got %q, want one line", got)
	}
}

func TestPoolReuses(t *testing.T) {
	made := 0
	p := NewPool(1, func() (int, error) { made++; return made, nil })
	for range 3 {
		x, err := p.Get(context.Background())
		if err != nil {
			t.Fatal(err)
		}
		p.Put(x)
	}
	if made != 1 {
		t.Errorf("made %d objects, want 1", made)
	}
}

func TestBytesAndQueue(t *testing.T) {
	b := NewBytes(10)
	if err := b.Reserve(context.Background(), 11); err == nil {
		t.Error("11 of 10 bytes were reserved")
	}
	if err := b.Reserve(context.Background(), 4); err != nil || b.Free() != 6 {
		t.Errorf("err %v, free %d", err, b.Free())
	}
	b.Return(4)
	q := NewQueue(func(seq int) int { return seq })
	q.Put(1)
	if x, ok := q.Take(); !ok || x != 1 {
		t.Errorf("got %d, %v", x, ok)
	}
	if _, ok := q.Take(); ok {
		t.Error("took an item that was never put")
	}
}
