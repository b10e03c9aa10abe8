// The grammar of runs, built on demand from the saturated system.

package summary

import (
	"fmt"

	"pathtally/pds"
)

// NT names a nonterminal of an engine's grammar; dense from 0. In an exported
// [Grammar] it is an index of that grammar.
type NT int32

// ntKind is what the runs of a nonterminal are.
type ntKind uint8

const (
	// closed [node, exit]: from the head until its symbol is popped in the exit.
	closed ntKind = iota
	// open [node]: from the head, stopped where the question stops runs, before
	// the symbol is popped.
	open
	// cutClosed [node, exit], prefix [node]: like closed and open, stopped
	// anywhere, what they spawn stopped anywhere too.
	cutClosed
	prefix
	// spawned [node]: work that was spawned at the head and has ended: closed in any
	// exit, or lost. If it can never end: begun.
	spawned
	// begun [node]: work that was spawned at the head, stopped anywhere.
	begun
	// lost [node]: from the head, stopped before a Stop rule with MarkLoss.
	lost
)

// when says which questions a production belongs to.
type when uint8

const (
	always    when = iota
	atAny          // stops the run: AnyMoment only
	atMarks        // stops the run before prod.rule: only if the question asks for one of its marks
	atAnyStep      // takes the step of a Stop rule: AnyMoment only
	atLoss         // stops the run before prod.rule, a loss
	ifEndless      // spawned work counts as begun: only if it can never end
)

type ntInfo struct {
	kind       ntKind
	of         int32 // pair for closed and cutClosed, else node
	start, end int32 // into grammar.prods; start -1: not built
}

// prod is a production. With when == always and rule ≥ 0 it takes the step of the
// rule; else it takes no step.
type prod struct {
	rule int32 // into Engine.rules; -1: none
	rhs  int32 // into grammar.rhs
	main uint8 // the first main symbols go on in this run, the others are spawned
	when when
	n    uint16 // length of the right side
}

type grammar struct {
	nts   []ntInfo
	prods []prod
	rhs   []NT
	index [7][]NT // per kind: by pair or node, shifted by 1; 0: none
}

func (e *Engine) nt(kind ntKind, of int32) NT {
	table := e.g.index[kind]
	if int(of) >= len(table) {
		n := len(e.nodes)
		if kind == closed || kind == cutClosed {
			n = len(e.pairs)
		}
		grown := make([]NT, max(n, int(of)+1, 2*len(table)))
		copy(grown, table)
		e.g.index[kind], table = grown, grown
	}
	if a := table[of]; a != 0 {
		return a - 1
	}
	a := NT(len(e.g.nts))
	e.g.nts = append(e.g.nts, ntInfo{kind: kind, of: of, start: -1})
	table[of] = a + 1
	return a
}

func (e *Engine) headOf(a NT) pds.Head {
	i := e.g.nts[a]
	if i.kind == closed || i.kind == cutClosed {
		return e.nodes[e.pairs[i.of].node].head
	}
	return e.nodes[i.of].head
}

// name prints a nonterminal for dumps: C[q g r], O[q g] and so on.
func (e *Engine) name(a NT) string {
	h := e.headOf(a)
	i := e.g.nts[a]
	letter := [...]string{"C", "O", "K", "P", "S", "B", "L"}[i.kind]
	if i.kind == closed || i.kind == cutClosed {
		return fmt.Sprintf("%s[%d %d %d]", letter, h.State, h.Symbol, e.pairs[i.of].exit)
	}
	return fmt.Sprintf("%s[%d %d]", letter, h.State, h.Symbol)
}

// productions gives the range of a nonterminal's productions, building them at
// the first call. The head must be closed.
func (e *Engine) productions(a NT) (start, end int32) {
	i := e.g.nts[a]
	if i.start >= 0 {
		return i.start, i.end
	}
	start = int32(len(e.g.prods))
	switch i.kind {
	case closed:
		e.buildClosed(i.of, closed, spawned)
	case cutClosed:
		e.buildClosed(i.of, cutClosed, begun)
	case open:
		e.buildOpen(i.of, open, closed, spawned)
	case prefix:
		e.buildOpen(i.of, prefix, cutClosed, begun)
	case lost:
		e.buildOpen(i.of, lost, closed, spawned)
	case spawned:
		for p := e.nodes[i.of].first; p >= 0; p = e.pairs[p].next {
			e.produce(-1, always, e.nt(closed, p))
		}
		e.produce(-1, always, e.nt(lost, i.of))
		e.produce(-1, ifEndless, e.nt(begun, i.of))
	case begun:
		e.produce(-1, always, e.nt(prefix, i.of))
		for p := e.nodes[i.of].first; p >= 0; p = e.pairs[p].next {
			e.produce(-1, always, e.nt(cutClosed, p))
		}
	}
	end = int32(len(e.g.prods))
	e.g.nts[a].start, e.g.nts[a].end = start, end
	return start, end
}

func (e *Engine) produce(rule int32, w when, main ...NT) {
	e.g.prods = append(e.g.prods, prod{rule: rule, when: w, rhs: int32(len(e.g.rhs)), main: uint8(len(main)), n: uint16(len(main))})
	e.g.rhs = append(e.g.rhs, main...)
}

// step adds a production that takes a rule's step, with what the rule spawns.
func (e *Engine) step(rule int32, work ntKind, main ...NT) {
	e.produce(rule, always, main...)
	for _, h := range e.rules[rule].Spawn {
		a := e.nt(work, e.nodeOf[h])
		e.g.rhs = append(e.g.rhs, a)
		p := &e.g.prods[len(e.g.prods)-1]
		p.n++
		if p.n == 0 {
			panic(fmt.Sprintf("summary: grammar: head %+v spawns more than 65,000 at once", e.nodes[e.owner[rule]].head))
		}
	}
}

func (e *Engine) rulesOf(n node) (start, end int32) {
	ni := &e.nodes[n]
	if !ni.closed {
		panic(fmt.Sprintf("summary: grammar: head %+v is not saturated", ni.head))
	}
	return ni.ruleStart, ni.ruleEnd
}

func (e *Engine) buildClosed(of pair, self, work ntKind) {
	n, exit := e.pairs[of].node, e.pairs[of].exit
	start, end := e.rulesOf(n)
	for r := start; r < end; r++ {
		rule := &e.rules[r]
		switch rule.Kind {
		case pds.Pop:
			if rule.State == exit {
				e.step(r, work)
			}
		case pds.Step:
			if p, ok := e.pairOf[pairKey(e.target[r], exit)]; ok {
				e.step(r, work, e.nt(self, p))
			}
		case pds.Push:
			for p := e.nodes[e.target[r]].first; p >= 0; p = e.pairs[p].next {
				k := e.nodeOf[pds.Head{State: e.pairs[p].exit, Symbol: rule.Below}]
				if p2, ok := e.pairOf[pairKey(k, exit)]; ok {
					e.step(r, work, e.nt(self, p), e.nt(self, p2))
				}
			}
		}
	}
}

func (e *Engine) buildOpen(n node, self, done, work ntKind) {
	switch self {
	case open:
		e.produce(-1, atAny)
	case prefix:
		e.produce(-1, always)
	}
	start, end := e.rulesOf(n)
	for r := start; r < end; r++ {
		rule := &e.rules[r]
		if rule.Mark != 0 && self == open {
			e.produce(r, atMarks)
		}
		if rule.Mark&pds.MarkLoss != 0 && self == lost {
			e.produce(r, atLoss)
		}
		switch rule.Kind {
		case pds.Stop:
			// The moment after a stop is one too.
			if self != lost && (rule.Effect != 0 || rule.Doubt != 0 || len(rule.Spawn) != 0) {
				e.step(r, work)
				if self == open {
					e.g.prods[len(e.g.prods)-1].when = atAnyStep
				}
			}
		case pds.Step:
			e.step(r, work, e.nt(self, e.target[r]))
		case pds.Push:
			e.step(r, work, e.nt(self, e.target[r]))
			for p := e.nodes[e.target[r]].first; p >= 0; p = e.pairs[p].next {
				k := e.nodeOf[pds.Head{State: e.pairs[p].exit, Symbol: rule.Below}]
				e.step(r, work, e.nt(done, p), e.nt(self, k))
			}
		}
	}
}

// takesStep: the production executes its rule.
func (p *prod) takesStep() bool { return p.rule >= 0 && !p.stopsBefore() }

// stopsBefore: the run stops before the rule because of its mark.
func (p *prod) stopsBefore() bool { return p.when == atMarks || p.when == atLoss }
