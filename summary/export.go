// The trimmed grammar in a neutral form, for other engines.

package summary

import (
	"fmt"
	"slices"
	"strings"

	"pathtally/pds"
)

// RuleRef names a rule of the system. The zero value is none.
type RuleRef struct {
	Head  pds.Head
	Index int // into Rules(Head)
}

// Production is Lhs → Effect Rhs... .
type Production struct {
	Lhs    NT
	Effect pds.EffectID
	// Rhs: the first Main symbols go on in this run, in this order; the others are
	// spawned work.
	Rhs  []NT
	Main int
	// Rule is what the production executes; none for choices that take no step.
	Rule RuleRef
	// Doubt: Effect is the rule's DoubtEffect.
	Doubt bool
	// Before: the run stops before Rule because of its mark; nothing is executed.
	Before bool
}

// Grammar is a trimmed grammar: every nonterminal has a run and is reached from
// Start. Nonterminals are dense from 0; Start is 0; productions are grouped by
// left side.
type Grammar struct {
	Start NT
	NumNT int
	Prods []Production
	Names []string // of nonterminals, for dumps; len = NumNT
	Heads []pds.Head
	// Spawned says of each nonterminal that its runs are work of its own.
	Spawned []bool
	// Endless lists heads of spawned work that can never end and therefore counts
	// at any prefix; in order.
	Endless []pds.Head
	// Prefixes: there is spawned work that this grammar counts at *any* prefix, since
	// the question asks for it (Question.Prefixes) or is about moments. A run of it that breaks a claim may be one
	// that only a certain schedule shows.
	Prefixes bool
}

// String lists the productions, one a line: left side, effect if any, right side;
// spawned work stands behind "spawn", a stop before a rule reads "stop".
func (g *Grammar) String() string {
	var b strings.Builder
	for _, p := range g.Prods {
		fmt.Fprintf(&b, "%s ->", g.Names[p.Lhs])
		if p.Effect != 0 {
			fmt.Fprintf(&b, " e%d", p.Effect)
		}
		for i, a := range p.Rhs {
			if i >= p.Main {
				b.WriteString(" spawn")
			}
			b.WriteByte(' ')
			b.WriteString(g.Names[a])
		}
		if p.Before {
			b.WriteString(" stop")
		}
		b.WriteByte('\n')
	}
	return b.String()
}

// Grammar gives the trimmed grammar of the runs that [Solution.Greatest] speaks
// of, with counts instead of weights. q.Weights decides, with TakeDoubts, which
// of a step's two effects weighs less; if Weights is nil, every doubt is taken.
// The error is ErrExhausted or ErrNoWitness (no run: an empty grammar).
func (e *Engine) Grammar(h pds.Head, accept func(pds.StateID) bool, q Question) (*Grammar, error) {
	all := q.TakeDoubts && q.Weights == nil
	if q.Weights == nil {
		q.Weights = make([]int64, e.sys.NumCounts())
	}
	s := e.Solve(q)
	targets, ok := s.targets(h, accept)
	if !ok {
		return nil, ErrExhausted
	}
	for _, a := range targets {
		s.value(a) // decides what is endless
	}
	least := s.q.leastWork()
	g := &Grammar{}
	var productive map[NT]bool
	var order []NT
	rhsOf := func(p *prod) []NT {
		rhs := slices.Clone(e.g.rhs[p.rhs : int(p.rhs)+int(p.n)])
		if least {
			for i, b := range rhs {
				if e.g.nts[b].kind == spawned {
					rhs[i] = e.nt(begun, e.g.nts[b].of)
				}
			}
		}
		return rhs
	}
	// Twice: first all that is reachable, to find what is productive; then what is
	// reachable through productive productions only.
	walk := func(f func(a NT, p int32, rhs []NT)) []NT {
		seen := map[NT]bool{}
		var order []NT
		take := func(a NT) {
			if !seen[a] {
				seen[a] = true
				order = append(order, a)
			}
		}
		for _, a := range targets {
			if productive == nil || productive[a] {
				take(a)
			}
		}
		for i := 0; i < len(order); i++ {
			start, end := e.productions(order[i])
		next:
			for p := start; p < end; p++ {
				pr := e.g.prods[p]
				if !s.live(&pr) {
					continue
				}
				rhs := rhsOf(&pr)
				for _, b := range rhs {
					if productive != nil && !productive[b] {
						continue next
					}
				}
				for _, b := range rhs {
					take(b)
				}
				f(order[i], p, rhs)
			}
		}
		return order
	}
	type use struct {
		lhs  NT
		miss int
	}
	var uses []use
	users := map[NT][]int{}
	found := map[NT]bool{}
	var work []NT
	mark := func(a NT) {
		if !found[a] {
			found[a] = true
			work = append(work, a)
		}
	}
	walk(func(a NT, p int32, rhs []NT) {
		uses = append(uses, use{a, len(rhs)})
		for _, b := range rhs {
			users[b] = append(users[b], len(uses)-1)
		}
		if len(rhs) == 0 {
			mark(a)
		}
	})
	for len(work) > 0 {
		b := work[len(work)-1]
		work = work[:len(work)-1]
		for _, u := range users[b] {
			if uses[u].miss--; uses[u].miss == 0 {
				mark(uses[u].lhs)
			}
		}
	}
	productive = found
	id := map[NT]NT{}
	number := func(a NT) NT {
		i, ok := id[a]
		if !ok {
			i = NT(len(id) + 1)
			id[a] = i
		}
		return i
	}
	order = walk(func(NT, int32, []NT) {})
	if len(order) == 0 {
		return nil, ErrNoWitness
	}
	for _, a := range order {
		number(a)
	}
	g.NumNT = len(order) + 1
	g.Names = append(g.Names, "start")
	g.Heads = append(g.Heads, h)
	g.Spawned = append(g.Spawned, false)
	for _, a := range targets {
		if productive[a] {
			g.Prods = append(g.Prods, Production{Rhs: []NT{number(a)}, Main: 1})
		}
	}
	for _, a := range order {
		kind := e.g.nts[a].kind
		g.Names = append(g.Names, e.name(a))
		g.Heads = append(g.Heads, e.headOf(a))
		g.Spawned = append(g.Spawned, kind == spawned || kind == begun)
	}
	walk(func(a NT, p int32, rhs []NT) {
		pr := &e.g.prods[p]
		out := Production{Lhs: number(a), Main: int(pr.main), Before: pr.stopsBefore()}
		for _, b := range rhs {
			out.Rhs = append(out.Rhs, number(b))
		}
		if pr.rule >= 0 {
			n := e.owner[pr.rule]
			out.Rule = RuleRef{e.nodes[n].head, int(pr.rule - e.nodes[n].ruleStart)}
		}
		if pr.takesStep() {
			r := &e.rules[pr.rule]
			_, out.Doubt = s.weight(pr.rule)
			if all && r.Doubt != 0 {
				out.Doubt = true
			}
			out.Effect = r.Effect
			if out.Doubt {
				out.Effect = r.DoubtEffect
			}
			if (least || q.Prefixes) && len(r.Spawn) > 0 {
				g.Prefixes = true
			}
		}
		g.Prods = append(g.Prods, out)
		if e.g.nts[a].kind == spawned && e.g.nts[rhs[0]].kind == begun && s.isEndless(e.g.nts[a].of) {
			g.Endless = append(g.Endless, e.headOf(a))
		}
	})
	slices.SortFunc(g.Endless, compareHeads)
	return g, nil
}

func compareHeads(a, b pds.Head) int {
	if a.State != b.State {
		return int(a.State) - int(b.State)
	}
	return int(a.Symbol) - int(b.Symbol)
}

// Endless lists, in order, the heads of spawned work below h that can never end:
// an end question counts such work at any of its prefixes, which is an assumption
// to print. ok is false if the budget ran out.
func (e *Engine) Endless(h pds.Head) (heads []pds.Head, ok bool) {
	n, ok := e.ensure(h)
	if !ok {
		return nil, false
	}
	s := e.Solve(Question{Weights: make([]int64, e.sys.NumCounts())})
	seen := map[node]bool{n: true}
	listed := map[node]bool{}
	work := []node{n}
	take := func(n node) {
		if !seen[n] {
			seen[n] = true
			work = append(work, n)
		}
	}
	for len(work) > 0 {
		n := work[len(work)-1]
		work = work[:len(work)-1]
		start, end := e.rulesOf(n)
		for r := start; r < end; r++ {
			if t := e.target[r]; t >= 0 {
				take(t)
				if e.rules[r].Kind == pds.Push {
					for p := e.nodes[t].first; p >= 0; p = e.pairs[p].next {
						take(e.nodeOf[pds.Head{State: e.pairs[p].exit, Symbol: e.rules[r].Below}])
					}
				}
			}
			for _, h := range e.rules[r].Spawn {
				k := e.nodeOf[h]
				take(k)
				if listed[k] {
					continue
				}
				listed[k] = true
				s.value(e.nt(spawned, k))
				if s.isEndless(k) {
					heads = append(heads, h)
				}
			}
		}
	}
	slices.SortFunc(heads, compareHeads)
	return heads, true
}
