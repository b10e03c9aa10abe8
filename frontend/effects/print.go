package effects

// This file prints summaries in one stable form, for tests and dumps:
//
//	writes: elem int; p0{.next}
//	exits: returns|panics
//	r0: never nil
//	flow p0: r0 p1 global kept
//	pure
//
// Lines that say nothing are left out.

import (
	"fmt"
	"slices"
	"strings"
)

func (s *Summary) setString(st *set) string {
	var names []string
	for _, p := range st.items() {
		names = append(names, s.t.places.list[p].String())
	}
	slices.Sort(names)
	return strings.Join(slices.Compact(names), " ")
}

// root is the printed name of root i: p for parameters, f for free variables.
func (s *Summary) root(i int) string {
	if i >= s.params {
		return fmt.Sprintf("f%d", i-s.params)
	}
	return fmt.Sprintf("p%d", i)
}

func (s *Summary) String() string {
	defer s.lock()()
	var b strings.Builder
	var w []string
	if s.writes != nil {
		w = append(w, s.setString(s.writes))
	}
	for i, r := range s.rel {
		if r != nil {
			w = append(w, fmt.Sprintf("%s{%s}", s.root(i), s.setString(r)))
		}
	}
	if len(w) > 0 {
		fmt.Fprintf(&b, "writes: %s\n", strings.Join(w, "; "))
	}
	fmt.Fprintf(&b, "exits: %s\n", s.exits)
	for j, r := range s.results {
		if r.Known() || r.Nil != 0 && (r.NonNilIfOK || r.NilIfFailed) {
			fmt.Fprintf(&b, "r%d: %s\n", j, r)
		}
	}
	for i, f := range s.flows {
		var to []string
		for j := range s.results {
			if f.ToResult(j) {
				to = append(to, fmt.Sprintf("r%d", j))
			}
		}
		for k := range s.flows {
			if k != i && f.ToRoot(k) {
				to = append(to, s.root(k))
			}
		}
		if f.Global {
			to = append(to, "global")
		}
		if f.Kept {
			to = append(to, "kept")
		}
		if len(to) > 0 {
			fmt.Fprintf(&b, "flow %s: %s\n", s.root(i), strings.Join(to, " "))
		}
	}
	if s.pure {
		b.WriteString("pure\n")
	}
	return b.String()
}
