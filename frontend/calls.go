package frontend

import (
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
	"pathtally/pds"
	"pathtally/properties"
)

// resultAccess reads a result summary as an access path of a root.
func resultAccess(r effects.Result) (root int, path []*types.Var, ok bool) {
	if r.Param < 0 {
		return 0, nil, false
	}
	for _, s := range r.Path {
		path = append(path, s.Field)
	}
	return r.Param, path, true
}

// link is one way in which a call site is executed: the callee, and where its
// parameters and captured variables come from.
type link struct {
	fi      *fnInfo
	site    ssa.CallInstruction
	closure Expr             // the function value called; 0 for a static callee
	made    *ssa.MakeClosure // a closure that is called where it is made
	args    []Expr
	vals    []ssa.Value
	// callback: a function handed to code out of sight, which calls it with
	// arguments nobody knows.
	callback bool
}

func (m *Model) linkOf(site ssa.CallInstruction, g *ssa.Function, closure Expr) *link {
	l := &link{fi: m.info(g), site: site, closure: closure}
	c := site.Common()
	if c.IsInvoke() {
		l.args = append(l.args, m.x.name(c.Value))
		l.vals = append(l.vals, c.Value)
	} else if mc, ok := c.Value.(*ssa.MakeClosure); ok {
		l.made = mc
	} else if mc := onlyClosure(c.Value, g); mc != nil {
		l.made = mc
	}
	for _, a := range c.Args {
		l.args = append(l.args, m.x.name(a))
		l.vals = append(l.vals, a)
	}
	return l
}

// onlyClosure is the closure that a variable of the function holds, if g is made
// once in it, is all that is ever stored to the variable, and nothing outside stores to it.
func onlyClosure(v ssa.Value, g *ssa.Function) *ssa.MakeClosure {
	u, ok := v.(*ssa.UnOp)
	if !ok {
		return nil
	}
	a, ok := u.X.(*ssa.Alloc)
	if !ok || storedOutside(a) {
		return nil
	}
	var only *ssa.MakeClosure
	for _, r := range *a.Referrers() {
		if st, ok := r.(*ssa.Store); ok {
			mc := closureOf(st.Val)
			if mc == nil || mc.Fn != g || only != nil {
				return nil
			}
			only = mc
		}
	}
	return only
}

func (m *Model) linkFree(l *link, i int) Expr {
	if l.made != nil {
		if i < len(l.made.Bindings) {
			return m.x.name(l.made.Bindings[i])
		}
		return 0
	}
	if l.closure != 0 {
		if fv := m.sh.sameCapture(l.site, l.fi.fn, i); fv != nil && !l.callback {
			return m.x.name(fv)
		}
		return m.x.capt(l.closure, i)
	}
	return 0
}

// captured is linkFree for names of the instance.
func (m *Model) captured(l *link, i int) Expr {
	if l.made == nil && l.closure != 0 && (l.callback || m.sh.sameCapture(l.site, l.fi.fn, i) == nil) {
		return m.x.captOf(l.closure, i, l.fi.fn)
	}
	return m.linkFree(l, i)
}

// toCallee writes what the frame knows of the instance over the callee's frame.
func (m *Model) toCallee(ns nset, l *link) nset {
	out := nset{phase: ns.phase, outside: ns.outside, touched: ns.touched}
	as := func(y Expr) Expr {
		for i, a := range l.args {
			if a == y {
				return m.x.param(i)
			}
		}
		return 0
	}
	for _, e := range ns.names {
		var in nset
		if m.x.rootKind(e) == kGlobal {
			in.add(e)
		}
		for i := range l.args {
			m.carryOver(&in, e, l.vals[i], m.x.param(i))
		}
		for i := range l.fi.fn.FreeVars {
			if l.made != nil && i < len(l.made.Bindings) {
				m.carryOver(&in, e, l.made.Bindings[i], m.x.free(i))
			} else if f := m.captured(l, i); f != 0 {
				in.add(m.x.rename(e, f, m.x.free(i)))
			}
		}
		for _, e := range in.names {
			out.add(m.outward(e, as))
		}
	}
	m.tidy(&out)
	return out
}

// factsToCallee passes what the callee asks of its parameters, captures and globals.
func (m *Model) factsToCallee(fr *frame, l *link, at *ssa.BasicBlock) factset {
	var fs factset
	for _, k := range m.flowOf(l.fi).entry {
		var a Abs
		switch n := m.x.nodes[k]; n.kind {
		case kParam:
			if int(n.n) < len(l.vals) {
				a = m.absOf(fr, l.vals[n.n], at)
				if v := m.t.abs[a]; v.kind == aInt && !v.small() {
					// A recursion that counts would never end.
					if _, ok := l.vals[n.n].(*ssa.Const); !ok {
						a = 0
					}
				}
			}
		default:
			for _, t := range m.upKeys(k, l, at) {
				if a = fr.fs.get(t); a != 0 {
					break
				}
			}
		}
		if a != 0 {
			fs = fs.with(k, a)
		}
	}
	return fs
}

// upKeys writes a key of the callee over the caller's frame, in the forms the
// caller may keep it under.
func (m *Model) upKeys(k Expr, l *link, at *ssa.BasicBlock) []Expr {
	memo := upKeyOf{k, l.site, l.fi, l.closure, l.made, at}
	if out, ok := m.upOf[memo]; ok {
		return out
	}
	var out []Expr
	if e := m.upKey(k, l, func(v ssa.Value) Expr { return m.key(v, at) }); e != 0 {
		out = append(out, e)
	}
	if e := m.upKey(k, l, m.x.name); e != 0 && (len(out) == 0 || out[0] != e) {
		out = append(out, e)
	}
	m.upOf[memo] = out
	return out
}

// upKeyOf is what upKeys depends on.
type upKeyOf struct {
	k       Expr
	site    ssa.CallInstruction
	fi      *fnInfo
	closure Expr
	made    *ssa.MakeClosure
	at      *ssa.BasicBlock
}

func (m *Model) upKey(k Expr, l *link, form func(ssa.Value) Expr) Expr {
	if k == 0 {
		return 0
	}
	n := m.x.nodes[k]
	switch n.kind {
	case kGlobal, kConst, kReg:
		return k
	case kParam:
		if int(n.n) < len(l.vals) {
			return form(l.vals[n.n])
		}
		return 0
	case kFree:
		if l.made != nil && int(n.n) < len(l.made.Bindings) {
			return form(l.made.Bindings[n.n])
		}
		return m.linkFree(l, int(n.n))
	case kBin, kArgs:
		x, y := m.upKey(n.x, l, form), m.upKey(n.y, l, form)
		if x == 0 && n.x != 0 || y == 0 {
			return 0
		}
		return m.x.intern(exprNode{kind: n.kind, op: n.op, x: x, y: y})
	case kUn, kGet:
		if n.x == 0 {
			return k
		}
		x := m.upKey(n.x, l, form)
		if x == 0 {
			return 0
		}
		n.x = x
		return m.x.intern(n)
	}
	if m.x.isSel(k) {
		x := m.upKey(n.x, l, form)
		y := n.y
		if y != 0 {
			y = m.upKey(y, l, form)
			if y == 0 {
				return 0
			}
		}
		return m.x.sel(n.kind, x, n.n, y, n.ref)
	}
	return 0
}

// fromCallee adds to fr what an exit brings back.
func (m *Model) fromCallee(fr *frame, st state, l *link, call ssa.Value) {
	ns := m.t.nsets[st.ns]
	if ns.outside {
		fr.ns.outside = true
	}
	if ns.phase == born && fr.ns.phase == unborn {
		fr.ns = nset{phase: born, outside: ns.outside}
	}
	if ns.touched {
		fr.ns.touched = true
	}
	as := func(y Expr) Expr {
		if n := m.x.nodes[y]; n.kind == kParam && int(n.n) < len(l.args) {
			return l.args[n.n]
		}
		return 0
	}
	for _, e := range ns.names {
		e = m.outward(e, as)
		root := m.x.root[e]
		n := m.x.nodes[root]
		switch n.kind {
		case kGlobal:
			m.addBack(&fr.ns, e)
		case kResult:
			if call != nil && !l.callback {
				fr.ns.add(m.x.rename(e, root, m.resultName(call, int(n.n))))
			}
		case kParam:
			if int(n.n) >= len(l.args) {
				if l.callback {
					fr.ns.outside = true
				}
				continue
			}
			m.addBack(&fr.ns, m.x.rename(e, root, l.args[n.n]))
			m.alsoReturned(fr, e, root, l.vals[n.n])
		case kFree:
			f := m.captured(l, int(n.n))
			m.addBack(&fr.ns, m.x.rename(e, root, f))
			if l.made != nil && int(n.n) < len(l.made.Bindings) {
				m.alsoReturned(fr, e, root, l.made.Bindings[n.n])
			} else if !l.callback && m.x.loads[e] > 0 {
				// The closure may have been loaded: its place has it too.
				for _, o := range m.origins(fr.fi, l.site.Common().Value) {
					if m.x.frameFree(o.s) {
						m.addBack(&fr.ns, m.x.rename(e, root, m.x.captOf(o.s, int(n.n), l.fi.fn)))
					} else {
						m.heldUnder(fr, o)
					}
				}
			}
		}
	}
	for _, f := range m.t.facts[st.fs] {
		if n := m.x.nodes[f.key]; n.kind == kResult {
			if call != nil && !l.callback {
				m.setFact(fr, m.resultName(call, int(n.n)), f.val)
			}
			continue
		}
		for _, t := range m.upKeys(f.key, l, fr.b) {
			m.setFact(fr, t, f.val)
		}
	}
}

// alsoReturned: what came back under an argument also shows under the place
// the argument was loaded from.
func (m *Model) alsoReturned(fr *frame, e, root Expr, v ssa.Value) {
	if _, ok := v.(*ssa.UnOp); !ok {
		return
	}
	for _, o := range m.origins(fr.fi, v) {
		switch m.x.rootKind(o.s) {
		case kParam, kFree, kGlobal:
			if m.x.frameFree(o.s) {
				m.addBack(&fr.ns, m.x.rename(e, root, o.s))
			} else {
				m.heldUnder(fr, o)
			}
		default:
			if m.x.loads[e] > 0 {
				m.heldUnder(fr, o)
			}
		}
	}
}

// call executes a call instruction.
func (m *Model) call(fr *frame, c *ssa.Call, dst []pds.Rule) ([]pds.Rule, bool) {
	if b, ok := c.Call.Value.(*ssa.Builtin); ok {
		return m.builtin(fr, c, b.Name(), dst)
	}
	s, targets, closure := m.resolve(fr, c)
	if ms := m.matchEvents(s); len(ms) > 0 {
		if out, done := m.event(fr, c, s, ms, dst); done {
			return out, true
		}
		// An event of the rule, but of another instance.
		if s.obj != nil && m.isEventObj(s) {
			m.define(fr, c)
			return m.bornAt(fr, c, dst, fr.i+1)
		}
	}
	var enter []*link
	for _, g := range targets {
		l := m.linkOf(c, g, closure)
		if m.enters(fr, l) || m.rewrites(fr, l) {
			enter = append(enter, l)
		}
	}
	if len(enter) == 0 {
		if out, done := m.callbacks(fr, c, targets, dst); done {
			return out, true
		}
		return m.silent(fr, c, targets, dst)
	}
	before := fr.clone()
	for _, l := range enter {
		fr := before.clone()
		ns := m.lend(m.toCallee(fr.ns, l))
		fs := m.factsToCallee(fr, l, fr.b)
		m.kill(fr, c)
		m.define(fr, c)
		dst = append(dst, pds.Rule{Kind: pds.Push, State: runState,
			Top: m.entry(l.fi, ns, fs, recNo),
			Below: m.symbol(symbol{kind: symCont, fn: int32(fr.fi.id), blk: int32(fr.b.Index), idx: int32(fr.i),
				ns: m.t.nset(fr.ns), fs: m.t.factset(fr.fs),
				aux: m.cont(contRef{callee: int32(l.fi.id), closure: l.closure, rec: fr.rec})}),
			Label: m.label(label{kind: lblCall, instr: c, fn: l.fi.fn})})
	}
	if len(enter) < len(targets) {
		out, done := m.silent(fr, c, targets, dst)
		if done {
			return out, true
		}
		fr.i++
		return append(dst, m.goTo(fr, 0)), true
	}
	return dst, true
}

func (m *Model) entry(fi *fnInfo, ns nset, fs factset, rec int8) pds.SymbolID {
	return m.bounded(symbol{kind: symEntry, fn: int32(fi.id), ns: m.t.nset(ns), aux: int32(rec)}, fs)
}

// resolve says what a call site runs, as far as the source and the path's
// facts know: its shape for the rule, its candidate callees, and the function
// value if there is one.
func (m *Model) resolve(fr *frame, site ssa.CallInstruction) (*shape, []*ssa.Function, Expr) {
	s := m.siteShape(site)
	c := site.Common()
	targets := m.sh.targets[site]
	if c.IsInvoke() {
		if a := m.t.abs[m.absOf(fr, c.Value, fr.b)]; a.kind == aType && !types.IsInterface(a.typ) {
			if fn := m.method(a.typ, c.Method); fn != nil {
				t := *s
				t.recvT = a.typ
				if obj := funcObject(fn); obj != nil {
					t.obj, t.invoke = obj, false
				}
				return &t, []*ssa.Function{fn}, 0
			}
		}
		if isLocker(c.Value.Type()) {
			return s, nil, 0
		}
		return s, targets, 0
	}
	if c.StaticCallee() != nil {
		return s, targets, 0
	}
	closure := m.x.name(c.Value)
	a := m.t.abs[m.absOf(fr, c.Value, fr.b)]
	if fn := m.closureFn(fr.ns, closure); a.kind != aFunc && fn != nil {
		a = absVal{kind: aFunc, fn: fn}
	} else if a.kind != aFunc && len(targets) == 1 {
		a = absVal{kind: aFunc, fn: targets[0]} // nothing else can be in it
	}
	if a.kind == aFunc {
		if isBound(a.fn) || a.fn.Synthetic != "" && a.fn.Object() != nil && len(a.fn.FreeVars) == 0 {
			t := *s
			t.fn, t.obj = 0, funcObject(a.fn)
			if isBound(a.fn) {
				t.recv, t.recvT = m.x.captOf(closure, 0, a.fn), a.fn.FreeVars[0].Type()
				if types.IsInterface(t.recvT) {
					t.invoke = true
				}
			} else if len(t.args) > 0 && t.obj.Signature().Recv() != nil { // method expression
				t.recv, t.recvT = t.args[0], t.vals[0].Type()
				t.args, t.vals = t.args[1:], t.vals[1:]
			}
			return &t, []*ssa.Function{a.fn}, closure
		}
		if obj := funcObject(a.fn); obj != nil && a.fn.Parent() == nil {
			t := *s
			t.fn, t.obj = 0, obj
			return &t, []*ssa.Function{a.fn}, closure
		}
		return s, []*ssa.Function{a.fn}, closure
	}
	return s, targets, closure
}

// isLocker tells whether t is sync.Locker. Which lock is behind one is not
// guessed from all the locks there are, each time anew: Lock and Unlock of one
// field would be calls of two different locks. A lock behind a Locker counts
// where its type is known.
func isLocker(t types.Type) bool {
	n, ok := types.Unalias(t).(*types.Named)
	return ok && n.Obj().Pkg() != nil && n.Obj().Pkg().Path() == "sync" && n.Obj().Name() == "Locker"
}

func (m *Model) method(t types.Type, obj *types.Func) *ssa.Function {
	sel := m.sh.prog.SSA.MethodSets.MethodSet(t).Lookup(obj.Pkg(), obj.Name())
	if sel == nil {
		return nil
	}
	return m.sh.prog.SSA.MethodValue(sel)
}

func (m *Model) isEventObj(s *shape) bool {
	if yes, ok := m.eventFunc[s.obj]; ok {
		return yes
	}
	for i := range m.rule.Events {
		for _, c := range m.rule.Events[i].Callees {
			if c.Obj == s.obj {
				return true
			}
		}
	}
	return false
}

// enters tells whether a call has to be followed into its callee's body: an
// instance may be born there, the callee does something to the instance, or
// hands it on in a way that is worth following.
func (m *Model) enters(fr *frame, l *link) bool {
	g := l.fi
	if g.fn.Blocks == nil || m.isEventFunc(g.fn) || m.sh.boundary(g.fn) {
		return false
	}
	switch fr.ns.phase {
	case anyInst:
		return g.cone
	case unborn:
		return m.exportsBirth(g) || m.callsBack(fr, l)
	}
	if len(fr.ns.names) == 0 {
		return false
	}
	in := m.toCallee(fr.ns, l)
	for _, e := range in.names {
		if m.concernsNow(fr.ns, g, e) {
			return true
		}
		// A function value that the callee may call.
		if k := m.x.rootKind(e); (k == kParam || k == kFree) && m.armed(e, false) {
			return true
		}
	}
	sum := m.sh.eff.Of(g.fn)
	for _, e := range in.names {
		if k := m.x.nodes[e].kind; k == kHeld || k == kMaybe {
			continue // the summary says as much as can be said
		}
		i := -1
		switch n := m.x.nodes[m.x.root[e]]; n.kind {
		case kParam:
			i = int(n.n)
		case kFree:
			i = len(g.fn.Params) + int(n.n)
		}
		if i >= 0 && m.worthFollowing(sum.Flow(i), i, g.fn) {
			return true
		}
	}
	return m.callsBack(fr, l)
}

// worthFollowing: the callee puts what it is given as root i into a result or
// into another argument's memory; its body says where exactly. An instance that
// stays where it is (a lock) gets new names by results only: what is stored in
// passing is not asked about by those names.
func (m *Model) worthFollowing(f effects.Flow, i int, fn *ssa.Function) bool {
	if m.rule.Moves && f.Roots&^(1<<uint(min(i, 62))) != 0 {
		return true
	}
	res := fn.Signature.Results()
	for j := range res.Len() {
		if f.ToResult(j) && m.carries(res.At(j).Type()) && !types.Identical(res.At(j).Type(), errorType) {
			return true
		}
	}
	return false
}

// callsBack tells whether the callee is handed a function that does something
// to the instance (or in which one may be born).
func (m *Model) callsBack(fr *frame, l *link) bool {
	for i, v := range l.vals {
		if _, ok := v.Type().Underlying().(*types.Signature); !ok {
			continue
		}
		if fn, mc := m.funcValue(fr, v); fn != nil {
			cb := &link{fi: m.info(fn), site: l.site, made: mc, callback: true}
			if mc == nil {
				cb.closure = l.args[i]
			}
			if m.bears(fr, cb) {
				return true
			}
		}
	}
	return false
}

// funcValue is the function that v is known to be.
func (m *Model) funcValue(fr *frame, v ssa.Value) (*ssa.Function, *ssa.MakeClosure) {
	if mc := closureOf(v); mc != nil {
		return mc.Fn.(*ssa.Function), mc
	}
	if x, ok := v.(*ssa.ChangeType); ok {
		return m.funcValue(fr, x.X)
	}
	if a := m.t.abs[m.absOf(fr, v, fr.b)]; a.kind == aFunc {
		return a.fn, nil
	}
	if fn := m.closureFn(fr.ns, m.x.name(v)); fn != nil {
		return fn, nil
	}
	return nil, nil
}

// bears tells whether running the linked function does something to the instance.
func (m *Model) bears(fr *frame, l *link) bool {
	g := l.fi
	if g.fn.Blocks == nil {
		return false
	}
	switch fr.ns.phase {
	case anyInst:
		return g.cone
	case unborn:
		return m.exportsBirth(g)
	}
	for _, e := range m.toCallee(fr.ns, l).names {
		if m.concernsNow(fr.ns, g, e) || m.boundEvent(g.fn, e) {
			return true
		}
	}
	return false
}

// boundEvent: g is a method value of an event's method, bound to the instance.
func (m *Model) boundEvent(g *ssa.Function, e Expr) bool {
	return isBound(g) && m.x.nodes[e].kind == kFree && m.isEventFunc(g)
}

// builtin executes a call of a built-in function.
func (m *Model) builtin(fr *frame, c *ssa.Call, name string, dst []pds.Rule) ([]pds.Rule, bool) {
	m.define(fr, c)
	switch name {
	case "recover":
		if fr.rec == recCan {
			fr.rec = recDone
			m.setFact(fr, m.x.reg(c), m.nonNil())
		} else {
			m.setFact(fr, m.x.reg(c), m.t.absOf(absVal{kind: aNil}))
		}
	case "append":
		if fr.ns.phase == born && m.carries(c.Type()) {
			r := m.x.reg(c)
			base := m.x.name(c.Call.Args[0])
			for _, e := range fr.ns.names {
				if n := m.x.nodes[e]; n.kind == kHeld && m.x.within(base, e) {
					fr.ns.add(m.x.held(r))
				}
			}
			m.appended(fr, c)
		}
	case "ssa:wrapnilchk":
		a := m.x.name(c.Call.Args[0])
		for _, e := range fr.ns.names {
			fr.ns.add(m.x.rename(e, a, m.x.reg(c)))
		}
	}
	return m.bornAt(fr, c, dst, fr.i+1)
}

// kill: the call may overwrite memory; what was known of the places ends.
func (m *Model) kill(fr *frame, site ssa.CallInstruction) {
	if len(fr.fs) == 0 && (fr.ns.phase != born || len(fr.ns.names) == 0) {
		return
	}
	sum := m.sh.effectsAt(site)
	if !sum.Writes() && !sum.WritesUnknown() {
		return
	}
	hit := func(addr Expr) bool { return m.overwrites(sum, addr, site.Parent()) }
	fr.fs = fr.fs.filter(func(e Expr) bool {
		return !m.x.readsPlace(e, hit) && !m.x.callsGetter(e, func(g *ssa.Function) bool { return m.sh.eff.Of(g).ReadsOverwritten(sum) })
	})
	if fr.ns.phase == born && !sum.WritesUnknown() {
		// The place may hold something else now, or what it held: a doubt.
		old := fr.ns.names
		fr.ns.names = nil
		for _, e := range old {
			if k := m.x.nodes[e].kind; k != kHeld && k != kMaybe && m.x.readsPlace(e, hit) {
				e = m.x.maybe(e)
			}
			fr.ns.add(e)
		}
	}
}

// silent executes a call that does nothing to the instance itself: it may
// overwrite places, hand the instance on, panic, or not come back.
func (m *Model) silent(fr *frame, c *ssa.Call, targets []*ssa.Function, dst []pds.Rule) ([]pds.Rule, bool) {
	sum := m.sh.effectsAt(c)
	ex := m.sh.exitsAt(c)
	if len(targets) == 0 && c.Call.StaticCallee() == nil {
		ex |= effects.Returns // nothing in sight implements it; something will
	}
	n := len(dst)
	if ex&effects.Panics != 0 && (m.panicMatters[fr.fi.fn] || ex&effects.Returns == 0) {
		p := fr.clone()
		m.kill(p, c)
		dst = append(dst, m.leaveBy(p, properties.ExitPanic, m.label(label{kind: lblCallPanics, instr: c})))
	}
	if m.goexits(c, ex) {
		p := fr.clone()
		m.kill(p, c)
		dst = append(dst, m.leaveBy(p, properties.ExitGoexit, m.label(label{kind: lblGoexit, instr: c})))
	}
	if ex&effects.Returns == 0 {
		return dst, true
	}
	mends := m.mayMend(fr, c, targets)
	m.pass(fr, c, sum)
	m.kill(fr, c)
	m.define(fr, c)
	m.results(fr, c, sum)
	if mends != 0 {
		fr.i++
		r := m.goTo(fr, m.label(label{kind: lblCall, instr: c}))
		r.DoubtEffect, r.Doubt = mends, m.doubtAbout(c, "dynamic call", "runs code that nothing in sight names; it may count on what it is handed")
		return append(dst, r), true
	}
	if out, done := m.bornAt(fr, c, dst, fr.i+1); done {
		return out, true
	}
	if len(dst) > n {
		fr.i++
		return append(dst, m.goTo(fr, 0)), true
	}
	return nil, false
}

// goexits tells whether a call that is not entered may end the goroutine.
func (m *Model) goexits(site ssa.CallInstruction, ex effects.Exit) bool {
	if ex&effects.Goexits == 0 {
		return false
	}
	if ex&effects.Returns == 0 {
		return true
	}
	g := site.Common().StaticCallee()
	return g != nil && m.sh.goexits[g]
}

// mayMend gives what a call of unknown code counts if it does to the instance
// what is still missing, 0 if it cannot: nothing says what it runs, and it is
// handed the instance under a type that allows the missing event.
func (m *Model) mayMend(fr *frame, c *ssa.Call, targets []*ssa.Function) pds.EffectID {
	if fr.ns.phase != born || len(targets) > 0 || c.Call.StaticCallee() != nil {
		return 0
	}
	sig := c.Call.Signature().Params()
	v := make([]int64, len(m.rule.Counts))
	any := false
	for i, a := range c.Call.Args {
		if i >= sig.Len() || !fr.ns.has(m.x.name(a)) {
			continue
		}
		t := sig.At(i).Type()
		for k := range m.rule.Events {
			e := &m.rule.Events[k]
			if e.Count < 0 || v[e.Count] != 0 || !m.closes(e) || !allows(t, e) {
				continue
			}
			v[e.Count], any = e.Weight, true
		}
	}
	if !any {
		return 0
	}
	return m.effect(v)
}

// closes tells whether an event about an instance is a release, a close: the
// first linear claim of the rule has it on the lighter side of a question that
// an earlier count weighs down.
func (m *Model) closes(e *properties.EventMatch) bool {
	if givesInstance(e) {
		return false
	}
	for i := range m.rule.Claims {
		c := &m.rule.Claims[i]
		if !c.Linear {
			continue
		}
		for _, q := range c.Questions {
			first := slices.IndexFunc(q.Weights, func(w int64) bool { return w != 0 })
			if first >= 0 && q.Weights[first] > 0 && q.Weights[e.Count]*e.Weight < 0 {
				return true
			}
		}
		return false
	}
	return false
}

// allows tells whether the event can be done to a value of type t.
func allows(t types.Type, e *properties.EventMatch) bool {
	if e.CallsInstance {
		_, ok := t.Underlying().(*types.Signature)
		return ok
	}
	if _, ok := e.On.(properties.PatInstance); !ok {
		return true
	}
	for _, c := range e.Callees {
		if obj, _, _ := types.LookupFieldOrMethod(t, true, c.Obj.Pkg(), c.Obj.Name()); obj != nil {
			if _, ok := obj.(*types.Func); ok {
				return true
			}
		}
	}
	return false
}

// pass: a call that is not followed may hand the instance on.
func (m *Model) pass(fr *frame, site ssa.CallInstruction, sum *effects.Summary) {
	if fr.ns.phase != born || len(fr.ns.names) == 0 {
		return
	}
	c := site.Common()
	vals := c.Args
	if c.IsInvoke() {
		vals = append([]ssa.Value{c.Value}, vals...)
	}
	call, _ := site.(*ssa.Call)
	old := fr.ns.names
	for i, v := range vals {
		a := m.x.name(v)
		holds := false
		for _, e := range old {
			holds = holds || m.reaches(e, v)
		}
		if !holds {
			// A variadic slice holds what was stored into its array.
			for _, e := range old {
				if n := m.x.nodes[e]; n.kind == kHeld && n.x == a {
					holds = true
				}
			}
		}
		if !holds {
			continue
		}
		f := sum.Flow(i)
		if f.Outlives() {
			fr.ns.outside = true
		}
		if call != nil {
			sig := c.Signature().Results()
			for j := range sig.Len() {
				t := sig.At(j).Type()
				if f.ToResult(j) && m.carries(t) && !types.Identical(t, errorType) {
					fr.ns.add(m.x.held(m.resultName(call, j)))
				}
			}
		}
		for k := range vals {
			if k != i && f.ToRoot(k) {
				m.holdIn(fr, m.x.name(vals[k]), vals[k])
			}
		}
	}
	// Results that are a place reached from an argument.
	if call != nil {
		n := c.Signature().Results().Len()
		for j := range n {
			arg, path, ok := m.sh.resultPath(call, j)
			if !ok {
				continue
			}
			p := m.x.name(arg)
			for _, f := range path {
				if f == nil {
					p = m.x.load(p)
				} else {
					p = m.x.field(p, f)
				}
			}
			if p == 0 {
				continue
			}
			for _, e := range old {
				fr.ns.add(m.x.rename(e, p, m.resultName(call, j)))
			}
		}
	}
}

// results records what the summary knows of a call's results.
func (m *Model) results(fr *frame, c *ssa.Call, sum *effects.Summary) {
	f := m.flowOf(fr.fi)
	n := c.Call.Signature().Results().Len()
	for j := range min(n, sum.NumResults()) {
		k := m.resultName(c, j)
		if !f.wants(k) {
			continue
		}
		r := sum.Result(j)
		var a Abs
		switch {
		case r.Const != nil:
			a = m.valueAbs(r.Const)
		case r.Nil == effects.IsNil:
			a = m.t.absOf(absVal{kind: aNil})
		case r.Nil == effects.NonNil:
			a = m.nonNil()
		case r.Param >= 0 && len(r.Path) == 0, r.NilIff >= 0:
			i := r.Param
			if i < 0 {
				i = r.NilIff
			}
			vals := c.Call.Args
			if c.Call.IsInvoke() {
				vals = append([]ssa.Value{c.Call.Value}, vals...)
			}
			if i < len(vals) {
				a = m.absOf(fr, vals[i], fr.b)
				if v := m.t.abs[a]; r.Param < 0 && v.kind != aNil && v.kind != aTop {
					a = m.nonNil()
				}
			}
		}
		m.setFact(fr, k, a)
	}
}

// resume goes on behind a call that came back.
func (m *Model) resume(st state, sym symbol, fr *frame, dst []pds.Rule) []pds.Rule {
	ref := m.conts[sym.aux]
	fr.rec = ref.rec
	site := fr.b.Instrs[fr.i].(ssa.CallInstruction)
	call, _ := site.(*ssa.Call)
	var l *link
	if ref.callback != nil {
		l = m.callbackLink(site, ref.callback, m.fns[ref.callee].fn)
		if ref.bound != nil {
			l.made, l.closure = ref.bound, 0
		}
	} else {
		l = m.linkOf(site, m.fns[ref.callee].fn, ref.closure)
	}
	if out, done := m.takePending(st, sym, fr, dst); done {
		return out
	}
	if st.exit != properties.ExitReturn {
		m.fromCallee(fr, st, l, nil)
		return append(dst, m.leaveBy(fr, st.exit, 0))
	}
	wasUnborn := fr.ns.phase == unborn
	m.fromCallee(fr, st, l, call)
	if ref.again {
		more := true
		if v := m.t.abs[m.t.facts[st.fs].get(m.x.result(0))]; v.kind == aBool && v.lo == 0 {
			more = false // the body of a range over a function was left
		}
		if more {
			dst = m.callbackRules(fr.clone(), call, ref.callback, l, cbMany, dst)
			return dst
		}
	}
	if call != nil && wasUnborn && fr.ns.phase == unborn && m.fns[ref.callee].exports != exportsYes {
		// What an entered callee has to do with instances was followed in it.
		if out, done := m.bornAt(fr, call, dst, fr.i+1); done {
			return out
		}
	}
	fr.i++
	return append(dst, m.goTo(fr, 0))
}
