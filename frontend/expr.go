package frontend

import (
	"fmt"
	"go/token"
	"go/types"
	"slices"
	"strconv"
	"strings"

	"golang.org/x/tools/go/ssa"
)

// Expr names a hash-consed expression over one frame: an address, a value, or
// a condition. 0 is no expression.
//
// Names (what may equal the instance) and fact keys (what a branch may depend
// on) are both expressions. A register stands for the value it was last given
// on the path; Load(a) stands for what memory holds at a *now*. The two are
// kept apart on purpose: executing a load copies what is known of the place to
// the register, a store changes the place alone.
type Expr int32

type exprKind uint8

const (
	kNone     exprKind = iota
	kParam             // parameter n of the frame (receiver first)
	kFree              // captured variable n of the frame
	kGlobal            // address of a package variable
	kReg               // register: an SSA value
	kRes               // component n of the tuple register x
	kResult            // result n of the function, in exits only
	kConst             // constant
	kField             // &x.f, x a pointer
	kFieldVal          // x.f, x a struct value
	kLoad              // *x
	kIndex             // &x[y] or the entry y of the map x
	kCap               // captured variable n inside the closure value x
	kHeld              // something that can be reached from x (inexact)
	kMaybe             // x, of which the model cannot tell whether it is the instance
	kBin               // x op y
	kUn                // op x
	kGet               // result n of the pure getter ref called with the arguments x
	kArgs              // list of arguments: those of x, then y
)

type exprNode struct {
	kind exprKind
	op   token.Token // kBin, kUn
	n    int32       // index
	x, y Expr
	ref  any // ssa.Value, *ssa.Global, *types.Var (field origin), constant as string
}

// exprs is the table of expressions, shared by all functions of a model.
// Registers are unique over the program, so one table serves every frame.
type exprs struct {
	nodes []exprNode
	ids   map[exprNode]Expr
	names map[ssa.Value]Expr // answers of name
	root  []Expr             // root[e]: the innermost subject (a kParam, kFree, kGlobal, kReg, kRes, kResult node)
	loads []int16            // number of kLoad, kIndex and kHeld selectors in e
	depth []int16
}

// maxDepth bounds the number of selectors of an expression: a longer one is
// not tracked (its second repetition of a field is a recursive structure).
const maxDepth = 9

func newExprs() *exprs {
	x := &exprs{ids: map[exprNode]Expr{}, names: map[ssa.Value]Expr{}}
	x.nodes = append(x.nodes, exprNode{})
	x.root = append(x.root, 0)
	x.loads = append(x.loads, 0)
	x.depth = append(x.depth, 0)
	return x
}

func (t *exprs) intern(n exprNode) Expr {
	if e, ok := t.ids[n]; ok {
		return e
	}
	e := Expr(len(t.nodes))
	t.nodes = append(t.nodes, n)
	t.ids[n] = e
	root, loads, depth := e, int16(0), int16(0)
	switch n.kind {
	case kField, kFieldVal, kLoad, kIndex, kCap, kHeld, kMaybe:
		root, loads, depth = t.root[n.x], t.loads[n.x], t.depth[n.x]+1
		if n.kind == kLoad || n.kind == kIndex || n.kind == kHeld {
			loads++
		}
	case kBin, kUn, kGet, kArgs:
		root = 0
		depth = t.depth[n.x] + 1
		if n.y != 0 && t.depth[n.y] >= depth {
			depth = t.depth[n.y] + 1
		}
	}
	t.root = append(t.root, root)
	t.loads = append(t.loads, loads)
	t.depth = append(t.depth, depth)
	return e
}

func (t *exprs) param(i int) Expr          { return t.intern(exprNode{kind: kParam, n: int32(i)}) }
func (t *exprs) free(i int) Expr           { return t.intern(exprNode{kind: kFree, n: int32(i)}) }
func (t *exprs) result(i int) Expr         { return t.intern(exprNode{kind: kResult, n: int32(i)}) }
func (t *exprs) global(g *ssa.Global) Expr { return t.intern(exprNode{kind: kGlobal, ref: g}) }
func (t *exprs) reg(v ssa.Value) Expr      { return t.intern(exprNode{kind: kReg, ref: v}) }
func (t *exprs) res(v ssa.Value, i int) Expr {
	return t.intern(exprNode{kind: kRes, n: int32(i), ref: v})
}
func (t *exprs) constant(s string) Expr { return t.intern(exprNode{kind: kConst, ref: s}) }

// kept stands for a name that another frame or a pending deferred call has: with
// it the instance is not lost, whatever happens to the names of this frame.
func (t *exprs) kept() Expr { return t.constant("(kept)") }

// pending is the key under which a frame carries the deferred call that it has
// pushed for the function around it.
func (t *exprs) pending() Expr { return t.constant("(deferred)") }

// maxHeld bounds the loads of what an inexact name is about: what can be reached
// from a place can be reached from its holder, and a recursive structure would
// give a name for each of its paths.
const maxHeld = 2

func (t *exprs) held(x Expr) Expr {
	for t.loads[x] > maxHeld && t.isSel(x) {
		x = t.nodes[x].x
	}
	if k := t.nodes[x].kind; k == kHeld {
		return x
	}
	// What an element holds, its container holds: which element is of no use.
	for e := x; t.isSel(e); e = t.nodes[e].x {
		if n := t.nodes[e]; n.kind == kIndex {
			x = n.x
		}
	}
	return t.intern(exprNode{kind: kHeld, x: x})
}
func (t *exprs) maybe(x Expr) Expr {
	if k := t.nodes[x].kind; k == kMaybe {
		return x
	}
	return t.intern(exprNode{kind: kMaybe, x: x})
}

// sel applies a selector; it answers 0 if the result would be too deep to track.
func (t *exprs) sel(k exprKind, x Expr, n int32, y Expr, ref any) Expr {
	if x == 0 || t.depth[x] >= maxDepth {
		return 0
	}
	xn := t.nodes[x]
	switch k {
	case kFieldVal:
		// (*a).f is *(&a.f): one form for a field of a loaded struct.
		if xn.kind == kLoad {
			return t.load(t.field(xn.x, ref.(*types.Var)))
		}
	case kHeld:
		return t.held(x)
	case kMaybe:
		return t.maybe(x)
	case kCap:
		if xn.kind == kReg {
			if mc, ok := xn.ref.(*ssa.MakeClosure); ok && int(n) < len(mc.Bindings) {
				return t.name(mc.Bindings[n])
			}
		}
	}
	if xn.kind == kHeld || xn.kind == kMaybe {
		// Whatever is selected from something inexact stays inexact.
		return x
	}
	if k == kField && ref != nil && t.repeats(x, ref) {
		return 0
	}
	return t.intern(exprNode{kind: k, n: n, x: x, y: y, ref: ref})
}

// repeats tells whether the field already occurs twice in x.
func (t *exprs) repeats(x Expr, field any) bool {
	seen := 0
	for x != 0 {
		n := t.nodes[x]
		if n.kind == kField && n.ref == field {
			seen++
		}
		switch n.kind {
		case kField, kFieldVal, kLoad, kIndex, kCap, kHeld, kMaybe:
			x = n.x
		default:
			x = 0
		}
	}
	return seen >= 2
}

func (t *exprs) field(x Expr, f *types.Var) Expr    { return t.sel(kField, x, 0, 0, f.Origin()) }
func (t *exprs) fieldVal(x Expr, f *types.Var) Expr { return t.sel(kFieldVal, x, 0, 0, f.Origin()) }
func (t *exprs) load(x Expr) Expr                   { return t.sel(kLoad, x, 0, 0, nil) }
func (t *exprs) index(x, y Expr) Expr {
	if y == 0 {
		return 0
	}
	return t.sel(kIndex, x, 0, y, nil)
}
func (t *exprs) capt(x Expr, i int) Expr { return t.sel(kCap, x, int32(i), 0, nil) }

// isSel tells whether e is a selector over nodes[e].x.
func (t *exprs) isSel(e Expr) bool {
	switch t.nodes[e].kind {
	case kField, kFieldVal, kLoad, kIndex, kCap, kHeld, kMaybe:
		return true
	}
	return false
}

// rebase replaces the subject `from` of e by `to`: rebase(from.f.*, from, to) =
// to.f.*. It answers 0 if from is not a subject of e (or the result is too
// deep). A struct that is loaded or stored as a whole counts as subject of the
// places in it: *(&a.f) has the subject *a.
func (t *exprs) rebase(e, from, to Expr) Expr {
	if e == from {
		return to
	}
	if e == 0 {
		return 0
	}
	n := t.nodes[e]
	if n.kind == kLoad {
		// *(&(&a.f).g) seen as (*a).f.g
		if fn := t.nodes[from]; fn.kind == kLoad {
			if r := t.rebaseStruct(n.x, fn.x, to); r != 0 {
				return r
			}
		}
	}
	if !t.isSel(e) {
		return 0
	}
	x := t.rebase(n.x, from, to)
	if x == 0 {
		return 0
	}
	return t.sel(n.kind, x, n.n, n.y, n.ref)
}

// rebaseStruct turns the address a.f.g into the value to.f.g.
func (t *exprs) rebaseStruct(addr, a, to Expr) Expr {
	if addr == a {
		return to
	}
	n := t.nodes[addr]
	if n.kind != kField {
		return 0
	}
	x := t.rebaseStruct(n.x, a, to)
	if x == 0 {
		return 0
	}
	return t.sel(kFieldVal, x, 0, 0, n.ref)
}

// within tells whether `part` is e or a subject of e.
func (t *exprs) within(part, e Expr) bool {
	for e != 0 {
		if e == part {
			return true
		}
		if !t.isSel(e) {
			return false
		}
		e = t.nodes[e].x
	}
	return false
}

// mentions tells whether the register r (kReg or kRes over the same value)
// occurs anywhere in e, index and operand positions included.
func (t *exprs) mentions(e Expr, v ssa.Value) bool {
	if e == 0 {
		return false
	}
	n := t.nodes[e]
	switch n.kind {
	case kReg, kRes:
		return n.ref == v
	case kParam, kFree, kGlobal, kResult, kConst:
		return false
	}
	return t.mentions(n.x, v) || t.mentions(n.y, v)
}

// overwrites tells whether reading e reads a place that `hit` says is overwritten.
func (t *exprs) readsPlace(e Expr, hit func(addr Expr) bool) bool {
	for e != 0 {
		n := t.nodes[e]
		switch n.kind {
		case kLoad:
			if hit(n.x) {
				return true
			}
			e = n.x
		case kIndex:
			if hit(e) {
				return true
			}
			e = n.x
		case kField, kFieldVal, kCap, kHeld, kMaybe:
			e = n.x
		case kBin, kUn, kGet, kArgs:
			if t.readsPlace(n.y, hit) {
				return true
			}
			e = n.x
		default:
			return false
		}
	}
	return false
}

// hasLoad tells whether e reads memory at all.
func (t *exprs) hasLoad(e Expr) bool {
	if e == 0 {
		return false
	}
	switch n := t.nodes[e]; n.kind {
	case kBin, kUn, kArgs:
		return t.hasLoad(n.x) || t.hasLoad(n.y)
	case kGet:
		return true
	}
	return t.loads[e] > 0
}

// callsGetter tells whether e calls a pure getter of which `hit` says that it
// may answer differently now.
func (t *exprs) callsGetter(e Expr, hit func(fn *ssa.Function) bool) bool {
	if e == 0 {
		return false
	}
	n := t.nodes[e]
	switch n.kind {
	case kGet:
		if hit(n.ref.(*ssa.Function)) {
			return true
		}
	case kParam, kFree, kGlobal, kReg, kRes, kResult, kConst:
		return false
	}
	return t.callsGetter(n.x, hit) || t.callsGetter(n.y, hit)
}

// rootKind is the kind of e's innermost subject.
func (t *exprs) rootKind(e Expr) exprKind { return t.nodes[t.root[e]].kind }

// name is the expression that a register's value is known by: address
// arithmetic and conversions that keep identity are looked through; loads and
// φs are registers of their own.
func (t *exprs) name(v ssa.Value) Expr {
	if e, ok := t.names[v]; ok {
		return e
	}
	e := t.nameNew(v)
	t.names[v] = e
	return e
}

func (t *exprs) nameNew(v ssa.Value) Expr {
	switch v := v.(type) {
	case *ssa.Parameter:
		for i, p := range v.Parent().Params {
			if p == v {
				return t.param(i)
			}
		}
	case *ssa.FreeVar:
		for i, p := range v.Parent().FreeVars {
			if p == v {
				return t.free(i)
			}
		}
	case *ssa.Global:
		return t.global(v)
	case *ssa.Const:
		if v.Value != nil {
			return t.constant(v.Value.ExactString())
		}
		return t.constant("nil")
	case *ssa.Function:
		return t.reg(v)
	case *ssa.FieldAddr:
		return t.field(t.name(v.X), structField(v.X.Type(), v.Field))
	case *ssa.Field:
		return t.fieldVal(t.name(v.X), structField(v.X.Type(), v.Field))
	case *ssa.IndexAddr:
		return t.index(t.name(v.X), t.name(v.Index))
	case *ssa.MakeInterface:
		return t.name(v.X)
	case *ssa.ChangeInterface:
		return t.name(v.X)
	case *ssa.ChangeType:
		return t.name(v.X)
	case *ssa.TypeAssert:
		if !v.CommaOk {
			return t.name(v.X)
		}
		return t.reg(v)
	case *ssa.Extract:
		if ta, ok := v.Tuple.(*ssa.TypeAssert); ok && v.Index == 0 {
			return t.name(ta.X)
		}
		return t.res(v.Tuple, v.Index)
	}
	return t.reg(v)
}

// structField is field i of the struct that typ is or points to.
func structField(typ types.Type, i int) *types.Var {
	if p, ok := typ.Underlying().(*types.Pointer); ok {
		typ = p.Elem()
	}
	s, ok := typ.Underlying().(*types.Struct)
	if !ok {
		// A type parameter whose core type is a struct.
		if c, ok := coreStruct(typ); ok {
			s = c
		} else {
			panic(fmt.Sprintf("frontend: %s has no field %d", typ, i))
		}
	}
	return s.Field(i)
}

func coreStruct(typ types.Type) (*types.Struct, bool) {
	tp, ok := typ.(*types.TypeParam)
	if !ok {
		return nil, false
	}
	iface, ok := tp.Constraint().Underlying().(*types.Interface)
	if !ok {
		return nil, false
	}
	for i := 0; i < iface.NumEmbeddeds(); i++ {
		if s, ok := iface.EmbeddedType(i).Underlying().(*types.Struct); ok {
			return s, true
		}
		if u, ok := iface.EmbeddedType(i).(*types.Union); ok && u.Len() > 0 {
			if s, ok := u.Term(0).Type().Underlying().(*types.Struct); ok {
				return s, true
			}
		}
	}
	return nil, false
}

// String prints e in the notation of the package comment.
func (t *exprs) String(e Expr) string {
	var b strings.Builder
	t.print(&b, e)
	return b.String()
}

func (t *exprs) print(b *strings.Builder, e Expr) {
	n := t.nodes[e]
	switch n.kind {
	case kNone:
		b.WriteString("?")
	case kParam:
		b.WriteString(strconv.Itoa(int(n.n)))
	case kFree:
		b.WriteString("cap" + strconv.Itoa(int(n.n)))
	case kGlobal:
		b.WriteString("&" + n.ref.(*ssa.Global).String())
	case kReg:
		b.WriteString(n.ref.(ssa.Value).Name())
	case kRes:
		b.WriteString(n.ref.(ssa.Value).Name() + "#" + strconv.Itoa(int(n.n)))
	case kResult:
		b.WriteString("result" + strconv.Itoa(int(n.n)))
	case kConst:
		b.WriteString(n.ref.(string))
	case kField, kFieldVal:
		t.print(b, n.x)
		b.WriteString("." + n.ref.(*types.Var).Name())
	case kLoad:
		t.print(b, n.x)
		b.WriteString(".*")
	case kIndex:
		t.print(b, n.x)
		b.WriteString("[")
		t.print(b, n.y)
		b.WriteString("]")
	case kCap:
		t.print(b, n.x)
		b.WriteString(".cap" + strconv.Itoa(int(n.n)))
	case kHeld:
		t.print(b, n.x)
		b.WriteString("…")
	case kMaybe:
		t.print(b, n.x)
		b.WriteString("?")
	case kBin:
		b.WriteString("(")
		t.print(b, n.x)
		b.WriteString(" " + n.op.String() + " ")
		t.print(b, n.y)
		b.WriteString(")")
	case kUn:
		b.WriteString(n.op.String())
		t.print(b, n.x)
	case kGet:
		b.WriteString(n.ref.(*ssa.Function).Name() + "(")
		t.print(b, n.x)
		b.WriteString(")")
	case kArgs:
		if n.x != 0 {
			t.print(b, n.x)
			b.WriteString(", ")
		}
		t.print(b, n.y)
	}
}

func sortExprs(es []Expr) { slices.Sort(es) }
