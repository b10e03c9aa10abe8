package frontend

import (
	"go/token"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/properties"
)

// fnInfo is what is known of a function under one rule without walking a path.
type fnInfo struct {
	fn *ssa.Function
	id int // dense in the model; index into Model.fns

	events   bool // an event of the rule stands in its body
	cone     bool // it reaches an event (over the call graph and its closures)
	near     bool // it reaches an event by named calls in sight: what it asks of its parameters is passed on
	births   map[ssa.Value][]birth
	bearing  bool          // an instance can be born in its cone
	direct   bool          // an instance can be born in its own body
	exports  exporting     // whether callers have to follow the births in it
	own      []Expr        // subjects of the events in its own body
	subjects map[Expr]bool // what the events of its cone are about, over its parameters, captures and globals
	subjList []Expr        // the same, in order of discovery

	loops  *loopInfo            // lazily; loops over whole containers
	stores map[Expr][]ssa.Value // name of address -> stored values, of the own body

	flow *flowInfo // lazily; branches, keys of interest, liveness
}

// birth: at the instruction that is the key of fnInfo.births, the value known
// by name (and by static, through memory) may be "this one".
type birth struct {
	name, static Expr
}

// origin is one way to write a value without registers that were loaded.
type origin struct {
	s Expr      // static form: loads written out
	n Expr      // name form at the place where it is computed
	b ssa.Value // the instruction that must have run for it to exist; nil: nameable at entry
}

const (
	maxOrigins  = 6
	maxSubjects = 48
)

func (m *Model) info(fn *ssa.Function) *fnInfo {
	if fi, ok := m.fnOf[fn]; ok {
		return fi
	}
	fi := &fnInfo{fn: fn, id: len(m.fns), births: map[ssa.Value][]birth{}, subjects: map[Expr]bool{}}
	m.fnOf[fn] = fi
	m.fns = append(m.fns, fi)
	return fi
}

// buildCone finds the functions with events, those that reach them, what their
// events are about and where instances are born.
func (m *Model) buildCone() {
	var work []*fnInfo
	queued := map[*fnInfo]bool{}
	push := func(fi *fnInfo) {
		if !queued[fi] {
			queued[fi] = true
			work = append(work, fi)
		}
	}
	handles := m.sh.handles(m.rule)
	for _, site := range m.sh.candidateSites(m.rule) {
		fn := site.Parent()
		if m.siteShape(site).fn != 0 && handles != nil && !handles[m.sh.prog.PackageOfFunction(fn)] {
			continue
		}
		if m.isEventFunc(fn) {
			continue // an event's function is not entered
		}
		s := m.siteShape(site)
		for _, mt := range m.matchEvents(s) {
			fi := m.info(fn)
			fi.events, fi.cone, fi.near = true, true, true
			if mt.birth >= 0 {
				fi.bearing, fi.direct = true, true
			}
			if mt.subject != 0 {
				v := m.subjectValue(&mt, site)
				if v != nil {
					for _, o := range m.origins(fi, v) {
						m.addSubject(fi, o)
						if o.b == nil && o.s != 0 && m.typeFits(fi.fn, o.s) && !slices.Contains(fi.own, o.s) {
							fi.own = append(fi.own, o.s)
						}
					}
				}
			}
			push(fi)
		}
	}
	for _, n := range m.namings() {
		fi := m.info(n.fn)
		before := len(fi.subjList)
		born := fi.direct
		for _, o := range m.origins(fi, n.v) {
			m.addSubject(fi, o)
			if o.b == nil && o.s != 0 && fi.subjects[o.s] && !slices.Contains(fi.own, o.s) {
				fi.own = append(fi.own, o.s)
			}
		}
		if len(fi.subjList) > before || fi.direct && !born {
			fi.cone, fi.near = true, true
			push(fi)
		}
	}
	for _, mc := range m.sh.boundEvents(m.rule) {
		// Whoever calls the method value later: the instance is named here.
		if fn := mc.Parent(); !m.isEventFunc(fn) && valueUsed(mc) {
			fi := m.info(fn)
			fi.events, fi.cone, fi.near = true, true, true
			for _, o := range m.origins(fi, mc.Bindings[0]) {
				m.addSubject(fi, o)
				if o.b == nil && o.s != 0 && m.typeFits(fi.fn, o.s) && !slices.Contains(fi.own, o.s) {
					fi.own = append(fi.own, o.s)
				}
			}
			push(fi)
		}
	}
	for len(work) > 0 {
		fi := work[0]
		work = work[1:]
		queued[fi] = false
		if m.isEventFunc(fi.fn) {
			continue
		}
		for _, c := range m.sh.callers[fi.fn] {
			if m.isEventFunc(c.fn) {
				continue
			}
			g := m.info(c.fn)
			changed := !g.cone || fi.bearing && !g.bearing
			g.cone = true
			if fi.near && !g.near && (c.site == nil || c.site.Common().StaticCallee() != nil || len(m.sh.targets[c.site]) == 1) && m.sh.together(c.fn, fi.fn) {
				g.near, changed = true, true
			}
			g.bearing = g.bearing || fi.bearing
			for _, u := range fi.subjList {
				for _, o := range m.translate(g, u, c, fi.fn) {
					if m.addSubject(g, o) {
						changed = true
					}
				}
			}
			if changed {
				push(g)
			}
		}
	}
	m.coverBirths()
}

// naming is a place where an instance that stays gets a name elsewhere: its
// address is stored or returned.
type naming struct {
	fn *ssa.Function
	v  ssa.Value
}

// namings lists the places where the address of an instance is stored or
// returned, in a fixed order. An instance that moves is followed anyhow.
func (m *Model) namings() []naming {
	if m.rule.Moves || m.eventBirths || m.rule.Each == nil {
		return nil
	}
	named := map[*types.TypeName]bool{}
	for _, t := range m.rule.Each.Types {
		if p, ok := t.(*types.Pointer); ok {
			t = p.Elem()
		}
		if n, ok := types.Unalias(t).(*types.Named); ok && !types.IsInterface(n) {
			named[n.Origin().Obj()] = true
		}
	}
	var out []naming
	add := func(fn *ssa.Function, v ssa.Value) {
		p, ok := v.Type().(*types.Pointer)
		if !ok {
			return
		}
		n, ok := types.Unalias(p.Elem()).(*types.Named)
		if !ok || !named[n.Origin().Obj()] || m.isEventFunc(fn) {
			return
		}
		if _, ok := v.(*ssa.Const); !ok {
			out = append(out, naming{fn, v})
		}
	}
	for _, fn := range m.sh.fns {
		for _, b := range fn.Blocks {
			for _, i := range b.Instrs {
				switch i := i.(type) {
				case *ssa.Store:
					add(fn, i.Val)
				case *ssa.Return:
					for _, r := range i.Results {
						add(fn, r)
					}
				}
			}
		}
	}
	return out
}

// maxPath bounds the loads on the way from a root's parameter to an instance.
const maxPath = 3

// farAway tells whether an instance is not asked about from this frame: it lies
// behind more loads than maxPath, or inside a recursive structure (a field
// occurs twice on the way). A function nearer to it is then a root for it.
func (t *exprs) farAway(e Expr) bool {
	if int(t.loads[e]) > maxPath {
		return true
	}
	for x := e; t.isSel(x); x = t.nodes[x].x {
		if n := t.nodes[x]; n.kind == kField {
			for y := n.x; t.isSel(y); y = t.nodes[y].x {
				if k := t.nodes[y]; k.kind == kField && k.ref == n.ref {
					return true
				}
			}
		}
	}
	return false
}

// addSubject records a subject of fi's cone, or a birth if it does not exist at entry.
func (m *Model) addSubject(fi *fnInfo, o origin) bool {
	if o.s == 0 || !m.typeFits(fi.fn, o.s) {
		return false
	}
	if o.b == nil {
		switch m.x.rootKind(o.s) {
		case kParam, kFree, kGlobal:
		default:
			return false
		}
		if fi.subjects[o.s] || len(fi.subjList) >= maxSubjects || m.x.farAway(o.s) {
			return false
		}
		fi.subjects[o.s] = true
		fi.subjList = append(fi.subjList, o.s)
		return true
	}
	if m.eventBirths || m.x.hasGhost(o.s) {
		return false // instances of this rule are born at its events only; elements where they are selected
	}
	if m.x.nodes[o.s].kind == kLoad {
		if t := m.typeOf(fi.fn, o.s); t != nil && isLocker(t) {
			return false // mostly a lock of the struct around it, which has a name of its own
		}
	}
	switch o.b.(type) {
	case *ssa.Alloc:
		if m.x.loads[o.n] > 0 {
			return false // not there yet when the holder is allocated
		}
	case *ssa.MakeClosure, *ssa.Function, *ssa.Const, *ssa.Builtin:
		return false
	}
	for _, x := range fi.births[o.b] {
		if x.static == o.s {
			return false
		}
	}
	fi.births[o.b] = append(fi.births[o.b], birth{name: o.n, static: o.s})
	fi.bearing, fi.direct = true, true
	return true
}

// coverBirths drops a birth whose place was named by an earlier instruction
// that always runs before it: there the path has guessed already whether it is
// "this one".
func (m *Model) coverBirths() {
	for _, fi := range m.fns {
		if len(fi.births) < 2 {
			continue
		}
		byStatic := map[Expr][]ssa.Instruction{}
		for b, list := range fi.births {
			for _, x := range list {
				byStatic[x.static] = append(byStatic[x.static], b.(ssa.Instruction))
			}
		}
		for b, list := range fi.births {
			bi := b.(ssa.Instruction)
			fi.births[b] = slices.DeleteFunc(list, func(x birth) bool {
				for _, other := range byStatic[x.static] {
					if other != bi && dominates(other, bi) {
						return true
					}
				}
				return false
			})
		}
	}
}

func dominates(a, b ssa.Instruction) bool {
	if a.Block() != b.Block() {
		return a.Block().Dominates(b.Block())
	}
	for _, i := range a.Block().Instrs {
		if i == a {
			return true
		}
		if i == b {
			return false
		}
	}
	return false
}

// isEventFunc tells whether fn itself is an event of the rule: it is not entered.
func (m *Model) isEventFunc(fn *ssa.Function) bool {
	for p := fn.Parent(); p != nil; p = fn.Parent() {
		fn = p
	}
	obj := funcObject(fn)
	if obj == nil {
		return false
	}
	if yes, ok := m.eventFunc[obj]; ok {
		return yes
	}
	yes := false
	for i := range m.rule.Events {
		for _, c := range m.rule.Events[i].Callees {
			if c.Obj == obj {
				yes = true
			}
		}
	}
	m.eventFunc[obj] = yes
	return yes
}

// subjectValue is the SSA value behind a match's subject.
func (m *Model) subjectValue(mt *match, site ssa.CallInstruction) ssa.Value {
	c := site.Common()
	if mt.ev.CallsInstance {
		return c.Value
	}
	if _, ok := mt.ev.On.(properties.PatInstance); ok {
		if c.IsInvoke() {
			return c.Value
		}
		if mc, ok := c.Value.(*ssa.MakeClosure); ok {
			return mc.Bindings[0]
		}
		if len(c.Args) > 0 {
			return c.Args[0]
		}
		return nil
	}
	for i, p := range mt.ev.With {
		if _, ok := p.(properties.PatInstance); ok {
			s := m.siteShape(site)
			if i < len(s.vals) {
				return s.vals[i]
			}
		}
	}
	return nil
}

// origins lists the ways to write v.
func (m *Model) origins(fi *fnInfo, v ssa.Value) []origin {
	return m.originsOf(fi, v, map[ssa.Value]bool{})
}

func (m *Model) originsOf(fi *fnInfo, v ssa.Value, seen map[ssa.Value]bool) []origin {
	if seen[v] || len(seen) > 64 {
		return nil
	}
	seen[v] = true
	defer delete(seen, v)
	x := m.x
	switch v := v.(type) {
	case *ssa.Parameter, *ssa.FreeVar, *ssa.Global:
		e := x.name(v)
		return []origin{{e, e, nil}}
	case *ssa.FieldAddr:
		f := structField(v.X.Type(), v.Field)
		return m.mapOrigins(m.originsOf(fi, v.X, seen), func(o origin) origin {
			return origin{x.field(o.s, f), x.field(o.n, f), o.b}
		})
	case *ssa.Field:
		f := structField(v.X.Type(), v.Field)
		if out, ok := m.partOrigins(fi, v, f, seen); ok {
			return out
		}
		return m.mapOrigins(m.originsOf(fi, v.X, seen), func(o origin) origin {
			return origin{x.fieldVal(o.s, f), x.fieldVal(o.n, f), o.b}
		})
	case *ssa.IndexAddr:
		return m.indexOrigins(fi, v, v.X, v.Index, seen)
	case *ssa.Index:
		return m.indexOrigins(fi, v, v.X, v.Index, seen)
	case *ssa.Lookup:
		if v.CommaOk {
			e := x.reg(v)
			return []origin{{e, e, v}}
		}
		return m.indexOrigins(fi, v, v.X, v.Index, seen)
	case *ssa.UnOp:
		if v.Op.String() != "*" {
			break
		}
		var out []origin
		for _, o := range m.originsOf(fi, v.X, seen) {
			out = m.loadOrigin(fi, out, o, v, seen)
		}
		return clip(out)
	case *ssa.Phi:
		var out []origin
		for _, e := range v.Edges {
			out = append(out, m.originsOf(fi, e, seen)...)
		}
		return clip(out)
	case *ssa.MakeInterface:
		return m.originsOf(fi, v.X, seen)
	case *ssa.ChangeInterface:
		return m.originsOf(fi, v.X, seen)
	case *ssa.ChangeType:
		return m.originsOf(fi, v.X, seen)
	case *ssa.TypeAssert:
		if !v.CommaOk {
			return m.originsOf(fi, v.X, seen)
		}
	case *ssa.Extract:
		if ta, ok := v.Tuple.(*ssa.TypeAssert); ok && v.Index == 0 {
			return m.originsOf(fi, ta.X, seen)
		}
		if c, ok := v.Tuple.(*ssa.Call); ok {
			if os := m.resultOrigins(fi, c, v.Index, seen); os != nil {
				return os
			}
		}
		e := x.res(v.Tuple, v.Index)
		return []origin{{e, e, v.Tuple}}
	case *ssa.Call:
		if os := m.resultOrigins(fi, v, 0, seen); os != nil {
			return os
		}
	case *ssa.Const:
		return nil
	}
	e := x.reg(v)
	return []origin{{e, e, v}}
}

func (m *Model) mapOrigins(os []origin, f func(origin) origin) []origin {
	for i := range os {
		os[i] = f(os[i])
	}
	return clip(os)
}

// clip drops what is too deep and doubles, and cuts the list.
func clip(os []origin) []origin {
	var out []origin
	for _, o := range os {
		if o.s == 0 || o.n == 0 || slices.Contains(out, o) {
			continue
		}
		out = append(out, o)
		if len(out) == maxOrigins {
			break
		}
	}
	return out
}

func (m *Model) indexOrigins(fi *fnInfo, v ssa.Value, base, idx ssa.Value, seen map[ssa.Value]bool) []origin {
	k := m.x.name(idx)
	fixed := false
	switch idx.(type) {
	case *ssa.Const, *ssa.Parameter:
		fixed = true
	}
	lookup := false
	if _, ok := v.(*ssa.Lookup); ok {
		lookup = true
	}
	bases := m.originsOf(fi, base, seen)
	var some []origin // an element that exists at entry, whichever it is
	if !fixed {
		for _, o := range bases {
			if e := m.x.index(o.s, m.x.ghost()); o.b == nil && m.x.frameFree(o.s) {
				some = append(some, origin{e, e, nil})
			}
		}
	}
	return clip(append(m.mapOrigins(bases, func(o origin) origin {
		r := origin{m.x.index(o.s, k), m.x.index(o.n, k), o.b}
		if !fixed || o.b != nil {
			r.b = v
		}
		if lookup {
			r.n = m.x.reg(v)
		}
		return r
	}), some...))
}

// loadOrigin appends the origins of a load at v from the address o; v is nil
// when a callee's subject is translated.
func (m *Model) loadOrigin(fi *fnInfo, out []origin, o origin, v *ssa.UnOp, seen map[ssa.Value]bool) []origin {
	x := m.x
	if root := x.nodes[x.root[o.n]]; root.kind == kReg {
		if _, ok := root.ref.(*ssa.Alloc); ok {
			vals := m.storesOf(fi)[o.n]
			for _, val := range vals {
				out = append(out, m.originsOf(fi, val, seen)...)
			}
			if len(vals) == 0 {
				// The struct that the place lies in may be stored as a whole.
				out = m.structOrigins(fi, out, o, v, seen)
				if len(out) > 0 {
					return out
				}
			}
			if len(vals) > 0 || v == nil {
				return out
			}
		}
	}
	r := origin{x.load(o.s), x.load(o.n), o.b}
	if v != nil {
		r.n = x.reg(v)
		if o.b != nil {
			r.b = v
		}
	}
	return append(out, r)
}

// partOrigins gives the origins of a field of a struct that was loaded from a
// local variable whose field is stored to in sight; ok is false for any other.
func (m *Model) partOrigins(fi *fnInfo, v *ssa.Field, f *types.Var, seen map[ssa.Value]bool) (out []origin, ok bool) {
	load, isLoad := v.X.(*ssa.UnOp)
	if !isLoad || load.Op != token.MUL {
		return nil, false
	}
	a, isAlloc := load.X.(*ssa.Alloc)
	if !isAlloc {
		return nil, false
	}
	vals := m.storesOf(fi)[m.x.field(m.x.reg(a), f)]
	for _, val := range vals {
		out = append(out, m.originsOf(fi, val, seen)...)
	}
	return clip(out), len(vals) > 0
}

// structOrigins appends the origins of a load from the address o in a local
// struct that is a copy of another one.
func (m *Model) structOrigins(fi *fnInfo, out []origin, o origin, v *ssa.UnOp, seen map[ssa.Value]bool) []origin {
	for p := o.n; m.x.nodes[p].kind == kField; {
		p = m.x.nodes[p].x
		for _, val := range m.storesOf(fi)[p] {
			load, ok := val.(*ssa.UnOp)
			if !ok || load.Op != token.MUL || seen[load] {
				continue
			}
			seen[load] = true
			for _, from := range m.originsOf(fi, load.X, seen) {
				part := origin{m.x.rebase(o.n, p, from.s), m.x.rebase(o.n, p, from.n), from.b}
				if part.s != 0 && part.n != 0 {
					out = m.loadOrigin(fi, out, part, v, seen)
				}
			}
			delete(seen, load)
		}
	}
	return out
}

func (m *Model) storesOf(fi *fnInfo) map[Expr][]ssa.Value {
	if fi.stores == nil {
		fi.stores = map[Expr][]ssa.Value{}
		for _, b := range fi.fn.Blocks {
			for _, i := range b.Instrs {
				if st, ok := i.(*ssa.Store); ok {
					a := m.x.name(st.Addr)
					fi.stores[a] = append(fi.stores[a], st.Val)
				}
			}
		}
	}
	return fi.stores
}

// resultOrigins writes a call's result as an argument, or as a place reached
// from an argument, if the callee's summary says so.
func (m *Model) resultOrigins(fi *fnInfo, c *ssa.Call, res int, seen map[ssa.Value]bool) []origin {
	arg, path, ok := m.sh.resultPath(c, res)
	if !ok {
		return nil
	}
	os := m.originsOf(fi, arg, seen)
	for _, st := range path {
		var next []origin
		for _, o := range os {
			if st == nil {
				next = m.loadOrigin(fi, next, o, nil, seen)
			} else {
				next = append(next, origin{m.x.field(o.s, st), m.x.field(o.n, st), o.b})
			}
		}
		os = next
	}
	if len(path) > 0 {
		for i := range os {
			os[i].n = m.x.reg(c)
			if _, ok := c.Type().(*types.Tuple); ok {
				os[i].n = m.x.res(c, res)
			}
			if os[i].b != nil {
				os[i].b = c
			}
		}
	}
	return clip(os)
}

// translate writes a callee's subject u over the caller's frame.
func (m *Model) translate(g *fnInfo, u Expr, c caller, callee *ssa.Function) []origin {
	n := m.x.nodes[u]
	switch n.kind {
	case kGlobal:
		return []origin{{u, u, nil}}
	case kParam:
		v := c.arg(callee, int(n.n))
		if v == nil {
			return nil
		}
		return m.origins(g, v)
	case kFree:
		v := c.free(callee, int(n.n))
		if v == nil {
			// A function value is called: what it captured is in the value.
			if c.site == nil || c.site.Common().IsInvoke() || c.site.Common().StaticCallee() != nil {
				return nil
			}
			if fv := m.sh.sameCapture(c.site, callee, int(n.n)); fv != nil {
				return m.origins(g, fv)
			}
			var out []origin
			for _, o := range m.origins(g, c.site.Common().Value) {
				if o.b == nil { // else it was captured where it has a name of its own
					out = append(out, origin{m.x.captOf(o.s, int(n.n), callee), m.x.captOf(o.n, int(n.n), callee), nil})
				}
			}
			return clip(out)
		}
		return m.origins(g, v)
	case kField, kFieldVal, kLoad, kIndex, kCap:
		var out []origin
		for _, o := range m.translate(g, n.x, c, callee) {
			switch n.kind {
			case kLoad:
				out = m.loadOrigin(g, out, o, nil, map[ssa.Value]bool{})
			case kIndex:
				y := n.y
				if yn := m.x.nodes[y]; yn.kind == kParam {
					v := c.arg(callee, int(yn.n))
					if v == nil {
						continue
					}
					switch v.(type) {
					case *ssa.Const, *ssa.Parameter:
						y = m.x.name(v)
					default:
						continue // not nameable at the caller's entry, and no instruction computes it there
					}
				}
				out = append(out, origin{m.x.index(o.s, y), m.x.index(o.n, y), o.b})
			default:
				out = append(out, origin{
					m.x.sel(n.kind, o.s, n.n, n.y, n.ref),
					m.x.sel(n.kind, o.n, n.n, n.y, n.ref), o.b})
			}
		}
		return clip(out)
	}
	return nil
}
