package effects

import (
	"testing"
	"time"

	"pathtally/frontend/load"
)

// TestStd summarises the whole standard library with all bodies: nothing may
// panic, the fixpoint must be closed, and the counts must not collapse.
func TestStd(t *testing.T) {
	if testing.Short() {
		t.Skip("loads the standard library")
	}
	start := time.Now()
	prog, err := load.Load(load.Config{Patterns: []string{"std"}})
	if err != nil {
		t.Fatal(err)
	}
	fns := append(prog.Functions()[:len(prog.Functions()):len(prog.Functions())], prog.Wrappers()...)
	t.Logf("loaded %d functions in %v", len(fns), time.Since(start).Round(time.Millisecond))
	start = time.Now()
	tab := Compute(prog.SSA, fns, Options{Callees: NewTypeResolver(prog.SSA, fns).Callees})
	t.Logf("summaries in %v", time.Since(start).Round(time.Millisecond))
	logCounts(t, tab)
	for i, err := range tab.sanity() {
		if i == 10 {
			break
		}
		t.Error(err)
	}
}

func logCounts(t *testing.T, tab *Table) {
	var functions, groups, silent, pure, panics, unknown, results, known, largest int
	for _, c := range tab.sccs {
		largest = max(largest, len(c))
	}
	for _, n := range tab.nodes {
		if n.fn == nil {
			groups++
			continue
		}
		if isBodyless(n.fn) {
			continue
		}
		functions++
		s := &n.sum
		if !s.Writes() {
			silent++
		}
		if s.PureGetter() {
			pure++
		}
		if s.MayPanic() {
			panics++
		}
		if s.WritesUnknown() {
			unknown++
		}
		for j := range s.NumResults() {
			results++
			if s.Result(j).Known() {
				known++
			}
		}
	}
	t.Logf("%d functions, %d groups, %d components (largest %d), %d places, %d sets, %d unions", functions, groups, len(tab.sccs), largest, len(tab.places.list), tab.sets.next, len(tab.sets.unions))
	t.Logf("%d overwrite nothing, %d overwrite unknown places, %d pure getters, %d may panic", silent, unknown, pure, panics)
	t.Logf("%d of %d results known", known, results)
	if functions < 10000 || pure < 500 || known < 2000 {
		t.Error("too few")
	}
}
