package frontend

import (
	"go/constant"
	"go/token"
	"go/types"
	"slices"

	"golang.org/x/tools/go/ssa"

	"pathtally/frontend/effects"
)

// key is the expression under which facts about v are kept when it is used in
// block at: pure operations on equal operands are one expression, and so are
// two loads of one place, as long as nothing can have changed the place between
// the load and the use. v's own register otherwise.
func (m *Model) key(v ssa.Value, at *ssa.BasicBlock) Expr {
	k := valueAt{v, at}
	e, ok := m.keyOf[k]
	if !ok {
		e = m.keyDepth(v, at, 0)
		m.keyOf[k] = e
	}
	return e
}

type valueAt struct {
	v  ssa.Value
	at *ssa.BasicBlock
}

func (m *Model) keyDepth(v ssa.Value, at *ssa.BasicBlock, depth int) Expr {
	x := m.x
	if depth > 5 {
		return x.reg(v)
	}
	switch v := v.(type) {
	case *ssa.BinOp:
		a, b := m.keyDepth(v.X, at, depth+1), m.keyDepth(v.Y, at, depth+1)
		op := v.Op
		switch op {
		case token.NEQ, token.GTR, token.GEQ, token.LSS, token.LEQ, token.EQL,
			token.ADD, token.SUB, token.MUL, token.AND, token.OR, token.XOR, token.AND_NOT, token.SHL, token.SHR, token.REM, token.QUO:
			return x.intern(exprNode{kind: kBin, op: op, x: a, y: b})
		}
	case *ssa.UnOp:
		switch v.Op {
		case token.NOT, token.SUB, token.XOR:
			return x.intern(exprNode{kind: kUn, op: v.Op, x: m.keyDepth(v.X, at, depth+1)})
		case token.MUL:
			if v.Block() == at && m.cleanSince(v, at) {
				if a := m.placeKey(v.X, at, depth+1); a != 0 {
					if e := x.load(a); e != 0 {
						return e
					}
				}
			}
		}
	case *ssa.ChangeType:
		return m.keyDepth(v.X, at, depth+1)
	case *ssa.ChangeInterface:
		return m.keyDepth(v.X, at, depth+1)
	case *ssa.TypeAssert:
		if _, iface := v.AssertedType.Underlying().(*types.Interface); iface && !v.CommaOk {
			return m.keyDepth(v.X, at, depth+1)
		}
	case *ssa.MakeInterface:
		return x.reg(v)
	case *ssa.Extract:
		if ta, ok := v.Tuple.(*ssa.TypeAssert); ok && v.Index == 1 {
			// Asserting one value to one type twice is one question.
			return x.intern(exprNode{kind: kUn, op: token.TYPE, x: m.keyDepth(ta.X, at, depth+1), ref: types.TypeString(ta.AssertedType, nil)})
		}
		if c, ok := v.Tuple.(*ssa.Call); ok {
			if e := m.getterKey(c, v.Index, at, depth); e != 0 {
				return e
			}
		}
		return x.res(v.Tuple, v.Index)
	case *ssa.Parameter, *ssa.FreeVar, *ssa.Const, *ssa.Global:
		return x.name(v)
	case *ssa.Field:
		return x.fieldVal(m.keyDepth(v.X, at, depth+1), structField(v.X.Type(), v.Field))
	case *ssa.FieldAddr, *ssa.IndexAddr:
		return m.placeKey(v, at, depth+1)
	case *ssa.Call:
		if b, ok := v.Call.Value.(*ssa.Builtin); ok && (b.Name() == "len" || b.Name() == "cap") {
			if a := m.keyDepth(v.Call.Args[0], at, depth+1); a != 0 {
				if e := x.intern(exprNode{kind: kUn, op: token.IDENT, n: int32(len(b.Name())*10 + int(b.Name()[0])), x: a}); !m.mapOrChan(v.Call.Args[0].Type()) {
					return e
				}
			}
			break
		}
		if e := m.getterKey(v, 0, at, depth); e != 0 {
			return e
		}
	}
	return x.reg(v)
}

// getterKey writes result res of a call of a pure getter by what it is called
// with: two calls with equal arguments and no store to what the getter reads
// between them give one value. A getter that hands out a place is written as a
// load of that place. 0 if the call is no such getter, or may have become stale
// at the end of block at.
func (m *Model) getterKey(c *ssa.Call, res int, at *ssa.BasicBlock, depth int) Expr {
	if c.Block() != at || m.rule == nil {
		return 0
	}
	fn := c.Call.StaticCallee()
	if fn == nil || fn.Blocks == nil || len(fn.FreeVars) > 0 {
		return 0
	}
	sum := m.sh.eff.Of(fn)
	if !sum.PureGetter() || !m.quietSince(c, at, sum) {
		return 0
	}
	if arg, path, ok := m.sh.resultPath(c, res); ok && len(path) > 0 {
		e := m.keyDepth(arg, at, depth+1)
		for _, f := range path {
			if f == nil {
				e = m.x.load(e)
			} else {
				e = m.x.field(e, f)
			}
		}
		if e != 0 {
			return e
		}
	}
	var args Expr
	for _, a := range c.Call.Args {
		args = m.x.intern(exprNode{kind: kArgs, x: args, y: m.keyDepth(a, at, depth+1)})
	}
	return m.x.intern(exprNode{kind: kGet, n: int32(res), x: args, ref: fn})
}

// quietSince tells whether nothing between the getter's call and the end of its
// block can change what it read.
func (m *Model) quietSince(c *ssa.Call, at *ssa.BasicBlock, sum *effects.Summary) bool {
	after := false
	for _, i := range at.Instrs {
		if i == c {
			after = true
			continue
		}
		if !after {
			continue
		}
		switch i := i.(type) {
		case *ssa.Store:
			if m.mayChange(sum, i.Addr) {
				return false
			}
		case *ssa.MapUpdate, *ssa.RunDefers:
			return false
		case *ssa.Defer:
		case ssa.CallInstruction:
			if _, ok := i.Common().Value.(*ssa.Builtin); !ok && sum.ReadsOverwritten(m.sh.effectsAt(i)) {
				return false
			}
		}
	}
	return after
}

// mayChange tells whether a store to addr may change what a pure getter reads.
func (m *Model) mayChange(getter *effects.Summary, addr ssa.Value) bool {
	switch a := addr.(type) {
	case *ssa.FieldAddr:
		return getter.ReadsField(structField(a.X.Type(), a.Field))
	case *ssa.Alloc:
		return escapes(a)
	}
	return true
}

// mapOrChan: the length of a map or channel may change though its value does not.
func (m *Model) mapOrChan(t types.Type) bool {
	switch t.Underlying().(type) {
	case *types.Map, *types.Chan:
		return true
	}
	return false
}

// placeKey writes an address with its loads written out, where that is safe.
func (m *Model) placeKey(addr ssa.Value, at *ssa.BasicBlock, depth int) Expr {
	switch a := addr.(type) {
	case *ssa.FieldAddr:
		return m.x.field(m.placeKey(a.X, at, depth+1), structField(a.X.Type(), a.Field))
	case *ssa.IndexAddr:
		return m.x.index(m.placeKey(a.X, at, depth+1), m.x.name(a.Index))
	case *ssa.UnOp:
		return m.keyDepth(a, at, depth+1)
	}
	return m.x.name(addr)
}

// cleanSince tells whether nothing between the load and the end of its block
// can change what it read.
func (m *Model) cleanSince(load *ssa.UnOp, at *ssa.BasicBlock) bool {
	after := false
	for _, i := range at.Instrs {
		if i == load {
			after = true
			continue
		}
		if !after {
			continue
		}
		switch i := i.(type) {
		case *ssa.Store:
			if mayAlias(i.Addr, load.X) {
				return false
			}
		case *ssa.MapUpdate:
		case ssa.CallInstruction:
			if _, ok := i.Common().Value.(*ssa.Builtin); ok {
				continue
			}
			if _, ok := i.(*ssa.Defer); ok {
				continue
			}
			return false
		case *ssa.RunDefers:
			return false
		}
	}
	return after
}

// mayAlias: two addresses of different shape are taken to be different places.
func mayAlias(a, b ssa.Value) bool {
	if a == b {
		return true
	}
	switch x := a.(type) {
	case *ssa.FieldAddr:
		y, ok := b.(*ssa.FieldAddr)
		return ok && structField(x.X.Type(), x.Field).Origin() == structField(y.X.Type(), y.Field).Origin()
	case *ssa.IndexAddr:
		_, ok := b.(*ssa.IndexAddr)
		return ok
	case *ssa.Global, *ssa.Alloc, *ssa.FreeVar:
		return false
	}
	switch b.(type) {
	case *ssa.FieldAddr, *ssa.IndexAddr, *ssa.Global, *ssa.Alloc, *ssa.FreeVar:
		return false
	}
	return types.Identical(a.Type(), b.Type())
}

// constAbs is the abstract value of a constant.
func (m *Model) constAbs(c *ssa.Const) Abs {
	if c.Value == nil {
		if isNilable(c.Type()) {
			return m.t.absOf(absVal{kind: aNil})
		}
		return 0
	}
	return m.valueAbs(c.Value)
}

func (m *Model) valueAbs(v constant.Value) Abs {
	switch v.Kind() {
	case constant.Bool:
		return m.boolAbs(constant.BoolVal(v))
	case constant.Int:
		if n, ok := constant.Int64Val(v); ok {
			return m.intAbs(n, n)
		}
	}
	return m.t.absOf(absVal{kind: aEq, c: v.ExactString()})
}

func (m *Model) boolAbs(b bool) Abs {
	if b {
		return m.t.absOf(absVal{kind: aBool, lo: 1, hi: 1})
	}
	return m.t.absOf(absVal{kind: aBool})
}

func (m *Model) intAbs(lo, hi int64) Abs {
	if lo == minInt && hi == maxInt {
		return 0
	}
	return m.t.absOf(absVal{kind: aInt, lo: lo, hi: hi})
}

func isNilable(t types.Type) bool {
	switch t := t.Underlying().(type) {
	case *types.Pointer, *types.Interface, *types.Signature, *types.Slice, *types.Map, *types.Chan:
		return true
	case *types.Basic:
		return t.Kind() == types.UnsafePointer || t.Kind() == types.UntypedNil
	}
	return false
}

func isInt(t types.Type) bool {
	b, ok := t.Underlying().(*types.Basic)
	return ok && b.Info()&types.IsInteger != 0
}

func isBool(t types.Type) bool {
	b, ok := t.Underlying().(*types.Basic)
	return ok && b.Info()&types.IsBoolean != 0
}

// absOf is what is known of v's value when it is used in block at.
func (m *Model) absOf(fr *frame, v ssa.Value, at *ssa.BasicBlock) Abs {
	return m.absDepth(fr, v, at, 0)
}

func (m *Model) absDepth(fr *frame, v ssa.Value, at *ssa.BasicBlock, depth int) Abs {
	if c, ok := v.(*ssa.Const); ok {
		return m.constAbs(c)
	}
	k := m.key(v, at)
	if a := fr.fs.get(k); a != 0 {
		return a
	}
	if r := m.x.reg(v); r != k {
		if a := fr.fs.get(r); a != 0 {
			return a
		}
	}
	if depth > 6 {
		return 0
	}
	// A value that is the instance (or contains it by address) is not nil.
	if isNilable(v.Type()) && fr.ns.phase == born {
		n := m.x.name(v)
		for _, e := range fr.ns.names {
			if e == n || m.x.nodes[e].kind == kField && m.x.within(n, e) && m.x.loads[e] == m.x.loads[n] {
				return m.nonNil()
			}
		}
	}
	switch v := v.(type) {
	case *ssa.Alloc, *ssa.FieldAddr, *ssa.IndexAddr, *ssa.MakeMap, *ssa.MakeChan, *ssa.MakeSlice, *ssa.Global:
		return m.nonNil()
	case *ssa.MakeInterface:
		return m.t.absOf(absVal{kind: aType, typ: v.X.Type()})
	case *ssa.Function:
		return m.t.absOf(absVal{kind: aFunc, fn: v})
	case *ssa.MakeClosure:
		return m.t.absOf(absVal{kind: aFunc, fn: v.Fn.(*ssa.Function)})
	case *ssa.ChangeType:
		return m.absDepth(fr, v.X, at, depth+1)
	case *ssa.ChangeInterface:
		return m.absDepth(fr, v.X, at, depth+1)
	case *ssa.UnOp:
		switch v.Op {
		case token.NOT:
			a := m.t.abs[m.absDepth(fr, v.X, at, depth+1)]
			if a.kind == aBool {
				return m.boolAbs(a.lo == 0)
			}
		case token.SUB:
			a := m.t.abs[m.absDepth(fr, v.X, at, depth+1)]
			if a.kind == aInt && a.lo == a.hi && a.lo != minInt {
				return m.intAbs(-a.lo, -a.lo)
			}
		case token.MUL:
			if g, ok := v.X.(*ssa.Global); ok {
				return m.globalAbs(g)
			}
		}
	case *ssa.BinOp:
		if a := m.moved(fr, v, at); a != 0 {
			return a
		}
		return m.binAbs(v.Op, m.absDepth(fr, v.X, at, depth+1), m.absDepth(fr, v.Y, at, depth+1), v)
	case *ssa.Call:
		if b, ok := v.Call.Value.(*ssa.Builtin); ok && (b.Name() == "len" || b.Name() == "cap") {
			return m.intAbs(0, maxInt)
		}
		if x := m.errorTest(v); x != nil && m.t.abs[m.absDepth(fr, x, at, depth+1)].kind == aNil {
			return m.boolAbs(false)
		}
	case *ssa.Extract:
		if ta, ok := v.Tuple.(*ssa.TypeAssert); ok {
			a := m.t.abs[m.absDepth(fr, ta.X, at, depth+1)]
			if ok, known := assertOK(a, ta.AssertedType); known {
				if v.Index == 1 {
					return m.boolAbs(ok)
				}
				if ok {
					return m.nonNilIf(isNilable(v.Type()), a)
				}
			}
		}
	}
	return 0
}

// moved answers whether two pointers are equal of which one is a variable that
// began as the other and may have gone on, as in a walk along a chain: they are
// equal if the instance lies at the same place in both, and different if it lies
// in one of them only. 0 if nothing tells. A chain that comes back to where it
// began is not thought of: two names of different places are different objects.
func (m *Model) moved(fr *frame, v *ssa.BinOp, at *ssa.BasicBlock) Abs {
	if fr.ns.phase != born || v.Op != token.EQL && v.Op != token.NEQ || v.Block() != at {
		return 0
	}
	if _, ok := v.X.Type().Underlying().(*types.Pointer); !ok || !beganAs(v.X, v.Y) && !beganAs(v.Y, v.X) {
		return 0
	}
	x, y := m.x.name(v.X), m.x.name(v.Y)
	inX, inY := false, false
	for _, e := range fr.ns.names {
		switch k := m.x.nodes[e].kind; {
		case k == kMaybe || k == kHeld:
			if m.x.within(x, e) || m.x.within(y, e) {
				return 0
			}
		case k == kField && m.x.within(x, e) && m.x.loads[e] == m.x.loads[x]:
			inX = true
			if fr.ns.has(m.x.rebase(e, x, y)) {
				return m.boolAbs(v.Op == token.EQL)
			}
		case k == kField && m.x.within(y, e) && m.x.loads[e] == m.x.loads[y]:
			inY = true
		}
	}
	if inX != inY {
		return m.boolAbs(v.Op == token.NEQ)
	}
	return 0
}

// beganAs tells whether v is a φ that has the value from on one of its edges.
func beganAs(v, from ssa.Value) bool {
	phi, ok := v.(*ssa.Phi)
	return ok && slices.Contains(phi.Edges, from)
}

// globalAbs is what is known of a package variable that only its package's
// initialisation stores to.
func (m *Model) globalAbs(g *ssa.Global) Abs {
	if c := m.sh.eff.GlobalConst(g); c != nil {
		return m.valueAbs(c)
	}
	if m.sh.eff.GlobalNonNil(g) {
		return m.nonNil()
	}
	return 0
}

// assertOK: does a type assertion on a value known as a succeed?
func assertOK(a absVal, want types.Type) (ok, known bool) {
	switch a.kind {
	case aNil:
		return false, true
	case aType:
		if iface, isIface := want.Underlying().(*types.Interface); isIface {
			return types.Implements(a.typ, iface), true
		}
		return types.Identical(a.typ, want), true
	}
	return false, false
}

func (m *Model) nonNil() Abs { return m.t.absOf(absVal{kind: aNon}) }

func (m *Model) nonNilIf(yes bool, a absVal) Abs {
	if !yes {
		return 0
	}
	if a.kind == aType {
		if _, ok := a.typ.Underlying().(*types.Pointer); ok {
			return 0 // a typed nil pointer may be in the interface
		}
	}
	return 0
}

// binAbs evaluates a comparison or a sum of known values.
func (m *Model) binAbs(op token.Token, x, y Abs, v *ssa.BinOp) Abs {
	a, b := m.t.abs[x], m.t.abs[y]
	if a.kind == aTop || b.kind == aTop {
		return 0
	}
	truth := func(yes, no bool) Abs {
		switch {
		case yes:
			return m.boolAbs(true)
		case no:
			return m.boolAbs(false)
		}
		return 0
	}
	switch op {
	case token.EQL:
		eq, ne := sameAbs(a, b)
		return truth(eq, ne)
	case token.NEQ:
		eq, ne := sameAbs(a, b)
		return truth(ne, eq)
	}
	if a.kind == aInt && b.kind == aInt {
		switch op {
		case token.LSS:
			return truth(a.hi < b.lo, a.lo >= b.hi)
		case token.LEQ:
			return truth(a.hi <= b.lo, a.lo > b.hi)
		case token.GTR:
			return truth(a.lo > b.hi, a.hi <= b.lo)
		case token.GEQ:
			return truth(a.lo >= b.hi, a.hi < b.lo)
		case token.ADD, token.SUB:
			lo, ok1 := addSat(a.lo, b.lo, op == token.SUB, b.hi)
			hi, ok2 := addSat(a.hi, b.hi, op == token.SUB, b.lo)
			if ok1 && ok2 && v != nil && isWide(v.Type()) {
				return m.intAbs(lo, hi)
			}
		case token.AND:
			if a.lo == a.hi && b.lo == b.hi {
				return m.intAbs(a.lo&b.lo, a.lo&b.lo)
			}
		case token.OR:
			if a.lo == a.hi && b.lo == b.hi {
				return m.intAbs(a.lo|b.lo, a.lo|b.lo)
			}
		}
	}
	return 0
}

// isWide: 64-bit integers; a narrower one could wrap within the interval.
func isWide(t types.Type) bool {
	b, ok := t.Underlying().(*types.Basic)
	if !ok {
		return false
	}
	switch b.Kind() {
	case types.Int, types.Int64:
		return true
	}
	return false
}

func addSat(x, y int64, sub bool, other int64) (int64, bool) {
	if x == minInt || x == maxInt {
		return x, true
	}
	if sub {
		y = other
		if y == minInt || y == maxInt {
			return -1 - y, true // the opposite infinity
		}
		r := x - y
		return r, (r < x) == (y > 0)
	}
	if y == minInt || y == maxInt {
		return y, true
	}
	r := x + y
	return r, (r > x) == (y > 0)
}

// sameAbs: are two values certainly equal, certainly different?
func sameAbs(a, b absVal) (eq, ne bool) {
	non := func(v absVal) bool { return v.kind == aNon || v.kind == aType || v.kind == aFunc }
	switch {
	case a.kind == aNil && b.kind == aNil:
		return true, false
	case a.kind == aNil && non(b), b.kind == aNil && non(a):
		return false, true
	case a.kind == aBool && b.kind == aBool:
		return a.lo == b.lo, a.lo != b.lo
	case a.kind == aInt && b.kind == aInt:
		return a.lo == a.hi && b.lo == b.hi && a.lo == b.lo, a.hi < b.lo || b.hi < a.lo
	case a.kind == aEq && b.kind == aEq:
		return a.c == b.c, a.c != b.c
	case a.kind == aNe && b.kind == aEq, a.kind == aEq && b.kind == aNe:
		return false, a.c == b.c
	}
	return false, false
}

// assume adds to fr what follows from the condition v having the given truth.
// It answers false if that contradicts what is known.
func (m *Model) assume(fr *frame, v ssa.Value, truth bool, at *ssa.BasicBlock) bool {
	if a := m.t.abs[m.absOf(fr, v, at)]; a.kind == aBool {
		if (a.lo == 1) != truth {
			return false
		}
	}
	m.setFact(fr, m.key(v, at), m.boolAbs(truth))
	if r := m.x.reg(v); r != m.key(v, at) {
		m.setFact(fr, r, m.boolAbs(truth))
	}
	switch v := v.(type) {
	case *ssa.UnOp:
		if v.Op == token.NOT {
			return m.assume(fr, v.X, !truth, at)
		}
	case *ssa.BinOp:
		op := v.Op
		if !truth {
			op = negate(op)
		}
		m.refine(fr, v.X, op, v.Y, at)
		m.refine(fr, v.Y, flip(op), v.X, at)
	case *ssa.Call:
		if x := m.errorTest(v); x != nil && truth {
			m.strengthen(fr, x, m.nonNil(), at)
		}
	case *ssa.Extract:
		if ta, ok := v.Tuple.(*ssa.TypeAssert); ok && v.Index == 1 && truth {
			if _, iface := ta.AssertedType.Underlying().(*types.Interface); iface {
				m.strengthen(fr, ta.X, m.nonNil(), at)
			} else {
				m.strengthen(fr, ta.X, m.t.absOf(absVal{kind: aType, typ: ta.AssertedType}), at)
			}
		}
	}
	return true
}

// asksType is the parameter of which fn answers whether it has some type, and
// does nothing else: a nil interface has none. -1 if fn is not of that kind.
func asksType(fn *ssa.Function) int {
	if len(fn.Blocks) != 1 {
		return -1
	}
	for _, instr := range fn.Blocks[0].Instrs {
		ret, ok := instr.(*ssa.Return)
		if !ok || len(ret.Results) != 1 {
			continue
		}
		if e, ok := ret.Results[0].(*ssa.Extract); ok && e.Index == 1 {
			if ta, ok := e.Tuple.(*ssa.TypeAssert); ok {
				if p, ok := ta.X.(*ssa.Parameter); ok {
					return slices.Index(fn.Params, p)
				}
			}
		}
	}
	return -1
}

// errorTest is the error that a call asks about, if its answer true says that
// the error is not nil: errors.Is with a target that is not nil, errors.As, and
// the older questions of package os. Source: the documentation of the standard library.
func (m *Model) errorTest(c *ssa.Call) ssa.Value {
	fn := c.Call.StaticCallee()
	if fn == nil || len(c.Call.Args) == 0 {
		return nil
	}
	if i := asksType(fn); i >= 0 && i < len(c.Call.Args) {
		return c.Call.Args[i]
	}
	obj := funcObject(fn)
	if obj == nil {
		return nil
	}
	switch obj.FullName() {
	case "errors.Is":
		switch t := c.Call.Args[1].(type) {
		case *ssa.MakeInterface:
			return c.Call.Args[0]
		case *ssa.UnOp:
			if g, ok := t.X.(*ssa.Global); ok && t.Op == token.MUL && m.sh.eff.GlobalNonNil(g) {
				return c.Call.Args[0]
			}
		}
	case "errors.As", "os.IsNotExist", "os.IsExist", "os.IsPermission", "os.IsTimeout":
		return c.Call.Args[0]
	}
	return nil
}

func negate(op token.Token) token.Token {
	switch op {
	case token.EQL:
		return token.NEQ
	case token.NEQ:
		return token.EQL
	case token.LSS:
		return token.GEQ
	case token.LEQ:
		return token.GTR
	case token.GTR:
		return token.LEQ
	case token.GEQ:
		return token.LSS
	}
	return token.ILLEGAL
}

func flip(op token.Token) token.Token {
	switch op {
	case token.LSS:
		return token.GTR
	case token.LEQ:
		return token.GEQ
	case token.GTR:
		return token.LSS
	case token.GEQ:
		return token.LEQ
	}
	return op
}

// refine records what `x op y` says about x.
func (m *Model) refine(fr *frame, x ssa.Value, op token.Token, y ssa.Value, at *ssa.BasicBlock) {
	if _, ok := x.(*ssa.Const); ok {
		return
	}
	b := m.t.abs[m.absOf(fr, y, at)]
	if b.kind == aTop {
		return
	}
	a := m.t.abs[m.absOf(fr, x, at)]
	switch op {
	case token.EQL:
		if b.kind == aType {
			b = absVal{kind: aNon}
		}
		if b.kind != aNe {
			if b.kind == aInt && a.kind == aInt {
				b.lo, b.hi = max(a.lo, b.lo), min(a.hi, b.hi)
			}
			m.strengthen(fr, x, m.t.absOf(b), at)
		}
	case token.NEQ:
		switch b.kind {
		case aNil:
			m.strengthen(fr, x, m.nonNil(), at)
		case aBool:
			m.strengthen(fr, x, m.boolAbs(b.lo == 0), at)
		case aEq:
			m.strengthen(fr, x, m.t.absOf(absVal{kind: aNe, c: b.c}), at)
		case aInt:
			lo, hi := int64(minInt), int64(maxInt)
			if a.kind == aInt {
				lo, hi = a.lo, a.hi
			} else if isUnsigned(x.Type()) {
				lo = 0
			}
			if b.lo == b.hi {
				if lo == b.lo && lo < maxInt {
					m.strengthen(fr, x, m.intAbs(lo+1, hi), at)
				} else if hi == b.lo && hi > minInt {
					m.strengthen(fr, x, m.intAbs(lo, hi-1), at)
				}
			}
		}
	case token.LSS, token.LEQ, token.GTR, token.GEQ:
		if b.kind != aInt || !isInt(x.Type()) {
			return
		}
		lo, hi := int64(minInt), int64(maxInt)
		if isUnsigned(x.Type()) {
			lo = 0
		}
		if a.kind == aInt {
			lo, hi = a.lo, a.hi
		}
		switch op {
		case token.LSS:
			if b.hi != maxInt && b.hi != minInt {
				hi = min(hi, b.hi-1)
			}
		case token.LEQ:
			hi = min(hi, b.hi)
		case token.GTR:
			if b.lo != minInt && b.lo != maxInt {
				lo = max(lo, b.lo+1)
			}
		case token.GEQ:
			lo = max(lo, b.lo)
		}
		if lo <= hi {
			m.strengthen(fr, x, m.intAbs(lo, hi), at)
		}
	}
}

func isUnsigned(t types.Type) bool {
	b, ok := t.Underlying().(*types.Basic)
	return ok && b.Info()&types.IsUnsigned != 0
}

// strengthen records that v has the value a, under every key v goes by.
func (m *Model) strengthen(fr *frame, v ssa.Value, a Abs, at *ssa.BasicBlock) {
	k := m.key(v, at)
	if old := m.t.abs[fr.fs.get(k)]; old.kind == aType || old.kind == aFunc {
		if m.t.abs[a].kind == aNon {
			return // nothing new
		}
	}
	m.setFact(fr, k, a)
	if r := m.x.reg(v); r != k {
		m.setFact(fr, r, a)
	}
	switch v := v.(type) {
	case *ssa.ChangeInterface:
		m.strengthen(fr, v.X, a, at)
	case *ssa.ChangeType:
		m.strengthen(fr, v.X, a, at)
	}
}

// setFact records a fact if anything later asks for it.
func (m *Model) setFact(fr *frame, k Expr, a Abs) {
	if k == 0 || !m.flowOf(fr.fi).wants(k) {
		return
	}
	fr.fs = fr.fs.with(k, a)
}
