package effects

// This file builds the graph of who calls whom. A node is a function or a group
// of candidates of dynamic calls; groups keep the number of edges linear.

import (
	"go/types"

	"golang.org/x/tools/go/ssa"
)

// nodeID is a dense name of a node; noNode is none.
type nodeID int32

const noNode nodeID = -1

// mask is a set of roots of one function: bit i is root i, where the roots are
// the parameters (receiver first), then the free variables. Bit 63 is "unknown
// root"; roots from 59 on have no bit of their own and count as unknown. No bit
// at all means: an object that the function allocated itself.
type mask uint64

const (
	maxRoots         = 59
	unknownRoot mask = 1 << 63
)

func rootMask(i int) mask {
	if i >= maxRoots {
		return unknownRoot
	}
	return 1 << uint(i)
}

// site is one call, go or defer of a function, in argument terms: args holds
// the receiver of an interface call first.
type site struct {
	instr    ssa.CallInstruction
	target   nodeID      // noNode: a builtin
	callback bool        // the callee is handed to code without body, which may call it
	handed   ssa.Value   // callback: the function value or the value with the method
	args     []ssa.Value // callback: the arguments of the call that hands it on
	origins  []mask      // by argument, then by free variable if bound != nil
	bound    []ssa.Value // bindings of the closure called, if it is known
	ext      *extern     // callee without body
}

// node is a function or a group.
type node struct {
	id      nodeID
	fn      *ssa.Function // nil: a group
	members []nodeID      // group only
	partial bool          // group only: code out of sight may be called too, which may do anything
	open    bool          // group only: code without body may be called too, see isOpen
	sites   []site
	globals []*ssa.Global                 // package variables of types with nil that the body loads; only until the graph is built
	index   map[ssa.CallInstruction]int32 // sites by instruction, if there are many; made on demand
	deps    []nodeID                      // summaries that results need besides those of callees
	roots   int                           // parameters and free variables (group: most arguments)

	local    *set     // stores of the body itself to unknown objects
	localRel []*set   // stores of the body itself, by root
	reads    *set     // loads of the body itself
	recovers recovery // whether the body itself calls recover
	impure   bool     // the body itself does what a pure getter must not

	model model
	blind bool // taken as a function without body though it may have one

	scc       int32
	evalAt    int64 // when the current stage solved it last, in steps
	changedAt int64 // when the current stage changed it last
	sum       Summary
}

type groupKey struct {
	first   **ssa.Function
	n       int
	partial bool
	open    bool
}

// isBodyless says whether nothing is known about what fn does.
func isBodyless(fn *ssa.Function) bool { return fn.Blocks == nil || isGenericOriginal(fn) }

// usesTarget says whether the target's summary holds for the call: a callee
// without body is described by ext, candidates of a dynamic call count besides.
func (t *Table) usesTarget(s *site) bool {
	return s.target != noNode && (s.ext == nil || t.nodes[s.target].fn == nil)
}

// isOpen says whether a dynamic call may reach code without body that no loaded
// body mentions: the interface is declared where no bodies are loaded (its
// implementations may come from there), or a function value of a type that code
// without body can make.
func (t *Table) isOpen(c *ssa.CallCommon) bool {
	if !t.blind {
		return false
	}
	if c.IsInvoke() {
		return c.Method.Pkg() == nil || !t.bodies[c.Method.Pkg()]
	}
	n, ok := types.Unalias(c.Value.Type()).(*types.Named)
	return !ok || n.Obj().Pkg() == nil || !t.bodies[n.Obj().Pkg()]
}

func (n *node) bodyless() bool { return n.blind || isBodyless(n.fn) }

// nodeOf returns the node of fn, made if need be.
func (t *Table) nodeOf(fn *ssa.Function) nodeID {
	if id, ok := t.byFn[fn]; ok {
		return id
	}
	n := &node{id: nodeID(len(t.nodes)), fn: fn, roots: numRoots(fn), model: modelOf(fn), scc: -1}
	t.nodes = append(t.nodes, n)
	t.byFn[fn] = n.id
	return n.id
}

func numRoots(fn *ssa.Function) int {
	n := len(fn.Params)
	if fn.Blocks == nil { // such functions may have no Params
		n = fn.Signature.Params().Len()
		if fn.Signature.Recv() != nil {
			n++
		}
	}
	return n + len(fn.FreeVars)
}

// numParams is numRoots without the free variables.
func numParams(fn *ssa.Function) int { return numRoots(fn) - len(fn.FreeVars) }

func (t *Table) groupOf(fns []*ssa.Function, complete, open bool) nodeID {
	key := groupKey{n: len(fns), partial: !complete, open: open}
	if len(fns) > 0 {
		key.first = &fns[0]
	}
	if id, ok := t.byGroup[key]; ok {
		return id
	}
	n := &node{id: nodeID(len(t.nodes)), partial: !complete, open: open, scc: -1}
	t.nodes = append(t.nodes, n)
	t.byGroup[key] = n.id
	t.groupKeep = append(t.groupKeep, fns)
	for _, fn := range fns {
		m := t.nodeOf(fn)
		n.members = append(n.members, m)
		n.roots = max(n.roots, numParams(fn))
	}
	return n.id
}

// callArgs returns the arguments of a call, the receiver of an interface call
// first.
func callArgs(c *ssa.CallCommon) []ssa.Value {
	if !c.IsInvoke() {
		return c.Args
	}
	return append([]ssa.Value{c.Value}, c.Args...)
}

// calleeOf finds the one function that v denotes, and the bindings if it is a
// closure made in this function. It sees through cells that are stored to once.
func calleeOf(v ssa.Value) (fn *ssa.Function, bound []ssa.Value) {
	for range 8 {
		switch x := v.(type) {
		case *ssa.Function:
			return x, nil
		case *ssa.MakeClosure:
			return x.Fn.(*ssa.Function), x.Bindings
		case *ssa.ChangeType:
			v = x.X
		case *ssa.UnOp:
			alloc, outer := cellOf(x)
			if alloc == nil {
				return nil, nil
			}
			vals, ok := cellStores(alloc)
			if !ok || len(vals) != 1 {
				return nil, nil
			}
			if outer { // bindings belong to another frame
				fn, _ := calleeOf(vals[0])
				return fn, nil
			}
			v = vals[0]
		default:
			return nil, nil
		}
	}
	return nil, nil
}

// cellOf returns the variable that a load reads, if it is a local variable of
// the function or (outer) of an enclosing one.
func cellOf(load *ssa.UnOp) (cell *ssa.Alloc, outer bool) {
	addr := load.X
	for {
		switch x := addr.(type) {
		case *ssa.Alloc:
			return x, outer
		case *ssa.FreeVar:
			outer = true
			addr = bindingOf(x)
			if addr == nil {
				return nil, false
			}
		default:
			return nil, false
		}
	}
}

// bindingOf returns what the only MakeClosure of the function binds to fv.
func bindingOf(fv *ssa.FreeVar) ssa.Value {
	fn := fv.Parent()
	if fn.Parent() == nil {
		return nil
	}
	k := -1
	for i, f := range fn.FreeVars {
		if f == fv {
			k = i
		}
	}
	var found ssa.Value
	for _, ref := range *fn.Referrers() {
		mc, ok := ref.(*ssa.MakeClosure)
		if !ok || k < 0 {
			continue
		}
		if found != nil {
			return nil
		}
		found = mc.Bindings[k]
	}
	return found
}

// cellStores returns all values ever stored to a local variable whose address
// is only loaded from, stored to, and captured by closures that do the same.
// ok is false if the address goes anywhere else.
func cellStores(cell *ssa.Alloc) (vals []ssa.Value, ok bool) {
	return addrStores(cell, nil, 0)
}

func addrStores(addr ssa.Value, vals []ssa.Value, depth int) ([]ssa.Value, bool) {
	if depth > 4 || addr.Referrers() == nil {
		return vals, false
	}
	for _, ref := range *addr.Referrers() {
		switch r := ref.(type) {
		case *ssa.DebugRef:
		case *ssa.UnOp:
		case *ssa.Store:
			if r.Addr != addr || r.Val == addr {
				return vals, false
			}
			vals = append(vals, r.Val)
		case *ssa.MakeClosure:
			fn := r.Fn.(*ssa.Function)
			for k, b := range r.Bindings {
				if b == addr {
					var ok bool
					if vals, ok = addrStores(fn.FreeVars[k], vals, depth+1); !ok {
						return vals, false
					}
				}
			}
		default:
			return vals, false
		}
	}
	return vals, true
}

// sortComponents numbers the strongly connected components of the graph, callees
// first, and returns them. Tarjan, Depth-first search and linear graph
// algorithms, 1972, without recursion.
func (t *Table) sortComponents() [][]nodeID {
	n := len(t.nodes)
	index := make([]int32, n)
	low := make([]int32, n)
	onStack := make([]bool, n)
	var stack []nodeID
	var sccs [][]nodeID
	next := int32(1)
	type frame struct {
		v    nodeID
		edge int
	}
	var work []frame
	for root := range t.nodes {
		if index[root] != 0 {
			continue
		}
		work = append(work[:0], frame{v: nodeID(root)})
		for len(work) > 0 {
			f := &work[len(work)-1]
			v := f.v
			if f.edge == 0 && index[v] == 0 {
				index[v], low[v] = next, next
				next++
				stack = append(stack, v)
				onStack[v] = true
			}
			w, ok := t.nodes[v].edge(f.edge)
			if ok {
				f.edge++
				if w == noNode {
					continue
				}
				if index[w] == 0 {
					work = append(work, frame{v: w})
				} else if onStack[w] {
					low[v] = min(low[v], index[w])
				}
				continue
			}
			work = work[:len(work)-1]
			if len(work) > 0 {
				u := work[len(work)-1].v
				low[u] = min(low[u], low[v])
			}
			if low[v] == index[v] {
				var c []nodeID
				for {
					w := stack[len(stack)-1]
					stack = stack[:len(stack)-1]
					onStack[w] = false
					t.nodes[w].scc = int32(len(sccs))
					c = append(c, w)
					if w == v {
						break
					}
				}
				sccs = append(sccs, c)
			}
		}
	}
	return sccs
}

// edge returns the i-th successor of n.
func (n *node) edge(i int) (nodeID, bool) {
	if i < len(n.sites) {
		return n.sites[i].target, true
	}
	i -= len(n.sites)
	if i < len(n.members) {
		return n.members[i], true
	}
	i -= len(n.members)
	if i < len(n.deps) {
		return n.deps[i], true
	}
	return noNode, false
}

// fullName is the types.Func name of what fn is (an instance, wrapper or bound
// method of), or "".
func fullName(fn *ssa.Function) string {
	if obj, ok := fn.Object().(*types.Func); ok && obj != nil {
		return obj.Origin().FullName()
	}
	return ""
}

// siteOf returns the site of a call, nil for builtins.
func (n *node) siteOf(c ssa.CallInstruction) *site {
	if len(n.sites) <= 16 {
		for i := range n.sites {
			if s := &n.sites[i]; s.instr == c && !s.callback {
				return s
			}
		}
		return nil
	}
	if n.index == nil {
		n.index = make(map[ssa.CallInstruction]int32, len(n.sites))
		for i := range n.sites {
			if !n.sites[i].callback {
				n.index[n.sites[i].instr] = int32(i)
			}
		}
	}
	i, ok := n.index[c]
	if !ok {
		return nil
	}
	return &n.sites[i]
}
