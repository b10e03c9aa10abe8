package frontend

import (
	"go/token"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
)

// flowInfo is what the walk through one function needs to know beforehand:
// which branches bear on the rule, which facts anything later asks for, and
// which registers are used later.
type flowInfo struct {
	fi     *fnInfo
	jump   []*ssa.BasicBlock // by block index: where a branch that bears on nothing comes together again
	keys   map[Expr]bits     // facts of interest -> blocks at whose start something later asks for them
	entry  []Expr            // keys that speak of parameters, captures and globals, in a fixed order
	inLoop []bool            // by block index
	inert  []bool            // by block index: bears on nothing
	pdom   []int             // by block index: immediate postdominator, -1 if none
	uses   map[ssa.Value][]int
	pinned map[ssa.Value]bool
	live   map[ssa.Value]bits
	defers bool // the function defers something
	// lateDefers: what it defers stands in bodies of ranges over functions only,
	// and its returns do not say that deferred calls run.
	lateDefers bool

	after []Expr // memory facts that callers want to know behind a call
	asked bool   // after grew since the function was prepared
}

// bits is a set of block indices.
type bits []uint64

func newBits(n int) bits { return make(bits, (n+63)/64) }
func (b bits) has(i int) bool {
	return b[i/64]>>(uint(i)%64)&1 != 0
}
func (b bits) set(i int) { b[i/64] |= 1 << (uint(i) % 64) }

func (f *flowInfo) wants(k Expr) bool { _, ok := f.keys[k]; return ok }

func (m *Model) flowOf(fi *fnInfo) *flowInfo {
	if fi.flow == nil {
		fi.flow = &flowInfo{fi: fi, keys: map[Expr]bits{}}
		m.buildFlow(fi)
	}
	return fi.flow
}

// maxRounds bounds how often the functions of the cone are prepared again
// because callers and callees ask more of each other.
const maxRounds = 3

// buildFlows prepares all functions of the cone, again until the facts that
// callers and callees ask of each other no longer grow (recursion) or a fixed
// number of rounds is over: missing facts only add paths.
func (m *Model) buildFlows() {
	for round := 0; round < maxRounds; round++ {
		grew := false
		for i := len(m.fns) - 1; i >= 0; i-- {
			fi := m.fns[i]
			if m.isEventFunc(fi.fn) || !fi.near && (fi.flow == nil || len(fi.flow.after) == 0) {
				continue
			}
			before, known := 0, fi.flow != nil
			if known {
				before = len(fi.flow.entry)
			}
			// In the first round one that is there was built as a callee.
			if !known {
				m.flowOf(fi)
			} else if fi.flow.asked || round > 0 && m.asksMore(fi) {
				m.buildFlow(fi)
			}
			fi.flow.asked = false
			grew = m.askCallees(fi) || grew || len(fi.flow.entry) > before
		}
		if !grew {
			break
		}
	}
}

// askCallees tells the callees of fi which memory facts fi wants to know after
// a call that may change them; it answers whether any callee had not been told.
func (m *Model) askCallees(fi *fnInfo) bool {
	var keys []Expr
	for k := range fi.flow.keys {
		if m.x.nodes[k].kind == kLoad {
			keys = append(keys, k)
		}
	}
	if len(keys) == 0 {
		return false
	}
	sortExprs(keys)
	grew := false
	for _, b := range fi.fn.Blocks {
		for _, i := range b.Instrs {
			site, ok := i.(ssa.CallInstruction)
			if !ok {
				continue
			}
			if _, ok := site.(*ssa.Go); ok {
				continue
			}
			for _, g := range m.sh.targets[site] {
				if !m.tracked(fi.fn, g) {
					continue
				}
				sum := m.sh.eff.Of(g)
				if !sum.Writes() {
					continue
				}
				for _, k := range keys {
					for _, d := range m.toCalleeKey(k, site, g, b) {
						if m.x.readsPlace(d, func(addr Expr) bool { return m.overwrites(sum, addr, g) }) && m.askAfter(m.info(g), d) {
							grew = true
						}
					}
				}
			}
		}
	}
	return grew
}

// tracked tells whether what g stores is followed for its caller: a function of
// the cone, a closure of the caller's own, or a plain setter.
func (m *Model) tracked(caller, g *ssa.Function) bool {
	if g.Blocks == nil || m.isEventFunc(g) {
		return false
	}
	if gi, ok := m.fnOf[g]; ok && gi.near {
		return true
	}
	if g.Parent() == caller {
		return true
	}
	if len(g.Blocks) != 1 {
		return false
	}
	for _, i := range g.Blocks[0].Instrs {
		if _, ok := i.(ssa.CallInstruction); ok {
			return false
		}
	}
	return true
}

func (m *Model) askAfter(gi *fnInfo, k Expr) bool {
	f := m.flowOf(gi)
	if slices.Contains(f.after, k) || len(f.after) >= maxAfter {
		return false
	}
	f.after = append(f.after, k)
	f.asked = true
	return true
}

// maxAfter bounds what callers may ask of a function's stores.
const maxAfter = 24

// toCalleeKey writes a key of the caller over the callee's frame, in every way
// that an argument, a captured variable or a global allows.
func (m *Model) toCalleeKey(k Expr, site ssa.CallInstruction, g *ssa.Function, b *ssa.BasicBlock) []Expr {
	var out []Expr
	add := func(e Expr) {
		if e != 0 && m.x.frameFree(e) && !slices.Contains(out, e) {
			out = append(out, e)
		}
	}
	if m.x.rootKind(k) == kGlobal {
		out = append(out, k)
	}
	c := caller{fn: site.Parent(), site: site}
	if mc, ok := site.Common().Value.(*ssa.MakeClosure); ok {
		c.made = mc
	}
	for i := range g.Params {
		if v := c.arg(g, i); v != nil {
			add(m.x.rebase(k, m.x.name(v), m.x.param(i)))
			add(m.x.rebase(k, m.key(v, b), m.x.param(i)))
			if mc, ok := v.(*ssa.MakeClosure); ok {
				for j, f := range mc.Bindings {
					add(m.x.rebase(k, m.x.name(f), m.x.capt(m.x.param(i), j)))
				}
			}
		}
	}
	for i := range g.FreeVars {
		if v := c.free(g, i); v != nil {
			add(m.x.rebase(k, m.x.name(v), m.x.free(i)))
		}
	}
	return out
}

// asksMore: a callee has keys, so that the function may have to be looked at again.
func (m *Model) asksMore(fi *fnInfo) bool {
	for _, b := range fi.fn.Blocks {
		for _, i := range b.Instrs {
			if c, ok := i.(ssa.CallInstruction); ok {
				for _, g := range m.sh.targets[c] {
					if gi, ok := m.fnOf[g]; ok && gi.flow != nil && len(gi.flow.entry) > 0 {
						return true
					}
				}
			}
		}
	}
	return false
}

func (m *Model) buildFlow(fi *fnInfo) {
	f, fn := fi.flow, fi.fn
	n := len(fn.Blocks)
	f.jump = make([]*ssa.BasicBlock, n)
	if f.inLoop == nil {
		f.inLoop = loopBlocks(fn)
		f.findUses()
	}
	if f.inert == nil {
		f.inert = make([]bool, n)
		for i, b := range fn.Blocks {
			f.inert[i] = m.inertBlock(fi, b)
		}
		f.pdom = postDominators(fn)
	}
	inert, pdom := f.inert, f.pdom
	// The branches that bear on something make keys; a key at a φ makes the
	// branch before it bear on something: until nothing changes.
	for round := 0; ; round++ {
		changed := false
		for i, b := range fn.Blocks {
			var j *ssa.BasicBlock
			if len(b.Succs) == 2 {
				j = m.joinOf(fi, b, inert, pdom)
			}
			if f.jump[i] != j {
				f.jump[i], changed = j, true
			}
		}
		if round > 0 && !changed {
			break
		}
		m.findKeys(fi)
		if round > 20 {
			break
		}
	}
	f.entry = f.entry[:0]
	for k := range f.keys {
		if m.x.frameFree(k) {
			f.entry = append(f.entry, k)
		}
	}
	sortExprs(f.entry)
}

// frameFree tells whether e speaks of no register of the frame.
func (t *exprs) frameFree(e Expr) bool {
	if e == 0 {
		return true
	}
	n := t.nodes[e]
	switch n.kind {
	case kReg:
		_, fn := n.ref.(*ssa.Function)
		return fn
	case kRes, kResult:
		return false
	case kParam, kFree, kGlobal, kConst:
		return true
	}
	return t.frameFree(n.x) && t.frameFree(n.y)
}

// joinOf is the block where the two sides of the branch at the end of b come
// together, if neither side does anything that bears on the rule.
func (m *Model) joinOf(fi *fnInfo, b *ssa.BasicBlock, inert []bool, pdom []int) *ssa.BasicBlock {
	ji := pdom[b.Index]
	if ji < 0 {
		return nil
	}
	j := fi.fn.Blocks[ji]
	// b itself is in the region only if a side leads back to it: then what stands
	// in it runs again.
	region := map[*ssa.BasicBlock]bool{}
	work := []*ssa.BasicBlock{b.Succs[0], b.Succs[1]}
	for len(work) > 0 {
		c := work[len(work)-1]
		work = work[:len(work)-1]
		if c == j || region[c] {
			continue
		}
		if !inert[c.Index] {
			return nil
		}
		region[c] = true
		work = append(work, c.Succs...)
	}
	region[b] = true
	for _, i := range j.Instrs {
		phi, ok := i.(*ssa.Phi)
		if !ok {
			break
		}
		if fi.flow.wants(m.x.reg(phi)) || m.carries(phi.Type()) {
			var first ssa.Value
			for k, p := range j.Preds {
				if region[p] {
					if first == nil {
						first = phi.Edges[k]
					} else if first != phi.Edges[k] {
						return nil
					}
				}
			}
		}
	}
	return j
}

// inertBlock tells whether running the block bears on nothing: no event, no
// birth, no call that matters, no store that anybody asks about, no exit.
func (m *Model) inertBlock(fi *fnInfo, b *ssa.BasicBlock) bool {
	for _, instr := range b.Instrs {
		if v, ok := instr.(ssa.Value); ok && len(fi.births[v]) > 0 {
			return false
		}
		switch i := instr.(type) {
		case *ssa.Return, *ssa.Panic, *ssa.RunDefers, *ssa.Defer, *ssa.Go:
			return false
		case *ssa.Store:
			if m.carriesValue(i.Val) || m.askedPlace(i.Addr) {
				return false
			}
		case *ssa.MapUpdate:
			if m.carriesValue(i.Value) || m.carriesValue(i.Key) {
				return false
			}
		case *ssa.Send:
			if m.carriesValue(i.X) {
				return false
			}
		case *ssa.Call:
			if !m.inertCall(fi, i) {
				return false
			}
		case *ssa.Select:
			for _, s := range i.States {
				if s.Dir == types.SendOnly && m.carriesValue(s.Send) {
					return false
				}
			}
		}
	}
	return true
}

func (m *Model) inertCall(fi *fnInfo, c *ssa.Call) bool {
	if b, ok := c.Call.Value.(*ssa.Builtin); ok {
		switch b.Name() {
		case "recover", "panic", "close":
			return b.Name() == "close"
		case "append":
			return !m.carries(c.Type())
		}
		return true
	}
	s := m.siteShape(c)
	if len(m.matchEvents(s)) > 0 {
		return false
	}
	sum := m.sh.effectsAt(c)
	ex := m.sh.exitsAt(c)
	if ex&effects.Returns == 0 || m.goexits(c, ex) {
		return false
	}
	if ex&effects.Panics != 0 && m.panicMatters[fi.fn] {
		return false
	}
	if sum.WritesUnknown() && len(m.askedFields) > 0 {
		return false
	}
	for _, g := range m.sh.targets[c] {
		if gi, ok := m.fnOf[g]; ok && gi.cone && !m.isEventFunc(g) {
			return false
		}
		if isBound(g) && m.isEventFunc(g) {
			return false // an event, if the function value is bound to the instance
		}
	}
	if !c.Call.IsInvoke() && m.carriesValue(c.Call.Value) {
		return false
	}
	for _, a := range c.Call.Args {
		if m.carriesValue(a) {
			return false
		}
	}
	if c.Call.IsInvoke() && m.carries(c.Call.Value.Type()) && m.rule.Moves {
		return false
	}
	return !m.writesAsked(sum)
}

// askedPlace tells whether facts or names read the place somewhere.
func (m *Model) askedPlace(addr ssa.Value) bool {
	switch a := addr.(type) {
	case *ssa.FieldAddr:
		return m.askedFields[structField(a.X.Type(), a.Field).Origin()]
	case *ssa.Global, *ssa.Alloc, *ssa.FreeVar:
		return true
	}
	return false
}

// carries tells whether a value of type t may be, hold or lead to an instance.
func (m *Model) carries(t types.Type) bool {
	if m.rule.Each == nil {
		return false
	}
	if c, ok := m.carry[t]; ok {
		return c
	}
	m.carry[t] = false // recursive types: decided by what else is in them
	c := m.carriesNew(t)
	m.carry[t] = c
	return c
}

func (m *Model) carriesNew(t types.Type) bool {
	for _, want := range m.rule.Each.Types {
		if types.Identical(t, want) {
			return true
		}
		if p, ok := want.(*types.Pointer); ok && types.Identical(t, p.Elem()) {
			return true
		}
	}
	if len(m.rule.Each.Types) == 0 {
		return true
	}
	if t == types.Universe.Lookup("error").Type() {
		return false // an assumption: errors do not carry instances
	}
	switch u := t.Underlying().(type) {
	case *types.Interface, *types.Signature, *types.TypeParam:
		return true
	case *types.Pointer:
		return m.carries(u.Elem())
	case *types.Slice:
		return m.carries(u.Elem())
	case *types.Array:
		return m.carries(u.Elem())
	case *types.Chan:
		return m.carries(u.Elem())
	case *types.Map:
		return m.carries(u.Elem()) || m.carries(u.Key())
	case *types.Struct:
		for f := range u.Fields() {
			if m.carries(f.Type()) {
				return true
			}
		}
	case *types.Tuple:
		for v := range u.Variables() {
			if m.carries(v.Type()) {
				return true
			}
		}
	}
	return false
}

// carriesValue is carries for a value whose making is in sight.
func (m *Model) carriesValue(v ssa.Value) bool {
	switch v := v.(type) {
	case *ssa.Const, *ssa.Function, *ssa.Builtin:
		return false
	case *ssa.MakeInterface:
		return m.carriesValue(v.X)
	case *ssa.MakeClosure:
		for _, b := range v.Bindings {
			if m.carries(b.Type()) {
				return true
			}
		}
		return false
	case *ssa.Slice:
		if a, ok := v.X.(*ssa.Alloc); ok && a.Comment == "varargs" {
			for _, r := range *a.Referrers() {
				if ia, ok := r.(*ssa.IndexAddr); ok {
					for _, r := range *ia.Referrers() {
						if st, ok := r.(*ssa.Store); ok && m.carriesValue(st.Val) {
							return true
						}
					}
				}
			}
			return false
		}
	}
	return m.carries(v.Type())
}

// findKeys collects the facts that the function's branches, results and calls ask for.
func (m *Model) findKeys(fi *fnInfo) {
	f, fn := fi.flow, fi.fn
	n := len(fn.Blocks)
	use := map[Expr]map[int]bool{}
	var order []Expr
	ask := func(k Expr, block int) bool {
		if k == 0 || m.x.nodes[k].kind == kConst || m.x.nodes[k].kind == kGlobal {
			return false
		}
		if use[k] == nil {
			use[k] = map[int]bool{}
			order = append(order, k)
		}
		if use[k][block] {
			return false
		}
		use[k][block] = true
		return true
	}
	everywhere := func(k Expr) {
		for i := range n {
			ask(k, i)
		}
	}
	var cond func(v ssa.Value, b *ssa.BasicBlock, depth int)
	cond = func(v ssa.Value, b *ssa.BasicBlock, depth int) {
		if depth > 4 {
			return
		}
		if _, ok := v.(*ssa.Const); ok {
			return
		}
		ask(m.key(v, b), b.Index)
		switch v := v.(type) {
		case *ssa.UnOp:
			if v.Op == token.NOT {
				cond(v.X, b, depth+1)
			}
		case *ssa.BinOp:
			cond(v.X, b, depth+1)
			cond(v.Y, b, depth+1)
		case *ssa.Extract:
			if ta, ok := v.Tuple.(*ssa.TypeAssert); ok {
				cond(ta.X, b, depth+1)
			}
		case *ssa.Call:
			if x := m.errorTest(v); x != nil {
				cond(x, b, depth+1)
			}
		case *ssa.ChangeInterface:
			cond(v.X, b, depth+1)
		case *ssa.ChangeType:
			cond(v.X, b, depth+1)
		}
	}
	for i, b := range fn.Blocks {
		if len(b.Succs) == 2 && f.jump[i] == nil {
			if iff, ok := b.Instrs[len(b.Instrs)-1].(*ssa.If); ok {
				cond(iff.Cond, b, 0)
			}
		}
		for _, instr := range b.Instrs {
			switch instr := instr.(type) {
			case *ssa.Return:
				for _, r := range instr.Results {
					if isNilable(r.Type()) || isBool(r.Type()) || isInt(r.Type()) {
						if _, ok := r.(*ssa.Const); !ok {
							ask(m.key(r, b), i)
							ask(m.x.reg(r), i)
						}
					}
				}
			case *ssa.Defer:
				m.callKeys(instr, b, func(k Expr) { everywhere(k) })
			case ssa.CallInstruction:
				m.callKeys(instr, b, func(k Expr) { ask(k, i) })
			}
		}
	}
	for _, k := range f.after {
		for i, b := range fn.Blocks {
			if len(b.Succs) == 0 {
				ask(k, i)
			}
		}
	}
	// Close under copies: φs, loads, stores, results.
	for changed := true; changed; {
		changed = false
		for i, b := range fn.Blocks {
			for _, instr := range b.Instrs {
				switch instr := instr.(type) {
				case *ssa.Phi:
					if use[m.x.reg(instr)] != nil {
						for k, e := range instr.Edges {
							changed = ask(m.key(e, b.Preds[k]), b.Preds[k].Index) || changed
							changed = ask(m.x.reg(e), b.Preds[k].Index) && m.useful(e) || changed
						}
					}
				case *ssa.UnOp:
					if instr.Op == token.MUL && use[m.x.reg(instr)] != nil {
						changed = ask(m.x.load(m.placeKey(instr.X, b, 0)), i) || changed
					}
					if instr.Op == token.NOT && use[m.x.reg(instr)] != nil {
						changed = ask(m.key(instr.X, b), i) || changed
					}
				case *ssa.BinOp:
					// A truth value that is kept: what it is made of is asked for where it is made.
					if isBool(instr.Type()) && use[m.x.reg(instr)] != nil {
						for _, v := range [2]ssa.Value{instr.X, instr.Y} {
							if m.useful(v) {
								changed = ask(m.key(v, b), i) || changed
								changed = ask(m.x.reg(v), i) || changed
							}
						}
					}
				case *ssa.Store:
					for _, p := range []Expr{m.x.load(m.placeKey(instr.Addr, b, 0)), m.x.load(m.x.name(instr.Addr))} {
						if p != 0 && use[p] != nil {
							changed = ask(m.key(instr.Val, b), i) || changed
							changed = ask(m.x.reg(instr.Val), i) && m.useful(instr.Val) || changed
						}
					}
				}
			}
		}
	}
	for _, k := range order {
		live := newBits(n)
		defs, early := m.definedIn(fn, k)
		var work []int
		reach := func(b int) {
			// In front of the block that defines a register of the key, nothing
			// that was known of it is of use; a φ stands at the very start.
			if defs != nil && defs.has(b) && !early.has(b) || live.has(b) {
				return
			}
			live.set(b)
			if defs == nil || !defs.has(b) {
				work = append(work, b)
			}
		}
		for b := range use[k] {
			reach(b)
		}
		for len(work) > 0 {
			b := work[len(work)-1]
			work = work[:len(work)-1]
			for _, p := range fn.Blocks[b].Preds {
				reach(p.Index)
			}
		}
		f.keys[k] = live
	}
}

// definedIn gives the blocks of fn that define the registers of a key,
// and those of them in which all of its registers are φs; nil if it has none.
func (m *Model) definedIn(fn *ssa.Function, k Expr) (defs, early bits) {
	n := len(fn.Blocks)
	var visit func(e Expr)
	late := newBits(n)
	visit = func(e Expr) {
		if e == 0 {
			return
		}
		switch nd := m.x.nodes[e]; nd.kind {
		case kReg, kRes:
			i, ok := nd.ref.(ssa.Instruction)
			if !ok || i.Parent() != fn {
				return
			}
			if defs == nil {
				defs = newBits(n)
			}
			b := i.Block().Index
			defs.set(b)
			if _, phi := i.(*ssa.Phi); !phi {
				late.set(b)
			}
		case kParam, kFree, kGlobal, kResult, kConst:
		default:
			visit(nd.x)
			visit(nd.y)
		}
	}
	visit(k)
	if defs == nil {
		return nil, nil
	}
	early = newBits(n)
	for i := range defs {
		early[i] = defs[i] &^ late[i]
	}
	return defs, early
}

// useful: a register whose value may be known; constants are known anyway.
func (m *Model) useful(v ssa.Value) bool {
	_, c := v.(*ssa.Const)
	return !c
}

// callKeys asks for what a call wants to know: what its callees ask of their
// parameters, which closure a function value is, which type an interface holds.
func (m *Model) callKeys(site ssa.CallInstruction, b *ssa.BasicBlock, ask func(Expr)) {
	c := site.Common()
	if _, ok := c.Value.(*ssa.Builtin); ok {
		return
	}
	if c.IsInvoke() || c.StaticCallee() == nil {
		if m.carriesOrCone(site) {
			ask(m.key(c.Value, b))
			ask(m.x.reg(c.Value))
		}
	}
	for _, g := range m.sh.targets[site] {
		gi, ok := m.fnOf[g]
		if !ok || !gi.near || m.isEventFunc(g) || g.Blocks == nil {
			continue
		}
		_, deferred := site.(*ssa.Defer)
		for _, k := range m.flowOf(gi).entry {
			for _, t := range m.toCaller(k, site, g, b) {
				ask(t)
			}
			// The arguments of a deferred call are what they were at the statement.
			if n := m.x.nodes[k]; deferred && n.kind == kParam {
				if v := (caller{fn: site.Parent(), site: site}).arg(g, int(n.n)); v != nil && m.useful(v) {
					ask(m.x.reg(v))
				}
			}
		}
	}
}

func (m *Model) carriesOrCone(site ssa.CallInstruction) bool {
	for _, g := range m.sh.targets[site] {
		if gi, ok := m.fnOf[g]; ok && gi.cone || m.isEventFunc(g) {
			return true
		}
	}
	return len(m.sh.targets[site]) == 0
}

// toCaller writes a callee's key over the caller's frame at the call.
func (m *Model) toCaller(k Expr, site ssa.CallInstruction, callee *ssa.Function, b *ssa.BasicBlock) []Expr {
	n := m.x.nodes[k]
	one := func(e Expr) []Expr {
		if e == 0 {
			return nil
		}
		return []Expr{e}
	}
	c := caller{fn: site.Parent(), site: site}
	if mc, ok := site.Common().Value.(*ssa.MakeClosure); ok {
		c.made = mc
	}
	switch n.kind {
	case kGlobal, kConst:
		return one(k)
	case kReg:
		return one(k)
	case kParam:
		v := c.arg(callee, int(n.n))
		if v == nil {
			return nil
		}
		return one(m.key(v, b))
	case kFree:
		if c.made != nil {
			if v := c.free(callee, int(n.n)); v != nil {
				return one(m.key(v, b))
			}
			return nil
		}
		if fv := m.sh.sameCapture(site, callee, int(n.n)); fv != nil {
			return one(m.x.name(fv))
		}
		if site.Common().StaticCallee() == nil && !site.Common().IsInvoke() {
			return one(m.x.capt(m.x.name(site.Common().Value), int(n.n)))
		}
		return nil
	case kBin, kArgs:
		if n.x != 0 {
			x := m.toCaller(n.x, site, callee, b)
			if len(x) != 1 {
				return nil
			}
			n.x = x[0]
		}
		if y := m.toCaller(n.y, site, callee, b); len(y) == 1 {
			n.y = y[0]
			return one(m.x.intern(n))
		}
		return nil
	case kUn, kGet:
		if n.x == 0 {
			return one(k)
		}
		if x := m.toCaller(n.x, site, callee, b); len(x) == 1 {
			n.x = x[0]
			return one(m.x.intern(n))
		}
		return nil
	}
	if m.x.isSel(k) {
		if x := m.toCaller(n.x, site, callee, b); len(x) == 1 {
			y := n.y
			if y != 0 {
				ys := m.toCaller(y, site, callee, b)
				if len(ys) != 1 {
					return nil
				}
				y = ys[0]
			}
			return one(m.x.sel(n.kind, x[0], n.n, y, n.ref))
		}
	}
	return nil
}

// loopBlocks marks the blocks that lie on a cycle.
func loopBlocks(fn *ssa.Function) []bool {
	n := len(fn.Blocks)
	out := make([]bool, n)
	for i, b := range fn.Blocks {
		seen := make([]bool, n)
		work := append([]*ssa.BasicBlock(nil), b.Succs...)
		for len(work) > 0 {
			c := work[len(work)-1]
			work = work[:len(work)-1]
			if c == b {
				out[i] = true
				break
			}
			if !seen[c.Index] {
				seen[c.Index] = true
				work = append(work, c.Succs...)
			}
		}
	}
	return out
}

// postDominators gives each block's immediate postdominator, -1 if there is
// none (it leads to several ends, or to no end). Cooper, Harvey, Kennedy, A
// simple, fast dominance algorithm, 2001, on the reversed graph.
func postDominators(fn *ssa.Function) []int {
	n := len(fn.Blocks)
	const exit = -1
	order := make([]int, 0, n) // postorder of the reversed graph
	num := make([]int, n)      // position in order
	for i := range num {
		num[i] = -1
	}
	seen := make([]bool, n)
	var visit func(b *ssa.BasicBlock)
	visit = func(b *ssa.BasicBlock) {
		seen[b.Index] = true
		for _, p := range b.Preds {
			if !seen[p.Index] {
				visit(p)
			}
		}
		num[b.Index] = len(order)
		order = append(order, b.Index)
	}
	for _, b := range fn.Blocks {
		if len(b.Succs) == 0 && !seen[b.Index] {
			visit(b)
		}
	}
	const undef = -2
	ipd := make([]int, n)
	for i := range ipd {
		ipd[i] = undef
	}
	rank := func(b int) int {
		if b == exit {
			return n
		}
		return num[b]
	}
	meet := func(a, b int) int {
		for a != b {
			for rank(a) < rank(b) {
				a = ipd[a]
			}
			for rank(b) < rank(a) {
				b = ipd[b]
			}
		}
		return a
	}
	for changed := true; changed; {
		changed = false
		for i := len(order) - 1; i >= 0; i-- {
			b := fn.Blocks[order[i]]
			d := undef
			if len(b.Succs) == 0 {
				d = exit
			}
			for _, s := range b.Succs {
				if !seen[s.Index] || ipd[s.Index] == undef {
					continue
				}
				if d == undef {
					d = s.Index
				} else {
					d = meet(d, s.Index)
				}
			}
			if d != ipd[b.Index] {
				ipd[b.Index], changed = d, true
			}
		}
	}
	for i := range ipd {
		if ipd[i] < 0 {
			ipd[i] = -1
		}
	}
	return ipd
}

// findUses collects where the values that names can be rooted in are used.
func (f *flowInfo) findUses() {
	f.uses = map[ssa.Value][]int{}
	f.pinned = map[ssa.Value]bool{}
	f.live = map[ssa.Value]bits{}
	stack, unwinds := false, false
	defer func() {
		f.defers = f.defers || stack
		f.lateDefers = stack && !unwinds
	}()
	for i, b := range f.fi.fn.Blocks {
		for _, instr := range b.Instrs {
			if phi, ok := instr.(*ssa.Phi); ok {
				for k, e := range phi.Edges {
					f.uses[baseOf(e)] = append(f.uses[baseOf(e)], b.Preds[k].Index)
				}
				continue
			}
			_, isDefer := instr.(*ssa.Defer)
			_, isMake := instr.(*ssa.MakeClosure)
			if c, ok := instr.(*ssa.Call); ok {
				if b, ok := c.Call.Value.(*ssa.Builtin); ok && b.Name() == "ssa:deferstack" {
					stack = true
				}
			}
			_, runs := instr.(*ssa.RunDefers)
			unwinds = unwinds || runs
			if d, ok := instr.(*ssa.Defer); ok && !outerDefer(d) {
				f.defers = true
			}
			for _, op := range instr.Operands(nil) {
				if *op == nil {
					continue
				}
				v := baseOf(*op)
				f.uses[v] = append(f.uses[v], i)
				if isDefer || isMake {
					f.pinned[v] = true
				}
			}
		}
	}
}

// baseOf looks through address arithmetic and conversions, as exprs.name does.
func baseOf(v ssa.Value) ssa.Value {
	for {
		switch x := v.(type) {
		case *ssa.FieldAddr:
			v = x.X
		case *ssa.Field:
			v = x.X
		case *ssa.IndexAddr:
			v = x.X
		case *ssa.MakeInterface:
			v = x.X
		case *ssa.ChangeInterface:
			v = x.X
		case *ssa.ChangeType:
			v = x.X
		case *ssa.TypeAssert:
			if x.CommaOk {
				return v
			}
			v = x.X
		case *ssa.Extract:
			if ta, ok := x.Tuple.(*ssa.TypeAssert); ok && x.Index == 0 {
				v = ta.X
				continue
			}
			return x.Tuple
		default:
			return v
		}
	}
}

// liveAt tells whether v is used in or after block b.
func (f *flowInfo) liveAt(v ssa.Value, b *ssa.BasicBlock) bool {
	if f.pinned[v] {
		return true
	}
	l, ok := f.live[v]
	if !ok {
		l = newBits(len(f.fi.fn.Blocks))
		var def *ssa.BasicBlock
		if i, ok := v.(ssa.Instruction); ok {
			def = i.Block()
		}
		work := append([]int(nil), f.uses[v]...)
		for _, u := range work {
			l.set(u)
		}
		for len(work) > 0 {
			u := work[len(work)-1]
			work = work[:len(work)-1]
			if f.fi.fn.Blocks[u] == def {
				continue
			}
			for _, p := range f.fi.fn.Blocks[u].Preds {
				if !l.has(p.Index) {
					l.set(p.Index)
					work = append(work, p.Index)
				}
			}
		}
		f.live[v] = l
	}
	return l.has(b.Index)
}

// writesAsked tells whether a call summarised by sum may store to a field that
// anything of the cone asks about.
func (m *Model) writesAsked(sum *effects.Summary) bool {
	if !sum.Writes() {
		return false
	}
	w, ok := m.askedWrites[sum]
	if !ok {
		for _, v := range m.askedFieldList {
			if sum.MayOverwriteField(v) {
				w = true
				break
			}
		}
		m.askedWrites[sum] = w
	}
	return w
}
