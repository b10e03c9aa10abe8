package frontend

import (
	"fmt"
	"go/token"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
	"pathtally/pds"
	"pathtally/properties"
)

// frame is a function activation at a point, with what the path knows of it.
// The walk changes its own copy.
type frame struct {
	fi  *fnInfo
	b   *ssa.BasicBlock
	i   int
	ns  nset
	fs  factset
	rec int8
}

func (m *Model) frameOf(s symbol) *frame {
	fi := m.fns[s.fn]
	fr := &frame{fi: fi, ns: m.t.nsets[s.ns], fs: m.t.facts[s.fs], i: int(s.idx)}
	if len(fi.fn.Blocks) > 0 {
		fr.b = fi.fn.Blocks[s.blk]
	}
	if s.kind == symEntry || s.kind == symPoint {
		fr.rec = int8(s.aux)
	}
	return fr
}

func (m *Model) point(fr *frame) pds.SymbolID {
	m.tidy(&fr.ns)
	return m.bounded(symbol{kind: symPoint, fn: int32(fr.fi.id), blk: int32(fr.b.Index), idx: int32(fr.i),
		ns: m.t.nset(fr.ns), aux: int32(fr.rec)}, fr.fs)
}

// maxFactsets bounds the sets of facts that one point of a function (with one
// set of names) is told apart by. Past it facts about integers are dropped, and
// past twice as many all facts: that only adds paths.
const maxFactsets = 40

// bounded interns the symbol s with the facts fs, or with fewer. What a symbol
// was reduced to is remembered: the answer for a frame does not change, however
// many others there are by the time it is asked again.
func (m *Model) bounded(s symbol, fs factset) pds.SymbolID {
	full := s
	full.fs = m.t.factset(fs)
	if id, ok := m.reduced[full]; ok {
		return id
	}
	n := m.factsets[s]
	less := full
	switch {
	case n >= 2*maxFactsets:
		less.fs = m.t.factset(nil)
	case n >= maxFactsets:
		less.fs = m.t.factset(fs.only(func(f fact) bool { return m.t.abs[f.val].kind != aInt && m.x.nodes[f.key].kind != kBin }))
	}
	if _, known := m.symID[less]; !known {
		m.factsets[s] = n + 1
	}
	id := m.symbol(less)
	m.reduced[full] = id
	return id
}

// Rules implements pds.System: it walks from the head's point to the next step
// that branches, calls, counts or leaves, and gives the rules of that step.
func (m *Model) Rules(h pds.Head, dst []pds.Rule) []pds.Rule {
	if h.Symbol == 0 || h.State == 0 {
		return dst
	}
	sym, st := m.symbols[h.Symbol], m.states[h.State]
	fr := m.frameOf(sym)
	switch st.kind {
	case stRun:
		switch sym.kind {
		case symEntry:
			m.visited[fr.fi.fn] = true
			if m.flowOf(fr.fi).defers {
				return append(dst, pds.Rule{Kind: pds.Push, State: runState, Top: m.point(fr),
					Below: m.symbol(symbol{kind: symLeave, fn: int32(fr.fi.id)})})
			}
			return m.walk(fr, dst)
		case symPoint:
			return m.walk(fr, dst)
		case symSpawned:
			return append(dst, pds.Rule{Kind: pds.Push, State: runState, Top: m.entry(fr.fi, fr.ns, fr.fs, recNo),
				Below: h.Symbol})
		}
	case stExit:
		switch sym.kind {
		case symSpawned:
			if !m.handedOn(m.t.nsets[st.ns], fr.ns) {
				dst = append(dst, pds.Rule{Kind: pds.Pop, State: h.State})
			}
			return dst
		case symCont:
			return m.resume(st, sym, fr, dst)
		case symDeferRet:
			return m.resumeDefer(st, sym, fr, dst)
		}
	case stUnwind:
		switch sym.kind {
		case symDeferred:
			return m.runDeferred(st, sym, dst)
		case symLeave:
			return m.leave(st, sym, dst)
		}
	}
	return dst
}

// walk runs the frame until a step that matters.
func (m *Model) walk(fr *frame, dst []pds.Rule) []pds.Rule {
	if fr.ns.gone() {
		return append(dst, m.lost(fr))
	}
	if side := fr.i - len(fr.b.Instrs); side >= 0 && side < len(fr.b.Succs) {
		if out, done := m.follow(fr, side, dst); done {
			return out
		}
	}
	blocks := 0
	limit := 4*len(fr.fi.fn.Blocks) + 16
	for {
		for fr.i < len(fr.b.Instrs) {
			instr := fr.b.Instrs[fr.i]
			out, done := m.step(fr, instr, dst)
			if done {
				return out
			}
			if fr.ns.gone() {
				// The step that loses it is shown; behind it everything stops.
				return append(dst, m.goTo(fr, m.label(label{kind: lblLost, instr: instr})))
			}
			if fr.i < len(fr.b.Instrs) && fr.b.Instrs[fr.i] == instr {
				fr.i++
			}
			if fr.i == 0 {
				break // a jump
			}
		}
		if blocks++; blocks > limit {
			// A long way in which nothing happens, or a circle: then the steps
			// meet a point that was there before.
			return append(dst, m.goTo(fr, 0))
		}
		if len(fr.b.Instrs) == 0 {
			return dst
		}
	}
}

// lost ends a path whose instance exists, though nothing can name it any more.
func (m *Model) lost(fr *frame) pds.Rule {
	r := pds.Rule{Kind: pds.Stop}
	if !fr.ns.outside {
		r.Mark = pds.MarkLoss
		r.Label = m.label(label{kind: lblLost, instr: m.instrAt(fr)})
	}
	return r
}

func (m *Model) instrAt(fr *frame) ssa.Instruction {
	if fr.b == nil || len(fr.b.Instrs) == 0 {
		return nil
	}
	return fr.b.Instrs[min(fr.i, len(fr.b.Instrs)-1)]
}

func (f *frame) clone() *frame { c := *f; return &c }

func (m *Model) goTo(fr *frame, lbl pds.LabelID) pds.Rule {
	return pds.Rule{Kind: pds.Step, State: runState, Top: m.point(fr), Label: lbl}
}

// step executes one instruction. done: out holds the rules of the walk's end.
// A jump leaves fr at instruction 0 of another block.
func (m *Model) step(fr *frame, instr ssa.Instruction, dst []pds.Rule) (out []pds.Rule, done bool) {
	switch i := instr.(type) {
	case *ssa.Phi, *ssa.DebugRef:
		return nil, false
	case *ssa.Jump:
		return m.follow(fr, 0, dst)
	case *ssa.If:
		return m.branch(fr, i, dst)
	case *ssa.Return:
		if m.flowOf(fr.fi).lateDefers && fr.b != fr.fi.fn.Recover {
			r := m.unwind(fr, properties.ExitReturn)
			r.Label = m.label(label{kind: lblReturn, instr: i})
			return append(dst, r), true
		}
		return append(dst, m.ret(fr, i)), true
	case *ssa.Panic:
		return m.panics(fr, i, dst), true
	case *ssa.RunDefers:
		fr.i++
		r := m.unwind(fr, properties.ExitReturn)
		if ret, ok := fr.b.Instrs[len(fr.b.Instrs)-1].(*ssa.Return); ok {
			r.Label = m.label(label{kind: lblReturn, instr: ret})
		}
		return append(dst, r), true
	case *ssa.Defer:
		return append(dst, m.deferRule(fr, i)), true
	case *ssa.Go:
		return m.spawn(fr, i, dst)
	case *ssa.Call:
		return m.call(fr, i, dst)
	case *ssa.Store:
		m.store(fr, i)
		return nil, false
	case *ssa.MapUpdate:
		m.mapUpdate(fr, i)
		m.insert(fr, m.x.name(i.Map), i.Map, i.Key)
		return nil, false
	case *ssa.Send:
		m.insert(fr, 0, nil, i.X)
		return nil, false
	case *ssa.Select:
		if m.sendsIt(fr, i) {
			return m.choose(fr, i, dst), true
		}
	}
	v, ok := instr.(ssa.Value)
	if !ok {
		return nil, false
	}
	m.define(fr, v)
	switch v := v.(type) {
	case *ssa.Alloc:
		m.zero(fr, v)
	case *ssa.UnOp:
		if v.Op == token.MUL {
			m.load(fr, v)
		}
	case *ssa.Slice:
		m.slice(fr, v)
	case *ssa.IndexAddr:
		if out, done := m.take(fr, v, dst); done {
			return out, true
		}
		m.perhaps(fr, m.x.name(v.X), m.x.name(v.Index), func(e Expr) Expr { return e })
	case *ssa.Convert, *ssa.MultiConvert, *ssa.SliceToArrayPointer, *ssa.Range:
		for _, op := range instr.Operands(nil) {
			m.hold(fr, m.x.name(*op), m.x.reg(v))
		}
	case *ssa.TypeAssert:
		if v.CommaOk {
			return nil, false
		}
	case *ssa.Lookup:
		m.fetch(fr, v, v.X, v.Index)
	case *ssa.Index:
		if out, done := m.take(fr, v, dst); done {
			return out, true
		}
		m.fetch(fr, v, v.X, v.Index)
	case *ssa.Next:
		if out, done := m.take(fr, v, dst); done {
			return out, true
		}
		m.fetch(fr, v, v.Iter, nil)
	}
	return m.bornAt(fr, v, dst, fr.i+1)
}

// define: register v is given a new value; what was known of the old one ends.
func (m *Model) define(fr *frame, v ssa.Value) {
	if !m.flowOf(fr.fi).inLoop[fr.b.Index] {
		return
	}
	m.reuse(&fr.ns, fr.fi, v)
	fr.ns.filter(func(e Expr) bool { return !m.x.mentions(e, v) })
	fr.fs = fr.fs.filter(func(e Expr) bool { return !m.x.mentions(e, v) })
}

// bornAt forks where v may be "this one": the instance of a rule whose
// instances come into being by being met.
func (m *Model) bornAt(fr *frame, v ssa.Value, dst []pds.Rule, next int) ([]pds.Rule, bool) {
	if fr.ns.phase != unborn {
		return nil, false
	}
	list := fr.fi.births[v]
	if len(list) == 0 {
		return nil, false
	}
	c := fr.clone()
	c.i = next
	dst = append(dst, m.goTo(c, 0))
	for _, x := range list {
		c := fr.clone()
		c.i = next
		c.ns = nset{phase: born}
		c.ns.add(x.name)
		c.ns.add(x.static)
		dst = append(dst, m.goTo(c, m.label(label{kind: lblBirth, instr: v.(ssa.Instruction)})))
	}
	return dst, true
}

// zero: a fresh object has zero in every place.
func (m *Model) zero(fr *frame, v *ssa.Alloc) {
	f := m.flowOf(fr.fi)
	r := m.x.reg(v)
	for _, k := range f.zeroKeys(m.x, v, r) {
		n := m.x.nodes[k]
		t := v.Type().Underlying().(*types.Pointer).Elem()
		if in := m.x.nodes[n.x]; in.kind == kField {
			t = in.ref.(*types.Var).Type()
		}
		m.setFact(fr, k, m.zeroAbs(t))
	}
}

func (m *Model) zeroAbs(t types.Type) Abs {
	switch {
	case isNilable(t):
		return m.t.absOf(absVal{kind: aNil})
	case isBool(t):
		return m.boolAbs(false)
	case isInt(t):
		return m.intAbs(0, 0)
	}
	return 0
}

// load: register v now holds what the place holds.
func (m *Model) load(fr *frame, v *ssa.UnOp) {
	r := m.x.reg(v)
	a := m.x.name(v.X)
	if fr.ns.phase == born {
		p := m.x.load(a)
		old := fr.ns.names
		for _, e := range old {
			if p != 0 {
				fr.ns.add(m.x.rename(e, p, r))
			}
			if n := m.x.nodes[e]; n.kind == kHeld && m.x.within(n.x, a) && m.carries(v.Type()) {
				// The place lies in something that holds the instance.
				fr.ns.add(m.x.maybe(r))
				fr.ns.add(m.x.held(r))
			}
		}
		if s := m.x.load(m.placeKey(v.X, fr.b, 0)); s != 0 && s != p {
			for _, e := range old {
				fr.ns.add(m.x.rename(e, s, r))
			}
		}
	}
	f := m.flowOf(fr.fi)
	if f.wants(r) {
		p := m.x.load(m.placeKey(v.X, fr.b, 0))
		val := fr.fs.get(p)
		if val == 0 {
			if g, ok := v.X.(*ssa.Global); ok {
				val = m.globalAbs(g)
			}
		}
		m.setFact(fr, r, val)
	}
}

// hold: dst holds whatever src holds or is, inexactly.
func (m *Model) hold(fr *frame, src, dst Expr) {
	if fr.ns.phase != born {
		return
	}
	for _, e := range fr.ns.names {
		if m.x.within(src, e) {
			fr.ns.add(m.x.held(dst))
		}
	}
}

// fetch: an element is taken out of a container.
func (m *Model) fetch(fr *frame, v ssa.Value, from, at ssa.Value) {
	if fr.ns.phase != born {
		return
	}
	c := m.x.name(from)
	if at != nil {
		to := m.x.reg(v)
		if _, ok := v.Type().(*types.Tuple); ok {
			to = m.x.res(v, 0)
		}
		place := m.x.index(c, m.x.name(at))
		for _, e := range fr.ns.names {
			fr.ns.add(m.x.rename(e, place, to))
		}
		m.perhaps(fr, c, m.x.name(at), func(e Expr) Expr { return m.x.rename(e, place, to) })
	}
	for _, e := range fr.ns.names {
		if n := m.x.nodes[e]; n.kind == kHeld && n.x == c && m.carries(v.Type()) {
			if t, ok := v.Type().(*types.Tuple); ok {
				for i := range t.Len() {
					if m.carries(t.At(i).Type()) {
						fr.ns.add(m.x.maybe(m.x.res(v, i)))
						fr.ns.add(m.x.held(m.x.res(v, i)))
					}
				}
				continue
			}
			fr.ns.add(m.x.maybe(m.x.reg(v)))
			fr.ns.add(m.x.held(m.x.reg(v)))
		}
	}
}

// insert: val goes into the container c (0: somewhere out of sight).
func (m *Model) insert(fr *frame, c Expr, cv ssa.Value, val ssa.Value) {
	if fr.ns.phase != born {
		return
	}
	for _, e := range fr.ns.names {
		if !m.reaches(e, val) {
			continue
		}
		if c == 0 {
			fr.ns.outside = true
			continue
		}
		m.holdIn(fr, c, cv)
	}
}

// holdIn: the object behind c (the register cv) holds the instance now.
func (m *Model) holdIn(fr *frame, c Expr, cv ssa.Value) {
	fr.ns.add(m.x.held(c))
	for _, o := range m.origins(fr.fi, cv) {
		m.heldUnder(fr, o)
	}
}

func (m *Model) heldUnder(fr *frame, o origin) {
	switch m.x.rootKind(o.s) {
	case kParam, kFree, kGlobal:
		h := m.x.held(o.s)
		if m.x.rootKind(o.s) == kParam && m.x.loads[h] == 0 {
			h = m.x.held(m.x.load(o.s))
		}
		fr.ns.add(h)
	case kReg, kRes:
		switch ref := m.x.nodes[m.x.root[o.s]].ref.(type) {
		case *ssa.Alloc, *ssa.MakeMap, *ssa.MakeSlice, *ssa.MakeChan, *ssa.MakeClosure, *ssa.Const:
		case *ssa.Call:
			if b, ok := ref.Call.Value.(*ssa.Builtin); ok && b.Name() == "append" {
				return
			}
			fr.ns.outside = true // in an object that came from elsewhere
		default:
			fr.ns.outside = true
		}
	}
}

// store: memory changes.
func (m *Model) store(fr *frame, st *ssa.Store) {
	a := m.x.name(st.Addr)
	s := m.placeKey(st.Addr, fr.b, 0)
	f := m.flowOf(fr.fi)
	var known Abs
	if len(f.keys) > 0 {
		known = m.absOf(fr, st.Val, fr.b)
	}
	if fr.ns.phase == born && len(fr.ns.names) > 0 {
		old := fr.ns.names
		_, isConst := st.Val.(*ssa.Const)
		hit := func(addr Expr) bool {
			return addr == a || addr == s || m.x.within(a, addr) && m.x.loads[addr] == m.x.loads[a] ||
				s != 0 && m.x.within(s, addr) && m.x.loads[addr] == m.x.loads[s]
		}
		fr.ns.filter(func(e Expr) bool { return !m.x.readsPlace(e, hit) })
		if !isConst {
			for _, e := range old {
				if !m.reaches(e, st.Val) {
					continue
				}
				m.carryOver(&fr.ns, e, st.Val, m.x.load(a))
				if p := m.path(st.Addr); p != a {
					m.carryOver(&fr.ns, e, st.Val, m.x.load(p))
				}
				m.alsoUnder(fr, st.Addr, e, st.Val)
			}
		}
		if len(fr.ns.names) < len(old) && m.allSpent(fr) {
			fr.ns.names = nil // overwritten, and the registers it is still in are not used any more
		}
	}
	// A number that is counted up in memory is widened as one in a register is.
	old := fr.fs
	_, isConst := st.Val.(*ssa.Const)
	running := m.t.abs[known].kind == aInt && !isConst && f.inLoop[fr.b.Index]
	if len(fr.fs) > 0 {
		fr.fs = fr.fs.filter(func(e Expr) bool {
			return !m.x.readsPlace(e, func(addr Expr) bool { return m.sameShape(addr, a) || s != 0 && m.sameShape(addr, s) }) &&
				!m.x.callsGetter(e, func(g *ssa.Function) bool { return m.mayChange(m.sh.eff.Of(g), st.Addr) })
		})
	}
	for _, p := range [2]Expr{m.x.load(s), m.x.load(a)} {
		if p != 0 {
			if running && old.get(p) != 0 {
				known = m.widen(old.get(p), known)
			} else if running {
				known = 0
			}
			m.setFact(fr, p, known)
		}
	}
}

// alsoUnder names what was stored under the other ways to write its address: a
// store through a loaded pointer shows under the place the pointer came from,
// and in an object from elsewhere it is out of the function's hands.
func (m *Model) alsoUnder(fr *frame, addr ssa.Value, e Expr, val ssa.Value) {
	if k := m.x.rootKind(m.x.name(addr)); k != kReg && k != kRes {
		return
	}
	for _, o := range m.origins(fr.fi, addr) {
		switch m.x.rootKind(o.s) {
		case kParam, kFree, kGlobal:
			if m.x.frameFree(o.s) {
				m.carryOver(&fr.ns, e, val, m.x.load(o.s))
			} else {
				m.heldUnder(fr, o)
			}
		default:
			m.heldUnder(fr, o)
		}
	}
}

// sameShape: may a store to b change the place a? Places of different fields,
// different variables or different kinds are different; one field of two
// objects may be the same object's.
func (m *Model) sameShape(a, b Expr) bool {
	if a == b {
		return true
	}
	if a == 0 || b == 0 {
		return false
	}
	x, y := m.x.nodes[a], m.x.nodes[b]
	if m.x.within(b, a) && m.x.loads[a] == m.x.loads[b] {
		return true // a lies in the struct that is stored as a whole
	}
	switch {
	case x.kind == kField && y.kind == kField:
		if x.ref != y.ref {
			return false
		}
		return !m.freshApart(x.x, y.x)
	case x.kind == kIndex && y.kind == kIndex:
		return true
	case x.kind == kParam || y.kind == kParam || x.kind == kReg && y.kind == kReg:
		_, xa := x.ref.(*ssa.Alloc)
		_, ya := y.ref.(*ssa.Alloc)
		return !xa && !ya && x.kind != kField && y.kind != kField && x.kind != kIndex && y.kind != kIndex && x.kind != kGlobal && y.kind != kGlobal && x.kind != kFree && y.kind != kFree
	}
	return false
}

// freshApart: two different objects, at least one of which was allocated here.
func (m *Model) freshApart(a, b Expr) bool {
	x, y := m.x.nodes[a], m.x.nodes[b]
	_, xa := x.ref.(*ssa.Alloc)
	_, ya := y.ref.(*ssa.Alloc)
	if x.kind == kReg && xa && y.kind == kReg && ya {
		return a != b
	}
	return x.kind == kReg && xa && y.kind == kParam || y.kind == kReg && ya && x.kind == kParam
}

// edge walks from block `from` to block `to`: φs take the values of the edge,
// and what nothing later asks for is forgotten.
func (m *Model) edge(fr *frame, from, to *ssa.BasicBlock) {
	pred := -1
	for k, p := range to.Preds {
		if p == from {
			pred = k
			break
		}
	}
	f := m.flowOf(fr.fi)
	m.crossLoops(&fr.ns, fr.fi, from, to)
	for _, instr := range to.Instrs {
		phi, ok := instr.(*ssa.Phi)
		if !ok {
			break
		}
		m.reuse(&fr.ns, fr.fi, phi)
	}
	ns, fs := fr.ns, fr.fs
	for _, instr := range to.Instrs {
		phi, ok := instr.(*ssa.Phi)
		if !ok {
			break
		}
		r := m.x.reg(phi)
		want := f.wants(r)
		if !want && !m.carries(phi.Type()) {
			continue
		}
		ns.filter(func(e Expr) bool { return !m.x.mentions(e, phi) })
		fs = fs.filter(func(e Expr) bool { return !m.x.mentions(e, phi) })
	}
	for _, instr := range to.Instrs {
		phi, ok := instr.(*ssa.Phi)
		if !ok {
			break
		}
		if pred < 0 {
			continue
		}
		r, v := m.x.reg(phi), phi.Edges[pred]
		if fr.ns.phase == born && m.carries(phi.Type()) {
			for _, e := range fr.ns.names {
				m.carryOver(&ns, e, v, r)
			}
		}
		if f.wants(r) {
			a := m.absOf(fr, v, from)
			if n := m.t.abs[a]; n.kind == aInt && to.Dominates(from) && (!n.small() || !m.smallLoop(phi)) {
				a = m.widen(fr.fs.get(r), a)
			}
			if a != 0 {
				fs = fs.with(r, a)
			} else {
				fs = fs.with(r, 0)
			}
		}
	}
	fr.ns, fr.fs = ns, fs
	fr.b, fr.i = to, 0
	for fr.i < len(to.Instrs) {
		if _, ok := to.Instrs[fr.i].(*ssa.Phi); !ok {
			break
		}
		fr.i++
	}
	if fr.i == 0 && len(to.Instrs) == 0 {
		return
	}
	m.prune(fr)
}

// prune forgets facts that nothing asks for from here on, and names of
// registers that are not used any more (as long as the instance has another
// name: the last one is kept, so that it is lost where a reader sees it lost).
func (m *Model) prune(fr *frame) {
	f := m.flowOf(fr.fi)
	fr.fs = fr.fs.filter(func(k Expr) bool {
		live, ok := f.keys[k]
		return ok && live.has(fr.b.Index) || k == m.x.pending()
	})
	if fr.ns.phase != born || len(fr.ns.names) < 2 {
		return
	}
	m.tidy(&fr.ns)
	dead := func(e Expr) bool {
		switch n := m.x.nodes[m.x.root[e]]; n.kind {
		case kReg, kRes:
			v, ok := n.ref.(ssa.Value)
			return ok && !f.liveAt(v, fr.b)
		}
		return false
	}
	// rank: 0 exact, 1 may be it, 2 may hold it.
	rank := func(e Expr) int {
		switch m.x.nodes[e].kind {
		case kMaybe:
			return 1
		case kHeld:
			return 2
		}
		return 0
	}
	best := 3 // of the names that are alive
	for _, e := range fr.ns.names {
		if r := rank(e); !dead(e) {
			best = min(best, r)
		}
	}
	if best < 3 {
		fr.ns.filter(func(e Expr) bool { return !dead(e) || rank(e) < best })
	}
}

// loopHead tells whether a back edge leads to b.
func (m *Model) loopHead(b *ssa.BasicBlock) bool {
	for _, p := range b.Preds {
		if b.Dominates(p) {
			return true
		}
	}
	return false
}

// widen is what a loop header keeps of a number that was `old` in this turn and
// is `next` in the following one: the first turn is told from the others, the
// others are one interval, or a running counter would never end.
func (m *Model) widen(old, next Abs) Abs {
	o, n := m.t.abs[old], m.t.abs[next]
	switch {
	case old == next:
		return old
	case o.kind != aInt:
		return 0
	case o.lo <= n.lo && n.hi <= o.hi && o.lo != o.hi:
		return old
	case o.lo != o.hi:
		return 0
	case n.lo > o.hi:
		return m.intAbs(n.lo, maxInt)
	case n.hi < o.lo:
		return m.intAbs(minInt, n.hi)
	}
	return 0
}

// maxUnroll bounds the numbers that are followed one by one: turns of a loop,
// depths of a recursion.
const maxUnroll = 16

// smallLoop: a counter whose comparison with a small constant ends the loop is
// unrolled (three tries are three turns).
func (m *Model) smallLoop(phi *ssa.Phi) bool {
	head := phi.Block()
	ends := func(v ssa.Value) bool {
		for _, r := range *v.Referrers() {
			b, ok := r.(*ssa.BinOp)
			if !ok || b.Block() != head && !head.Dominates(b.Block()) {
				continue
			}
			switch b.Op {
			case token.LSS, token.LEQ, token.GTR, token.GEQ, token.NEQ, token.EQL:
			default:
				continue
			}
			if !leavesLoop(b, head) {
				continue
			}
			for _, op := range []ssa.Value{b.X, b.Y} {
				if c, ok := op.(*ssa.Const); ok && c.Value != nil && isInt(c.Type()) {
					if n := c.Int64(); n >= -maxUnroll/2 && n <= maxUnroll {
						return true
					}
				}
			}
		}
		return false
	}
	if ends(phi) {
		return true
	}
	for _, r := range *phi.Referrers() {
		// for i := range 3: counted first and compared then.
		if b, ok := r.(*ssa.BinOp); ok && (b.Op == token.ADD || b.Op == token.SUB) && ends(b) {
			return true
		}
	}
	return false
}

// leavesLoop tells whether a branch on cond has a side that does not come back to head.
func leavesLoop(cond *ssa.BinOp, head *ssa.BasicBlock) bool {
	b := cond.Block()
	iff, ok := b.Instrs[len(b.Instrs)-1].(*ssa.If)
	if !ok || iff.Cond != cond {
		return false
	}
	for _, s := range b.Succs {
		if s != head && !reaches(s, head) {
			return true
		}
	}
	return false
}

// reaches tells whether a path inside the part that `to` dominates leads to `to`.
func reaches(from, to *ssa.BasicBlock) bool {
	seen := map[*ssa.BasicBlock]bool{}
	work := []*ssa.BasicBlock{from}
	for len(work) > 0 {
		c := work[len(work)-1]
		work = work[:len(work)-1]
		if c == to {
			return true
		}
		if seen[c] || !to.Dominates(c) {
			continue
		}
		seen[c] = true
		work = append(work, c.Succs...)
	}
	return false
}

// small tells whether an interval's finite bounds are small enough to follow.
func (v absVal) small() bool {
	in := func(n int64) bool { return n == minInt || n == maxInt || n >= -2*maxUnroll && n <= 2*maxUnroll }
	return in(v.lo) && in(v.hi)
}

// branch decides an If by what is known, skips it if it bears on nothing, and
// forks otherwise.
func (m *Model) branch(fr *frame, i *ssa.If, dst []pds.Rule) ([]pds.Rule, bool) {
	b := fr.b
	if a := m.t.abs[m.absOf(fr, i.Cond, b)]; a.kind == aBool {
		side := 1
		if a.lo == 1 {
			side = 0
		}
		if side == 1 && !m.exhausted(fr, i) {
			return dst, true
		}
		return m.follow(fr, side, dst)
	}
	if j := m.flowOf(fr.fi).jump[b.Index]; j != nil {
		m.skip(fr, b, j)
		return nil, false
	}
	for side := range 2 {
		if impossible(b.Succs[side]) {
			m.edge(fr, b, b.Succs[1-side]) // the last case of a blocking select
			return nil, false
		}
	}
	for side := range 2 {
		c := fr.clone()
		if !m.assume(c, i.Cond, side == 0, b) || side == 1 && !m.exhausted(c, i) {
			continue
		}
		if fr.ns.phase == born && turns(b, b.Succs[side]) {
			c.i = len(b.Instrs) + side // the next step shows the turn
		} else {
			m.edge(c, b, b.Succs[side])
		}
		kind := lblTrue
		if side == 1 {
			kind = lblFalse
		}
		dst = append(dst, m.goTo(c, m.label(label{kind: kind, instr: i})))
	}
	return dst, true
}

// turns tells whether the edge ends a turn of a loop.
func turns(from, to *ssa.BasicBlock) bool {
	return to.Dominates(from) || to.Comment == "for.post"
}

// follow takes the edge to successor side of fr.b. While there is an instance,
// the end of a turn of a loop is a step of its own: that is where a reader sees
// the loop lose what the turn has made.
func (m *Model) follow(fr *frame, side int, dst []pds.Rule) ([]pds.Rule, bool) {
	from, to := fr.b, fr.b.Succs[side]
	before := fr.ns.names
	m.edge(fr, from, to)
	if fr.ns.phase != born {
		return nil, false
	}
	if !turns(from, to) {
		by := m.replacedBy(before, from, to)
		if by == nil || !m.allDead(fr) {
			return nil, false
		}
		fr.ns.names = nil
		return append(dst, m.goTo(fr, m.label(label{kind: lblLost, instr: by}))), true
	}
	l := label{kind: lblTurn, instr: from.Instrs[len(from.Instrs)-1], side: int8(side)}
	if m.allDead(fr) {
		fr.ns.names = nil
		l.kind = lblTurnLost
	} else if from.Comment == "for.post" {
		return nil, false // shown where the body ended
	}
	return append(dst, m.goTo(fr, m.label(l))), true
}

// replacedBy finds the assignment that put something else into the variable
// that one of the names was: on other ways to block `to` it still is. nil if
// there is none.
func (m *Model) replacedBy(names []Expr, from, to *ssa.BasicBlock) ssa.Instruction {
	pred := slices.Index(to.Preds, from)
	for _, instr := range to.Instrs {
		phi, ok := instr.(*ssa.Phi)
		if !ok {
			break
		}
		for _, e := range names {
			for k, v := range phi.Edges {
				if k == pred || v == phi.Edges[pred] || m.x.name(v) != e {
					continue
				}
				switch now := phi.Edges[pred].(type) {
				case *ssa.Extract:
					return now.Tuple.(ssa.Instruction)
				case ssa.Instruction:
					if _, phi := now.(*ssa.Phi); !phi {
						return now
					}
				}
				return from.Instrs[len(from.Instrs)-1]
			}
		}
	}
	return nil
}

// allDead tells whether every name of the instance is rooted in a register that
// is not used from the start of fr.b on.
func (m *Model) allDead(fr *frame) bool {
	f := m.flowOf(fr.fi)
	for _, e := range fr.ns.names {
		switch n := m.x.nodes[m.x.root[e]]; n.kind {
		case kReg, kRes:
			if v, ok := n.ref.(ssa.Value); !ok || f.liveAt(v, fr.b) {
				return false
			}
		default:
			return false
		}
	}
	return true
}

// allSpent tells whether every name of the instance is rooted in a register that
// is not used behind the instruction at fr.
func (m *Model) allSpent(fr *frame) bool {
	f := m.flowOf(fr.fi)
	for _, e := range fr.ns.names {
		n := m.x.nodes[m.x.root[e]]
		v, ok := n.ref.(ssa.Value)
		if n.kind != kReg && n.kind != kRes || !ok || f.pinned[v] {
			return false
		}
		for _, s := range fr.b.Succs {
			if f.liveAt(v, s) {
				return false
			}
		}
		for _, i := range fr.b.Instrs[min(fr.i+1, len(fr.b.Instrs)):] {
			for _, op := range i.Operands(nil) {
				if *op != nil && baseOf(*op) == v {
					return false
				}
			}
		}
	}
	return true
}

// skip goes from a branch that bears on nothing to where its sides meet.
func (m *Model) skip(fr *frame, b, j *ssa.BasicBlock) {
	region := map[*ssa.BasicBlock]bool{}
	work := append([]*ssa.BasicBlock(nil), b.Succs...)
	for len(work) > 0 {
		c := work[len(work)-1]
		work = work[:len(work)-1]
		if c == j || region[c] {
			continue
		}
		region[c] = true
		work = append(work, c.Succs...)
	}
	from := b
	for _, p := range j.Preds {
		if p == b || region[p] {
			from = p
			break
		}
	}
	if m.flowOf(fr.fi).inLoop[b.Index] {
		stale := func(e Expr) bool {
			if n := m.x.nodes[m.x.root[e]]; n.kind == kReg || n.kind == kRes {
				if i, ok := n.ref.(ssa.Instruction); ok {
					return region[i.Block()]
				}
			}
			return false
		}
		fr.ns.filter(func(e Expr) bool { return !stale(e) })
		fr.fs = fr.fs.filter(func(e Expr) bool { return !stale(e) })
	}
	m.edge(fr, from, j)
}

// ret leaves the function normally.
func (m *Model) ret(fr *frame, r *ssa.Return) pds.Rule {
	st := m.exitState(fr, properties.ExitReturn, r.Results)
	rule := pds.Rule{Kind: pds.Pop, State: m.state(st)}
	// With deferred calls the return was shown before they ran; the end of a
	// package's initialisation stands nowhere.
	if !runsDefers(fr.b) && (r.Pos().IsValid() || fr.fi.fn.Syntax() != nil) {
		rule.Label = m.label(label{kind: lblReturn, instr: r})
	}
	return rule
}

func runsDefers(b *ssa.BasicBlock) bool {
	for _, i := range b.Instrs {
		if _, ok := i.(*ssa.RunDefers); ok {
			return true
		}
	}
	return false
}

// exitState is what the caller learns when the frame ends.
func (m *Model) exitState(fr *frame, kind properties.ExitKind, results []ssa.Value) state {
	st := state{kind: stExit, exit: kind}
	ns := nset{phase: fr.ns.phase, outside: fr.ns.outside, touched: fr.ns.touched}
	here := func(y Expr) Expr {
		if m.x.frameFree(y) {
			return y
		}
		return 0
	}
	for _, e := range fr.ns.names {
		switch u := m.unspilled(fr.fi, e); m.x.rootKind(u) {
		case kParam, kFree, kGlobal:
			// Names that read no memory the caller has kept itself.
			if e := m.outward(u, here); m.x.loads[e] > 0 && m.x.frameFree(e) {
				ns.add(e)
			}
		}
		var given nset
		for i, r := range results {
			m.carryOver(&given, e, r, m.x.result(i))
		}
		for _, e := range given.names {
			ns.add(m.outward(e, here))
		}
	}
	if fr.rec == recDone {
		st.rec = recDone
	}
	var fs factset
	for i, r := range results {
		a := m.absOf(fr, r, fr.b)
		if v := m.t.abs[a]; v.kind == aInt && v.lo != v.hi {
			a = 0
		}
		if a != 0 {
			fs = fs.with(m.x.result(i), a)
		}
	}
	// What the function itself stored, where callers ask.
	sum := m.sh.eff.Of(fr.fi.fn)
	for _, f := range fr.fs {
		if k := m.x.nodes[f.key].kind; !m.x.frameFree(f.key) || !m.x.hasLoad(f.key) || k == kBin || k == kGet {
			continue
		}
		if m.x.readsPlace(f.key, func(addr Expr) bool { return m.overwrites(sum, addr, fr.fi.fn) }) {
			fs = fs.with(f.key, f.val)
		}
	}
	if kind == properties.ExitReturn {
		m.outcome(&st, fr, results)
	}
	if kind != properties.ExitReturn {
		fs = nil
	}
	if a := fr.fs.get(m.x.pending()); a != 0 {
		fs = fs.with(m.x.pending(), a)
	}
	return m.boundedExit(fr.fi, st, ns, fs)
}

var errorType = types.Universe.Lookup("error").Type()

func (m *Model) outcome(st *state, fr *frame, results []ssa.Value) {
	sig := fr.fi.fn.Signature.Results()
	if sig.Len() == 0 {
		st.outcome = properties.Success
		return
	}
	last := sig.At(sig.Len() - 1).Type()
	var a absVal
	if len(results) == sig.Len() {
		a = m.t.abs[m.absOf(fr, results[len(results)-1], fr.b)]
	}
	switch {
	case types.Identical(last, errorType):
		switch a.kind {
		case aNil:
			st.outcome = properties.Success
		case aNon, aType:
			st.outcome = properties.Failure
		}
	default:
		st.outcome = properties.Success
		if isBool(last) && a.kind == aBool {
			st.last = int8(2*a.lo - 1)
		}
	}
}

// overwrites tells whether a call summarised by sum may store to the place.
// addr is written over the frame of fn; nil if that is not known.
func (m *Model) overwrites(sum *effects.Summary, addr Expr, fn *ssa.Function) bool {
	k := writeKey{sum, addr, fn}
	w, ok := m.writes[k]
	if !ok {
		w = m.overwritesNew(sum, addr, fn)
		m.writes[k] = w
	}
	return w
}

type writeKey struct {
	sum  *effects.Summary
	addr Expr
	fn   *ssa.Function
}

func (m *Model) overwritesNew(sum *effects.Summary, addr Expr, fn *ssa.Function) bool {
	n := m.x.nodes[addr]
	switch n.kind {
	case kField:
		return sum.MayOverwriteField(n.ref.(*types.Var))
	case kGlobal:
		return sum.MayOverwriteGlobal(n.ref.(*ssa.Global))
	case kIndex:
		return sum.Writes() && m.elemWritten(sum, n.x, fn)
	case kReg:
		a, ok := n.ref.(*ssa.Alloc)
		if !ok {
			return m.cellWritten(sum, addr, fn)
		}
		return storedOutside(a) && sum.MayOverwriteCell(a.Type().Underlying().(*types.Pointer).Elem())
	case kFree, kParam, kLoad, kCap, kFieldVal, kRes, kResult:
		return m.cellWritten(sum, addr, fn)
	}
	return false
}

// cellWritten: a place that only its type tells from others.
func (m *Model) cellWritten(sum *effects.Summary, addr Expr, fn *ssa.Function) bool {
	if fn == nil {
		return sum.Writes()
	}
	if t := m.typeOf(fn, addr); t != nil {
		if p, ok := t.Underlying().(*types.Pointer); ok {
			return sum.MayOverwriteCell(p.Elem())
		}
	}
	return sum.Writes()
}

// elemWritten: a container of unknown type is taken as written if anything is.
func (m *Model) elemWritten(sum *effects.Summary, c Expr, fn *ssa.Function) bool {
	if fn == nil {
		return sum.Writes()
	}
	if t := m.typeOf(fn, c); t != nil {
		if elem := elemOf(t); elem != nil {
			return sum.MayOverwriteElem(elem)
		}
	}
	return sum.Writes()
}

// storedOutside tells whether code outside the function that has the cell may
// store to it: it holds the address, and not only to read, as a closure does
// whose captured variable it never assigns.
func storedOutside(cell ssa.Value) bool {
	for _, r := range *cell.Referrers() {
		switch r := r.(type) {
		case *ssa.Store:
			if r.Val == cell || isFreeVar(cell) {
				return true
			}
		case *ssa.UnOp, *ssa.DebugRef:
		case *ssa.FieldAddr, *ssa.IndexAddr:
			if isFreeVar(cell) {
				return true // a part may be stored to, or handed on
			}
		case *ssa.MakeClosure:
			for i, b := range r.Bindings {
				if b == cell && storedOutside(r.Fn.(*ssa.Function).FreeVars[i]) {
					return true
				}
			}
		default:
			return true
		}
	}
	return false
}

func isFreeVar(v ssa.Value) bool { _, ok := v.(*ssa.FreeVar); return ok }

// escapes tells whether code outside the function may hold the cell's address.
func escapes(a *ssa.Alloc) bool {
	for _, r := range *a.Referrers() {
		switch r := r.(type) {
		case *ssa.Store:
			if r.Val == a {
				return true
			}
		case *ssa.UnOp, *ssa.FieldAddr, *ssa.IndexAddr, *ssa.DebugRef:
		default:
			return true
		}
	}
	return false
}

// panics leaves by a panic statement.
func (m *Model) panics(fr *frame, p *ssa.Panic, dst []pds.Rule) []pds.Rule {
	if mi, ok := p.X.(*ssa.MakeInterface); ok {
		if c, ok := mi.X.(*ssa.Const); ok && c.Value != nil && c.Value.ExactString() == `"noreturn"` {
			return dst // behind a call that does not return; the call itself was handled
		}
	}
	if p.Pos() == token.NoPos {
		return dst // the end of a blocking select, or select{}
	}
	return append(dst, m.leaveBy(fr, properties.ExitPanic, m.label(label{kind: lblPanic, instr: p})))
}

// impossible tells whether b stands where control never comes: behind the last
// case of a blocking select, or where an iterator breaks its contract.
func impossible(b *ssa.BasicBlock) bool {
	if len(b.Succs) > 0 || len(b.Instrs) == 0 {
		return false
	}
	p, ok := b.Instrs[len(b.Instrs)-1].(*ssa.Panic)
	return ok && effects.KindOf(p) == effects.UnreachedPanic
}

// leaveBy: the frame is left by a panic or Goexit: through its deferred calls,
// if it has any.
func (m *Model) leaveBy(fr *frame, kind properties.ExitKind, lbl pds.LabelID) pds.Rule {
	var r pds.Rule
	if m.flowOf(fr.fi).defers {
		r = m.unwind(fr, kind)
	} else {
		r = pds.Rule{Kind: pds.Pop, State: m.state(m.exitState(fr, kind, nil))}
	}
	r.Label = lbl
	return r
}

// maxExits bounds the ways out of a function that its callers tell apart: past
// it facts about memory are dropped, past three times as many all facts and the
// names that are not exact. Fewer facts only add paths.
const maxExits = 12

type exitKey struct {
	fn   int
	full state
}

// boundedExit gives the exit its names and facts, or fewer; a decision stays.
func (m *Model) boundedExit(fi *fnInfo, st state, ns nset, fs factset) state {
	m.tidy(&ns)
	k := exitKey{fi.id, st}
	k.full.ns, k.full.fs = m.t.nset(ns), m.t.factset(fs)
	if d, ok := m.exits[k]; ok {
		return d
	}
	n := m.exitCount[fi.id]
	d := k.full
	if n >= maxExits {
		fs = fs.only(func(f fact) bool { return m.x.nodes[f.key].kind == kResult })
		if n >= 3*maxExits {
			fs = nil
			ns.filter(func(e Expr) bool { k := m.x.nodes[e].kind; return k != kHeld && k != kMaybe })
		}
		d.ns, d.fs = m.t.nset(ns), m.t.factset(fs)
	}
	m.exits[k] = d
	own := exitKey{fi.id, d}
	if !m.exitSeen[own] {
		m.exitSeen[own] = true
		m.exitCount[fi.id]++
	}
	return d
}

// unwind starts to run the deferred calls of the frame. A normal return comes
// back at fr.i.
func (m *Model) unwind(fr *frame, mode properties.ExitKind) pds.Rule {
	return pds.Rule{Kind: pds.Pop, State: m.unwindState(fr, mode)}
}

func (m *Model) unwindState(fr *frame, mode properties.ExitKind) pds.StateID {
	st := state{kind: stUnwind, exit: mode, fn: int32(fr.fi.id), rec: fr.rec,
		ns: m.t.nset(fr.ns), fs: m.t.factset(fr.fs)}
	if mode == properties.ExitReturn {
		st.blk, st.idx = int32(fr.b.Index), int32(fr.i)
	}
	return m.state(st)
}

func (m *Model) unwindFrame(st state) *frame {
	fi := m.fns[st.fn]
	return &frame{fi: fi, b: fi.fn.Blocks[st.blk], i: int(st.idx), ns: m.t.nsets[st.ns], fs: m.t.facts[st.fs], rec: st.rec}
}

// recovered marks, in state.blk of an unwinding, that a panic was stopped: the
// remaining deferred calls run normally and the function ends at its Recover block.
const recovered = -1

// leave: all deferred calls have run.
func (m *Model) leave(st state, sym symbol, dst []pds.Rule) []pds.Rule {
	if st.exit == properties.ExitReturn && st.idx == recovered {
		fi := m.fns[st.fn]
		fr := &frame{fi: fi, b: fi.fn.Blocks[0], ns: m.t.nsets[st.ns], fs: m.t.facts[st.fs], rec: st.rec}
		if fi.fn.Recover == nil {
			return append(dst, pds.Rule{Kind: pds.Pop, State: m.state(m.exitState(fr, properties.ExitReturn, nil))})
		}
		fr.b, fr.i = fi.fn.Recover, 0
		return append(dst, m.goTo(fr, 0))
	}
	fr := m.unwindFrame(st)
	switch st.exit {
	case properties.ExitReturn:
		if r, ok := fr.b.Instrs[fr.i].(*ssa.Return); ok {
			rule := m.ret(fr, r)
			rule.Label = 0 // shown before the deferred calls ran
			return append(dst, rule)
		}
		return append(dst, m.goTo(fr, 0))
	default:
		return append(dst, pds.Rule{Kind: pds.Pop, State: m.state(m.exitState(fr, st.exit, nil))})
	}
}

func (f *flowInfo) zeroKeys(x *exprs, v *ssa.Alloc, r Expr) []Expr {
	var out []Expr
	for k := range f.keys {
		n := x.nodes[k]
		if n.kind == kLoad && x.root[k] == r && x.loads[k] == 1 {
			out = append(out, k)
		}
	}
	sortExprs(out)
	return out
}

func (m *Model) bug(format string, args ...any) {
	panic(fmt.Sprintf("frontend: "+format, args...))
}
