package effects

import (
	"maps"
	"slices"
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
	checkModels(t, tab)
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

// checkModels compares the models with the bodies that they stand for: every
// name exists, a body proves or at least does not refute what is said of
// results, and a function said to write nothing writes only to what it has
// allocated, to variables, or to internals of its own package.
func checkModels(t *testing.T, tab *Table) {
	byName := map[string]*node{}
	for _, n := range tab.nodes {
		if n.fn != nil && n.fn.Synthetic == "" || n.fn != nil && n.fn.Origin() != nil {
			byName[fullName(n.fn)] = n
		}
	}
	names := slices.Sorted(maps.Keys(known))
	proved := 0
	for _, name := range names {
		m := known[name]
		n := byName[name]
		if n == nil {
			// Generic functions have a node only if something instantiates them.
			if m.nilIff == nil {
				t.Errorf("model of %s: no such function", name)
			}
			continue
		}
		for j, nl := range m.nilness {
			switch r := n.sum.Result(j); {
			case r.Nil == nl:
				proved++
			case r.Nil&nl == 0:
				t.Errorf("model of %s: result %d is %s", name, j, r)
			default:
				t.Logf("model of %s: result %d is not proved by the body", name, j)
			}
		}
		if !m.noWrites {
			continue
		}
		for i, r := range n.sum.rel {
			for _, p := range r.items() {
				if pl := tab.places.list[p]; pl.kind == fieldPlace && pl.field.Exported() {
					t.Errorf("model of %s: the body writes %s of parameter %d", name, pl, i)
				}
			}
		}
	}
	t.Logf("%d of the modelled results are proved by bodies", proved)
	if proved < 10 {
		t.Error("too few")
	}
}
