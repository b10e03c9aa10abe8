package frontend

import (
	"fmt"
	"os"
	"sort"
	"testing"
	"time"

	"pathtally/frontend/load"
	"pathtally/pds"
	"pathtally/properties"
)

func TestTmp(t *testing.T) {
	dir, pat, only := os.Getenv("TDIR"), os.Getenv("TPAT"), os.Getenv("TRULE")
	if dir == "" {
		t.Skip()
	}
	t0 := time.Now()
	prog, err := load.Load(load.Config{Dir: dir, Patterns: []string{pat}})
	if err != nil {
		t.Fatal(err)
	}
	fmt.Println("load", time.Since(t0))
	t0 = time.Now()
	sh := Analyze(prog)
	fmt.Println("analyze", time.Since(t0), len(sh.fns))
	book, err := properties.Resolve(properties.BuiltInRules(), prog.Universe(), properties.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range book.Rules {
		if only != "" && r.Name != only {
			continue
		}
		t0 = time.Now()
		m := sh.lower(r)
		cone := 0
		for _, fi := range m.fns {
			if fi.cone {
				cone++
			}
		}
		fmt.Println(r.Name, "lower", time.Since(t0), "cone", cone, "starts", len(m.starts))
		t0 = time.Now()
		seen := map[pds.Head]bool{}
		exits = map[pds.Head]map[pds.StateID]bool{}
		users = map[pds.Head][]func(pds.StateID){}
		steps := 0
		for _, s := range m.starts {
			before := steps
			explore(m, s.Head, seen, &steps)
			if steps-before > 3000 {
				fmt.Println("  big", s.Root.Name, s.Kind, s.Instance, steps-before)
			}
			if steps > 3000000 {
				break
			}
		}
		fmt.Println(r.Name, "explored", time.Since(t0), "heads", len(seen), "symbols", len(m.symbols), "states", len(m.states), "exprs", len(m.x.nodes))
		by := map[string]int{}
		ex := map[string][]string{}
		for h := range seen {
			n := m.fns[m.symbols[h.Symbol].fn].fn.String()
			by[n]++
			if len(ex[n]) < 6 {
				ex[n] = append(ex[n], m.StateString(h.State)+" | "+m.SymbolString(h.Symbol))
			}
		}
		var names []string
		for n := range by {
			names = append(names, n)
		}
		sort.Slice(names, func(i, j int) bool { return by[names[i]] > by[names[j]] })
		for i, n := range names {
			if i > 4 || by[n] < 300 {
				break
			}
			fmt.Println("   ", by[n], n)
			for _, e := range ex[n] {
				fmt.Println("        ", e)
			}
		}
	}
}

var exits = map[pds.Head]map[pds.StateID]bool{}
var users = map[pds.Head][]func(pds.StateID){}

// explore is a plain saturation.
func explore(m *Model, h pds.Head, seen map[pds.Head]bool, steps *int) {
	type cont struct {
		below pds.SymbolID
		from  pds.Head
	}
	var work []pds.Head
	visit := func(h pds.Head) {
		if !seen[h] {
			seen[h] = true
			work = append(work, h)
		}
	}
	var addExit func(h pds.Head, q pds.StateID)
	addExit = func(h pds.Head, q pds.StateID) {
		if exits[h] == nil {
			exits[h] = map[pds.StateID]bool{}
		}
		if exits[h][q] {
			return
		}
		exits[h][q] = true
		for _, u := range users[h] {
			u(q)
		}
	}
	on := func(h pds.Head, f func(pds.StateID)) {
		users[h] = append(users[h], f)
		for q := range exits[h] {
			f(q)
		}
	}
	visit(h)
	for n := 0; len(work) > 0 && n < 20000; n++ {
		h := work[len(work)-1]
		work = work[:len(work)-1]
		*steps++
		for _, r := range m.Rules(h, nil) {
			switch r.Kind {
			case pds.Pop:
				addExit(h, r.State)
			case pds.Step:
				n := pds.Head{State: r.State, Symbol: r.Top}
				visit(n)
				on(n, func(q pds.StateID) { addExit(h, q) })
			case pds.Push:
				n := pds.Head{State: r.State, Symbol: r.Top}
				visit(n)
				on(n, func(q pds.StateID) {
					k := pds.Head{State: q, Symbol: r.Below}
					visit(k)
					on(k, func(q pds.StateID) { addExit(h, q) })
				})
			}
		}
	}
}
