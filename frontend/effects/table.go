package effects

// This file is the entry function, its phases and the queries.

import (
	"fmt"
	"go/constant"
	"go/types"
	"math/bits"
	"slices"
	"sync"

	"golang.org/x/tools/go/ssa"
)

// Options are the choices of Compute. The zero value knows no dynamic callee:
// every dynamic call may then do anything.
type Options struct {
	// Callees resolves dynamic and interface calls; see TypeResolver. nil: every
	// such call is of unknown code.
	Callees Resolver
}

// Table holds the summaries of a program. It is safe for queries from several
// goroutines.
type Table struct {
	prog   *ssa.Program
	opts   Options
	places *places
	sets   *sets
	bodies map[*types.Package]bool // packages with loaded bodies
	blind  bool                    // some package with functions has none

	nodes     []*node // by nodeID
	byFn      map[*ssa.Function]nodeID
	byGroup   map[groupKey]nodeID
	groupKeep [][]*ssa.Function // keeps the slices that are group keys alive
	sccs      [][]nodeID        // callees first

	globals map[*ssa.Global]*globalUse
	reaches map[reachKey]reach
	scan    scanner
	now     int64 // steps of fixpoints
	flow    flowSolver

	mu     sync.Mutex
	late   map[*ssa.Function]*Summary // functions that were asked for but not given
	siteOf map[ssa.CallInstruction]*Summary
}

// Exit is a set of ways in which a call may go on. All are "may" but Partial.
type Exit uint16

const (
	Returns     Exit = 1 << iota // a normal return
	Panics                       // an explicit panic leaves the function
	Goexits                      // runtime.Goexit runs
	ExitsAll                     // the process ends: os.Exit, log.Fatal
	Blocks                       // a select{} or a loop without way out is reached
	Spawns                       // a goroutine is started
	CallsBlind                   // a call of a function without body that no model describes is reached
	CallsOpaque                  // a dynamic call is reached whose candidates are not all known
)

var exitNames = [...]string{"returns", "panics", "goexits", "exits", "blocks", "spawns", "blind", "opaque"}

func (e Exit) String() string {
	if e == 0 {
		return "none"
	}
	out := ""
	for i, n := range exitNames {
		if e>>uint(i)&1 != 0 {
			if out != "" {
				out += "|"
			}
			out += n
		}
	}
	return out
}

// Summary says what a call of one function may do. Roots are the parameters
// (receiver first), then the free variables.
type Summary struct {
	t       *Table
	params  int // parameters; roots from here on are free variables
	writes  *set
	rel     []*set // by root
	exits   Exit
	results []Result
	flows   []Flow  // by root
	outside [2]Flow // of what package variables reach, and of what is kept
	pure    bool
	reads   *set // pure only
}

// Compute summarises fns and all functions they may call. Preconditions: the
// program is built; fns holds every function with a body that may run.
//
// Phases: scan all bodies; order the call graph by strongly connected
// components; for each component, callees first: overwrites, exits, purity,
// results, flows.
func Compute(prog *ssa.Program, fns []*ssa.Function, opts Options) *Table {
	t := &Table{
		prog:    prog,
		opts:    opts,
		places:  newPlaces(),
		sets:    newSets(),
		bodies:  map[*types.Package]bool{},
		byFn:    make(map[*ssa.Function]nodeID, len(fns)),
		byGroup: map[groupKey]nodeID{},
		globals: map[*ssa.Global]*globalUse{},
		reaches: map[reachKey]reach{},
		late:    map[*ssa.Function]*Summary{},
		siteOf:  map[ssa.CallInstruction]*Summary{},
	}
	t.scan = scanner{t: t, origin: map[ssa.Value]mask{}, params: map[ssa.Value]int{}, visited: map[ssa.Value]bool{}}
	t.flow = flowSolver{t: t, index: map[ssa.Value]int32{}}
	for _, fn := range fns {
		if fn.Pkg != nil && fn.Blocks != nil {
			t.bodies[fn.Pkg.Pkg] = true
		}
		t.nodeOf(fn)
	}
	for _, p := range prog.AllPackages() {
		for _, m := range p.Members {
			if fn, ok := m.(*ssa.Function); ok && fn.Object() != nil && !t.bodies[p.Pkg] {
				t.blind = true
			}
		}
	}
	t.scanAll()
	t.sccs = t.sortComponents()
	for _, c := range t.sccs {
		t.solve(c)
	}
	t.settleGlobals()
	return t
}

// scanAll scans every node; scanning finds more nodes (wrappers that nobody
// listed, callees out of fns).
func (t *Table) scanAll() {
	for id := 0; id < len(t.nodes); id++ {
		n := t.nodes[id]
		if n.fn == nil {
			continue
		}
		n.sum = Summary{t: t, params: numParams(n.fn)}
		if n.bodyless() {
			t.blindWrites(n)
		} else {
			t.scanBody(n)
		}
	}
	t.addInitDeps()
	t.addYieldDeps()
}

// stage solves one kind of fact of a node from the facts of its callees and
// says whether the node's summary changed. Run again on the finished table, it
// must not change anything.
type stage struct {
	name string
	step func(t *Table, n *node) bool
}

// stages in order: purity needs overwrites and exits; results need exits (which
// returns are reached) and overwrites (does an access path still hold at the
// end); flows need only flows.
var stages = []stage{
	{"exits", (*Table).stepExits},
	{"pure", (*Table).stepPure},
	{"results", (*Table).stepResults},
	{"flows", (*Table).stepFlows},
}

func (t *Table) solve(c []nodeID) {
	t.solveWrites(c)
	for _, n := range c {
		t.begin(t.nodes[n])
	}
	for _, st := range stages {
		if len(c) == 1 && !t.selfCalls(c[0]) {
			st.step(t, t.nodes[c[0]])
			continue
		}
		for _, id := range c {
			t.nodes[id].evalAt, t.nodes[id].changedAt = -1, -1
		}
		for again := true; again; {
			again = false
			for _, id := range c {
				n := t.nodes[id]
				if !t.stale(n) {
					continue
				}
				t.now++
				n.evalAt = t.now
				if st.step(t, n) {
					n.changedAt = t.now
					again = true
				}
			}
		}
	}
}

// stale says whether a callee of n in the same component (or n itself) has
// changed since n was solved.
func (t *Table) stale(n *node) bool {
	if n.evalAt < 0 {
		return true
	}
	for i := 0; ; i++ {
		id, ok := n.edge(i)
		if !ok {
			return n.changedAt >= n.evalAt
		}
		if id != noNode && t.nodes[id].scc == n.scc && t.nodes[id].changedAt >= n.evalAt {
			return true
		}
	}
}

// addYieldDeps orders the bodies of loops over functions before the functions
// that hold the loops: calls that they defer belong to those.
func (t *Table) addYieldDeps() {
	for _, n := range t.nodes {
		if n.fn == nil {
			continue
		}
		for _, anon := range n.fn.AnonFuncs {
			if id, ok := t.byFn[anon]; ok && isYield(anon) {
				n.deps = append(n.deps, id)
			}
		}
	}
}

func (t *Table) selfCalls(id nodeID) bool {
	n := t.nodes[id]
	for i := 0; ; i++ {
		m, ok := n.edge(i)
		if !ok {
			return false
		}
		if m == id {
			return true
		}
	}
}

// begin sets the optimistic start values of a fixpoint.
func (t *Table) begin(n *node) {
	nr := 0
	n.sum.t = t
	if n.fn == nil {
		n.sum.params = n.roots
	}
	if n.fn != nil {
		nr = n.fn.Signature.Results().Len()
	} else {
		for _, m := range n.members {
			nr = max(nr, t.nodes[m].fn.Signature.Results().Len())
		}
	}
	n.sum.results = make([]Result, nr)
	n.sum.flows = make([]Flow, n.roots+1)
	for i := range n.sum.results {
		n.sum.results[i] = bottomResult
	}
	n.sum.pure = true
}

// solveWrites computes what the functions of a component overwrite. Overwrites
// of unknown objects pass through calls unchanged, so a component has one set;
// only the sets relative to roots need a fixpoint.
func (t *Table) solveWrites(c []nodeID) {
	var any *set
	scc := t.nodes[c[0]].scc
	for _, id := range c {
		n := t.nodes[id]
		n.sum.t = t
		n.sum.rel = make([]*set, n.roots)
		any = t.sets.union(any, n.local)
		copy(n.sum.rel, n.localRel)
		if n.partial {
			any = t.sets.union(any, t.sets.of(unknownPlace))
		}
		for i := range n.sites {
			s := &n.sites[i]
			if t.usesTarget(s) && t.nodes[s.target].scc != scc {
				any = t.sets.union(any, t.nodes[s.target].sum.writes)
			}
			if s.ext != nil {
				any = t.sets.union(any, s.ext.deep)
			}
		}
		for _, m := range n.members {
			if t.nodes[m].scc != scc {
				any = t.sets.union(any, t.nodes[m].sum.writes)
			}
		}
	}
	for {
		changed := false
		for _, id := range c {
			n := t.nodes[id]
			// put adds a set of places of objects with the given roots.
			put := func(s *set, m mask) {
				if m&unknownRoot != 0 {
					any = t.sets.union(any, s)
				}
				for m &^= unknownRoot; m != 0; m &= m - 1 {
					j := bits.TrailingZeros64(uint64(m))
					if u := t.sets.union(n.sum.rel[j], s); u != n.sum.rel[j] {
						n.sum.rel[j] = u
						changed = true
					}
				}
			}
			for i := range n.sites {
				s := &n.sites[i]
				apply := func(rel []*set) {
					for k, r := range rel {
						if r == nil {
							continue
						}
						m := unknownRoot
						if k < len(s.origins) {
							m = s.origins[k]
						}
						put(r, m)
					}
				}
				if t.usesTarget(s) {
					apply(t.nodes[s.target].sum.rel)
				}
				if s.ext != nil {
					apply(s.ext.direct)
				}
			}
			for _, m := range n.members {
				mn := t.nodes[m]
				for k, r := range mn.sum.rel {
					if k < numParams(mn.fn) {
						put(r, rootMask(k))
					} else {
						put(r, unknownRoot)
					}
				}
			}
		}
		if !changed {
			break
		}
	}
	for _, id := range c {
		t.nodes[id].sum.writes = any
	}
}

// stepPure decides whether a call can be left out when its value is known: see
// Summary.PureGetter.
func (t *Table) stepPure(n *node) bool {
	if !n.sum.pure {
		// Reads of callees only matter while all are pure.
		return false
	}
	pure := !n.impure && !n.partial && !n.open && n.sum.exits == Returns && n.sum.writes == nil
	for _, r := range n.sum.rel {
		pure = pure && r == nil
	}
	if n.fn != nil && n.bodyless() {
		pure = n.model.pure
	}
	reads := n.reads
	add := func(id nodeID) {
		if id != noNode {
			pure = pure && t.nodes[id].sum.pure
			reads = t.sets.union(reads, t.nodes[id].sum.reads)
		}
	}
	for i := range n.sites {
		add(n.sites[i].target)
	}
	for _, m := range n.members {
		add(m)
	}
	if n.fn == nil && len(n.members) == 0 {
		pure = false
	}
	if !pure {
		n.sum.pure, n.sum.reads = false, nil
		return true
	}
	if reads != n.sum.reads {
		n.sum.reads = reads
		return true
	}
	return false
}

// Of returns the summary of fn. It is never nil: a function that Compute did
// not see gets what is known of functions without body.
func (t *Table) Of(fn *ssa.Function) *Summary {
	if id, ok := t.byFn[fn]; ok {
		return &t.nodes[id].sum
	}
	t.mu.Lock()
	defer t.mu.Unlock()
	s, ok := t.late[fn]
	if !ok {
		s = t.blindSummary(fn)
		t.late[fn] = s
	}
	return s
}

// blindSummary summarises a function that has no node as one without body.
func (t *Table) blindSummary(fn *ssa.Function) *Summary {
	n := &node{id: noNode, fn: fn, blind: true, model: modelOf(fn), roots: numRoots(fn)}
	n.sum.params = numParams(fn)
	t.places.mu.Lock()
	t.blindWrites(n)
	t.places.mu.Unlock()
	t.begin(n)
	n.sum.writes, n.sum.rel = n.local, n.localRel
	t.stepExits(n)
	t.stepPure(n)
	t.stepResults(n)
	t.stepFlows(n)
	return &n.sum
}

// OfCall returns what one call may do, with the arguments (the receiver of an
// interface call first) as roots. For a static callee with a body it is Of the
// callee; for a dynamic call the join over the candidates; for a callee without
// body the effect with the types of these arguments and with the function values
// and methods that the callee is handed and may call. Precondition: the call
// stands in a function that Compute scanned and is no builtin.
func (t *Table) OfCall(instr ssa.CallInstruction) *Summary {
	t.mu.Lock()
	s, ok := t.siteOf[instr]
	t.mu.Unlock()
	if ok {
		return s
	}
	s = t.ofCall(instr)
	t.mu.Lock()
	t.siteOf[instr] = s
	t.mu.Unlock()
	return s
}

func (t *Table) ofCall(instr ssa.CallInstruction) *Summary {
	id, ok := t.byFn[instr.Parent()]
	if !ok {
		panic(fmt.Sprintf("effects: call in %s, which was not scanned", instr.Parent()))
	}
	n := t.nodes[id]
	t.mu.Lock()
	defer t.mu.Unlock()
	s := n.siteOf(instr)
	if s == nil {
		panic(fmt.Sprintf("effects: %s: no call site %s", instr.Parent(), instr))
	}
	target := t.nodes[s.target]
	callee := &target.sum
	call, isCall := instr.(*ssa.Call)
	joins := isCall && target.model.joinsNil
	if s.ext == nil && !joins {
		return callee
	}
	sum := *callee
	if joins {
		// What is joined is known at the call only.
		ev := evaluator{t: t, n: n}
		r := unknownResult(call.Type())
		r.Nil = ev.evalJoin(call, r, call.Block(), 0).Nil
		sum.results = []Result{r}
	}
	if s.ext == nil {
		return &sum
	}
	if t.usesTarget(s) {
		sum.rel = slices.Clone(sum.rel)
		for len(sum.rel) < len(s.ext.direct) {
			sum.rel = append(sum.rel, nil)
		}
		for k, r := range s.ext.direct {
			sum.rel[k] = t.sets.union(sum.rel[k], r)
		}
		sum.writes = t.sets.union(sum.writes, s.ext.deep)
		return &sum
	}
	sum.rel = s.ext.direct
	sum.writes = s.ext.deep
	for i := range n.sites {
		cb := &n.sites[i]
		if cb.instr != instr || !cb.callback {
			continue
		}
		c := &t.nodes[cb.target].sum
		sum.writes = t.sets.union(sum.writes, c.writes)
		for _, r := range c.rel {
			sum.writes = t.sets.union(sum.writes, r)
		}
		sum.exits |= c.exits &^ Returns
		sum.pure = sum.pure && c.pure
	}
	return &sum
}

func (s *Summary) touches(p placeID) bool {
	if s.writes == nil && !s.anyRel() {
		return false
	}
	ov := s.t.places.overlap(p)
	if s.writes.intersects(ov) {
		return true
	}
	for _, r := range s.rel {
		if r.intersects(ov) {
			return true
		}
	}
	return false
}

func (s *Summary) anyRel() bool {
	for _, r := range s.rel {
		if r != nil {
			return true
		}
	}
	return false
}

// Writes says whether the function may overwrite any memory that was there
// before the call.
func (s *Summary) Writes() bool { return s.writes != nil || s.anyRel() }

// WritesUnknown says whether nothing is known about what is overwritten.
func (s *Summary) WritesUnknown() bool { return s.writes.has(unknownPlace) }

func (s *Summary) lock() func() {
	s.t.places.mu.Lock()
	return s.t.places.mu.Unlock
}

// MayOverwriteField says whether field v (any instance of it) may change in any
// object.
func (s *Summary) MayOverwriteField(v *types.Var) bool {
	defer s.lock()()
	return s.touches(s.t.places.fieldID(v))
}

// MayOverwriteFieldElsewhere is MayOverwriteField without the stores that are
// known to go into the object of a root: those OverwritesParamField answers.
func (s *Summary) MayOverwriteFieldElsewhere(v *types.Var) bool {
	defer s.lock()()
	return s.writes.intersects(s.t.places.overlap(s.t.places.fieldID(v)))
}

// OverwritesParamField says whether the function may store to field v of the
// very object that root i (a parameter, or parameters + k for free variable k)
// points into.
func (s *Summary) OverwritesParamField(i int, v *types.Var) bool {
	defer s.lock()()
	ov := s.t.places.overlap(s.t.places.fieldID(v))
	return s.writes.intersects(ov) || i < len(s.rel) && s.rel[i].intersects(ov)
}

// MayOverwriteParam says whether the function may store to the very object that
// root i points into.
func (s *Summary) MayOverwriteParam(i int) bool {
	return s.writes != nil || i < len(s.rel) && s.rel[i] != nil
}

// MayOverwriteGlobal says whether the package variable g may change.
func (s *Summary) MayOverwriteGlobal(g *ssa.Global) bool {
	defer s.lock()()
	return s.touches(s.t.places.globalID(g))
}

// MayOverwriteElem says whether an element of type elem of some array, slice or
// map may change.
func (s *Summary) MayOverwriteElem(elem types.Type) bool {
	defer s.lock()()
	return s.touches(s.t.places.elemID(elem))
}

// MayOverwriteCell says whether what some *typ points to may change: a captured
// variable or a pointer parameter's target of which nothing more is known.
func (s *Summary) MayOverwriteCell(typ types.Type) bool {
	defer s.lock()()
	return s.touches(s.t.places.cellID(typ))
}

// OverwritesFreeVar says whether the function may store to the variable that it
// captured as free variable k.
func (s *Summary) OverwritesFreeVar(k int, typ types.Type) bool {
	defer s.lock()()
	ov := s.t.places.overlap(s.t.places.cellID(typ))
	i := s.params + k
	return s.writes.intersects(ov) || i < len(s.rel) && s.rel[i].intersects(ov)
}

// Exits returns the ways in which a call may go on.
func (s *Summary) Exits() Exit { return s.exits }

// MayPanic says whether an explicit panic may leave the function.
func (s *Summary) MayPanic() bool { return s.exits&Panics != 0 }

// NeverReturns says that no call returns normally.
func (s *Summary) NeverReturns() bool { return s.exits&Returns == 0 }

// AlwaysPanics says that every call that ends at all ends in an explicit panic.
func (s *Summary) AlwaysPanics() bool {
	return s.exits&(Returns|Panics|Goexits|ExitsAll|Blocks) == Panics
}

// MayGoexit says whether runtime.Goexit may run.
func (s *Summary) MayGoexit() bool { return s.exits&Goexits != 0 }

// MayExit says whether the process may be ended.
func (s *Summary) MayExit() bool { return s.exits&ExitsAll != 0 }

// BlocksForever says whether a select{} or a loop without way out may be reached.
func (s *Summary) BlocksForever() bool { return s.exits&Blocks != 0 }

// Spawns says whether a goroutine may be started.
func (s *Summary) Spawns() bool { return s.exits&Spawns != 0 }

// PureGetter says that a call changes nothing, returns, and that its results
// depend only on the arguments and the memory that it reads: two calls with
// equal arguments and no store to a place it reads between them give equal
// results.
func (s *Summary) PureGetter() bool { return s.pure }

// ReadsOverwritten says whether a call summarised by other may change what this
// pure getter reads. It is true for functions that are no pure getters.
func (s *Summary) ReadsOverwritten(other *Summary) bool {
	if !s.pure {
		return true
	}
	defer s.lock()()
	for _, p := range s.reads.items() {
		if other.touches(p) {
			return true
		}
	}
	return false
}

// ReadsField says whether a pure getter may read field v; true for functions
// that are no pure getters.
func (s *Summary) ReadsField(v *types.Var) bool {
	if !s.pure {
		return true
	}
	defer s.lock()()
	return s.reads.has(s.t.places.fieldID(v))
}

// Result returns what is known about result j.
func (s *Summary) Result(j int) Result { return s.results[j] }

// NumResults is the number of results.
func (s *Summary) NumResults() int { return len(s.results) }

// Flow says where what root i reaches may go.
func (s *Summary) Flow(i int) Flow {
	if i >= len(s.flows) {
		return Flow{}
	}
	return s.flows[i]
}

// FlowOfGlobals says where what package variables reach may go; its Global bit
// means nothing.
func (s *Summary) FlowOfGlobals() Flow { return s.outside[0] }

// Const returns the constant that result j always is, or nil.
func (s *Summary) Const(j int) constant.Value { return s.results[j].Const }
