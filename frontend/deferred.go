package frontend

// This file pushes deferred calls and runs them when a function is left.

import (
	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
	"pathtally/pds"
	"pathtally/properties"
)

// lend marks what a callee is handed as known to its caller too: the callee
// cannot lose it.
func (m *Model) lend(ns nset) nset {
	if ns.phase == born {
		ns.add(m.x.kept())
	}
	return ns
}

// rewrites tells whether a callee stores what the caller wants to know afterwards.
func (m *Model) rewrites(fr *frame, l *link) bool {
	return l.fi.flow != nil && len(l.fi.flow.after) > 0 && m.tracked(fr.fi.fn, l.fi.fn)
}

// deferRule pushes a deferred call between the rest of the body and what lies
// beneath.
func (m *Model) deferRule(fr *frame, d *ssa.Defer) pds.Rule {
	pushed := nset{phase: fr.ns.phase}
	if m.flowOf(fr.fi).inLoop[fr.b.Index] {
		// Registers of the loop may be defined again before the call runs:
		// what they are now is kept with it.
		for _, e := range fr.ns.names {
			if m.definedInLoop(fr.fi, e) {
				pushed.add(e)
			}
		}
	}
	after := fr.clone()
	after.i++
	for _, v := range d.Call.Args {
		if a := m.absOf(fr, v, fr.b); a != 0 {
			m.setFact(after, m.x.reg(v), a)
		}
	}
	if len(pushed.names) > 0 {
		after.ns.add(m.x.kept())
	}
	if outerDefer(d) {
		return m.deferOutside(after, fr, d)
	}
	var fs factset
	if !d.Call.IsInvoke() && d.Call.StaticCallee() == nil {
		// The function is the one of now, whatever its variable holds later.
		if a := m.absOf(fr, d.Call.Value, fr.b); m.t.abs[a].kind == aFunc {
			fs = fs.with(m.key(d.Call.Value, fr.b), a).with(m.x.reg(d.Call.Value), a)
		}
	}
	return pds.Rule{Kind: pds.Push, State: runState, Top: m.point(after),
		Below: m.symbol(symbol{kind: symDeferred, fn: int32(fr.fi.id), blk: int32(fr.b.Index), idx: int32(fr.i), ns: m.t.nset(pushed), fs: m.t.factset(fs)}),
		Label: m.label(label{kind: lblDefer, instr: d})}
}

// takePending handles an exit that carries a deferred call: the function that
// the call belongs to pushes it, others pass it on. done: dst holds the push,
// behind which the exit is handled again without it.
func (m *Model) takePending(st state, sym symbol, fr *frame, dst []pds.Rule) ([]pds.Rule, bool) {
	key := m.x.pending()
	a := m.t.facts[st.fs].get(key)
	if a == 0 {
		return dst, false
	}
	id := pds.SymbolID(m.t.abs[a].lo)
	if deferOwner(m.fns[m.symbols[id].fn].fn) != fr.fi.fn {
		if fr.fs.get(key) == 0 {
			fr.fs = fr.fs.with(key, a)
		} else if fr.fs.get(key) != a {
			d := m.fns[m.symbols[id].fn].fn.Blocks[m.symbols[id].blk].Instrs[m.symbols[id].idx]
			m.note(d, "range-over-func", "only one deferred call is followed out of the body of a range over a function")
		}
		return dst, false
	}
	st.fs = m.t.factset(m.t.facts[st.fs].with(key, 0))
	return append(dst, pds.Rule{Kind: pds.Push, State: m.state(st), Top: m.symbol(sym), Below: id}), true
}

// deferOwner is the function whose deferred calls those of fn are, if they are
// not its own: the innermost one around fn that is no body of a range over a function.
func deferOwner(fn *ssa.Function) *ssa.Function {
	for fn.Synthetic == "range-over-func yield" && fn.Parent() != nil {
		fn = fn.Parent()
	}
	return fn
}

// inBody writes what the function around a body of a range over a function
// knows of the instance over the frame of that body.
func (m *Model) inBody(ns nset, owner, body *ssa.Function) nset {
	if body == owner || body.Parent() == nil {
		return ns
	}
	ns = m.inBody(ns, owner, body.Parent())
	out := nset{phase: ns.phase, outside: ns.outside, touched: ns.touched}
	for _, b := range body.Parent().Blocks {
		for _, i := range b.Instrs {
			mc, ok := i.(*ssa.MakeClosure)
			if !ok || mc.Fn != body {
				continue
			}
			for _, e := range ns.names {
				if m.x.rootKind(e) == kGlobal {
					out.add(e)
				}
				for k, v := range mc.Bindings {
					out.add(m.x.rebase(e, m.x.name(v), m.x.free(k)))
				}
			}
		}
	}
	return out
}

// outerDefer: the deferred call belongs to the enclosing function (it stands
// in the body of a range over a function).
func outerDefer(d *ssa.Defer) bool {
	if d.DeferStack == nil {
		return false
	}
	u, ok := d.DeferStack.(*ssa.UnOp)
	if !ok {
		return false
	}
	_, free := u.X.(*ssa.FreeVar)
	return free
}

func (m *Model) definedInLoop(fi *fnInfo, e Expr) bool {
	n := m.x.nodes[m.x.root[e]]
	if n.kind != kReg && n.kind != kRes {
		return false
	}
	i, ok := n.ref.(ssa.Instruction)
	return ok && i.Parent() == fi.fn && m.flowOf(fi).inLoop[i.Block().Index]
}

// runDeferred runs the pending deferred call on top of the stack.
func (m *Model) runDeferred(st state, sym symbol, dst []pds.Rule) []pds.Rule {
	fr := m.unwindFrame(st)
	fi := m.fns[sym.fn]
	d := fi.fn.Blocks[sym.blk].Instrs[sym.idx].(*ssa.Defer)
	at := &frame{fi: fi, b: fi.fn.Blocks[sym.blk], i: int(sym.idx), ns: fr.ns, fs: fr.fs, rec: fr.rec}
	away := outerDefer(d)
	if away {
		at.fs = nil // they speak of another frame
		at.ns = m.inBody(fr.ns, fr.fi.fn, fi.fn)
		for _, e := range m.t.nsets[sym.ns].names {
			at.ns.add(e)
		}
	} else if m.flowOf(fi).inLoop[sym.blk] {
		pushed := m.t.nsets[sym.ns]
		at.ns.filter(func(e Expr) bool { return !m.definedInLoop(fi, e) })
		for _, e := range pushed.names {
			at.ns.add(e)
		}
	}
	for _, f := range m.t.facts[sym.fs] {
		at.fs = at.fs.with(f.key, f.val)
	}
	if b, ok := d.Call.Value.(*ssa.Builtin); ok {
		if b.Name() == "panic" {
			st.exit, st.idx, st.blk = properties.ExitPanic, 0, 0
		}
		return append(dst, pds.Rule{Kind: pds.Pop, State: m.state(st)})
	}
	s, targets, closure := m.resolve(at, d)
	if ms := m.matchEvents(s); len(ms) > 0 {
		live, doubtful := m.concerned(at.ns, ms)
		if at.ns.phase == unborn {
			live = nil
		}
		if len(live)+len(doubtful) > 0 {
			for _, o := range outcomes(live, doubtful) {
				if len(o.conds) == 0 && len(outcomes(live, doubtful)) > 1 && len(live) == 0 {
					continue
				}
				next := st
				ns := fr.ns
				ns.touched = ns.phase == born
				next.ns = m.t.nset(ns)
				r := pds.Rule{Kind: pds.Pop, State: m.state(next), Effect: m.effect(m.tally(live, o)), Mark: m.marks(live, o),
					Label: m.label(label{kind: lblDeferredEvent, instr: d})}
				if len(doubtful) > 0 {
					r.DoubtEffect = m.effect(m.tally(doubtful, o))
					r.Doubt = m.doubt(d, "may be another object than the one asked about")
				}
				dst = append(dst, r)
			}
			return dst
		}
		if s.obj != nil && m.isEventObj(s) {
			return append(dst, pds.Rule{Kind: pds.Pop, State: m.state(st)})
		}
	}
	entered := 0
	for _, g := range targets {
		l := m.linkOf(d, g, closure)
		in := at.clone()
		if !m.enters(in, l) && !m.rewrites(in, l) && !(st.exit == properties.ExitPanic && m.callsRecover(g)) {
			continue
		}
		entered++
		rec := int8(recNo)
		if st.exit == properties.ExitPanic {
			rec = recCan
		}
		ns := m.lend(m.toCallee(in.ns, l))
		fs := m.factsToCallee(in, l, nil)
		keep := fr.clone()
		m.kill(keep, d)
		dst = append(dst, pds.Rule{Kind: pds.Push, State: runState, Top: m.entry(l.fi, ns, fs, rec),
			Below: m.symbol(symbol{kind: symDeferRet, fn: sym.fn, blk: sym.blk, idx: sym.idx,
				ns: m.t.nset(keep.ns), fs: m.t.factset(keep.fs),
				aux: m.cont(contRef{callee: int32(l.fi.id), closure: l.closure, rec: st.rec, mode: st.exit, ublk: st.blk, uidx: st.idx})}),
			Label: m.label(label{kind: lblDeferredRuns, instr: d, fn: g})})
	}
	if entered > 0 && entered == len(targets) {
		return dst
	}
	sum := m.sh.effectsAt(d)
	ex := m.sh.exitsAt(d)
	m.pass(fr, d, sum)
	m.kill(fr, d)
	if ex&effects.Panics != 0 && (m.panicMatters[fi.fn] || ex&effects.Returns == 0) {
		dst = append(dst, pds.Rule{Kind: pds.Pop, State: m.unwindState(fr, properties.ExitPanic), Label: m.label(label{kind: lblCallPanics, instr: d})})
	}
	if m.goexits(d, ex) {
		dst = append(dst, pds.Rule{Kind: pds.Pop, State: m.unwindState(fr, properties.ExitGoexit), Label: m.label(label{kind: lblGoexit, instr: d})})
	}
	if ex&effects.Returns != 0 {
		next := st
		next.ns, next.fs = m.t.nset(fr.ns), m.t.factset(fr.fs)
		dst = append(dst, pds.Rule{Kind: pds.Pop, State: m.state(next)})
	}
	return dst
}

func (m *Model) callsRecover(fn *ssa.Function) bool {
	for _, b := range fn.Blocks {
		for _, i := range b.Instrs {
			if c, ok := i.(*ssa.Call); ok {
				if bi, ok := c.Call.Value.(*ssa.Builtin); ok && bi.Name() == "recover" {
					return true
				}
			}
		}
	}
	return false
}

// resumeDefer goes on with the unwinding when a deferred call has come back.
func (m *Model) resumeDefer(st state, sym symbol, fr *frame, dst []pds.Rule) []pds.Rule {
	ref := m.conts[sym.aux]
	site := fr.b.Instrs[fr.i].(ssa.CallInstruction)
	l := m.linkOf(site, m.fns[ref.callee].fn, ref.closure)
	owner := fr.fi
	if outerDefer(site.(*ssa.Defer)) {
		owner = m.info(deferOwner(fr.fi.fn))
		fr.ns.outside = fr.ns.outside || m.t.nsets[st.ns].outside
		fr.ns.touched = fr.ns.touched || m.t.nsets[st.ns].touched
	} else {
		m.fromCallee(fr, st, l, nil)
	}
	next := state{kind: stUnwind, exit: ref.mode, fn: int32(owner.id), blk: ref.ublk, idx: ref.uidx, rec: ref.rec,
		ns: m.t.nset(fr.ns), fs: m.t.factset(fr.fs)}
	switch st.exit {
	case properties.ExitReturn:
		if st.rec == recDone && ref.mode == properties.ExitPanic {
			next.exit, next.blk, next.idx = properties.ExitReturn, 0, recovered
		}
	default:
		next.exit, next.blk, next.idx = st.exit, 0, 0
		if st.exit == properties.ExitPanic && ref.mode == properties.ExitGoexit {
			next.exit = properties.ExitPanic
		}
	}
	return append(dst, pds.Rule{Kind: pds.Pop, State: m.state(next)})
}

// deferOutside pushes a deferred call of the body of a range over a function: it
// belongs to the function around it, whose part of the stack cannot be reached
// from here. It travels with the exit until that function has control again.
func (m *Model) deferOutside(after, fr *frame, d *ssa.Defer) pds.Rule {
	lbl := m.label(label{kind: lblDefer, instr: d})
	if fr.fs.get(m.x.pending()) != 0 {
		m.note(d, "range-over-func", "only one deferred call is followed out of the body of a range over a function")
		return m.goTo(after, lbl)
	}
	pushed := nset{phase: fr.ns.phase}
	for _, e := range fr.ns.names {
		if i, ok := m.x.nodes[m.x.root[e]].ref.(ssa.Instruction); ok && i.Parent() == fr.fi.fn {
			pushed.add(e)
		}
	}
	id := m.symbol(symbol{kind: symDeferred, fn: int32(fr.fi.id), blk: int32(fr.b.Index), idx: int32(fr.i), ns: m.t.nset(pushed)})
	after.fs = after.fs.with(m.x.pending(), m.t.absOf(absVal{kind: aPending, lo: int64(id)}))
	return m.goTo(after, lbl)
}
