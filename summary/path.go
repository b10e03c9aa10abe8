// Paths: explicit runs, and derivations turned into them.

package summary

import (
	"errors"
	"fmt"
	"math/big"

	"pathtally/pds"
)

// MaxPath is the greatest number of steps of a path that is written out,
// spawned work included.
const MaxPath = 100_000

// ErrTooLong: a path exists but has more than MaxPath steps.
var ErrTooLong = errors.New("the path has more than 100,000 steps")

// Path is a run as a search found it.
type Path struct {
	Start pds.Head
	Steps []Step
	// End is how the run ends; Last is the head it ends at (Symbol 0: the stack is
	// empty, State is the exit).
	End  pds.End
	Last pds.Head
	// Before is the index of the rule of Last before which the run stopped because
	// of its mark; -1: none.
	Before int
	// Endless: spawned work that can never end, shown up to some moment.
	Endless bool
	// Repeats marks blocks of steps that come several times in a row; outer before
	// inner, in order of From.
	Repeats []Repeat
}

// Step is one step of a path.
type Step struct {
	Head    pds.Head
	Depth   int // symbols on the stack before the step
	Index   int // of the rule, into Rules(Head)
	Rule    pds.Rule
	Doubt   bool   // the rule counts DoubtEffect
	Spawned []Path // len = len(Rule.Spawn), or nil if none of them runs
}

// Repeat says that Steps[From : From+Len*Times] is Times times the same block.
type Repeat struct{ From, Len, Times int }

// Choices gives the path in the form that [pds.Replay] executes.
func (p *Path) Choices() []pds.Choice {
	if len(p.Steps) == 0 {
		return nil
	}
	cs := make([]pds.Choice, len(p.Steps))
	for i := range p.Steps {
		st := &p.Steps[i]
		cs[i] = pds.Choice{Rule: st.Index, Doubt: st.Doubt}
		if st.Spawned != nil {
			cs[i].Spawned = make([][]pds.Choice, len(st.Spawned))
			for k := range st.Spawned {
				cs[i].Spawned[k] = st.Spawned[k].Choices()
			}
		}
	}
	return cs
}

// Len is the number of steps, spawned work included.
func (p *Path) Len() int {
	n := len(p.Steps)
	for i := range p.Steps {
		for k := range p.Steps[i].Spawned {
			n += p.Steps[i].Spawned[k].Len()
		}
	}
	return n
}

// tree is a derivation. Subtrees may be shared.
type tree struct {
	prod int32
	nt   NT
	kids []*tree // by position on the right side; nil for spawned work with a constant, see Solution.constant
	// pump: the first turn of a pump starts (1) or its core stands (2) here.
	mark byte
	turn int // for mark 1: number of turns
}

// emit writes a derivation out as a path. The budget counts down over nested calls.
func (s *Solution) emit(t *tree, budget *int) (Path, error) {
	e := s.e
	p := Path{Start: e.headOf(t.nt), Before: -1}
	var stack []pds.SymbolID
	state := p.Start.State
	stack = append(stack, p.Start.Symbol)
	type item struct {
		t     *tree
		close bool // the tree has been written; for the second half of a pump
	}
	work := []item{{t: t}}
	type pumpAt struct{ from, times, core, coreEnd int }
	var pumps []pumpAt
	var open []int
	for len(work) > 0 {
		it := work[len(work)-1]
		work = work[:len(work)-1]
		t := it.t
		if it.close {
			at := &pumps[open[len(open)-1]]
			if t.mark == 2 {
				at.coreEnd = len(p.Steps)
				continue
			}
			open = open[:len(open)-1]
			if n := at.core - at.from; n > 0 && n%at.times == 0 {
				p.Repeats = append(p.Repeats, Repeat{at.from, n / at.times, at.times})
			}
			if n := len(p.Steps) - at.coreEnd; n > 0 && n%at.times == 0 {
				p.Repeats = append(p.Repeats, Repeat{at.coreEnd, n / at.times, at.times})
			}
			continue
		}
		switch t.mark {
		case 1:
			open = append(open, len(pumps))
			pumps = append(pumps, pumpAt{from: len(p.Steps), times: t.turn})
			work = append(work, item{t, true})
		case 2:
			pumps[open[len(open)-1]].core = len(p.Steps)
			work = append(work, item{t, true})
		}
		pr := &e.g.prods[t.prod]
		if pr.stopsBefore() {
			p.Before = int(pr.rule - e.nodes[e.owner[pr.rule]].ruleStart)
			continue
		}
		for i := int(pr.main) - 1; i >= 0; i-- {
			work = append(work, item{t: t.kids[i]})
		}
		if pr.rule < 0 {
			continue
		}
		if *budget--; *budget < 0 {
			return Path{}, ErrTooLong
		}
		n := e.owner[pr.rule]
		rule := e.rules[pr.rule]
		h := e.nodes[n].head
		if h.State != state || len(stack) == 0 || h.Symbol != stack[len(stack)-1] {
			panic(fmt.Sprintf("summary: path: step %d is at %+v, the run is elsewhere", len(p.Steps), h))
		}
		_, doubted := s.weight(pr.rule)
		st := Step{Head: h, Depth: len(stack), Index: int(pr.rule - e.nodes[n].ruleStart), Rule: rule, Doubt: doubted}
		for i := int(pr.main); i < int(pr.n); i++ {
			sub, err := s.emitSpawned(e.g.rhs[int(pr.rhs)+i], t.kids[i], budget)
			if err != nil {
				return Path{}, err
			}
			st.Spawned = append(st.Spawned, sub)
		}
		p.Steps = append(p.Steps, st)
		if rule.Kind == pds.Stop {
			p.End = pds.EndStop
			continue
		}
		state = rule.State
		stack = stack[:len(stack)-1]
		switch rule.Kind {
		case pds.Step:
			stack = append(stack, rule.Top)
		case pds.Push:
			stack = append(stack, rule.Below, rule.Top)
		}
	}
	p.Last = pds.Head{State: state}
	if len(stack) == 0 {
		p.End = pds.EndEmpty
	} else {
		p.Last.Symbol = stack[len(stack)-1]
	}
	return p, nil
}

func (s *Solution) emitSpawned(a NT, t *tree, budget *int) (Path, error) {
	e := s.e
	if t == nil {
		// A constant: the least prefix.
		l := s.leastPrefixes()
		return l.emitBest(e.nt(begun, e.g.nts[a].of), budget)
	}
	endless := false
	for e.g.nts[t.nt].kind == spawned || e.g.nts[t.nt].kind == begun {
		endless = endless || e.g.nts[t.nt].kind == spawned && s.isEndless(e.g.nts[t.nt].of)
		t = t.kids[0]
	}
	sub, err := s.emit(t, budget)
	sub.Endless = endless
	return sub, err
}

// emitBest writes out the run of greatest weight of a finite nonterminal of kind
// begun.
func (s *Solution) emitBest(a NT, budget *int) (Path, error) {
	if s.value(a).Kind != Finite {
		panic("summary: path: " + s.e.name(a) + " is not finite")
	}
	t, err := s.bestTree(a)
	if err != nil {
		return Path{}, err
	}
	return s.emit(t.kids[0], budget)
}

// bestTree follows best productions.
func (s *Solution) bestTree(a NT) (*tree, error) {
	return s.build(a, s.bestOf)
}

// bestOf is the best production of a nonterminal, see cell.best.
func (s *Solution) bestOf(a NT) int32 {
	for s.borrows(s.e.nodeOfNT(a)) {
		s = s.base
	}
	return s.cell(a).best
}

// build makes the derivation that takes the same production wherever a
// nonterminal occurs; pick must be acyclic. Trees are shared, so this costs one
// tree per nonterminal; the length is checked in big integers.
func (s *Solution) build(a NT, pick func(NT) int32) (*tree, error) {
	e := s.e
	made := map[NT]*tree{}
	length := map[NT]*big.Int{}
	busy := map[NT]bool{}
	limit := big.NewInt(MaxPath)
	work := []NT{a}
	constant := func(b NT) bool { return s.q.leastWork() && e.g.nts[b].kind == spawned }
	for len(work) > 0 {
		b := work[len(work)-1]
		if made[b] != nil {
			work = work[:len(work)-1]
			continue
		}
		id := pick(b)
		if id < 0 {
			panic("summary: path: " + e.name(b) + " has no best production")
		}
		pr := &e.g.prods[id]
		rhs := e.g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)]
		ready := true
		for _, c := range rhs {
			if made[c] == nil && !constant(c) {
				work = append(work, c)
				ready = false
			}
		}
		if !ready {
			if busy[b] {
				panic("summary: path: best productions of " + e.name(b) + " are cyclic")
			}
			busy[b] = true
			continue
		}
		t := &tree{prod: id, nt: b, kids: make([]*tree, len(rhs))}
		n := new(big.Int)
		if pr.takesStep() {
			n.SetInt64(1)
		}
		for i, c := range rhs {
			if !constant(c) {
				t.kids[i] = made[c]
				n.Add(n, length[c])
			}
		}
		made[b], length[b] = t, n
		work = work[:len(work)-1]
	}
	if length[a].Cmp(limit) > 0 {
		return nil, ErrTooLong
	}
	return made[a], nil
}
