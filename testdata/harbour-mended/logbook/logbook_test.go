package logbook

import (
	"io"
	"testing"
)

func TestRotateAndShip(t *testing.T) {
	b, err := Open(t.TempDir(), 10)
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range []string{"Alma in", "Brig in", "Alma out"} {
		if err := b.Write(line); err != nil {
			t.Fatal(err)
		}
	}
	if err := b.Close(); err != nil {
		t.Fatal(err)
	}
	if err := b.Write("late"); err == nil {
		t.Error("a closed book was written to")
	}
	names, err := b.Segments()
	if err != nil || len(names) != 3 {
		t.Fatalf("segments %q, %v", names, err)
	}
	read := func(r io.Reader) error { _, err := io.Copy(io.Discard, r); return err }
	if n := ShipAll(append(names, "none"), read); n != 3 {
		t.Errorf("sent %d segments, want 3", n)
	}
	done, err := Ship(names[0], read)
	if err != nil {
		t.Fatal(err)
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
	if n, err := b.Stamp("end"); n == 0 || err != nil {
		t.Errorf("stamped %d bytes, %v", n, err)
	}
	f, err := b.Tail(4)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	if text, err := io.ReadAll(f); string(text) != "end\n" || err != nil {
		t.Errorf("got %q, %v", text, err)
	}
}
