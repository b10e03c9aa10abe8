package main

import (
	"strings"
	"testing"
)

// One module through every room: a lock that a deferred call gives back only
// sometimes, and its mended twin.
func TestWholeRun(t *testing.T) {
	const desk = `package desk

import "sync"

type Desk struct {
	mu   sync.Mutex
	open int
}

func (d *Desk) Book(n int, quiet bool) int {
	d.mu.Lock()
	defer d.settle(quiet)
	if n < 0 {
		return 0
	}
	d.open += n
	return d.open
}

func (d *Desk) settle(quiet bool) {
	if quiet {
		RETURN
	}
	d.mu.Unlock()
}
`
	broken := module(t, map[string]string{"desk.go": strings.Replace(desk, "RETURN", "return", 1)})
	status, out, errs := start(t, "check", "-C", broken)
	if status != exitBroken {
		t.Fatalf("status %d\n%s%s", status, out, errs)
	}
	for _, want := range []string{
		"desk.go:22:3: (*Desk).Book can return with d.mu still taken\n",
		"    taken at    desk.go:11:2    d.mu.Lock()\n",
		"    lost at     desk.go:22:3    this return passes by d.mu.Unlock() in line 24\n",
		"1 == 0 is false\n",
	} {
		if !strings.Contains(out, want) {
			t.Errorf("no line %q in:\n%s", want, out)
		}
	}
	// The command that a finding names shows that finding and stops again.
	_, again, ok := strings.Cut(out, "again: pathtally ")
	if !ok {
		t.Fatalf("no command to run again:\n%s", out)
	}
	again, _, _ = strings.Cut(again, "\n")
	if status, out2, errs := start(t, append(strings.Fields(again), "-C", broken)...); status != exitBroken || !strings.Contains(out2, "d.mu still taken") {
		t.Errorf("%s: status %d\n%s%s", again, status, out2, errs)
	}

	mended := module(t, map[string]string{"desk.go": strings.Replace(desk, "RETURN", "defer d.note()", 1) + "\nfunc (d *Desk) note() {}\n"})
	if status, out, errs := start(t, "check", "-C", mended); status != exitHolds {
		t.Errorf("mended: status %d\n%s%s", status, out, errs)
	}
}
