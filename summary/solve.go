// Greatest weights of all runs of a nonterminal.

package summary

import (
	"fmt"
	"math/big"
	"slices"

	"pathtally/pds"
)

// A Question asks for weights of runs.
//
// An end question (neither AnyMoment nor a StopMark other than MarkLoss) counts
// spawned work when it has ended; spawned work that can never end counts at any
// of its prefixes, see [Solution.Endless]. In every other question spawned work
// counts with the least weight of its prefixes: its events may or may not have
// happened yet, whichever keeps the claim. Prefixes changes both.
type Question struct {
	// Weights has one number per count; a run weighs Weights·counts.
	Weights []int64
	// StopMarks: open runs stop before a rule with one of these marks.
	StopMarks pds.Mark
	// AnyMoment: open runs stop anywhere.
	AnyMoment bool
	// Prefixes: spawned work counts at any moment of it, most against the claim, in
	// questions of either kind (totals across goroutines without regard to order).
	Prefixes bool
	// TakeDoubts: a step with a doubt weighs what is less, with or without it.
	TakeDoubts bool
	// FearDoubts: a step with a doubt weighs what is more, with or without it.
	FearDoubts bool
	// Off takes rules out of the system: index into Rules(head). Nil: none.
	Off func(h pds.Head, rule int) bool
}

// leastWork: spawned work counts with the least weight of its prefixes.
func (q *Question) leastWork() bool {
	return !q.Prefixes && (q.AnyMoment || q.StopMarks&^pds.MarkLoss != 0)
}

// ValueKind is what is known of a greatest weight.
type ValueKind uint8

const (
	// Exhausted: the budget ran out; nothing is known.
	Exhausted ValueKind = iota
	// NoPath: there is no such run.
	NoPath
	// Finite: Value.Int is reached and never passed.
	Finite
	// Unbounded: every number is passed.
	Unbounded
)

// Value is a greatest weight, exact for the model. The zero value is Exhausted.
type Value struct {
	Kind ValueKind
	n    num
}

// FiniteValue makes a finite value.
func FiniteValue(n int64) Value { return Value{Finite, num{small: n}} }

// Int is the weight of a finite value.
func (v Value) Int() *big.Int { return new(big.Int).Set(v.n.toBig()) }

// Int64 is the weight of a finite value that fits into 64 bits.
func (v Value) Int64() (n int64, ok bool) { return v.n.small, v.Kind == Finite && v.n.big == nil }

// Above says whether some run weighs more than bound; known is false if the
// budget ran out.
func (v Value) Above(bound int64) (above, known bool) {
	switch v.Kind {
	case Exhausted:
		return false, false
	case Unbounded:
		return true, true
	case Finite:
		return v.n.cmp(num{small: bound}) > 0, true
	}
	return false, true
}

// String gives ?, none, inf or the number.
func (v Value) String() string {
	switch v.Kind {
	case Exhausted:
		return "?"
	case NoPath:
		return "none"
	case Unbounded:
		return "inf"
	}
	return v.n.String()
}

// best is the greater of two values; Exhausted wins, since then nothing is known.
func best(a, b Value) Value {
	switch {
	case a.Kind == Exhausted || b.Kind == Exhausted:
		return Value{}
	case a.Kind == Finite && b.Kind == Finite:
		if a.n.cmp(b.n) >= 0 {
			return a
		}
		return b
	case a.Kind >= b.Kind:
		return a
	}
	return b
}

// plus adds; NoPath absorbs.
func plus(a, b Value) Value {
	switch {
	case a.Kind == Exhausted || b.Kind == Exhausted:
		return Value{}
	case a.Kind == NoPath || b.Kind == NoPath:
		return Value{Kind: NoPath}
	case a.Kind == Unbounded || b.Kind == Unbounded:
		return Value{Kind: Unbounded}
	}
	return Value{Finite, a.n.add(b.n)}
}

type status uint8

const (
	unsolved status = iota
	noPath
	finite
	unbounded
	gaveUp // the budget ran out here or below
)

// cell is what a solution knows of a nonterminal.
type cell struct {
	val    num
	best   int32 // best production (finite); of an unbounded one, the best before its pump was found; -1: none
	local  int32 // 1 + index in the current ask; 0 outside
	status status
}

const pageSize = 1 << 10

// pumpStep is a production on a pump and the position on its right side where
// the pump goes on.
type pumpStep struct {
	prod  int32
	child int
}

// Solution answers a question for all heads, lazily: asking costs what was not
// asked before.
type Solution struct {
	e     *Engine
	q     Question
	doubt int8 // +1: the lesser weight, -1: the greater, 0: as it is
	pages [][]cell
	// least gives the negated least weights of spawned prefixes; made on demand.
	least *Solution
	// pumps: from an unbounded nonterminal back to itself with a gain.
	pumps map[NT][]pumpStep
	// endless: spawned work that can never end.
	endless  map[node]bool
	searches map[int64]*search // by half-width; -1: weights ignored
	gaveUp   []pds.Head
	// base answers for all heads that lead to none of the rules in without; nil: none.
	base    *Solution
	without []RuleRef
	touched struct { // nodes that lead to a rule in without
		nodes map[node]bool
		deps  int // len(e.deps) and len(e.nodes) when they were found
		known int
	}
	// exact: look for pumps after every improvement, whatever it costs.
	exact bool
	// allowance of every component, see pumpAllowance; tests lower it.
	allowance int
}

// Solve prepares the answers to a question. It panics if the number of weights
// is not the number of counts.
func (e *Engine) Solve(q Question) *Solution {
	if len(q.Weights) != e.sys.NumCounts() {
		panic(fmt.Sprintf("summary: solve: %d weights for %d counts", len(q.Weights), e.sys.NumCounts()))
	}
	s := &Solution{e: e, q: q, pumps: map[NT][]pumpStep{}, endless: map[node]bool{}, searches: map[int64]*search{}, allowance: pumpAllowance}
	s.q.Weights = slices.Clone(q.Weights)
	switch {
	case q.TakeDoubts:
		s.doubt = 1
	case q.FearDoubts:
		s.doubt = -1
	}
	return s
}

// Without is the solution of the same question with some more rules taken out.
// What does not lead to these rules is taken over from s, so asking costs only
// what does.
func (s *Solution) Without(rules []RuleRef) *Solution {
	off := make(map[RuleRef]bool, len(rules))
	for _, r := range rules {
		off[r] = true
	}
	q := s.q
	before := s.q.Off
	q.Off = func(h pds.Head, rule int) bool {
		return off[RuleRef{h, rule}] || before != nil && before(h, rule)
	}
	t := s.e.Solve(q)
	t.doubt, t.exact, t.allowance = s.doubt, s.exact, s.allowance
	t.base, t.without = s, slices.Clone(rules)
	t.touched.known = -1
	return t
}

// touches: the node leads to a rule that was taken out. The node must be closed;
// then the answer is final.
func (s *Solution) touches(n node) bool {
	e := s.e
	if s.touched.known != len(e.nodes) || s.touched.deps != len(e.deps) {
		s.touched.known, s.touched.deps = len(e.nodes), len(e.deps)
		s.touched.nodes = map[node]bool{}
		var work []node
		take := func(n node) {
			if !s.touched.nodes[n] {
				s.touched.nodes[n] = true
				work = append(work, n)
			}
		}
		for _, r := range s.without {
			if n, ok := e.nodeOf[r.Head]; ok {
				take(n)
			}
		}
		for len(work) > 0 {
			n := work[len(work)-1]
			work = work[:len(work)-1]
			for d := e.nodes[n].deps; d >= 0; d = e.deps[d].next {
				take(e.deps[d].to)
			}
			for _, k := range e.spawners[n] {
				take(k)
			}
		}
	}
	return s.touched.nodes[n]
}

func (e *Engine) nodeOfNT(a NT) node {
	i := e.g.nts[a]
	if i.kind == closed || i.kind == cutClosed {
		return e.pairs[i.of].node
	}
	return i.of
}

// borrows: the base's answer for a nonterminal of the node is this one's too.
func (s *Solution) borrows(n node) bool { return s.base != nil && !s.touches(n) }

func (s *Solution) isEndless(n node) bool {
	return s.endless[n] || s.borrows(n) && s.base.isEndless(n)
}

// pump is the pump of an unbounded nonterminal; nil if it has none of its own or
// none was kept.
func (s *Solution) pump(a NT) []pumpStep {
	if p := s.pumps[a]; p != nil || !s.borrows(s.e.nodeOfNT(a)) {
		return p
	}
	return s.base.pump(a)
}

func (s *Solution) cell(a NT) *cell {
	p := int(a) / pageSize
	for p >= len(s.pages) {
		s.pages = append(s.pages, nil)
	}
	if s.pages[p] == nil {
		s.pages[p] = make([]cell, pageSize)
		for i := range s.pages[p] {
			s.pages[p][i].best = -1
		}
	}
	return &s.pages[p][int(a)%pageSize]
}

// GaveUp lists heads whose recursion was too large: solving it took more
// relaxations of productions than the engine's budget has rule steps. What uses
// them is Exhausted.
func (s *Solution) GaveUp() []pds.Head { return s.gaveUp }

// live: the production belongs to the question.
func (s *Solution) live(p *prod) bool {
	switch p.when {
	case atAny, atAnyStep:
		if !s.q.AnyMoment {
			return false
		}
	case ifEndless:
		return s.q.Prefixes || s.isEndless(s.e.g.nts[s.e.g.rhs[p.rhs]].of)
	case atMarks:
		return s.e.rules[p.rule].Mark&s.q.StopMarks != 0
	}
	if p.rule < 0 || s.q.Off == nil {
		return true
	}
	n := s.e.owner[p.rule]
	return !s.q.Off(s.e.nodes[n].head, int(p.rule-s.e.nodes[n].ruleStart))
}

func (s *Solution) dot(e pds.EffectID) num {
	var sum num
	if e == 0 {
		return sum
	}
	for i, x := range s.e.sys.Vector(e) {
		if x != 0 && s.q.Weights[i] != 0 {
			sum = sum.add(mul(x, s.q.Weights[i]))
		}
	}
	return sum
}

// weight is what a rule weighs, and whether its doubt is taken for that.
func (s *Solution) weight(rule int32) (w num, doubted bool) {
	r := &s.e.rules[rule]
	w = s.dot(r.Effect)
	if r.Doubt != 0 && s.doubt != 0 {
		d := s.dot(r.DoubtEffect)
		if c := d.cmp(w); c != 0 && (c < 0) == (s.doubt > 0) {
			return d, true
		}
	}
	return w, false
}

func (s *Solution) prodWeight(p *prod) num {
	if !p.takesStep() {
		return num{}
	}
	w, _ := s.weight(p.rule)
	return w
}

// leastPrefixes gives the solution for the least weights of spawned prefixes:
// greatest weights under negated weights.
func (s *Solution) leastPrefixes() *Solution {
	if s.least == nil {
		q := Question{Weights: make([]int64, len(s.q.Weights)), Off: s.q.Off}
		for i, w := range s.q.Weights {
			q.Weights[i] = -w
			if w == -1<<63 {
				panic("summary: solve: weight -2^63")
			}
		}
		s.least = s.e.Solve(q)
		if s.base != nil {
			s.least = s.base.leastPrefixes().Without(s.without)
		}
		s.least.doubt = -s.doubt
		s.least.exact = s.exact
	}
	return s.least
}

// Closed is the greatest weight of the runs from h that pop its symbol in exit.
func (s *Solution) Closed(h pds.Head, exit pds.StateID) Value {
	n, ok := s.e.ensure(h)
	if !ok {
		return Value{}
	}
	p, ok := s.e.pairOf[pairKey(n, exit)]
	if !ok {
		return Value{Kind: NoPath}
	}
	return s.value(s.e.nt(closed, p))
}

// Open is the greatest weight of the runs from h that stop where the question
// says, before the symbol of h is popped.
func (s *Solution) Open(h pds.Head) Value {
	n, ok := s.e.ensure(h)
	if !ok {
		return Value{}
	}
	if !s.q.AnyMoment && s.q.StopMarks == 0 {
		return Value{Kind: NoPath}
	}
	return s.value(s.e.nt(open, n))
}

// Greatest is the greatest weight of the runs from h that either empty the stack
// in an accepted state or stop where the question says. (For a claim about every
// moment, accept every state: the last moment is one too.)
func (s *Solution) Greatest(h pds.Head, accept func(pds.StateID) bool) Value {
	targets, ok := s.targets(h, accept)
	if !ok {
		return Value{}
	}
	v := Value{Kind: NoPath}
	for _, a := range targets {
		v = best(v, s.value(a))
	}
	return v
}

// targets lists the nonterminals whose runs a question about h is about, exits
// by state first.
func (s *Solution) targets(h pds.Head, accept func(pds.StateID) bool) ([]NT, bool) {
	n, ok := s.e.ensure(h)
	if !ok {
		return nil, false
	}
	var list []NT
	if accept != nil {
		for p := s.e.nodes[n].first; p >= 0; p = s.e.pairs[p].next {
			if accept(s.e.pairs[p].exit) {
				list = append(list, s.e.nt(closed, p))
			}
		}
	}
	if s.q.AnyMoment || s.q.StopMarks != 0 {
		list = append(list, s.e.nt(open, n))
	}
	return list, true
}

func (s *Solution) value(a NT) Value {
	if s.cell(a).status == unsolved {
		s.solve(a)
	}
	c := s.cell(a)
	switch c.status {
	case noPath:
		return Value{Kind: NoPath}
	case unbounded:
		return Value{Kind: Unbounded}
	case finite:
		return Value{Finite, c.val}
	case gaveUp:
		return Value{}
	}
	panic("summary: solve: " + s.e.name(a) + " was not solved")
}

// constant gives spawned work its constant in a question about moments.
func (s *Solution) constant(a NT) {
	l := s.leastPrefixes()
	v := l.value(s.e.nt(begun, s.e.g.nts[a].of))
	c := s.cell(a)
	switch v.Kind {
	case Unbounded:
		// As little as one likes: no run past here can break a claim.
		c.status = noPath
	case Finite:
		c.status, c.val = finite, v.n.neg()
	case Exhausted:
		c.status = gaveUp
	default:
		panic("summary: solve: spawned work of " + s.e.name(a) + " has no prefix")
	}
}

// ask is the work of one solve: the unsolved nonterminals below the one asked
// for, their live productions, and who uses whom. Local indices from 0.
type ask struct {
	s         *Solution
	nts       []NT
	prodStart []int32 // per local nonterminal, len+1: into prods
	prods     []askProd
	useStart  []int32 // per local nonterminal, len+1: into uses
	uses      []int32 // productions with it on the right side

	// Scratch of component, per local nonterminal except queued.
	number  []int32 // of its component
	numbers int32
	set     []int  // when the best production was set
	first   []int  // when it was set first
	seen    []int  // stamp of the last search that came by
	queued  []bool // per production
	stamp   int
}

type askProd struct {
	w    num
	id   int32
	lhs  int32
	miss int32 // right symbols not yet known to be productive
}

func (k *ask) rhs(p int32) []NT {
	g := &k.s.e.g
	pr := &g.prods[p]
	return g.rhs[pr.rhs : int(pr.rhs)+int(pr.n)]
}

// solve: collect what is unsolved below a, drop what has no run, and solve the
// rest component by component, bottom up.
func (s *Solution) solve(a NT) {
	k := s.collect(a)
	productive := k.productive()
	for k.markEndless(productive) {
		for _, a := range k.nts {
			s.cell(a).local = 0
		}
		k = s.collect(a)
		productive = k.productive()
	}
	n := len(k.nts)
	k.number, k.set, k.first, k.seen, k.queued = make([]int32, n), make([]int, n), make([]int, n), make([]int, n), make([]bool, len(k.prods))
	k.components(func(l int32) bool { return productive[l] }, func(p int32) bool { return k.prods[p].miss == 0 }, k.component)
	for i, a := range k.nts {
		c := s.cell(a)
		c.local = 0
		if !productive[i] {
			c.status = noPath
		}
	}
}

func (s *Solution) collect(a NT) *ask {
	k := &ask{s: s}
	least := s.q.leastWork()
	take := func(a NT) {
		c := s.cell(a)
		if c.status != unsolved || c.local != 0 {
			return
		}
		if s.borrows(s.e.nodeOfNT(a)) {
			s.base.value(a)
			b := s.base.cell(a)
			c.status, c.val, c.best = b.status, b.val, b.best
			return
		}
		if least && s.e.g.nts[a].kind == spawned {
			s.constant(a)
			return
		}
		k.nts = append(k.nts, a)
		c.local = int32(len(k.nts))
	}
	take(a)
	for i := 0; i < len(k.nts); i++ {
		k.prodStart = append(k.prodStart, int32(len(k.prods)))
		start, end := s.e.productions(k.nts[i])
		for p := start; p < end; p++ {
			pr := &s.e.g.prods[p]
			if !s.live(pr) {
				continue
			}
			k.prods = append(k.prods, askProd{id: p, lhs: int32(i), w: s.prodWeight(pr)})
			for _, b := range k.rhs(p) {
				take(b)
			}
		}
	}
	k.prodStart = append(k.prodStart, int32(len(k.prods)))
	// Uses, by counting sort.
	k.useStart = make([]int32, len(k.nts)+1)
	each := func(f func(local int32, p int32)) {
		for p := range k.prods {
			for _, b := range k.rhs(k.prods[p].id) {
				if l := s.cell(b).local; l != 0 {
					f(l-1, int32(p))
				}
			}
		}
	}
	each(func(l, _ int32) { k.useStart[l+1]++ })
	for i := range k.nts {
		k.useStart[i+1] += k.useStart[i]
	}
	k.uses = make([]int32, k.useStart[len(k.nts)])
	next := slices.Clone(k.useStart)
	each(func(l, p int32) { k.uses[next[l]] = p; next[l]++ })
	return k
}

// productive finds the nonterminals that have a run, and leaves miss at 0 exactly
// for productions all of whose right symbols have one.
func (k *ask) productive() []bool {
	is := make([]bool, len(k.nts))
	var work []int32
	found := func(p int32) {
		if l := k.prods[p].lhs; !is[l] {
			is[l] = true
			work = append(work, l)
		}
	}
	for p := range k.prods {
		pr := &k.prods[p]
		for _, b := range k.rhs(pr.id) {
			if c := k.s.cell(b); c.local != 0 || c.status == noPath {
				pr.miss++
			}
		}
		if pr.miss == 0 {
			found(int32(p))
		}
	}
	for len(work) > 0 {
		l := work[len(work)-1]
		work = work[:len(work)-1]
		for _, p := range k.uses[k.useStart[l]:k.useStart[l+1]] {
			if k.prods[p].miss--; k.prods[p].miss == 0 {
				found(p)
			}
		}
	}
	return is
}

// markEndless looks for spawned work that has no end: that without a run, as long
// as no other such work below it might be why (it may spawn work without an end,
// which counts at any moment and so does not hinder). It says whether it marked
// any; then the question has more productions.
func (k *ask) markEndless(productive []bool) bool {
	s := k.s
	stuck := func(l int32) bool { return !productive[l] && s.e.g.nts[k.nts[l]].kind == spawned }
	any := false
	for l := range k.nts {
		any = any || stuck(int32(l))
	}
	if !any {
		return false
	}
	above := make([]bool, len(k.nts)) // a stuck one is in its component or below
	k.components(func(int32) bool { return true }, func(int32) bool { return true }, func(comp []int32) {
		below, has := false, false
		for _, l := range comp {
			has = has || stuck(l)
			for p := k.prodStart[l]; p < k.prodStart[l+1]; p++ {
				for _, b := range k.rhs(k.prods[p].id) {
					// Members of the component are not set yet.
					if u := s.cell(b).local - 1; u >= 0 && above[u] {
						below = true
					}
				}
			}
		}
		for _, l := range comp {
			above[l] = below || has
			if !below && stuck(l) {
				s.endless[s.e.g.nts[k.nts[l]].of] = true
			}
		}
	})
	return true
}

// components calls f for every strongly connected component of the included
// part under the productions in use, users after used (Tarjan, Depth-first search and linear graph
// algorithms, 1972; with a stack of its own).
func (k *ask) components(include func(local int32) bool, use func(prod int32) bool, f func([]int32)) {
	n := len(k.nts)
	index := make([]int32, n) // 0: not visited
	low := make([]int32, n)
	on := make([]bool, n)
	type frame struct {
		v    int32
		prod int32
		pos  int32
	}
	var stack []int32
	var frames []frame
	next := int32(1)
	visit := func(v int32) {
		index[v], low[v] = next, next
		next++
		on[v] = true
		stack = append(stack, v)
		frames = append(frames, frame{v: v, prod: k.prodStart[v]})
	}
	for root := range n {
		if index[root] != 0 || !include(int32(root)) {
			continue
		}
		visit(int32(root))
	walk:
		for len(frames) > 0 {
			fr := &frames[len(frames)-1]
			v := fr.v
			for fr.prod < k.prodStart[v+1] {
				pr := &k.prods[fr.prod]
				rhs := k.rhs(pr.id)
				if !use(fr.prod) {
					fr.prod++
					fr.pos = 0
					continue
				}
				for int(fr.pos) < len(rhs) {
					u := k.s.cell(rhs[fr.pos]).local - 1
					fr.pos++
					if u < 0 {
						continue
					}
					if index[u] == 0 {
						visit(u)
						continue walk
					}
					if on[u] {
						low[v] = min(low[v], index[u])
					}
				}
				fr.prod++
				fr.pos = 0
			}
			frames = frames[:len(frames)-1]
			if len(frames) > 0 {
				u := frames[len(frames)-1].v
				low[u] = min(low[u], low[v])
			}
			if low[v] == index[v] {
				i := len(stack) - 1
				for stack[i] != v {
					i--
				}
				comp := stack[i:]
				for _, u := range comp {
					on[u] = false
				}
				f(comp)
				stack = stack[:i]
			}
		}
	}
}

// sum is the weight of a production with the present values of its right side.
func (k *ask) sum(p int32) (t num, st status) {
	pr := &k.prods[p]
	t, st = pr.w, finite
	for _, b := range k.rhs(pr.id) {
		c := k.s.cell(b)
		switch c.status {
		case unbounded:
			st = unbounded
		case finite:
			t = t.add(c.val)
		default:
			return t, noPath
		}
	}
	return t, st
}

// pumpAllowance is the number of looks along best productions per component,
// besides 64 per nonterminal, before pumps are only looked for now and then.
const pumpAllowance = 1 << 21

// component solves one component: values rise from nothing by FIFO relaxation; a
// cycle among best productions is a pump that gains at every turn, and makes the
// component unbounded. Values of components below are constants.
//
// A cycle of best productions gains because v[X] ≤ w + Σv[rhs] along the old
// ones, strictly at the last; without a cycle the trees of best productions have
// height ≤ n, so values stay finite and the relaxation ends.
func (k *ask) component(comp []int32) {
	s := k.s
	k.numbers++
	for _, l := range comp {
		k.number[l] = k.numbers
	}
	in := func(l int32) bool { return k.number[l] == k.numbers }
	become := func(st status) {
		for _, l := range comp {
			s.cell(k.nts[l]).status = st
		}
	}
	loops, stuck := false, false
	for _, l := range comp {
		for p := k.prodStart[l]; p < k.prodStart[l+1]; p++ {
			if k.prods[p].miss != 0 {
				continue
			}
			for _, b := range k.rhs(k.prods[p].id) {
				c := s.cell(b)
				switch c.status {
				case unbounded:
					become(unbounded)
					return
				case gaveUp:
					stuck = true
				}
				if c.local != 0 && in(c.local-1) {
					loops = true
				}
			}
		}
	}
	if stuck {
		become(gaveUp)
		return
	}
	if !loops {
		l := comp[0]
		c := s.cell(k.nts[l])
		for p := k.prodStart[l]; p < k.prodStart[l+1]; p++ {
			if k.prods[p].miss != 0 {
				continue
			}
			t, _ := k.sum(p)
			if c.status == unsolved || t.cmp(c.val) > 0 {
				c.status, c.val, c.best = finite, t, k.prods[p].id
			}
		}
		return
	}
	r := &relaxation{k: k, in: in, comp: comp}
	r.allowance = s.allowance
	if s.allowance > 0 {
		r.allowance += 64 * len(comp)
	}
	if s.exact {
		r.allowance = 1 << 62
	}
	left := s.e.budget
	var queue []int32
	queued := k.queued
	for _, l := range comp {
		for p := k.prodStart[l]; p < k.prodStart[l+1]; p++ {
			if k.prods[p].miss == 0 {
				queue = append(queue, p)
				queued[p] = true
			}
		}
	}
	for i := 0; i < len(queue); i++ {
		p := queue[i]
		queued[p] = false
		if left--; left < 0 {
			become(gaveUp)
			s.gaveUp = append(s.gaveUp, s.e.headOf(k.nts[comp[0]]))
			return
		}
		t, st := k.sum(p)
		if st != finite {
			continue
		}
		l := k.prods[p].lhs
		a := k.nts[l]
		c := s.cell(a)
		if c.status == finite && t.cmp(c.val) <= 0 {
			continue
		}
		if c.status == finite {
			if steps, found := r.pump(a, p); found {
				if steps != nil {
					s.pumps[a] = steps
				}
				become(unbounded)
				return
			}
		}
		c.status, c.val, c.best = finite, t, k.prods[p].id
		r.time++
		k.set[l] = r.time
		if k.first[l] == 0 {
			k.first[l] = r.time
		}
		for _, u := range k.uses[k.useStart[l]:k.useStart[l+1]] {
			if k.prods[u].miss == 0 && in(k.prods[u].lhs) && !queued[u] {
				queued[u] = true
				queue = append(queue, u)
			}
		}
		if i > 1<<14 && i > len(queue)/2 {
			queue = append(queue[:0], queue[i+1:]...)
			i = -1
		}
	}
}

// relaxation looks for pumps in a component.
type relaxation struct {
	k         *ask
	in        func(int32) bool
	comp      []int32
	time      int // improvements so far
	allowance int
	since     int // improvements since the last look at the whole component
}

// pump: does a stand below production p along best productions? If so, steps
// leads from a back to a. When the allowance is spent, the whole component is
// looked at once every n improvements instead; a cycle found so late gives no
// steps, since its side trees may hang on it.
func (r *relaxation) pump(a NT, p int32) (steps []pumpStep, found bool) {
	k, s := r.k, r.k.s
	if r.allowance <= 0 {
		r.since++
		if r.since < len(r.comp) {
			return nil, false
		}
		r.since = 0
		return nil, r.cyclic()
	}
	// Depth first from p; a nonterminal whose best production is older than a's
	// first value cannot lead to a.
	type frame struct {
		prod int32
		pos  int
	}
	al := s.cell(a).local - 1
	k.stamp++
	frames := []frame{{prod: k.prods[p].id}}
	for len(frames) > 0 {
		f := &frames[len(frames)-1]
		rhs := k.rhs(f.prod)
		if f.pos == len(rhs) {
			frames = frames[:len(frames)-1]
			continue
		}
		b := rhs[f.pos]
		f.pos++
		r.allowance--
		if b == a {
			for _, f := range frames {
				steps = append(steps, pumpStep{f.prod, f.pos - 1})
			}
			return steps, true
		}
		c := s.cell(b)
		l := c.local - 1
		if l < 0 || !r.in(l) || c.best < 0 || k.seen[l] == k.stamp || k.set[l] < k.first[al] {
			continue
		}
		k.seen[l] = k.stamp
		frames = append(frames, frame{prod: c.best})
	}
	return nil, false
}

// cyclic: do the best productions of the component contain a cycle? By taking
// away, again and again, what leads to nothing that is left.
func (r *relaxation) cyclic() bool {
	k, s := r.k, r.k.s
	degree := map[int32]int{}
	users := map[int32][]int32{}
	var work []int32
	for _, l := range r.comp {
		n := 0
		if c := s.cell(k.nts[l]); c.best >= 0 {
			for _, b := range k.rhs(c.best) {
				if bl := s.cell(b).local - 1; bl >= 0 && r.in(bl) {
					n++
					users[bl] = append(users[bl], l)
				}
			}
		}
		degree[l] = n
		if n == 0 {
			work = append(work, l)
		}
	}
	gone := 0
	for ; gone < len(work); gone++ {
		for _, u := range users[work[gone]] {
			if degree[u]--; degree[u] == 0 {
				work = append(work, u)
			}
		}
	}
	return gone < len(r.comp)
}
