// What could still have come of each configuration of a path.

package summary

import (
	"pathtally/pds"
)

// Fork is a configuration of a path with the ways out of it.
type Fork struct {
	// Here is the greatest weight, counted from the start of the path, of all runs
	// that begin like the path up to this configuration.
	Here Value
	// Ways has one value per rule of the configuration's head (index as in
	// Rules(head)): the same for runs that take this rule next.
	Ways []Value
}

// AlongPath says for every configuration of a path (len = len(p.Steps)+1, the
// last one where the path ends) how great the weight of the whole run can still
// become: steps taken weigh what they did on the path, the rest is completed as
// well as the question allows, over the very stack of that configuration, to an
// exit that accept accepts or to a stop of the question. To learn how small a
// weight can still become, solve with negated weights and negate.
//
// Steps already taken weigh what s says (with doubts as s takes them, spawned
// work as s values it, since how far it runs is still open). A step whose spawned
// work the question makes as little as one likes gives NoPath from there on.
//
// Cost: per configuration the number of rules times exits; completions of stack
// parts that configurations have in common are computed once.
func (s *Solution) AlongPath(p Path, accept func(pds.StateID) bool) []Fork {
	e := s.e
	if _, ok := e.ensure(p.Start); !ok {
		return make([]Fork, len(p.Steps)+1)
	}
	c := &completer{s: s, accept: accept, memo: map[complKey]Value{}}
	c.cells = append(c.cells, stackCell{})
	top := c.push(0, p.Start.Symbol)
	state := p.Start.State
	past := FiniteValue(0)
	forks := make([]Fork, 0, len(p.Steps)+1)
	for i := 0; ; i++ {
		f := Fork{Here: plus(past, c.complete(top, state))}
		var rules []pds.Rule
		if top != 0 {
			h := pds.Head{State: state, Symbol: c.cells[top].symbol}
			n, ok := e.ensure(h)
			if !ok {
				f.Here = Value{}
			} else {
				start, end := e.rulesOf(n)
				rules = e.rules[start:end]
				for r := start; r < end; r++ {
					f.Ways = append(f.Ways, c.way(top, past, r))
				}
			}
		}
		forks = append(forks, f)
		if i == len(p.Steps) {
			return forks
		}
		if len(rules) == 0 {
			// Out of budget, or no path of this system: nothing is known behind.
			return append(forks, make([]Fork, len(p.Steps)-i)...)
		}
		n := e.nodeOf[pds.Head{State: state, Symbol: c.cells[top].symbol}]
		rule := e.nodes[n].ruleStart + int32(p.Steps[i].Index)
		past = plus(past, c.stepValue(rule))
		r := &e.rules[rule]
		if r.Kind == pds.Stop {
			f := Fork{Here: Value{Kind: NoPath}}
			if s.q.AnyMoment {
				f.Here = past
			}
			return append(forks, f)
		}
		top = c.after(top, r)
		state = r.State
	}
}

// stackCell is a stack as a linked list, top first; cell 0 is the empty stack.
type stackCell struct {
	symbol pds.SymbolID
	below  int32
}

type complKey struct {
	cell  int32
	state pds.StateID
}

type completer struct {
	s      *Solution
	accept func(pds.StateID) bool
	cells  []stackCell
	memo   map[complKey]Value
}

func (c *completer) push(below int32, g pds.SymbolID) int32 {
	c.cells = append(c.cells, stackCell{g, below})
	return int32(len(c.cells) - 1)
}

// after is the stack behind a rule that leaves the top cell.
func (c *completer) after(top int32, r *pds.Rule) int32 {
	below := c.cells[top].below
	switch r.Kind {
	case pds.Step:
		return c.push(below, r.Top)
	case pds.Push:
		return c.push(c.push(below, r.Below), r.Top)
	}
	return below
}

// complete is the greatest weight of a run from a configuration to an accepted
// end. Deep stacks are worked from the bottom up, so it does not recurse.
func (c *completer) complete(top int32, state pds.StateID) Value {
	work := []complKey{{top, state}}
	for len(work) > 0 {
		k := work[len(work)-1]
		if _, ok := c.memo[k]; ok {
			work = work[:len(work)-1]
			continue
		}
		if k.cell == 0 {
			v := Value{Kind: NoPath}
			if c.accept != nil && c.accept(k.state) {
				v = FiniteValue(0)
			}
			c.memo[k] = v
			continue
		}
		e := c.s.e
		cell := c.cells[k.cell]
		h := pds.Head{State: k.state, Symbol: cell.symbol}
		n, ok := e.ensure(h)
		if !ok {
			c.memo[k] = Value{}
			continue
		}
		v := Value{Kind: NoPath}
		ready := true
		for p := e.nodes[n].first; p >= 0; p = e.pairs[p].next {
			rest := complKey{cell.below, e.pairs[p].exit}
			below, ok := c.memo[rest]
			if !ok {
				work = append(work, rest)
				ready = false
				continue
			}
			if below.Kind != NoPath {
				v = best(v, plus(c.s.value(e.nt(closed, p)), below))
			}
		}
		if !ready {
			continue
		}
		if c.s.q.AnyMoment || c.s.q.StopMarks != 0 {
			v = best(v, c.s.value(e.nt(open, n)))
		}
		c.memo[k] = v
	}
	return c.memo[complKey{top, state}]
}

// stepValue is what a rule weighs with its spawned work.
func (c *completer) stepValue(rule int32) Value {
	s := c.s
	w, _ := s.weight(rule)
	v := Value{Finite, w}
	for _, h := range s.e.rules[rule].Spawn {
		a := s.e.nt(spawned, s.e.nodeOf[h])
		v = plus(v, s.value(a))
	}
	return v
}

// way is the value of taking a rule at a configuration.
func (c *completer) way(top int32, past Value, rule int32) Value {
	s := c.s
	e := s.e
	r := &e.rules[rule]
	n := e.owner[rule]
	if s.q.Off != nil && s.q.Off(e.nodes[n].head, int(rule-e.nodes[n].ruleStart)) {
		return Value{Kind: NoPath}
	}
	v := plus(past, c.stepValue(rule))
	if r.Kind == pds.Stop {
		// Before a mark the run can stop; behind a stop only moments count.
		out := Value{Kind: NoPath}
		if r.Mark&s.q.StopMarks != 0 {
			out = past
		}
		if s.q.AnyMoment {
			out = best(out, v)
		}
		return out
	}
	out := plus(v, c.complete(c.after(top, r), r.State))
	if r.Mark&s.q.StopMarks != 0 {
		out = best(out, past)
	}
	return out
}
