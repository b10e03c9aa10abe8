package effects

// This file finds the ways in which a function may end.

import (
	"go/constant"
	"go/token"
	"strings"

	"golang.org/x/tools/go/ssa"
)

// PanicKind tells the statements of kind ssa.Panic apart.
type PanicKind uint8

const (
	ExplicitPanic  PanicKind = iota // a panic statement of the source
	NoReturnMark                    // stands behind a call that does not return
	EmptySelect                     // select{}: blocks forever
	UnreachedPanic                  // stands where control never comes: behind the cases of a select, in range-over-func bodies
)

// KindOf says what p stands for.
func KindOf(p *ssa.Panic) PanicKind {
	text := ""
	if mi, ok := p.X.(*ssa.MakeInterface); ok {
		if c, ok := mi.X.(*ssa.Const); ok && c.Value != nil && c.Value.Kind() == constant.String {
			text = constant.StringVal(c.Value)
		}
	}
	instrs := p.Block().Instrs
	if p.Pos() != token.NoPos {
		if text != "noreturn" {
			return ExplicitPanic
		}
		// The mark has the position of the call before it.
		for i := len(instrs) - 2; i >= 0; i-- {
			if c, ok := instrs[i].(*ssa.Call); ok {
				if c.Pos() == p.Pos() {
					return NoReturnMark
				}
				break
			}
		}
		return ExplicitPanic
	}
	switch text {
	case "blocking select matched no case":
		for _, i := range instrs {
			if s, ok := i.(*ssa.Select); ok && s.Blocking && len(s.States) == 0 {
				return EmptySelect
			}
		}
		return UnreachedPanic
	case "iterator call did not preserve panic", "yield function called after range loop exit":
		return UnreachedPanic
	}
	return ExplicitPanic
}

// flowGraph is the part of a body that control may reach when calls that never
// return end the walk.
type flowGraph struct {
	reached []bool // by block
	cut     []int  // by block: number of instructions that run, len(Instrs) if all
}

// stepExits is a stage.
func (t *Table) stepExits(n *node) bool {
	var e Exit
	switch {
	case n.fn == nil:
		for _, m := range n.members {
			e |= t.nodes[m].sum.exits
		}
		if n.partial {
			e |= Returns | CallsOpaque
		}
		if n.open {
			e |= Returns | CallsBlind
		}
	default:
		e = t.exitsOf(n)
	}
	if e|n.sum.exits == n.sum.exits {
		return false
	}
	n.sum.exits |= e
	return true
}

func (t *Table) exitsOf(n *node) Exit {
	model := n.model
	if model.exits != 0 {
		return model.exits
	}
	if n.bodyless() {
		if model.known {
			return Returns
		}
		return Returns | CallsBlind
	}
	fn := n.fn
	g := t.reach(n)
	var e Exit
	mayRecover := false
	var guards []*ssa.Defer // deferred calls that certainly recover
	siteAt := 0
	for bi, b := range fn.Blocks {
		k := siteAt
		for siteAt < len(n.sites) && n.sites[siteAt].instr.Block() == b {
			siteAt++
		}
		if !g.reached[bi] {
			continue
		}
		for ; k < siteAt; k++ {
			d, ok := n.sites[k].instr.(*ssa.Defer)
			if !ok || n.sites[k].callback {
				continue
			}
			switch t.recovers(n.sites[k].target) {
			case recoversAlways:
				guards = append(guards, d)
				mayRecover = true
			case recoversMaybe:
				mayRecover = true
			}
		}
	}
	mayRecover = mayRecover || t.mayRecover(n)
	threw := false
	throw := func(at ssa.Instruction) {
		threw = true
		for _, d := range guards {
			if precedes(d, at) {
				return
			}
		}
		e |= Panics
	}
	siteAt = 0
	for bi, b := range fn.Blocks {
		lo := siteAt
		for siteAt < len(n.sites) && n.sites[siteAt].instr.Block() == b {
			siteAt++
		}
		if !g.reached[bi] {
			continue
		}
		// Calls behind the cut do not run.
		var end ssa.Instruction
		if c := g.cut[bi]; c < len(b.Instrs) {
			end = b.Instrs[c-1]
		}
		for k := lo; k < siteAt; k++ {
			s := &n.sites[k]
			if s.target == noNode {
				continue
			}
			c := t.nodes[s.target].sum.exits
			if _, ok := s.instr.(*ssa.Go); ok {
				// What the goroutine does later is not done by this call.
				e |= Spawns
			} else {
				e |= c &^ (Returns | Panics)
				if c&Panics != 0 {
					throw(s.instr)
				}
			}
			if end != nil && s.instr == end && (k+1 == siteAt || n.sites[k+1].instr != end) {
				break
			}
		}
		if end != nil {
			continue
		}
		switch last := b.Instrs[len(b.Instrs)-1].(type) {
		case *ssa.Return:
			if b != fn.Recover {
				e |= Returns
			}
		case *ssa.Panic:
			switch KindOf(last) {
			case ExplicitPanic:
				throw(last)
			case EmptySelect:
				e |= Blocks
			}
		}
	}
	if threw && mayRecover {
		e |= Returns
	}
	if t.deferredPanic(n) {
		e |= Panics
	}
	if loopsForever(fn, &g) {
		e |= Blocks
	}
	return e
}

// mayRecover says whether a call deferred by n, or by the body of a loop over a
// function in it, may stop a panic of n.
func (t *Table) mayRecover(n *node) bool {
	for i := range n.sites {
		if s := &n.sites[i]; !s.callback {
			if _, ok := s.instr.(*ssa.Defer); ok && t.recovers(s.target) != recoversNever {
				return true
			}
		}
	}
	for _, anon := range n.fn.AnonFuncs {
		if isYield(anon) {
			if id, ok := t.byFn[anon]; ok && t.mayRecover(t.nodes[id]) {
				return true
			}
		}
	}
	return false
}

// deferredPanic says whether the builtin panic itself is deferred.
func (t *Table) deferredPanic(n *node) bool {
	if n.fn.Recover == nil {
		return false
	}
	for _, b := range n.fn.Blocks {
		for _, i := range b.Instrs {
			if d, ok := i.(*ssa.Defer); ok {
				if bi, ok := d.Call.Value.(*ssa.Builtin); ok && bi.Name() == "panic" {
					return true
				}
			}
		}
	}
	return false
}

// precedes says whether a has run whenever b runs.
func precedes(a, b ssa.Instruction) bool {
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

type recovery uint8

const (
	recoversNever recovery = iota
	recoversMaybe
	recoversAlways
)

// recovers says whether a deferred call of a node stops a panic.
func (t *Table) recovers(id nodeID) recovery { return t.recoversAt(id, 0) }

// maxWrappers bounds chains of wrappers; longer ones may recover.
const maxWrappers = 6

func (t *Table) recoversAt(id nodeID, depth int) recovery {
	if id == noNode {
		return recoversNever // a deferred recover itself stops nothing
	}
	if depth > maxWrappers {
		return recoversMaybe
	}
	n := t.nodes[id]
	if n.fn == nil {
		if n.partial {
			return recoversMaybe
		}
		for _, m := range n.members {
			if t.recoversAt(m, depth+1) != recoversNever {
				return recoversMaybe
			}
		}
		return recoversNever
	}
	r := n.recovers
	if r == recoversAlways && n.sum.exits&Panics != 0 {
		r = recoversMaybe // it may panic anew
	}
	// The body of a loop over a function is part of its function.
	for _, anon := range n.fn.AnonFuncs {
		if isYield(anon) && r == recoversNever {
			if id, ok := t.byFn[anon]; ok && t.recoversAt(id, depth+1) != recoversNever {
				r = recoversMaybe
			}
		}
	}
	// A wrapper or bound method hands the right to recover to its method.
	if isWrapper(n.fn) {
		for i := range n.sites {
			if s := &n.sites[i]; !s.callback && t.recoversAt(s.target, depth+1) != recoversNever {
				r = max(r, recoversMaybe)
			}
		}
	}
	return r
}

// ownRecovery looks for recover in a body: in the entry block, before anything
// else can end the function, it always runs.
func ownRecovery(fn *ssa.Function) recovery {
	found := recoversAlways
	for _, b := range fn.Blocks {
		for _, i := range b.Instrs {
			c, ok := i.(*ssa.Call)
			if !ok {
				continue
			}
			bl, ok := c.Call.Value.(*ssa.Builtin)
			if ok && bl.Name() == "recover" {
				return found
			}
			if !ok {
				found = recoversMaybe // a call before it may end the function
			}
		}
		found = recoversMaybe // not in the entry block
	}
	return recoversNever
}

// isWrapper says whether fn only calls another method.
func isWrapper(fn *ssa.Function) bool {
	return strings.HasPrefix(fn.Synthetic, "wrapper for ") || strings.HasPrefix(fn.Synthetic, "bound method wrapper for ") || strings.HasPrefix(fn.Synthetic, "thunk for ")
}

// isYield says whether fn is the body of a loop over a function.
func isYield(fn *ssa.Function) bool { return fn.Synthetic == "range-over-func yield" }

// reach walks the blocks from the entry (and the Recover block); a call all of
// whose callees never return, as far as is known by now, ends its block.
func (t *Table) reach(n *node) flowGraph {
	fn := n.fn
	g := flowGraph{reached: make([]bool, len(fn.Blocks)), cut: make([]int, len(fn.Blocks))}
	for i, b := range fn.Blocks {
		g.cut[i] = len(b.Instrs)
	}
	for i := range n.sites {
		s := &n.sites[i]
		if _, ok := s.instr.(*ssa.Call); !ok || s.callback || s.target == noNode {
			continue
		}
		callee := t.nodes[s.target]
		if callee.sum.exits&Returns != 0 || callee.fn == nil && len(callee.members) == 0 {
			continue
		}
		b := s.instr.Block()
		for k, in := range b.Instrs {
			if in == s.instr {
				g.cut[b.Index] = min(g.cut[b.Index], k+1)
				break
			}
		}
	}
	// A deferred call that never returns ends the block of every RunDefers
	// that it certainly precedes.
	for i := range n.sites {
		s := &n.sites[i]
		d, ok := s.instr.(*ssa.Defer)
		if !ok || s.callback || s.target == noNode || d.DeferStack != nil {
			continue
		}
		callee := t.nodes[s.target]
		if callee.sum.exits&Returns != 0 || callee.fn == nil && len(callee.members) == 0 {
			continue
		}
		for _, b := range fn.Blocks {
			for k, in := range b.Instrs {
				if rd, ok := in.(*ssa.RunDefers); ok && precedes(d, rd) {
					g.cut[b.Index] = min(g.cut[b.Index], k+1)
				}
			}
		}
	}
	todo := []*ssa.BasicBlock{fn.Blocks[0]}
	g.reached[0] = true
	if fn.Recover != nil && t.mayRecover(n) {
		g.reached[fn.Recover.Index] = true
		todo = append(todo, fn.Recover)
	}
	for len(todo) > 0 {
		b := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		if g.cut[b.Index] < len(b.Instrs) {
			continue
		}
		for _, s := range b.Succs {
			if !g.reached[s.Index] {
				g.reached[s.Index] = true
				todo = append(todo, s)
			}
		}
	}
	return g
}

// loopsForever says whether a reached block has no way to any end.
func loopsForever(fn *ssa.Function, g *flowGraph) bool {
	cyclic := false
	for i, b := range fn.Blocks {
		if !g.reached[i] {
			continue
		}
		for _, s := range b.Succs {
			cyclic = cyclic || s.Dominates(b) || s.Index <= b.Index
		}
	}
	if !cyclic {
		return false
	}
	out := make([]bool, len(fn.Blocks))
	var todo []*ssa.BasicBlock
	for i, b := range fn.Blocks {
		if g.reached[i] && (len(b.Succs) == 0 || g.cut[i] < len(b.Instrs)) {
			out[i] = true
			todo = append(todo, b)
		}
	}
	for len(todo) > 0 {
		b := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		for _, p := range b.Preds {
			if g.reached[p.Index] && !out[p.Index] && g.cut[p.Index] == len(p.Instrs) {
				out[p.Index] = true
				todo = append(todo, p)
			}
		}
	}
	for i := range fn.Blocks {
		if g.reached[i] && !out[i] {
			return true
		}
	}
	return false
}
