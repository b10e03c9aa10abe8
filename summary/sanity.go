// Checks of what was built.

package summary

import (
	"errors"
	"fmt"

	"pathtally/pds"
)

// Sanity checks the closed part of an engine and reports everything that is
// wrong: one more round of saturation, with rules asked anew, must add no exit
// and need no head; exits must be in order, once each, and each must have a
// reason (a rule that gives it). Cost: about that of the saturation itself.
func (e *Engine) Sanity() error {
	var errs []error
	bad := func(n node, format string, args ...any) {
		h := e.nodes[n].head
		errs = append(errs, fmt.Errorf("state %d, symbol %d: %s", h.State, h.Symbol, fmt.Sprintf(format, args...)))
	}
	for i := range e.nodes {
		n := node(i)
		ni := &e.nodes[n]
		if e.nodeOf[ni.head] != n {
			bad(n, "head leads to another node")
		}
		if !ni.closed {
			continue
		}
		if !ni.expanded || ni.done != ni.last {
			bad(n, "closed with work left")
		}
		last := pds.StateID(-1)
		reason := map[pds.StateID]bool{}
		for p := ni.first; p >= 0; p = e.pairs[p].next {
			q := e.pairs[p].exit
			if q <= last {
				bad(n, "exit %d behind exit %d", q, last)
			}
			last = q
			reason[q] = false
			if e.pairOf[pairKey(n, q)] != p {
				bad(n, "exit %d is not in the index", q)
			}
		}
		gives := func(q pds.StateID, r int) {
			if _, ok := reason[q]; !ok {
				bad(n, "rule %d gives exit %d, which is missing", r, q)
			}
			reason[q] = true
		}
		sub := func(h pds.Head, r int) node {
			k, ok := e.nodeOf[h]
			if !ok || !e.nodes[k].closed {
				bad(n, "rule %d needs state %d, symbol %d, which is not closed", r, h.State, h.Symbol)
				return -1
			}
			return k
		}
		through := func(k node, r int) {
			if k < 0 {
				return
			}
			for p := e.nodes[k].first; p >= 0; p = e.pairs[p].next {
				gives(e.pairs[p].exit, r)
			}
		}
		for r, rule := range e.sys.Rules(ni.head, nil) {
			switch rule.Kind {
			case pds.Pop:
				gives(rule.State, r)
			case pds.Step:
				through(sub(pds.Head{State: rule.State, Symbol: rule.Top}, r), r)
			case pds.Push:
				if t := sub(pds.Head{State: rule.State, Symbol: rule.Top}, r); t >= 0 {
					for p := e.nodes[t].first; p >= 0; p = e.pairs[p].next {
						through(sub(pds.Head{State: e.pairs[p].exit, Symbol: rule.Below}, r), r)
					}
				}
			}
			for _, h := range rule.Spawn {
				sub(h, r)
			}
		}
		for p := ni.first; p >= 0; p = e.pairs[p].next {
			if !reason[e.pairs[p].exit] {
				bad(n, "exit %d has no reason", e.pairs[p].exit)
			}
		}
	}
	return errors.Join(errs...)
}

// Sanity checks what a solution knows and reports everything that is wrong: one
// more round must change nothing. A finite value is reached by its best production
// and passed by none; what has no run has a right symbol without one in every
// production; what is unbounded uses something unbounded. Cost: linear.
func (s *Solution) Sanity() error {
	var errs []error
	e := s.e
	least := s.q.leastWork()
	for i := range e.g.nts {
		a := NT(i)
		if i/pageSize >= len(s.pages) || s.pages[i/pageSize] == nil {
			continue
		}
		c := s.cell(a)
		if c.local != 0 {
			errs = append(errs, fmt.Errorf("%s: left in the middle of a question", e.name(a)))
		}
		if c.status == unsolved || least && e.g.nts[a].kind == spawned {
			continue
		}
		if s.borrows(e.nodeOfNT(a)) {
			if b := s.base.value(a); b.String() != s.value(a).String() {
				errs = append(errs, fmt.Errorf("%s: %v, taken over from %v", e.name(a), s.value(a), b))
			}
			continue
		}
		var v Value
		v.Kind = NoPath
		start, end := e.productions(a)
		for p := start; p < end; p++ {
			pr := &e.g.prods[p]
			if !s.live(pr) {
				continue
			}
			t := Value{Finite, s.prodWeight(pr)}
			for _, b := range e.g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)] {
				if s.cell(b).status == unsolved {
					errs = append(errs, fmt.Errorf("%s: %s below it is not solved", e.name(a), e.name(b)))
					continue
				}
				t = plus(t, s.value(b))
			}
			v = best(v, t)
			if c.status == finite && p == c.best && t.String() != s.value(a).String() {
				errs = append(errs, fmt.Errorf("%s: %v, but its best production gives %v", e.name(a), s.value(a), t))
			}
		}
		if got := s.value(a); got.String() != v.String() {
			errs = append(errs, fmt.Errorf("%s: %v, one more round gives %v", e.name(a), got, v))
		}
	}
	return errors.Join(errs...)
}
