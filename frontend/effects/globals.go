package effects

// This file says which package variables keep the value that their package's
// initialisation gives them.

import (
	"go/constant"
	"strings"

	"go/types"

	"golang.org/x/tools/go/ssa"
)

// globalUse is how loaded bodies use a package variable.
type globalUse struct {
	inits []*ssa.Store // stores of variable initialisers
	late  bool         // a func init stores to it
	leaks bool         // stored to elsewhere, or its address is taken

	final, nonNil bool // nonNil is the answer once final is set
}

func (t *Table) global(g *ssa.Global) *globalUse {
	u := t.globals[g]
	if u == nil {
		u = &globalUse{}
		t.globals[g] = u
	}
	return u
}

// InitOnlyGlobal says that only the initialisation of g's own package stores to
// g and that its address is not taken, as far as loaded bodies go. Assumption:
// code out of sight does not assign to variables of other packages.
func (t *Table) InitOnlyGlobal(g *ssa.Global) bool {
	u := t.globals[g]
	return u == nil || !u.leaks
}

// GlobalNonNil says that g is initialised with a non-nil value and keeps it. A
// variable of type error in a package without loaded bodies whose name says that
// it is a sentinel (Err..., EOF) counts as one: an assumption.
func (t *Table) GlobalNonNil(g *ssa.Global) bool { return t.globalNonNil(g, 0) }

// GlobalConst returns the constant that g is initialised with and keeps, or nil.
func (t *Table) GlobalConst(g *ssa.Global) constant.Value { return t.globalConst(g) }

func (t *Table) globalNonNil(g *ssa.Global, depth int) bool {
	if depth > maxEvalDepth || !t.InitOnlyGlobal(g) {
		return false
	}
	u := t.globals[g]
	if g.Pkg == nil || !t.bodies[g.Pkg.Pkg] {
		return isSentinel(g)
	}
	if u == nil || u.late || len(u.inits) != 1 {
		return false
	}
	if u.final {
		return u.nonNil
	}
	st := u.inits[0]
	ev := evaluator{t: t, n: t.nodes[t.byFn[st.Parent()]]}
	r := ev.eval(st.Val, nil, depth+1)
	// No value yet: the fixpoint is optimistic.
	return r.bottom || r.Nil == NonNil
}

func (t *Table) globalConst(g *ssa.Global) constant.Value {
	if !t.InitOnlyGlobal(g) {
		return nil
	}
	u := t.globals[g]
	if u == nil || u.late || len(u.inits) != 1 {
		return nil
	}
	if c, ok := u.inits[0].Val.(*ssa.Const); ok {
		return c.Value
	}
	return nil
}

func isSentinel(g *ssa.Global) bool {
	if !types.Identical(deref(g.Type()), types.Universe.Lookup("error").Type()) {
		return false
	}
	n := g.Name()
	return strings.HasPrefix(n, "Err") || strings.HasPrefix(n, "err") || n == "EOF"
}

// addInitDeps orders the functions that initialisers call before those that
// read the variables, so that results never depend on a component that is solved
// later.
func (t *Table) addInitDeps() {
	for _, n := range t.nodes {
		for _, g := range n.globals {
			if d := t.initCallee(g, 0); d != noNode && d != n.id {
				n.deps = append(n.deps, d)
			}
		}
		n.globals = nil
	}
}

// initCallee returns the function whose result g is initialised with.
func (t *Table) initCallee(g *ssa.Global, depth int) nodeID {
	u := t.globals[g]
	if u == nil || u.leaks || u.late || len(u.inits) != 1 || depth > 4 {
		return noNode
	}
	v := u.inits[0].Val
	for {
		switch x := v.(type) {
		case *ssa.ChangeType:
			v = x.X
		case *ssa.ChangeInterface:
			v = x.X
		case *ssa.Extract:
			v = x.Tuple
		case *ssa.UnOp:
			if h, ok := x.X.(*ssa.Global); ok {
				return t.initCallee(h, depth+1)
			}
			return noNode
		case *ssa.Call:
			if s := t.nodes[t.byFn[x.Parent()]].siteOf(x); s != nil {
				return s.target
			}
			return noNode
		default:
			return noNode
		}
	}
}

// settleGlobals makes the answers about package variables final.
func (t *Table) settleGlobals() {
	for g, u := range t.globals {
		u.nonNil = t.globalNonNil(g, 0)
	}
	for _, u := range t.globals {
		u.final = true
	}
}
