package effects

// This file checks a finished table.

import (
	"fmt"
)

// sanity solves every node once more from the summaries of its callees: a closed
// fixpoint does not change. It costs as much as the last round of Compute; it
// runs in tests and on demand, never by default.
func (t *Table) sanity() []error {
	var errs []error
	for _, c := range t.sccs {
		for _, id := range c {
			n := t.nodes[id]
			before := n.sum
			name := "group"
			if n.fn != nil {
				name = n.fn.String()
			}
			for _, st := range stages {
				if st.step(t, n) {
					errs = append(errs, fmt.Errorf("%s: stage %s is not closed", name, st.name))
				}
			}
			if w, rel := t.writesOnce(n); w != before.writes || !equalSets(rel, before.rel) {
				errs = append(errs, fmt.Errorf("%s: overwrites are not closed", name))
			}
		}
	}
	return errs
}

func equalSets(a, b []*set) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i] != b[i] {
			return false
		}
	}
	return true
}

// writesOnce derives the overwrites of n from those of its callees, one by one
// and in plain set operations.
func (t *Table) writesOnce(n *node) (*set, []*set) {
	any := t.sets.union(n.sum.writes, n.local)
	rel := make([]*set, n.roots)
	copy(rel, n.localRel)
	put := func(s *set, m mask) {
		if m&unknownRoot != 0 {
			any = t.sets.union(any, s)
		}
		for i := range rel {
			if i < maxRoots && m>>uint(i)&1 != 0 {
				rel[i] = t.sets.union(rel[i], s)
			}
		}
	}
	for i := range n.sites {
		s := &n.sites[i]
		at := func(k int) mask {
			if k < len(s.origins) {
				return s.origins[k]
			}
			return unknownRoot
		}
		if t.usesTarget(s) {
			put(t.nodes[s.target].sum.writes, unknownRoot)
			for k, r := range t.nodes[s.target].sum.rel {
				put(r, at(k))
			}
		}
		if s.ext != nil {
			put(s.ext.deep, unknownRoot)
			for k, r := range s.ext.direct {
				put(r, at(k))
			}
		}
	}
	for _, m := range n.members {
		mn := t.nodes[m]
		put(mn.sum.writes, unknownRoot)
		for k, r := range mn.sum.rel {
			if k < numParams(mn.fn) {
				put(r, rootMask(k))
			} else {
				put(r, unknownRoot)
			}
		}
	}
	return any, rel
}
