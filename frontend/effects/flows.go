package effects

// This file follows where a value may go: which results may hold it, which
// parameters' memory, whether it stays behind.
//
// Each value of a body has two masks of roots: holds (roots whose memory the
// value may reach) and stored (roots that are stored into what the value
// reaches). "x may be held by v" is an edge with three rules,
//
//	holds(v) ⊇ holds(x)      what x reaches, v reaches
//	stored(x) ⊇ stored(v)    a store through v may hit what x reaches
//	holds(v) ⊇ stored(v)
//
// and a store *a = b is the edge b → a with stored(a) ⊇ holds(b). Fields and
// elements are not told apart, nor is the order of instructions (an
// over-approximation). The package variables together, and whatever keeps (open
// channels, panics under way), are two more roots: what was put there by one
// call may come back by another. In spirit: Andersen, Program analysis and specialization
// for the C programming language, 1994, chapter 4, with all fields collapsed.

import (
	"fmt"
	"go/token"
	"math/bits"

	"golang.org/x/tools/go/ssa"
)

// Flow says where a root, or what it reaches, may go by one call.
type Flow struct {
	Results uint64 // bit j: into result j (bit 63: some result from 63 on)
	Roots   uint64 // bit k: into the memory of root k (bit 63: some root from 59 on); its own bit: one part of it into another
	Global  bool   // into a package variable
	Kept    bool   // into a channel, a goroutine, a panic or unknown code
}

// ToResult says whether the root may be held by result j.
func (f Flow) ToResult(j int) bool { return f.Results>>uint(min(j, 63))&1 != 0 }

// ToRoot says whether the root may be held by the memory of root k.
func (f Flow) ToRoot(k int) bool {
	if k >= maxRoots {
		k = 63
	}
	return f.Roots>>uint(k)&1 != 0
}

// Outlives says whether the root may be held by something other than results
// and parameters after the call.
func (f Flow) Outlives() bool { return f.Global || f.Kept }

func (f Flow) union(g Flow) Flow {
	return Flow{f.Results | g.Results, f.Roots | g.Roots, f.Global || g.Global, f.Kept || g.Kept}
}

// flowBit is the mask bit of root i: roots from maxRoots on share bit 63.
func flowBit(i int) uint64 {
	if i >= maxRoots {
		i = overflowBit
	}
	return 1 << uint(i)
}

type flowEdge struct{ from, to int32 }

// flowSolver is the state of one body; its buffers are used again. Values 0 and
// 1 are the package variables and whatever keeps.
type flowSolver struct {
	t      *Table
	n      *node
	index  map[ssa.Value]int32
	holds  []uint64
	stored []uint64
	edges  []flowEdge
	puts   []flowEdge // stored(to) ⊇ holds(from)
}

const (
	globalValue int32 = 0
	keptValue   int32 = 1
)

// Mask bits of the two roots that are no parameters; roots from maxRoots on
// share overflowBit.
const (
	globalBit   = 60
	keptBit     = 61
	overflowBit = 63
)

// stepFlows is a stage.
func (t *Table) stepFlows(n *node) bool {
	var fl []Flow
	var outside [2]Flow
	switch {
	case n.fn == nil:
		fl, outside = t.groupFlows(n)
	case n.bodyless():
		fl = blindFlows(n)
	default:
		fl, outside = t.flow.solve(n)
	}
	changed := false
	for i, f := range outside {
		if u := n.sum.outside[i].union(f); u != n.sum.outside[i] {
			n.sum.outside[i] = u
			changed = true
		}
	}
	for i, f := range fl {
		if u := n.sum.flows[i].union(f); u != n.sum.flows[i] {
			n.sum.flows[i] = u
			changed = true
		}
	}
	return changed
}

// groupFlows joins the flows of the candidates; root n.roots is the function
// value called, for its captured variables.
func (t *Table) groupFlows(n *node) (fl []Flow, outside [2]Flow) {
	fl = make([]Flow, n.roots+1)
	for _, m := range n.members {
		mn := t.nodes[m]
		p := numParams(mn.fn)
		low := uint64(1)<<uint(min(p, maxRoots)) - 1
		rename := func(f Flow) Flow {
			if f.Roots&^low != 0 { // into captured variables
				f.Roots = f.Roots&low | flowBit(n.roots)
			}
			return f
		}
		for i, f := range mn.sum.flows {
			k := i
			if i >= p {
				k = n.roots
			}
			fl[k] = fl[k].union(rename(f))
		}
		for i, f := range mn.sum.outside {
			outside[i] = outside[i].union(rename(f))
		}
	}
	if n.open {
		for i := range fl { // as blindFlows
			fl[i].Results = ^uint64(0)
		}
	}
	if n.partial {
		// Anything may go anywhere.
		all := Flow{^uint64(0), ^uint64(0) &^ (1<<globalBit | 1<<keptBit), true, true}
		for i := range fl {
			fl[i] = all
		}
		outside = [2]Flow{all, all}
	}
	return fl, outside
}

// blindFlows is the borrowing of code without body: results may hold the
// arguments, nothing else keeps them, unless a model says so.
func blindFlows(n *node) []Flow {
	fl := make([]Flow, n.roots)
	m := n.model
	for i := range fl {
		if !m.noFlow {
			fl[i].Results = ^uint64(0)
		}
		fl[i].Kept = m.keeps
		if m.stores && i > 0 {
			fl[i].Roots |= flowBit(0)
		}
	}
	return fl
}

func (s *flowSolver) solve(n *node) (fl []Flow, outside [2]Flow) {
	s.n = n
	fn := n.fn
	s.index = emptied(s.index)
	s.holds = append(s.holds[:0], 1<<globalBit, 1<<keptBit)
	s.stored = append(s.stored[:0], 0, 0)
	s.edges, s.puts = s.edges[:0], s.puts[:0]
	roots := 0
	root := func(v ssa.Value) {
		if s.t.places.hasPointers(v.Type()) {
			s.holds[s.value(v)] |= flowBit(roots)
		}
		roots++
	}
	for _, p := range fn.Params {
		root(p)
	}
	for _, f := range fn.FreeVars {
		root(f)
	}
	fl = make([]Flow, roots)
	site := 0
	for _, b := range fn.Blocks {
		for _, instr := range b.Instrs {
			for site < len(n.sites) && n.sites[site].callback {
				s.callback(&n.sites[site])
				site++
			}
			if site < len(n.sites) && n.sites[site].instr == instr {
				s.call(&n.sites[site])
				site++
				continue
			}
			s.instr(instr)
		}
	}
	// Edges come in the order of the code: a few rounds do.
	for changed := true; changed; {
		changed = false
		for v := range s.holds {
			if h := s.holds[v] | s.stored[v]; h != s.holds[v] {
				s.holds[v] = h
				changed = true
			}
		}
		for _, e := range s.edges {
			if h := s.holds[e.to] | s.holds[e.from]; h != s.holds[e.to] {
				s.holds[e.to] = h
				changed = true
			}
		}
		for _, e := range s.puts {
			if h := s.stored[e.to] | s.holds[e.from]; h != s.stored[e.to] {
				s.stored[e.to] = h
				changed = true
			}
		}
		for i := len(s.edges) - 1; i >= 0; i-- {
			e := s.edges[i]
			if h := s.stored[e.from] | s.stored[e.to]; h != s.stored[e.from] {
				s.stored[e.from] = h
				changed = true
			}
		}
	}
	each := func(m uint64, f func(*Flow)) {
		for ; m != 0; m &= m - 1 {
			switch i := bits.TrailingZeros64(m); i {
			case globalBit:
				f(&outside[0])
			case keptBit:
				f(&outside[1])
			case overflowBit:
				for k := maxRoots; k < len(fl); k++ {
					f(&fl[k])
				}
			default:
				f(&fl[i])
			}
		}
	}
	for _, b := range fn.Blocks {
		ret, ok := b.Instrs[len(b.Instrs)-1].(*ssa.Return)
		if !ok {
			continue
		}
		for j, r := range ret.Results {
			if s.t.places.hasPointers(r.Type()) {
				each(s.holds[s.value(r)], func(f *Flow) { f.Results |= 1 << uint(min(j, 63)) })
			}
		}
	}
	each(s.holds[globalValue], func(f *Flow) { f.Global = true })
	each(s.holds[keptValue], func(f *Flow) { f.Kept = true })
	k := 0
	into := func(v ssa.Value) {
		if s.t.places.hasPointers(v.Type()) {
			each(s.stored[s.value(v)], func(f *Flow) { f.Roots |= flowBit(k) })
		}
		k++
	}
	for _, p := range fn.Params {
		into(p)
	}
	for _, f := range fn.FreeVars {
		into(f)
	}
	return fl, outside
}

// value returns the index of v.
func (s *flowSolver) value(v ssa.Value) int32 {
	if _, ok := v.(*ssa.Global); ok {
		return globalValue
	}
	i, ok := s.index[v]
	if !ok {
		i = int32(len(s.holds))
		s.index[v] = i
		s.holds = append(s.holds, 0)
		s.stored = append(s.stored, 0)
	}
	return i
}

func plainValue(v ssa.Value) bool {
	switch v.(type) {
	case *ssa.Const, *ssa.Function, *ssa.Builtin:
		return true
	}
	return false
}

// flow adds the edge from x to v.
func (s *flowSolver) flow(x, v ssa.Value) {
	if plainValue(x) || plainValue(v) || !s.t.places.hasPointers(x.Type()) || !s.t.places.hasPointers(v.Type()) {
		return
	}
	s.edge(s.value(x), s.value(v))
}

func (s *flowSolver) edge(x, v int32) {
	if x != v {
		s.edges = append(s.edges, flowEdge{x, v})
	}
}

// put adds a store of x into what a reaches.
func (s *flowSolver) put(x, a ssa.Value) {
	if plainValue(x) || plainValue(a) || !s.t.places.hasPointers(x.Type()) {
		return
	}
	from, to := s.value(x), s.value(a)
	s.edge(from, to)
	s.puts = append(s.puts, flowEdge{from, to})
}

// keep adds a flow of x into whatever keeps.
func (s *flowSolver) keep(x ssa.Value) {
	if !plainValue(x) && s.t.places.hasPointers(x.Type()) {
		s.edge(s.value(x), keptValue)
	}
}

func (s *flowSolver) instr(instr ssa.Instruction) {
	switch i := instr.(type) {
	case *ssa.Store:
		s.put(i.Val, i.Addr)
	case *ssa.MapUpdate:
		s.put(i.Key, i.Map)
		s.put(i.Value, i.Map)
	case *ssa.Send:
		s.put(i.X, i.Chan)
		s.keep(i.X)
	case *ssa.Select:
		for _, st := range i.States {
			if st.Send != nil {
				s.put(st.Send, st.Chan)
				s.keep(st.Send)
			} else {
				s.flow(st.Chan, i)
			}
		}
	case *ssa.Panic:
		s.keep(i.X)
	case *ssa.Call:
		s.builtin(i.Common(), i)
	case *ssa.Defer, *ssa.Go:
		s.builtin(i.(ssa.CallInstruction).Common(), nil)
	case *ssa.UnOp:
		if i.Op == token.MUL || i.Op == token.ARROW {
			s.flow(i.X, i)
		}
	case *ssa.MakeClosure:
		for _, b := range i.Bindings {
			s.flow(b, i)
		}
	case *ssa.Phi:
		for _, e := range i.Edges {
			s.flow(e, i)
		}
	case *ssa.ChangeInterface:
		s.flow(i.X, i)
	case *ssa.ChangeType:
		s.flow(i.X, i)
	case *ssa.Convert:
		s.flow(i.X, i)
	case *ssa.Extract:
		s.flow(i.Tuple, i)
	case *ssa.Field:
		s.flow(i.X, i)
	case *ssa.FieldAddr:
		s.flow(i.X, i)
	case *ssa.Index:
		s.flow(i.X, i)
	case *ssa.IndexAddr:
		s.flow(i.X, i)
	case *ssa.Lookup:
		s.flow(i.X, i)
	case *ssa.MakeInterface:
		s.flow(i.X, i)
	case *ssa.Next:
		s.flow(i.Iter, i)
	case *ssa.Range:
		s.flow(i.X, i)
	case *ssa.Slice:
		s.flow(i.X, i)
	case *ssa.SliceToArrayPointer:
		s.flow(i.X, i)
	case *ssa.TypeAssert:
		s.flow(i.X, i)
	case *ssa.Alloc, *ssa.BinOp, *ssa.DebugRef, *ssa.If, *ssa.Jump, *ssa.MakeChan, *ssa.MakeMap,
		*ssa.MakeSlice, *ssa.Return, *ssa.RunDefers:
	default:
		panic(fmt.Sprintf("effects: %s: unknown instruction %T", s.n.fn, instr))
	}
}

func (s *flowSolver) builtin(c *ssa.CallCommon, v ssa.Value) {
	b := c.Value.(*ssa.Builtin)
	switch b.Name() {
	case "append":
		if len(c.Args) > 1 {
			s.put(c.Args[1], c.Args[0])
		}
		if v != nil {
			s.flow(c.Args[0], v)
			if len(c.Args) > 1 {
				s.flow(c.Args[1], v)
			}
		}
	case "copy":
		s.put(c.Args[1], c.Args[0])
	case "panic":
		s.keep(c.Args[0])
	case "ssa:wrapnilchk", "Add", "Slice", "SliceData", "StringData", "String", "min", "max":
		if v != nil {
			s.flow(c.Args[0], v)
		}
	case "recover":
		if v != nil {
			s.edge(keptValue, s.value(v))
		}
	}
}

// call adds the flows of a call.
func (s *flowSolver) call(st *site) {
	c := st.instr.Common()
	if _, ok := st.instr.(*ssa.Go); ok {
		for _, a := range st.args {
			s.keep(a)
		}
		if !c.IsInvoke() {
			s.keep(c.Value)
		}
	}
	callee := s.t.nodes[st.target]
	res := st.instr.Value()
	// root i of the callee in terms of this body; nil: nothing here.
	params := len(st.args)
	if callee.fn == nil {
		params = callee.roots
	} else {
		params = numParams(callee.fn)
	}
	value := func(i int) ssa.Value {
		switch {
		case i < len(st.args):
			return st.args[i]
		case i < params:
			return nil
		case c.IsInvoke():
			return st.args[0]
		case st.bound != nil && i-params < len(st.bound):
			return st.bound[i-params]
		}
		return c.Value
	}
	// index is value i of this body, -1 if it has no memory.
	index := func(i int) int32 {
		x := value(i)
		if x == nil || plainValue(x) || !s.t.places.hasPointers(x.Type()) {
			return -1
		}
		return s.value(x)
	}
	result := int32(-1)
	single := false
	if res != nil && s.t.places.hasPointers(res.Type()) {
		result = s.value(res)
		single = c.Signature().Results().Len() == 1
	}
	apply := func(x int32, f Flow) {
		if x < 0 || f == (Flow{}) {
			return
		}
		if result >= 0 && f.Results != 0 && (!single || f.ToResult(0)) {
			s.edge(x, result)
		}
		if f.Global {
			s.edge(x, globalValue)
		}
		if f.Kept {
			s.edge(x, keptValue)
		}
		put := func(k int) {
			if a := index(k); a >= 0 {
				s.edge(x, a)
				s.puts = append(s.puts, flowEdge{x, a})
			}
		}
		for m := f.Roots; m != 0; m &= m - 1 {
			switch k := bits.TrailingZeros64(m); {
			case k == overflowBit:
				for k := maxRoots; k < len(callee.sum.flows); k++ {
					put(k)
				}
			case k < len(callee.sum.flows):
				put(k)
			}
		}
	}
	for i, f := range callee.sum.flows {
		if f != (Flow{}) {
			apply(index(i), f)
		}
	}
	apply(globalValue, callee.sum.outside[0])
	apply(keptValue, callee.sum.outside[1])
}

// callback adds the flows of a function that code without body may call with
// anything that it was handed.
func (s *flowSolver) callback(st *site) {
	callee := s.t.nodes[st.target]
	own := len(callee.fn.Params) // roots from here on belong to the value handed
	first := 0
	if callee.fn.Signature.Recv() != nil {
		first = 1 // so does the receiver
	}
	var fromOwn, fromArgs Flow
	for i, f := range callee.sum.flows {
		if i < first || i >= own {
			fromOwn = fromOwn.union(f)
		} else {
			fromArgs = fromArgs.union(f)
		}
	}
	if fromOwn.Roots != 0 && len(st.args) > 0 {
		s.put(st.handed, st.handed) // one captured variable into another
	}
	toOwn := false
	for k := range callee.sum.flows {
		toOwn = toOwn || (k < first || k >= own) && fromArgs.ToRoot(k)
	}
	apply := func(x ssa.Value, f Flow) {
		if plainValue(x) || !s.t.places.hasPointers(x.Type()) {
			return
		}
		if f.Global {
			s.edge(s.value(x), globalValue)
		}
		if f.Kept {
			s.edge(s.value(x), keptValue)
		}
	}
	apply(st.handed, fromOwn)
	if !plainValue(st.handed) && s.t.places.hasPointers(st.handed.Type()) {
		for i, from := range []int32{globalValue, keptValue} {
			if f := callee.sum.outside[i]; f.Roots != 0 {
				to := s.value(st.handed)
				s.edge(from, to)
				s.puts = append(s.puts, flowEdge{from, to})
			}
		}
	}
	for _, a := range st.args {
		if a == st.handed {
			continue
		}
		apply(a, fromArgs)
		if toOwn {
			s.put(a, st.handed)
		}
		// The receiver or a captured variable may go into an argument.
		if fromOwn.Roots != 0 {
			s.put(st.handed, a)
		}
	}
}
