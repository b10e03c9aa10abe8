package frontend

import (
	"container/heap"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/pds"
	"pathtally/properties"
)

// Starting points are found from the events upwards. A unit is a function
// together with an instance that exists before it, or with all instances born
// below it. Units start at the functions in which an event or a birth stands.
// One that is closed (see properties.BottomUp) ends there; of one that is not,
// the callers become units too, up to the roots. So the cost of a lock that
// hundreds of functions reach, through one function that takes and releases it,
// is the cost of that function.
//
// Exact: what a closed function does to the instance adds nothing to any count
// difference that a claim asks about, so a caller all of whose callees are
// closed has only even paths; a caller with one that is not is explored with
// all of them.

// exporting says whether a caller that follows no instance yet has to enter a function.
type exporting uint8

const (
	exportsUnknown exporting = iota
	exportsYes               // a live or badly settled instance comes out of it
	exportsNo
)

// exportsBirth is asked when a path without instance comes to a call of g. An
// answer that is given once stays.
func (m *Model) exportsBirth(g *fnInfo) bool {
	if !g.bearing {
		return false
	}
	if g.exports == exportsUnknown {
		g.exports = exportsYes
	}
	return g.exports == exportsYes
}

type unitKey struct {
	fn *fnInfo
	u  Expr // the instance over the function's frame; 0: those born below
}

type unit struct {
	unitKey
	pos     int // of the function in the bottom-up order
	seq     int // of the unit's making
	start   properties.Start
	level   int // calls above the function where the event or birth stands
	settled bool
	closed  bool
	parents []unitKey // callers that follow it
}

type unitQueue struct {
	byKey map[unitKey]*unit
	even  map[unitKey]bool // answers of evenUnit
	order map[*fnInfo]int
	last  map[*fnInfo]int // highest number of the function's component
	heap  unitHeap
	all   []*unit
	now   *unit
	done  bool
}

type unitHeap []*unit

func (h unitHeap) Len() int { return len(h) }
func (h unitHeap) Less(i, j int) bool {
	if h[i].pos != h[j].pos {
		return h[i].pos < h[j].pos
	}
	return h[i].seq < h[j].seq
}
func (h unitHeap) Swap(i, j int) { h[i], h[j] = h[j], h[i] }
func (h *unitHeap) Push(x any)   { *h = append(*h, x.(*unit)) }
func (h *unitHeap) Pop() any {
	old := *h
	x := old[len(old)-1]
	*h = old[:len(old)-1]
	return x
}

// findStarts makes the first units: where events and births stand.
func (m *Model) findStarts() {
	q := &m.units
	q.byKey, q.even = map[unitKey]*unit{}, map[unitKey]bool{}
	q.order, q.last = m.bottomUp()
	if m.rule.Each == nil {
		for _, fn := range m.sh.fns {
			if fi, ok := m.fnOf[fn]; ok && fi.cone && !m.isEventFunc(fn) && fn.Blocks != nil {
				if kind := m.rootKind(fn); kind != "" {
					m.starts = append(m.starts, m.startOf(unitKey{fi, 0}, kind))
				}
			}
		}
		q.done = true
		return
	}
	existing := m.existingMatters()
	for _, fn := range m.sh.fns {
		fi, ok := m.fnOf[fn]
		if !ok || !fi.cone || m.isEventFunc(fn) || fn.Blocks == nil {
			continue
		}
		if existing {
			for _, u := range fi.own {
				if !m.x.hasGhost(u) {
					m.addUnit(unitKey{fi, u})
				}
			}
		}
		if fi.direct {
			m.addUnit(unitKey{fi, 0})
		}
	}
}

// bottomUp numbers the functions of the cone, callees (and closures) before
// callers; those of one strongly connected component follow each other, and
// last holds the highest number of each one's component. Tarjan, Depth-first
// search and linear graph algorithms, 1972.
func (m *Model) bottomUp() (order, last map[*fnInfo]int) {
	order, last = map[*fnInfo]int{}, map[*fnInfo]int{}
	callees := func(fi *fnInfo) []*fnInfo {
		var out []*fnInfo
		for _, b := range fi.fn.Blocks {
			for _, i := range b.Instrs {
				switch i := i.(type) {
				case *ssa.MakeClosure:
					if g, ok := m.fnOf[i.Fn.(*ssa.Function)]; ok && g.cone {
						out = append(out, g)
					}
				case ssa.CallInstruction:
					for _, t := range m.sh.targets[i] {
						if g, ok := m.fnOf[t]; ok && g.cone {
							out = append(out, g)
						}
					}
				}
			}
		}
		return out
	}
	type frame struct {
		fi   *fnInfo
		next []*fnInfo
	}
	index, low := map[*fnInfo]int{}, map[*fnInfo]int{}
	var open []*fnInfo // met, not yet in a component
	closed := map[*fnInfo]bool{}
	var stack []frame
	enter := func(fi *fnInfo) {
		index[fi] = len(index) + 1
		low[fi] = index[fi]
		open = append(open, fi)
		stack = append(stack, frame{fi, callees(fi)})
	}
	for _, fn := range m.sh.fns {
		fi, ok := m.fnOf[fn]
		if !ok || !fi.cone || index[fi] != 0 {
			continue
		}
		enter(fi)
		for len(stack) > 0 {
			top := &stack[len(stack)-1]
			if len(top.next) > 0 {
				g := top.next[0]
				top.next = top.next[1:]
				switch {
				case index[g] == 0:
					enter(g)
				case !closed[g]:
					low[top.fi] = min(low[top.fi], index[g])
				}
				continue
			}
			f := top.fi
			stack = stack[:len(stack)-1]
			if len(stack) > 0 {
				up := stack[len(stack)-1].fi
				low[up] = min(low[up], low[f])
			}
			if low[f] != index[f] {
				continue
			}
			first := slices.Index(open, f)
			part := open[first:]
			open = open[:first]
			// Within a component the one met last is deepest: it comes first.
			for k := len(part) - 1; k >= 0; k-- {
				closed[part[k]] = true
				order[part[k]] = len(order)
			}
			for _, g := range part {
				last[g] = len(order) - 1
			}
		}
	}
	return order, last
}

func (m *Model) addUnit(k unitKey) *unit {
	q := &m.units
	if u, ok := q.byKey[k]; ok {
		return u
	}
	kind := m.rootKind(k.fn.fn)
	u := &unit{unitKey: k, pos: q.order[k.fn], seq: len(q.all), start: m.startOf(k, kind)}
	u.start.Inner = kind == "" || kind == "goroutine" && k.u != 0 && m.foldable(k.fn, k.u)
	q.byKey[k] = u
	q.all = append(q.all, u)
	heap.Push(&q.heap, u)
	return u
}

// startOf is the starting point of a unit.
func (m *Model) startOf(k unitKey, kind string) properties.Start {
	obj := funcObject(k.fn.fn)
	s := properties.Start{
		Root: m.funcOf(k.fn.fn), Kind: kind,
		Recovered: isHandler(k.fn.fn),
		Caught:    m.panicMatters[k.fn.fn],
		Exported:  obj != nil && obj.Exported() && k.fn.fn.Parent() == nil,
	}
	ns := nset{phase: unborn}
	switch {
	case m.rule.Each == nil:
		ns.phase = anyInst
	case k.u == 0:
		s.Born = true
	default:
		ns.phase = born
		ns.add(k.u)
		s.Instance = m.sourceName(k.fn.fn, k.u)
		s.Home = m.home(k.fn.fn, k.u)
	}
	s.Head = pds.Head{State: runState, Symbol: m.entry(k.fn, ns, nil, recNo)}
	return s
}

// Next implements properties.BottomUp.
func (m *Model) Next() (properties.Start, bool) {
	q := &m.units
	if q.done {
		return properties.Start{}, false
	}
	if q.heap.Len() == 0 {
		m.finishStarts()
		return properties.Start{}, false
	}
	u := heap.Pop(&q.heap).(*unit)
	q.now = u
	return u.start, true
}

// maxClimb bounds how many calls above an event a function is still followed
// that is not even: what is uneven that far up is judged there, as if it were a
// root, and not from the hundreds of roots further up.
const maxClimb = 12

// climb makes a unit of a caller of u.
func (m *Model) climb(u *unit, k unitKey) {
	_, known := m.units.byKey[k]
	v := m.addUnit(k)
	if !known {
		v.level = u.level + 1
	}
}

// Settle implements properties.BottomUp.
func (m *Model) Settle(s properties.Settled) {
	u := m.units.now
	if s == properties.Closed && m.callsRecover(u.fn.fn) {
		// It was asked as if nothing panicked: what it does behind a recover that
		// answers is seen by whoever defers it only.
		s = properties.NotClosed
	}
	u.settled, u.closed = true, s == properties.Closed
	if s == properties.NotClosed && u.level >= maxClimb {
		s = properties.Spent
	}
	if s != properties.NotClosed {
		if u.u == 0 && u.fn.exports == exportsUnknown {
			u.fn.exports = exportsNo
		}
		if s == properties.Spent && u.start.Inner && m.named(u.fn.fn) {
			u.start.Inner, u.start.Kind = false, "cover"
		}
		return
	}
	if u.u == 0 {
		u.fn.exports = exportsYes
	}
	if m.sh.boundary(u.fn.fn) {
		return // an event of another rule, which counts for it
	}
	misfits := 0
	for _, c := range m.sh.callers[u.fn.fn] {
		g, ok := m.fnOf[c.fn]
		if !ok || !g.cone || m.isEventFunc(c.fn) || c.fn.Blocks == nil {
			continue
		}
		if u.u == 0 {
			u.parents = append(u.parents, unitKey{g, 0})
			m.climb(u, unitKey{g, 0})
			continue
		}
		for _, o := range m.translate(g, u.u, c, u.fn.fn) {
			switch {
			case o.s == 0:
			case !m.typeFits(g.fn, o.s):
				misfits++
			case o.b == nil:
				if g.subjects[o.s] && !m.x.hasGhost(o.s) {
					k := unitKey{g, o.s}
					u.parents = append(u.parents, k)
					m.climb(u, k)
				}
			case len(g.births[o.b]) > 0:
				u.parents = append(u.parents, unitKey{g, 0})
				m.climb(u, unitKey{g, 0})
			}
		}
	}
	if misfits > 0 && len(u.parents) == 0 && u.start.Inner {
		u.closed = true // an interface that never holds an instance of this rule
	}
}

// finishStarts makes roots of the units that are not closed and that no root
// follows (the covering rule), adds what needs no question, and fixes the order.
func (m *Model) finishStarts() {
	q := &m.units
	q.done = true
	answered := map[*unit]bool{}
	children := map[unitKey][]*unit{}
	for _, u := range q.all {
		for _, p := range u.parents {
			children[p] = append(children[p], u)
		}
	}
	var mark func(u *unit)
	mark = func(u *unit) {
		if answered[u] {
			return
		}
		answered[u] = true
		for _, c := range children[u.unitKey] {
			if isIterator(c.fn.fn) && c.fn.fn.Parent() == u.fn.fn {
				continue // made there; whoever ranges over it runs it
			}
			mark(c)
		}
	}
	for _, u := range q.all {
		// One that is closed was asked with all that it calls.
		if !u.start.Inner || u.closed {
			mark(u)
		}
	}
	// Uppermost first: a unit without followers, then whatever is left of recursion.
	for _, strict := range []bool{true, false} {
		for i := len(q.all) - 1; i >= 0; i-- {
			u := q.all[i]
			if u.closed || answered[u] || strict && m.followed(u) || !m.named(u.fn.fn) || m.unreached(u.fn.fn) {
				continue
			}
			u.start.Inner, u.start.Kind = false, "cover"
			mark(u)
		}
	}
	var starts []properties.Start
	existing := m.existingMatters()
	for _, fn := range m.sh.fns {
		fi, ok := m.fnOf[fn]
		if !ok || !fi.cone || m.isEventFunc(fn) || fn.Blocks == nil {
			continue
		}
		kind := m.rootKind(fn)
		add := func(k unitKey) {
			if u, ok := q.byKey[k]; ok {
				starts = append(starts, u.start)
			} else if kind != "" {
				s := m.startOf(k, kind)
				s.Even = true
				starts = append(starts, s)
			}
		}
		if existing {
			for _, u := range fi.subjList {
				if !m.x.hasGhost(u) { // elements are met where they are selected
					add(unitKey{fi, u})
				}
			}
		}
		if fi.bearing {
			add(unitKey{fi, 0})
		}
	}
	m.starts = starts
}

// unreached tells whether fn is a method on no call path: nobody outside its
// package can name it, nothing in sight calls it or takes its value, and where
// a method of its name is called through an interface, others are meant. (One
// that nothing at all calls is covered: its callers are still to be written.)
func (m *Model) unreached(fn *ssa.Function) bool {
	obj := funcObject(fn)
	if obj == nil || obj.Exported() || fn.Signature.Recv() == nil || fn.Parent() != nil || m.sh.taken[fn] || len(m.sh.callers[fn]) > 0 {
		return false
	}
	dispatched := false
	for _, site := range m.sh.byName[obj.Name()] {
		if site.Common().IsInvoke() {
			if len(m.sh.targets[site]) == 0 {
				return false
			}
			dispatched = true
		}
	}
	return dispatched
}

// isIterator tells whether fn is a closure for a range statement: its only
// parameter is the function that is called with each element.
func isIterator(fn *ssa.Function) bool {
	ps := fn.Signature.Params()
	if fn.Parent() == nil || ps.Len() != 1 || fn.Signature.Results().Len() != 0 {
		return false
	}
	yield, ok := ps.At(0).Type().Underlying().(*types.Signature)
	return ok && yield.Results().Len() == 1 && isBool(yield.Results().At(0).Type())
}

// followed tells whether another function follows the unit.
func (m *Model) followed(u *unit) bool {
	return slices.ContainsFunc(u.parents, func(p unitKey) bool { return p.fn != u.fn })
}

// named tells whether the function's package is one that is to be judged.
func (m *Model) named(fn *ssa.Function) bool {
	p := m.sh.prog.PackageOfFunction(fn)
	return p != nil && p.Named
}

// concernsNow tells whether a call of g has to be followed for the instance
// that g knows as e. As long as nothing has happened to the instance, a callee
// that is closed for it adds nothing: its own start has answered for it.
func (m *Model) concernsNow(ns nset, g *fnInfo, e Expr) bool {
	if !m.concerns(g, e) {
		return false
	}
	return ns.touched || ns.phase != born || !m.evenBelow(g, e)
}

func (m *Model) evenBelow(g *fnInfo, e Expr) bool {
	n := m.x.nodes[e]
	switch n.kind {
	case kMaybe:
		return m.evenBelow(g, n.x)
	case kHeld:
		for _, u := range g.subjList {
			if m.x.within(n.x, u) && !m.evenUnit(unitKey{g, u}) {
				return false
			}
		}
		return true
	}
	if g.subjects[e] {
		return m.evenUnit(unitKey{g, e})
	}
	return m.evenUnit(unitKey{g, m.x.ghosted(e)})
}

// evenUnit tells whether the unit is known to be closed. What is answered once
// stays, also when recursion makes it a unit later.
func (m *Model) evenUnit(k unitKey) bool {
	q := &m.units
	if even, ok := q.even[k]; ok {
		return even
	}
	even := false
	if u, ok := q.byKey[k]; ok {
		even = u.settled && u.closed
	} else if q.done || q.now != nil && q.last[k.fn] < q.now.pos {
		even = true // none of its callees does anything that is not closed
	}
	q.even[k] = even
	return even
}
