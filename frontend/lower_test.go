package frontend

import (
	"testing"

	"pathtally/frontend/load"
	"pathtally/properties"
	"pathtally/properties/judge"
)

// TestCoverage holds the ledger of the demo and of a part of the standard
// library: every function with an event is answered for by some start.
func TestCoverage(t *testing.T) {
	for _, c := range []struct {
		dir, pattern string
		least        int // functions with an event, over all rules
	}{
		{"../testdata/harbour", "./...", 60},
		{"..", "net/textproto", 1},
	} {
		prog, err := load.Load(load.Config{Dir: c.dir, Patterns: []string{c.pattern}})
		if err != nil {
			t.Fatal(err)
		}
		sh := Analyze(prog)
		book, err := properties.Resolve(properties.BuiltInRules(), prog.Universe(), properties.Options{})
		if err != nil {
			t.Fatal(err)
		}
		sh.Judge(book.Rules)
		all := 0
		for _, r := range book.Rules {
			m := sh.lower(r)
			judge.Judge(r, m, judge.Options{})
			events, answered := m.Coverage()
			if events != answered {
				t.Errorf("%s, rule %s: %d functions have an event, %d are answered for", c.pattern, r.Name, events, answered)
			}
			if n := len(m.WithEvents()); n > events {
				t.Errorf("%s, rule %s: %d functions in judged packages of %d with events", c.pattern, r.Name, n, events)
			}
			all += events
		}
		if all < c.least {
			t.Errorf("%s: only %d functions with an event", c.pattern, all)
		}
	}
}
