package frontend

import (
	"go/types"

	"golang.org/x/tools/go/ssa"

	"pathtally/properties"
)

// closureOf is the closure that v is, seen through conversions; nil if its
// making is not in sight.
func closureOf(v ssa.Value) *ssa.MakeClosure {
	for {
		switch x := v.(type) {
		case *ssa.MakeClosure:
			return x
		case *ssa.ChangeType:
			v = x.X
		case *ssa.MakeInterface:
			v = x.X
		case *ssa.ChangeInterface:
			v = x.X
		default:
			return nil
		}
	}
}

// carryOver adds to ns what the name e of the instance is called after val was
// copied to `to`. A closure has no names of its own: what it captures is named
// by the captured values, and so is what the closures among them capture.
func (m *Model) carryOver(ns *nset, e Expr, val ssa.Value, to Expr) {
	ns.add(m.x.rename(e, m.x.name(val), to))
	if mc := closureOf(val); mc != nil {
		for k, b := range mc.Bindings {
			m.carryOver(ns, e, b, m.x.captOf(to, k, mc.Fn.(*ssa.Function)))
		}
	}
}

// captOf names captured variable i of the closure value x of fn. A name of
// the instance thereby says which function it is captured by.
func (t *exprs) captOf(x Expr, i int, fn *ssa.Function) Expr {
	return t.sel(kCap, x, int32(i), 0, fn)
}

// closureFn is the function of the closure value x, as far as a name of the
// instance tells: nil if it captures nothing that is known.
func (m *Model) closureFn(ns nset, x Expr) *ssa.Function {
	for _, e := range ns.names {
		for m.x.isSel(e) {
			if n := m.x.nodes[e]; n.kind == kCap && n.x == x {
				fn, _ := n.ref.(*ssa.Function)
				return fn
			}
			e = m.x.nodes[e].x
		}
	}
	return nil
}

// armed tells whether the name e of the instance says that a function value
// captured it which does something to it when it is called. With leaves, only a
// value that the caller did not hand in itself counts.
func (m *Model) armed(e Expr, leaves bool) bool {
	for x := e; m.x.isSel(x); x = m.x.nodes[x].x {
		n := m.x.nodes[x]
		fn, ok := n.ref.(*ssa.Function)
		if n.kind != kCap || !ok {
			continue
		}
		if k := m.x.rootKind(n.x); leaves && (k == kParam || k == kFree) && m.x.loads[n.x] == 0 {
			continue
		}
		if isBound(fn) && m.isEventFunc(fn) {
			if x == e {
				return true
			}
			continue
		}
		if g, ok := m.fnOf[fn]; ok && g.cone {
			in := m.x.rename(e, x, m.x.free(int(n.n)))
			if m.concerns(g, in) && !m.evenBelow(g, in) {
				return true
			}
		}
	}
	return false
}

// renamed tells whether e, at an exit of the unit that is being judged, is a
// name by which the caller knows an instance that stays under another one: its
// address was stored, or is a result.
func (m *Model) renamed(e Expr) bool {
	if m.rule.Moves || m.eventBirths || m.units.now == nil || m.units.now.u == e {
		return false
	}
	switch m.x.nodes[e].kind {
	case kResult:
		return true
	case kLoad:
		k := m.x.rootKind(e)
		return k == kParam || k == kFree || k == kGlobal || k == kResult
	}
	return false
}

// reaches tells whether e is a name under val, or under what the closure val captures.
func (m *Model) reaches(e Expr, val ssa.Value) bool {
	if m.x.within(m.x.name(val), e) {
		return true
	}
	if mc := closureOf(val); mc != nil {
		for _, b := range mc.Bindings {
			if m.reaches(e, b) {
				return true
			}
		}
	}
	return false
}

// foldable tells whether what a spawned body does to its subject u completes
// what its spawner does: for every claim it only takes, or only gives back. A
// body that does both is a matter of its own.
func (m *Model) foldable(fi *fnInfo, u Expr) bool {
	touched := m.countsOn(fi, u, map[*fnInfo]bool{})
	for i := range m.rule.Claims {
		for _, q := range m.rule.Claims[i].Questions {
			pos, neg := false, false
			for k, w := range q.Weights {
				if k < 64 && touched>>uint(k)&1 != 0 {
					pos, neg = pos || w > 0, neg || w < 0
				}
			}
			if pos && neg {
				return false
			}
		}
	}
	return true
}

// countsOn is the set of counts (bit k is count k) that running fi may add to
// for its subject u.
func (m *Model) countsOn(fi *fnInfo, u Expr, seen map[*fnInfo]bool) uint64 {
	if seen[fi] {
		return 0
	}
	seen[fi] = true
	var out uint64
	for _, b := range fi.fn.Blocks {
		for _, instr := range b.Instrs {
			site, ok := instr.(ssa.CallInstruction)
			if !ok {
				continue
			}
			if _, ok := site.Common().Value.(*ssa.Builtin); ok {
				continue
			}
			for _, mt := range m.matchEvents(m.siteShape(site)) {
				if mt.ev.Count < 0 || mt.ev.Count >= 64 || mt.subject == 0 {
					continue
				}
				if v := m.subjectValue(&mt, site); v != nil {
					for _, o := range m.origins(fi, v) {
						if o.s == u {
							out |= 1 << uint(mt.ev.Count)
						}
					}
				}
			}
			c := caller{fn: fi.fn, site: site}
			if mc := closureOf(site.Common().Value); mc != nil {
				c.made = mc
			}
			for _, g := range m.sh.targets[site] {
				gi, ok := m.fnOf[g]
				if !ok || !gi.cone || m.isEventFunc(g) {
					continue
				}
				for _, cu := range gi.subjList {
					for _, o := range m.translate(fi, cu, c, g) {
						if o.s == u && o.b == nil {
							out |= m.countsOn(gi, cu, seen)
						}
					}
				}
			}
		}
	}
	return out
}

// handedOn tells whether a goroutine that was started with the instance under
// the names `in` has given it to somebody else when it ends with `out`. Such an
// end settles nothing and owes nothing: it is no run that the spawner counts.
func (m *Model) handedOn(out, in nset) bool {
	if out.outside && !in.outside {
		return true
	}
	for _, e := range out.names {
		switch m.x.rootKind(e) {
		case kParam, kFree, kGlobal:
			if m.x.loads[e] > 0 && !in.has(e) && !in.has(m.x.root[e]) {
				return true
			}
		}
	}
	return false
}

// rename is rebase for names of the instance: one that would be too deep to
// track becomes what holds it, instead of nothing.
func (t *exprs) rename(e, from, to Expr) Expr {
	if e == from {
		return to
	}
	if e == 0 || to == 0 {
		return 0
	}
	n := t.nodes[e]
	if n.kind == kLoad {
		if fn := t.nodes[from]; fn.kind == kLoad {
			if r := t.rebaseStruct(n.x, fn.x, to); r != 0 {
				return r
			}
		}
	}
	if !t.isSel(e) {
		return 0
	}
	x := t.rename(n.x, from, to)
	if x == 0 {
		return 0
	}
	if r := t.sel(n.kind, x, n.n, n.y, n.ref); r != 0 {
		return r
	}
	return t.held(x)
}

// unspilled writes a name that starts in the variable of a captured parameter
// by the parameter itself: callers know nothing of the variable.
func (m *Model) unspilled(fi *fnInfo, e Expr) Expr {
	r := m.x.root[e]
	a, ok := m.x.nodes[r].ref.(*ssa.Alloc)
	if !ok || m.x.nodes[r].kind != kReg {
		return e
	}
	vals := m.storesOf(fi)[r]
	if len(vals) != 1 {
		return e
	}
	if _, ok := vals[0].(*ssa.Parameter); !ok || !a.Heap {
		return e
	}
	if u := m.x.rename(e, m.x.load(r), m.x.name(vals[0])); u != 0 {
		return u
	}
	return e
}

// typeFits tells whether what e names in the frame of fn can be an instance of
// the rule, by its type: an interface may hold one.
func (m *Model) typeFits(fn *ssa.Function, e Expr) bool {
	t := m.typeOf(fn, e)
	if t == nil || m.rule.Each == nil || len(m.rule.Each.Types) == 0 {
		return true
	}
	switch t.Underlying().(type) {
	case *types.Interface, *types.Signature:
		return true
	}
	if _, ok := t.(*types.TypeParam); ok {
		return true
	}
	for _, want := range m.rule.Each.Types {
		switch want.Underlying().(type) {
		case *types.Interface, *types.Signature:
			return true
		}
		if types.Identical(t, want) {
			return true
		}
		if p, ok := t.Underlying().(*types.Pointer); ok && types.Identical(p.Elem(), want) {
			return true
		}
		if p, ok := want.Underlying().(*types.Pointer); ok {
			if types.Identical(p.Elem(), t) {
				return true
			}
			// A type with the instance's as underlying type (sync.rlocker).
			if q, ok := t.Underlying().(*types.Pointer); ok && types.Identical(p.Elem().Underlying(), q.Elem().Underlying()) {
				return true
			}
		}
	}
	return false
}

// mayCall tells whether a call through an interface can run the concrete method
// of an event: some value of its type must be converted to an interface at all.
func (m *Model) mayCall(e *properties.EventMatch, s *shape) bool {
	if !s.invoke || s.site == nil || !s.site.Common().IsInvoke() {
		return true
	}
	for _, c := range e.Callees {
		if c.Interface || c.Obj == s.obj {
			return true
		}
	}
	fns, complete := m.sh.resolver.Callees(s.site)
	if !complete {
		return true
	}
	for _, g := range fns {
		obj := funcObject(g)
		for _, c := range e.Callees {
			if obj == c.Obj {
				return true
			}
		}
	}
	return false
}
