// Saturation: which heads can be reached, and by which states each is left.

package summary

import (
	"fmt"
	"slices"

	"pathtally/pds"
)

// DefaultBudget is the number of rule steps that one Saturate may spend.
const DefaultBudget = 50_000_000

// Answer is how a saturation ended.
type Answer struct {
	Exhausted bool     // the budget ran out; nothing that was not found is excluded
	Budget    int64    // rule steps allowed
	Steps     int64    // rule steps spent in this call
	Worst     pds.Head // where most steps were spent, over all calls
	WorstHas  int64    // steps spent there
}

// String says it in one line.
func (a Answer) String() string {
	if !a.Exhausted {
		return fmt.Sprintf("closed after %d rule steps", a.Steps)
	}
	return fmt.Sprintf("budget of %d rule steps exhausted; most of them (%d) at state %d, symbol %d", a.Budget, a.WorstHas, a.Worst.State, a.Worst.Symbol)
}

// node is a head that was met; index into Engine.nodes.
type node = int32

// pair is a (node, exit) that was found; index into Engine.pairs.
type pair = int32

type nodeInfo struct {
	head               pds.Head
	ruleStart, ruleEnd int32 // into Engine.rules; meaningful if expanded
	deps               int32 // first of the list of those that take this node's exits; -1 ends
	first, last        pair  // list of exits; -1 if none
	done               pair  // last exit handed on to all deps; -1 if none
	epoch              int32 // last Saturate whose cone this node was in
	expanded           bool
	queued             bool
	closed             bool // everything below is final
	spent              int64
}

type pairInfo struct {
	node node
	exit pds.StateID
	next pair // next exit of the node; -1 ends
}

// dep: whoever holds it takes exit s of the node that lists it as an exit of its
// own (below 0), or of what goes on at ⟨s, below⟩.
type dep struct {
	to    node
	below pds.SymbolID
	next  int32
}

// Engine holds what is known of a system: nodes, exits, grammar. Everything is
// shared by all starts and questions. An Engine is not safe for concurrent use.
type Engine struct {
	sys    pds.System
	budget int64 // of Saturate calls that name none

	nodes  []nodeInfo
	nodeOf map[pds.Head]node
	pairs  []pairInfo
	pairOf map[uint64]pair
	deps   []dep
	rules  []pds.Rule
	target []node // per rule: the node of the successor head (pushed top); -1 for pop and stop
	owner  []node // per rule
	// spawners lists, per spawned node, who spawns it.
	spawners map[node][]node

	epoch   int32
	queue   []node
	visit   []node // cone traversal
	scratch []pds.Rule
	worst   node
	steps   int64

	g grammar
}

// New makes an engine for a system. budget is the number of rule steps that a
// saturation started by a question may spend; 0 means DefaultBudget.
func New(sys pds.System, budget int64) *Engine {
	if budget <= 0 {
		budget = DefaultBudget
	}
	return &Engine{sys: sys, budget: budget, nodeOf: map[pds.Head]node{}, pairOf: map[uint64]pair{}, spawners: map[node][]node{}, worst: -1}
}

// Size says how much was built.
type Size struct {
	Nodes, Pairs, Rules, Nonterminals, Productions int
}

// Size says how much was built so far.
func (e *Engine) Size() Size {
	return Size{len(e.nodes), len(e.pairs), len(e.rules), len(e.g.nts), len(e.g.prods)}
}

func pairKey(n node, q pds.StateID) uint64 { return uint64(uint32(n))<<32 | uint64(uint32(q)) }

func (e *Engine) node(h pds.Head) node {
	if n, ok := e.nodeOf[h]; ok {
		return n
	}
	n := node(len(e.nodes))
	e.nodes = append(e.nodes, nodeInfo{head: h, deps: -1, first: -1, last: -1, done: -1})
	e.nodeOf[h] = n
	return n
}

// Saturate finds all that can be reached from a head: afterwards, unless the
// answer says exhausted, the exits of the head and of every head below it are
// complete. What an exhausted call has found stays, and a later call goes on from
// there; starts that do not lead to the unfinished part are not affected by it.
// budget counts rule steps (a rule read, an exit handed on); 0 means the
// engine's. Time and memory are linear in the steps.
//
// This is post* by summaries: Reps, Schwoon, Jha, Melski, Weighted pushdown
// systems and their application to interprocedural dataflow analysis (2005),
// section 3, turned to exits and done on demand.
func (e *Engine) Saturate(start pds.Head, budget int64) Answer {
	if budget <= 0 {
		budget = e.budget
	}
	root := e.node(start)
	if e.nodes[root].closed {
		return e.answer(false, budget, 0)
	}
	e.epoch++
	e.queue = e.queue[:0]
	var cone []node
	e.enter(root, &cone)
	var steps int64
	for i := 0; i < len(e.queue); i++ {
		n := e.queue[i]
		if steps >= budget {
			for _, n := range e.queue[i:] {
				e.nodes[n].queued = false // stays dirty: its done mark says so
			}
			return e.answer(true, budget, steps)
		}
		e.nodes[n].queued = false
		before := steps
		if !e.nodes[n].expanded {
			steps += e.expand(n, &cone)
		}
		steps += e.propagate(n, &cone)
		e.nodes[n].spent += steps - before
		if e.worst < 0 || e.nodes[n].spent > e.nodes[e.worst].spent {
			e.worst = n
		}
		if i > 1<<16 && i > len(e.queue)/2 {
			e.queue = append(e.queue[:0], e.queue[i+1:]...)
			i = -1
		}
	}
	for _, n := range cone {
		e.close(n)
	}
	return e.answer(false, budget, steps)
}

// close makes a node final: its exits are put in the order of their states, so
// that nothing built from them depends on the order of the search.
func (e *Engine) close(n node) {
	ni := &e.nodes[n]
	ni.closed = true
	if ni.first == ni.last {
		return
	}
	var list []pair
	for p := ni.first; p >= 0; p = e.pairs[p].next {
		list = append(list, p)
	}
	slices.SortFunc(list, func(a, b pair) int { return int(e.pairs[a].exit) - int(e.pairs[b].exit) })
	for i, p := range list[:len(list)-1] {
		e.pairs[p].next = list[i+1]
	}
	ni.first, ni.last = list[0], list[len(list)-1]
	e.pairs[ni.last].next = -1
	ni.done = ni.last
}

func (e *Engine) answer(exhausted bool, budget, steps int64) Answer {
	e.steps += steps
	a := Answer{Exhausted: exhausted, Budget: budget, Steps: steps}
	if e.worst >= 0 {
		a.Worst, a.WorstHas = e.nodes[e.worst].head, e.nodes[e.worst].spent
	}
	return a
}

// enter takes a node and all below it into the cone of this call, and queues what
// is unfinished there.
func (e *Engine) enter(n node, cone *[]node) {
	e.visit = append(e.visit[:0], n)
	for len(e.visit) > 0 {
		n := e.visit[len(e.visit)-1]
		e.visit = e.visit[:len(e.visit)-1]
		ni := &e.nodes[n]
		if ni.closed || ni.epoch == e.epoch {
			continue
		}
		ni.epoch = e.epoch
		*cone = append(*cone, n)
		e.dirty(n)
		if !ni.expanded {
			continue
		}
		for r := ni.ruleStart; r < ni.ruleEnd; r++ {
			rule := &e.rules[r]
			if t := e.target[r]; t >= 0 {
				e.visit = append(e.visit, t)
				if rule.Kind == pds.Push {
					for p := e.nodes[t].first; p >= 0; p = e.pairs[p].next {
						if k, ok := e.nodeOf[pds.Head{State: e.pairs[p].exit, Symbol: rule.Below}]; ok {
							e.visit = append(e.visit, k)
						}
					}
				}
			}
			for _, s := range rule.Spawn {
				e.visit = append(e.visit, e.nodeOf[s])
			}
		}
	}
}

// dirty queues a node of the cone that has something to do.
func (e *Engine) dirty(n node) {
	ni := &e.nodes[n]
	if ni.epoch == e.epoch && !ni.queued && (!ni.expanded || ni.done != ni.last) {
		ni.queued = true
		e.queue = append(e.queue, n)
	}
}

func (e *Engine) addExit(n node, q pds.StateID) {
	key := pairKey(n, q)
	if _, ok := e.pairOf[key]; ok {
		return
	}
	p := pair(len(e.pairs))
	e.pairs = append(e.pairs, pairInfo{node: n, exit: q, next: -1})
	e.pairOf[key] = p
	ni := &e.nodes[n]
	if ni.closed {
		panic(fmt.Sprintf("summary: saturate: new exit %d of the closed head %+v", q, ni.head))
	}
	if ni.last >= 0 {
		e.pairs[ni.last].next = p
	} else {
		ni.first = p
	}
	ni.last = p
	e.dirty(n)
}

func (e *Engine) addDep(from, to node, below pds.SymbolID) {
	e.deps = append(e.deps, dep{to: to, below: below, next: e.nodes[from].deps})
	e.nodes[from].deps = int32(len(e.deps) - 1)
}

// expand reads the rules of a node.
func (e *Engine) expand(n node, cone *[]node) int64 {
	h := e.nodes[n].head
	e.scratch = e.sys.Rules(h, e.scratch[:0])
	e.nodes[n].ruleStart = int32(len(e.rules))
	e.rules = append(e.rules, e.scratch...)
	e.nodes[n].ruleEnd = int32(len(e.rules))
	e.nodes[n].expanded = true
	steps := int64(1)
	for i := range e.scratch {
		r := e.scratch[i]
		steps++
		e.owner = append(e.owner, n)
		t := node(-1)
		if r.Kind == pds.Step || r.Kind == pds.Push {
			t = e.node(pds.Head{State: r.State, Symbol: r.Top})
			e.enter(t, cone)
		}
		e.target = append(e.target, t)
		for _, s := range r.Spawn {
			k := e.node(s)
			e.spawners[k] = append(e.spawners[k], n)
			e.enter(k, cone)
		}
		switch r.Kind {
		case pds.Stop:
		case pds.Pop:
			e.addExit(n, r.State)
		case pds.Step, pds.Push:
			below := pds.SymbolID(0)
			if r.Kind == pds.Push {
				below = r.Below
			}
			e.addDep(t, n, below)
			// Exits behind done reach n when t is propagated.
			if done := e.nodes[t].done; done >= 0 {
				for p := e.nodes[t].first; ; p = e.pairs[p].next {
					steps++
					e.feed(n, below, e.pairs[p].exit, cone)
					if p == done {
						break
					}
				}
			}
		default:
			panic(fmt.Sprintf("summary: saturate: head %+v: rule %d has kind %d", h, i, r.Kind))
		}
	}
	return steps
}

// feed hands exit s to node to, directly or through ⟨s, below⟩.
func (e *Engine) feed(to node, below pds.SymbolID, s pds.StateID, cone *[]node) {
	if below == 0 {
		e.addExit(to, s)
		return
	}
	h := pds.Head{State: s, Symbol: below}
	k := e.node(h)
	if e.nodes[to].epoch == e.epoch {
		e.enter(k, cone)
	}
	// One edge k → to is enough, however many rules of to lead over k. Only the
	// newest is looked at: a full search would be quadratic, a double is harmless.
	if d := e.nodes[k].deps; d >= 0 && e.deps[d].to == to && e.deps[d].below == 0 {
		return
	}
	e.addDep(k, to, 0)
	for p := e.nodes[k].first; p >= 0; p = e.pairs[p].next {
		e.addExit(to, e.pairs[p].exit)
	}
}

// propagate hands the new exits of a node to those that wait for them.
func (e *Engine) propagate(n node, cone *[]node) int64 {
	var steps int64
	for {
		ni := &e.nodes[n]
		p := ni.first
		if ni.done >= 0 {
			p = e.pairs[ni.done].next
		}
		if p < 0 {
			return steps
		}
		ni.done = p
		q := e.pairs[p].exit
		for d := ni.deps; d >= 0; d = e.deps[d].next {
			steps++
			x := e.deps[d]
			e.feed(x.to, x.below, q, cone)
		}
	}
}

// Exits lists the states in which the head's symbol can be popped, in order.
// complete is false if the head was not saturated to the end.
func (e *Engine) Exits(h pds.Head) (exits []pds.StateID, complete bool) {
	n, ok := e.nodeOf[h]
	if !ok {
		return nil, false
	}
	return e.exits(n), e.nodes[n].closed
}

func (e *Engine) exits(n node) []pds.StateID {
	var exits []pds.StateID
	for p := e.nodes[n].first; p >= 0; p = e.pairs[p].next {
		exits = append(exits, e.pairs[p].exit)
	}
	slices.Sort(exits)
	return exits
}

// Heads lists, in order, all heads whose exits are final: what was reached from the
// starts that were saturated to the end. [pds.List] makes a table of them.
func (e *Engine) Heads() []pds.Head {
	var heads []pds.Head
	for i := range e.nodes {
		if e.nodes[i].closed {
			heads = append(heads, e.nodes[i].head)
		}
	}
	slices.SortFunc(heads, compareHeads)
	return heads
}

// ensure saturates a head for a question.
func (e *Engine) ensure(h pds.Head) (node, bool) {
	if n, ok := e.nodeOf[h]; ok && e.nodes[n].closed {
		return n, true
	}
	a := e.Saturate(h, e.budget)
	return e.nodeOf[h], !a.Exhausted
}
