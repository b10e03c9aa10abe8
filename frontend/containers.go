package frontend

import (
	"go/constant"
	"go/token"
	"go/types"
	"slices"
	"strconv"

	"golang.org/x/tools/go/ssa"

	"pathtally/pds"
)

// An instance that was put into a slice, an array or a map is named by the
// container and an index. The index is
//
//   - a constant or a register, where the code says which element it is;
//   - the ghost index: one element that stays the same, nobody knows which;
//   - met(L): the loop L over the whole container has come past it;
//   - later(L): the loop L has not come to it yet, and does not in this turn.
//
// Where a loop over the whole container takes an element, the walk forks into
// "this one" and "another one"; where such a loop ends since there is no
// further element, it has come past every one. A loop that is left early may
// not have. An index that is no loop's may be that of the instance: a doubt.

// ghost is the index of an element of which only the existence is known.
func (t *exprs) ghost() Expr { return t.constant("ghost") }

func (t *exprs) met(l *wholeLoop) Expr   { return t.constant("met " + l.id) }
func (t *exprs) later(l *wholeLoop) Expr { return t.constant("later " + l.id) }

// reindex rewrites the indices in e; f is given the container and the index,
// and answers the new index, or 0 to drop the whole name.
func (t *exprs) reindex(e Expr, f func(c, y Expr) Expr) Expr {
	if e == 0 || !t.isSel(e) {
		return e
	}
	n := t.nodes[e]
	x := t.reindex(n.x, f)
	if x == 0 {
		return 0
	}
	y := n.y
	if n.kind == kIndex {
		if y = f(n.x, n.y); y == 0 {
			return 0
		}
	}
	if x == n.x && y == n.y {
		return e
	}
	return t.sel(n.kind, x, n.n, y, n.ref)
}

// indexed tells whether an element is selected anywhere in e.
func (t *exprs) indexed(e Expr) bool {
	for e != 0 && t.isSel(e) {
		if t.nodes[e].kind == kIndex {
			return true
		}
		e = t.nodes[e].x
	}
	return false
}

// ghosted is e with the ghost index for every index: what all elements have in common.
func (t *exprs) ghosted(e Expr) Expr {
	return t.reindex(e, func(_, _ Expr) Expr { return t.ghost() })
}

// hasGhost tells whether e speaks of an element that is not known.
func (t *exprs) hasGhost(e Expr) bool {
	found := false
	t.reindex(e, func(_, y Expr) Expr {
		found = found || y == t.ghost()
		return y
	})
	return found
}

// reindex rewrites the indices of all names.
func (s *nset) reindex(t *exprs, f func(c, y Expr) Expr) {
	old := s.names
	if !slices.ContainsFunc(old, t.indexed) {
		return
	}
	s.names = nil
	for _, e := range old {
		r := t.reindex(e, f)
		if r != e && r != 0 && t.nodes[e].kind == kMaybe {
			r = t.held(t.nodes[r].x) // a doubt about an element that is out of reach now
		}
		s.add(r)
	}
}

// Bounds on inexact names: each is a place from which the instance may be
// fetched again. Past them it is not: a fetch of it then is one of another
// object, whose own start answers for it.
const (
	maxHolders     = 8 // of an instance that moves
	maxStayHolders = 2 // of one that stays where it is (a lock): near ones only
)

// tidy drops what other names cover: what a part of an object may hold, the
// object may hold. Of an instance that stays and to which nothing has happened
// yet, only exact names are worth knowing: met there, it is met for the first time.
func (m *Model) tidy(ns *nset) {
	held := 0
	if ns.phase == born && !m.rule.Moves && !ns.touched {
		ns.filter(func(e Expr) bool { k := m.x.nodes[e].kind; return k != kHeld && k != kMaybe })
		return
	}
	defer func() {
		if held == 0 {
			return
		}
		left := maxHolders
		if !m.rule.Moves {
			left = maxStayHolders
		}
		ns.filter(func(e Expr) bool {
			n := m.x.nodes[e]
			if n.kind != kHeld {
				return true
			}
			if left == 0 || !m.rule.Moves && m.x.depth[n.x] > 2 {
				return false
			}
			left--
			return true
		})
	}()
	for _, e := range ns.names {
		if m.x.nodes[e].kind == kHeld {
			held++
		}
	}
	if held < 2 {
		return
	}
	ns.filter(func(e Expr) bool {
		n := m.x.nodes[e]
		if n.kind != kHeld {
			return true
		}
		for x := n.x; m.x.isSel(x); {
			x = m.x.nodes[x].x
			if ns.has(m.x.held(x)) {
				return false
			}
		}
		return true
	})
}

// A wholeLoop is a loop that takes every element of a container once, unless
// it is left early.
type wholeLoop struct {
	id   string
	idx  Expr        // the index of this turn's element
	reg  ssa.Value   // the register that it is defined with
	over []ssa.Value // the container: what the loop's end looks at
	head *ssa.BasicBlock
	body map[*ssa.BasicBlock]bool
	done *ssa.BasicBlock // where the loop ends for want of elements
	// every: in each turn the element is taken.
	every bool
}

type loopInfo struct {
	loops []*wholeLoop
	takes map[ssa.Instruction]*wholeLoop // where a loop takes the element
	ends  map[*ssa.If]*wholeLoop
}

func (m *Model) loopsOf(fi *fnInfo) *loopInfo {
	if fi.loops == nil {
		fi.loops = &loopInfo{takes: map[ssa.Instruction]*wholeLoop{}, ends: map[*ssa.If]*wholeLoop{}}
		for _, b := range fi.fn.Blocks {
			m.findLoop(fi, b)
		}
	}
	return fi.loops
}

// findLoop looks for a whole loop whose end is decided at the end of b.
func (m *Model) findLoop(fi *fnInfo, b *ssa.BasicBlock) {
	if len(b.Instrs) == 0 || !slices.ContainsFunc(b.Preds, b.Dominates) {
		return
	}
	iff, ok := b.Instrs[len(b.Instrs)-1].(*ssa.If)
	if !ok {
		return
	}
	l := &wholeLoop{head: b, body: naturalLoop(b), done: b.Succs[1]}
	if !l.body[b.Succs[0]] || l.body[b.Succs[1]] {
		return
	}
	switch c := iff.Cond.(type) {
	case *ssa.Extract: // a range over a map
		next, ok := c.Tuple.(*ssa.Next)
		if !ok || c.Index != 0 || next.IsString || next.Block() != b {
			return
		}
		rg, ok := next.Iter.(*ssa.Range)
		if !ok {
			return
		}
		l.reg, l.idx, l.every = next, m.x.res(next, 1), true
		l.over = []ssa.Value{rg.X}
		m.keepLoop(fi, l, iff, []ssa.Instruction{next})
		return
	case *ssa.BinOp:
		idx, n := c.X, c.Y
		switch c.Op {
		case token.LSS, token.NEQ:
		case token.GTR:
			idx, n = n, idx
		case token.GEQ:
			n = nil // counts down to zero
		default:
			return
		}
		if n == nil {
			if k, ok := c.Y.(*ssa.Const); !ok || !isZero(k) {
				return
			}
			n = m.countsDown(idx, b, l.body)
		} else if !m.countsUp(idx, b, l.body) {
			return
		}
		if n == nil {
			return
		}
		if call, ok := n.(*ssa.Call); ok {
			if bi, ok := call.Call.Value.(*ssa.Builtin); ok && bi.Name() == "len" {
				l.over = append(l.over, call.Call.Args[0])
			}
		}
		l.reg, l.idx = idx, m.x.name(idx)
		var takes []ssa.Instruction
		for _, blk := range fi.fn.Blocks {
			if !l.body[blk] {
				continue
			}
			for _, i := range blk.Instrs {
				var c, y ssa.Value
				switch i := i.(type) {
				case *ssa.IndexAddr:
					c, y = i.X, i.Index
				case *ssa.Index:
					c, y = i.X, i.Index
				default:
					continue
				}
				if y != idx || !m.lengthOf(n, c) {
					continue
				}
				takes = append(takes, i)
				if !slices.Contains(l.over, c) {
					l.over = append(l.over, c)
				}
				always := true
				for _, p := range b.Preds {
					if l.body[p] && !blk.Dominates(p) {
						always = false
					}
				}
				l.every = l.every || always
			}
		}
		if len(takes) > 0 {
			m.keepLoop(fi, l, iff, takes)
		}
	}
}

func (m *Model) keepLoop(fi *fnInfo, l *wholeLoop, iff *ssa.If, takes []ssa.Instruction) {
	li := fi.loops
	l.id = strconv.Itoa(fi.id) + "." + strconv.Itoa(l.head.Index)
	li.loops = append(li.loops, l)
	li.ends[iff] = l
	for _, t := range takes {
		li.takes[t] = l
	}
}

// naturalLoop is the set of blocks of the loop with head b.
func naturalLoop(b *ssa.BasicBlock) map[*ssa.BasicBlock]bool {
	body := map[*ssa.BasicBlock]bool{b: true}
	var work []*ssa.BasicBlock
	for _, p := range b.Preds {
		if b.Dominates(p) && !body[p] {
			body[p] = true
			work = append(work, p)
		}
	}
	for len(work) > 0 {
		c := work[len(work)-1]
		work = work[:len(work)-1]
		for _, p := range c.Preds {
			if !body[p] {
				body[p] = true
				work = append(work, p)
			}
		}
	}
	return body
}

func isZero(c *ssa.Const) bool { return isInt64(c, 0) }

func isInt64(v ssa.Value, n int64) bool {
	c, ok := v.(*ssa.Const)
	if !ok || c.Value == nil || c.Value.Kind() != constant.Int {
		return false
	}
	k, exact := constant.Int64Val(c.Value)
	return exact && k == n
}

// countsUp tells whether idx takes the values 0, 1, 2... in the turns of the
// loop at b: a φ that starts at 0, or the successor of one that starts at -1.
func (m *Model) countsUp(idx ssa.Value, b *ssa.BasicBlock, body map[*ssa.BasicBlock]bool) bool {
	phi, first := idx, int64(0)
	if op, ok := idx.(*ssa.BinOp); ok && op.Block() == b && op.Op == token.ADD && isInt64(op.Y, 1) {
		phi, first = op.X, -1
	}
	p, ok := phi.(*ssa.Phi)
	if !ok || p.Block() != b {
		return false
	}
	for k, e := range p.Edges {
		if !body[b.Preds[k]] {
			if !isInt64(e, first) {
				return false
			}
			continue
		}
		if op, ok := e.(*ssa.BinOp); !ok || op.Op != token.ADD || op.X != p || !isInt64(op.Y, 1) {
			return false
		}
	}
	return true
}

// countsDown gives the length that idx counts down from: it starts below the
// length and goes to 0.
func (m *Model) countsDown(idx ssa.Value, b *ssa.BasicBlock, body map[*ssa.BasicBlock]bool) (n ssa.Value) {
	p, ok := idx.(*ssa.Phi)
	if !ok || p.Block() != b {
		return nil
	}
	for k, e := range p.Edges {
		op, ok := e.(*ssa.BinOp)
		if !ok || op.Op != token.SUB || !isInt64(op.Y, 1) {
			return nil
		}
		switch {
		case body[b.Preds[k]]:
			if op.X != p {
				return nil
			}
		case n != nil && n != op.X:
			return nil
		default:
			n = op.X
		}
	}
	return n
}

// lengthOf tells whether n is the length of c: len(c), also when c was loaded
// again, or the length of an array type.
func (m *Model) lengthOf(n, c ssa.Value) bool {
	t := c.Type().Underlying()
	if p, ok := t.(*types.Pointer); ok {
		t = p.Elem().Underlying()
	}
	if a, ok := t.(*types.Array); ok {
		return isInt64(n, a.Len())
	}
	call, ok := n.(*ssa.Call)
	if !ok {
		return false
	}
	bi, ok := call.Call.Value.(*ssa.Builtin)
	if !ok || bi.Name() != "len" {
		return false
	}
	x := call.Call.Args[0]
	return x == c || m.path(x) == m.path(c)
}

// path writes a value with the loads it comes from written out: the place that
// a loaded container lies in. Whether the place still holds it is not looked at.
func (m *Model) path(v ssa.Value) Expr {
	switch v := v.(type) {
	case *ssa.UnOp:
		if v.Op == token.MUL {
			if e := m.x.load(m.path(v.X)); e != 0 {
				return e
			}
		}
	case *ssa.FieldAddr:
		return m.x.field(m.path(v.X), structField(v.X.Type(), v.Field))
	case *ssa.IndexAddr:
		return m.x.index(m.path(v.X), m.x.name(v.Index))
	}
	return m.x.name(v)
}

// take executes an instruction at which a loop takes its next element: this
// one or another one.
func (m *Model) take(fr *frame, instr ssa.Instruction, dst []pds.Rule) ([]pds.Rule, bool) {
	if fr.ns.phase != born {
		return nil, false
	}
	l := m.loopsOf(fr.fi).takes[instr]
	if l == nil {
		return nil, false
	}
	met, later := m.x.met(l), m.x.later(l)
	open := false
	for _, e := range fr.ns.names {
		if k := m.x.nodes[e].kind; k == kHeld || k == kMaybe {
			continue
		}
		m.x.reindex(e, func(c, y Expr) Expr {
			if y != l.idx && y != met && y != later && m.isOver(l, c) {
				open = true
			}
			return y
		})
	}
	if !open {
		return nil, false
	}
	turn := func(to Expr) {
		c := fr.clone()
		c.ns.reindex(m.x, func(_, y Expr) Expr {
			if y == met || y == later || y == l.idx {
				return y
			}
			return to
		})
		if to == l.idx {
			m.taken(c, l, instr)
		}
		c.i++
		dst = append(dst, m.goTo(c, 0))
	}
	turn(l.idx)
	turn(later)
	return dst, true
}

// taken names the element that the loop has taken by value.
func (m *Model) taken(fr *frame, l *wholeLoop, instr ssa.Instruction) {
	var to Expr
	switch i := instr.(type) {
	case *ssa.Next:
		to = m.x.res(i, 2)
	case *ssa.Index:
		to = m.x.reg(i)
	default:
		return // an address: a name as it is
	}
	for _, e := range fr.ns.names {
		m.x.reindex(e, func(c, y Expr) Expr {
			if y == l.idx {
				fr.ns.add(m.x.rename(e, m.x.index(c, y), to))
			}
			return y
		})
	}
}

// isOver tells whether c is the container that the loop goes over.
func (m *Model) isOver(l *wholeLoop, c Expr) bool {
	for _, v := range l.over {
		if m.x.name(v) == c || m.path(v) == c {
			return true
		}
	}
	return false
}

// exhausted tells whether the loop at an If can end for want of elements on
// this path: not while it has not come past the instance.
func (m *Model) exhausted(fr *frame, i *ssa.If) bool {
	if fr.ns.phase != born {
		return true
	}
	l := m.loopsOf(fr.fi).ends[i]
	if l == nil || !l.every {
		return true
	}
	ok := true
	met := m.x.met(l)
	for _, e := range fr.ns.names {
		if k := m.x.nodes[e].kind; k == kHeld || k == kMaybe {
			continue
		}
		m.x.reindex(e, func(c, y Expr) Expr {
			// An element taken in this turn has not been passed yet: it was
			// taken by a range over a map, which found one.
			if y != met && m.isOver(l, c) {
				ok = false
			}
			return y
		})
	}
	return ok
}

// reuse rewrites indices when register v is defined again: the element with
// the old index is one that the loop has come past, or any.
func (m *Model) reuse(ns *nset, fi *fnInfo, v ssa.Value) {
	if ns.phase != born || !slices.ContainsFunc(ns.names, m.x.indexed) {
		return
	}
	var l *wholeLoop
	for _, c := range m.loopsOf(fi).loops {
		if c.reg == v {
			l = c
		}
	}
	ns.reindex(m.x, func(_, y Expr) Expr {
		switch {
		case l != nil && y == l.idx:
			return m.x.met(l)
		case l != nil && y == m.x.later(l):
			return m.x.ghost()
		case m.x.mentions(y, v):
			return m.x.ghost()
		}
		return y
	})
}

// crossLoops forgets, on the edge from one block to another, how far the loops
// have come that are entered or left by it.
func (m *Model) crossLoops(ns *nset, fi *fnInfo, from, to *ssa.BasicBlock) {
	if ns.phase != born || !slices.ContainsFunc(ns.names, m.x.indexed) {
		return
	}
	for _, l := range m.loopsOf(fi).loops {
		if l.body[from] == l.body[to] {
			continue
		}
		entered := l.body[to]
		met, later := m.x.met(l), m.x.later(l)
		ns.reindex(m.x, func(_, y Expr) Expr {
			if y == met || y == later || entered && y == l.idx {
				return m.x.ghost()
			}
			return y
		})
	}
}

// outward rewrites the indices of a name that leaves the frame (up to a
// caller, down to a callee): `as` says what a register is called there.
func (m *Model) outward(e Expr, as func(y Expr) Expr) Expr {
	return m.x.reindex(e, func(_, y Expr) Expr {
		switch n := m.x.nodes[y]; n.kind {
		case kConst:
			if _, err := strconv.Atoi(n.ref.(string)); err == nil || n.ref.(string)[0] == '"' {
				return y
			}
		case kGlobal:
			return y
		default:
			if z := as(y); z != 0 {
				return z
			}
		}
		return m.x.ghost()
	})
}

// addBack adds a name that a callee brought back: one that says less of the
// index than the frame knows already adds nothing.
func (m *Model) addBack(ns *nset, e Expr) {
	if e == 0 {
		return
	}
	if m.x.hasGhost(e) {
		g := m.x.ghosted(e)
		for _, o := range ns.names {
			if m.x.indexed(o) && m.x.ghosted(o) == g {
				return
			}
		}
	}
	ns.add(e)
}

// elements names what dst, made from the elements of src, holds: at turns an
// index of src into one of dst (0: not among them; the ghost index: somewhere).
func (m *Model) elements(fr *frame, src, dst Expr, at func(y Expr) Expr) {
	if fr.ns.phase != born {
		return
	}
	for _, e := range fr.ns.names {
		if e == src || !m.x.within(src, e) {
			continue
		}
		// The selector that stands right behind src.
		inner := e
		for m.x.nodes[inner].x != src {
			inner = m.x.nodes[inner].x
		}
		n := m.x.nodes[inner]
		switch n.kind {
		case kHeld:
			fr.ns.add(m.x.held(dst))
		case kIndex:
			y := at(n.y)
			if y == 0 {
				continue
			}
			if y < 0 {
				fr.ns.add(m.x.held(dst))
				continue
			}
			fr.ns.add(m.x.rename(e, inner, m.x.index(dst, y)))
		}
	}
}

// inexact says that the index is not known well enough to select by.
const inexact Expr = -1

// slice executes a slice expression.
func (m *Model) slice(fr *frame, v *ssa.Slice) {
	low, high := int64(0), int64(-1)
	known := true
	for _, b := range [2]struct {
		v  ssa.Value
		to *int64
	}{{v.Low, &low}, {v.High, &high}} {
		if b.v == nil {
			continue
		}
		c, ok := b.v.(*ssa.Const)
		if !ok || c.Value == nil {
			known = false
			continue
		}
		*b.to = c.Int64()
	}
	if p, ok := v.X.Type().Underlying().(*types.Pointer); ok {
		if a, ok := p.Elem().Underlying().(*types.Array); ok && high == a.Len() {
			high = -1
		}
	}
	whole := known && low == 0 && high < 0
	m.elements(fr, m.x.name(v.X), m.x.reg(v), func(y Expr) Expr {
		if whole {
			return y
		}
		n, err := strconv.ParseInt(m.constText(y), 10, 64)
		if err != nil || !known {
			return inexact
		}
		if n < low || high >= 0 && n >= high {
			return 0
		}
		return m.x.constant(strconv.FormatInt(n-low, 10))
	})
}

func (m *Model) constText(y Expr) string {
	if n := m.x.nodes[y]; n.kind == kConst {
		return n.ref.(string)
	}
	return ""
}

// appended executes append(base, more...).
func (m *Model) appended(fr *frame, c *ssa.Call) {
	r := m.x.reg(c)
	base := c.Call.Args[0]
	keep := func(y Expr) Expr {
		if _, err := strconv.Atoi(m.constText(y)); err == nil {
			return y
		}
		return m.x.ghost()
	}
	// What was there is under the result; in base too, unless base is given up.
	m.elements(fr, m.x.name(base), r, keep)
	if len(c.Call.Args) > 1 {
		put := func(Expr) Expr { return m.x.ghost() }
		if m.t.abs[m.absOf(fr, base, fr.b)].kind == aNil {
			put = keep
		}
		m.elements(fr, m.x.name(c.Call.Args[1]), r, put)
	}
}

// mapUpdate puts a value into a map.
func (m *Model) mapUpdate(fr *frame, u *ssa.MapUpdate) {
	if fr.ns.phase != born {
		return
	}
	c, k := m.x.name(u.Map), m.x.name(u.Key)
	p := m.path(u.Map)
	old := fr.ns.names
	fr.ns.filter(func(e Expr) bool { return !m.x.within(m.x.index(c, k), e) && !m.x.within(m.x.index(p, k), e) })
	for _, e := range old {
		if !m.reaches(e, u.Value) {
			continue
		}
		m.carryOver(&fr.ns, e, u.Value, m.x.index(c, k))
		if p != c {
			m.carryOver(&fr.ns, e, u.Value, m.x.index(p, k))
		}
		for _, o := range m.origins(fr.fi, u.Map) {
			switch m.x.rootKind(o.s) {
			case kParam, kFree, kGlobal:
				if m.x.frameFree(o.s) {
					m.carryOver(&fr.ns, e, u.Value, m.x.index(o.s, k))
					continue
				}
			}
			m.heldUnder(fr, o)
		}
	}
}

// perhaps names, as doubts, what is at index y of c, if the instance is an
// element of c at an index that may be the same.
func (m *Model) perhaps(fr *frame, c, y Expr, to func(e Expr) Expr) {
	if fr.ns.phase != born {
		return
	}
	at := m.x.index(c, y)
	for _, e := range fr.ns.names {
		if k := m.x.nodes[e].kind; k == kHeld || k == kMaybe {
			continue
		}
		mayBe := false
		r := m.x.reindex(e, func(d, z Expr) Expr {
			if d != c || z == y {
				return z
			}
			if m.x.nodes[y].kind == kConst && m.x.nodes[z].kind == kConst && z != m.x.ghost() {
				return z // two constants, or one that a loop has come past
			}
			if m.apart(y, z) {
				return z
			}
			if s := m.constText(z); len(s) > 4 && (s[:4] == "met " || s[:5] == "later") {
				return z
			}
			mayBe = true
			return y
		})
		if mayBe && m.x.within(at, r) {
			if r = to(r); r != 0 {
				fr.ns.add(m.x.maybe(r))
			}
		}
	}
}

// apart tells whether two indices differ by a constant that is not zero.
func (m *Model) apart(y, z Expr) bool {
	split := func(e Expr) (Expr, int64) {
		if op, ok := m.x.nodes[e].ref.(*ssa.BinOp); ok && m.x.nodes[e].kind == kReg {
			if c, ok := op.Y.(*ssa.Const); ok && c.Value != nil && c.Value.Kind() == constant.Int {
				switch op.Op {
				case token.ADD:
					return m.x.name(op.X), c.Int64()
				case token.SUB:
					return m.x.name(op.X), -c.Int64()
				}
			}
		}
		return e, 0
	}
	a, i := split(y)
	b, k := split(z)
	return a == b && i != k
}

// concerns tells whether running g does something to what it knows by the
// name e: e is a subject of its events, or holds one.
func (m *Model) concerns(g *fnInfo, e Expr) bool {
	n := m.x.nodes[e]
	switch n.kind {
	case kMaybe:
		e = n.x
	case kHeld:
		for _, u := range g.subjList {
			if m.x.within(n.x, u) {
				return true
			}
		}
		return false
	}
	return g.subjects[e] || m.x.indexed(e) && g.subjects[m.x.ghosted(e)]
}

// elemOf is the element type of a slice, map, array or pointer to an array;
// nil for any other type.
func elemOf(t types.Type) types.Type {
	switch t := t.Underlying().(type) {
	case *types.Slice:
		return t.Elem()
	case *types.Map:
		return t.Elem()
	case *types.Array:
		return t.Elem()
	case *types.Pointer:
		if a, ok := t.Elem().Underlying().(*types.Array); ok {
			return a.Elem()
		}
	}
	return nil
}

// sendsIt tells whether a case of the select sends the instance.
func (m *Model) sendsIt(fr *frame, sel *ssa.Select) bool {
	if fr.ns.phase != born {
		return false
	}
	for _, s := range sel.States {
		if s.Dir != types.SendOnly {
			continue
		}
		for _, e := range fr.ns.names {
			if m.reaches(e, s.Send) {
				return true
			}
		}
	}
	return false
}

// choose executes a select that may send the instance: one way for each case,
// since only the one that is chosen sends.
func (m *Model) choose(fr *frame, sel *ssa.Select, dst []pds.Rule) []pds.Rule {
	m.define(fr, sel)
	first := 0
	if !sel.Blocking {
		first = -1
	}
	for k := first; k < len(sel.States); k++ {
		c := fr.clone()
		if k >= 0 {
			if s := sel.States[k]; s.Dir == types.SendOnly {
				m.insert(c, 0, nil, s.Send)
			}
		}
		m.setFact(c, m.x.res(sel, 0), m.intAbs(int64(k), int64(k)))
		c.i++
		dst = append(dst, m.goTo(c, 0))
	}
	return dst
}
